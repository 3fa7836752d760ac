"""``skinmesh diff``: what changed between two built meshes."""

from __future__ import annotations

from math import isfinite, radians
from pathlib import Path
from time import perf_counter

import click
from rich.console import Console, RenderableType
from rich.text import Text

from skinmesh.commands.closing import CAUTION, grouped, print_parts, printable
from skinmesh.commands.diff_tables import along, causes, detail_tables, numbers
from skinmesh.commands.diff_words import effect, readable, verdict
from skinmesh.commands.stages import shown_stages
from skinmesh.compare.report import diff_json
from skinmesh.compare.run import MeshDifference, compare_directories
from skinmesh.errors import MissingExtra, OutputError
from skinmesh.show.diff_plot import diff_plot
from skinmesh.show.page import Page
from skinmesh.write.placing import new_files

EQUAL, DIFFERENT = 0, 1


def _angle(_ctx: click.Context, _parameter: click.Parameter, value: float) -> float:
    if not (isfinite(value) and value >= 0.0):
        raise click.BadParameter(f"{value} is not an angle of 0 or more.")
    return value


@click.command()
@click.argument("old_directory", metavar="OLD_DIR", type=click.Path(path_type=Path))
@click.argument("new_directory", metavar="NEW_DIR", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    metavar="FILE.json",
    type=click.Path(path_type=Path),
    help="File for the report, the picture beside it; by default stem.diff.json in NEW_DIR.",
)
@click.option(
    "--turn",
    metavar="DEG",
    type=float,
    default=1.0,
    show_default=True,
    callback=_angle,
    help="Name elements whose 0° direction or normal turned by more than this.",
)
@click.option("--all", "is_all", is_flag=True, help="Print the tables of stations, regions and plies too.")
@click.option("--picture/--no-picture", default=None, help="Draw the span (PNG); by default where that is possible.")
def diff(
    old_directory: Path,
    new_directory: Path,
    output: Path | None,
    turn: float,
    is_all: bool,
    picture: bool | None,
) -> int:
    """Say what changed from the built mesh in OLD_DIR to that in NEW_DIR.

    From their files alone: first whether loads, sets and results by number stay valid, then stations, regions, plies,
    stacks, materials, the surface, mass, centre and moments. Meshes of the same numbers are compared node by node and
    element by element, others by their parametric coordinates and closest points. Exit status: 0 equal in everything
    but dates and versions, 1 not equal, 2 wrong input.

    \b
    Examples:
      skinmesh diff before after
      skinmesh diff before after --all --no-picture -o change.json
    """
    start = perf_counter()
    can_draw = picture is not False and _can_draw(is_wanted=picture is True)
    with shown_stages() as stages:
        difference = compare_directories(old_directory, new_directory, progress=stages.begin)
        stages.begin("writing", 0.95)
        path = output or difference.new.file("diff.json")
        written = _write(path, difference, turn=radians(turn), can_draw=can_draw)
        stages.end()
    console = Console(highlight=False, markup=False, emoji=False)
    sides = [
        f"{built.directory} ({grouped(len(built.mesh.cells))} elements)" for built in (difference.old, difference.new)
    ]
    print_parts(
        console,
        Text(readable(f"{difference.new.mesh.title}: {sides[0]} to {sides[1]}"), style="bold"),
        verdict(difference),
        *(() if difference.is_equal else _parts(difference, radians(turn), is_all=is_all)),
        *(Text(printable(str(name))) for name in written),
        Text(f"Done in {perf_counter() - start:.1f} s."),
        Text(CAUTION, style="dim"),
    )
    return EQUAL if difference.is_equal else DIFFERENT


def _parts(difference: MeshDifference, turn: float, *, is_all: bool) -> tuple[RenderableType, ...]:
    if difference.is_same_mesh and not difference.files:
        return (causes(difference, turn),)
    spans = along(difference)
    return (
        effect(difference),
        causes(difference, turn),
        numbers(difference),
        *(() if spans is None else (spans,)),
        *(detail_tables(difference) if is_all else ()),
    )


def _can_draw(*, is_wanted: bool) -> bool:
    try:
        Page(16)
    except MissingExtra:
        if is_wanted:
            raise
        return False
    return True


def _write(path: Path, difference: MeshDifference, *, turn: float, can_draw: bool) -> tuple[Path, ...]:
    """Put report and picture in place, and take those of an earlier comparison away."""
    if path.is_dir() or not path.resolve().parent.is_dir():
        raise OutputError(f"cannot write {path}: name a file in a folder that exists, with -o")
    drawing = path.with_suffix(".png")
    if drawing == path:
        raise OutputError(f"cannot write {path}: the picture has that name; name a .json file with -o")
    try:
        with new_files(path.parent, is_own={path.name, drawing.name}.__contains__) as stage:
            (stage / path.name).write_text(diff_json(difference, turn=turn), encoding="utf-8", newline="\n")
            if can_draw:
                diff_plot(difference, stage / drawing.name)
    except OSError as error:
        raise OutputError(f"cannot write into {path.parent}: {error.strerror or error}") from error
    return (path, drawing) if can_draw else (path,)
