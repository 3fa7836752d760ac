"""``skinmesh build``: a blade file becomes a mesh and its files."""

from __future__ import annotations

from difflib import get_close_matches
from math import isfinite
from pathlib import Path
from time import perf_counter

import click
from rich.console import Console

from skinmesh.check.reading import read_built_mesh
from skinmesh.commands.closing import print_closing, print_timings, printable
from skinmesh.commands.keeping import print_kept, print_map
from skinmesh.commands.rebuild import BuildOrder, build_files
from skinmesh.commands.stages import shown_stages
from skinmesh.commands.watching import watch
from skinmesh.show.picture import require_pictures
from skinmesh.write.files import DEFAULT_FORMATS
from skinmesh.write.registry import FORMATS


def _length(_ctx: click.Context, _parameter: click.Parameter, value: float | None) -> float | None:
    """Refuse what is no length above zero."""
    if value is not None and not (isfinite(value) and value > 0):
        raise click.BadParameter(f"{value} is not a length above 0.")
    return value


def _format_names(_ctx: click.Context, _parameter: click.Parameter, value: str) -> tuple[str, ...]:
    """Split a list of format names with commas between."""
    names = tuple(dict.fromkeys(name.strip().lower() for name in value.split(",") if name.strip()))
    if not names:
        raise click.BadParameter(f"names no format; known: {', '.join(FORMATS)}.")
    for name in names:
        if name not in FORMATS:
            near = get_close_matches(name, FORMATS, n=1)
            hint = f"; did you mean '{near[0]}'?" if near else "."
            raise click.BadParameter(f"no format '{printable(name)}'; known: {', '.join(sorted(FORMATS))}{hint}")
    return names


@click.command()
@click.argument("blade_file", metavar="BLADE.yaml", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    metavar="DIR",
    type=click.Path(path_type=Path),
    help="Folder for the files; by default the blade file's stem + '-mesh', in the current folder.",
)
@click.option(
    "--formats",
    metavar="NAMES",
    default=",".join(DEFAULT_FORMATS),
    show_default=True,
    callback=_format_names,
    help=f"Formats to write, with commas between; known: {', '.join(sorted(FORMATS))}.",
)
@click.option(
    "--size",
    metavar="M",
    type=float,
    callback=_length,
    help="Target edge length in metres, everywhere, instead of the blade file's mesh.size.",
)
@click.option(
    "--keep",
    metavar="OLD_DIR",
    type=click.Path(path_type=Path),
    help="Folder of an earlier build of the same layout, whose node and element numbers, sets and connectivity stay.",
)
@click.option(
    "--map",
    "with_map",
    is_flag=True,
    help="With --keep: where the layout changed, make a new mesh instead of refusing; in either case write tables that"
    " carry the old nodes and elements to the new ones.",
)
@click.option("--watch", "is_watched", is_flag=True, help="Build again whenever an input file is saved, until Ctrl-C.")
@click.option("--pictures", is_flag=True, help="Also draw regions, stacks, thickness, e1, cuts, developed skin (PNG).")
@click.option("--timings", is_flag=True, help="Also print time and peak memory of each stage.")
def build(
    blade_file: Path,
    output: Path | None,
    formats: tuple[str, ...],
    size: float | None,
    keep: Path | None,
    with_map: bool,
    is_watched: bool,
    pictures: bool,
    timings: bool,
) -> None:
    """Build the layered shell mesh of BLADE.yaml and write it.

    All files are written, or none: a build that fails leaves DIR as it was. Files of an earlier build in DIR are
    replaced, or removed where they are not asked for now; other files there stay.

    \b
    Examples:
      skinmesh build marram-24.yaml
      skinmesh build marram-24.yaml -o fine --size 0.05 --formats vtu,inp
      skinmesh build marram-24.yaml --pictures
      skinmesh build marram-24.yaml -o after --keep before
      skinmesh build marram-24.yaml -o after --keep before --map
      skinmesh build marram-24.yaml --watch
    """
    start = perf_counter()
    if with_map and keep is None:
        raise click.UsageError("--map carries the nodes and elements of an earlier mesh: name its folder with --keep.")
    if is_watched and timings:
        raise click.UsageError("--timings tells the stages of one build; leave out --watch.")
    if pictures:
        require_pictures()
    old = None if keep is None else read_built_mesh(keep).mesh
    order = BuildOrder(blade_file, output, formats, size, pictures, mapped_from=old if with_map else None)
    if is_watched:
        watch(order, first=old)
        return
    with shown_stages() as stages:
        built = build_files(order, stages, keep=() if old is None else (old,), or_fresh=with_map)
    console = Console(highlight=False, markup=False, emoji=False)
    print_closing(
        console,
        built.mesh,
        directory=order.directory,
        files=built.files,
        seconds=perf_counter() - start,
        solid_mass=built.solid_mass,
    )
    if built.kept is not None and keep is not None:
        print_kept(console, built.kept, built.mesh, directory=keep)
    if built.carried is not None and keep is not None:
        print_map(console, built.carried, built.refusal, directory=keep)
    if timings:
        print_timings(console, stages.finished)
