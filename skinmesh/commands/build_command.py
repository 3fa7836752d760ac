"""``skinmesh build``: a blade file becomes a mesh and its files."""

from __future__ import annotations

import json
from dataclasses import replace
from difflib import get_close_matches
from functools import partial
from math import isfinite
from pathlib import Path
from time import perf_counter

import click
from rich.console import Console

import skinmesh
from skinmesh.check.reading import read_built_mesh
from skinmesh.commands.closing import print_closing, print_timings, printable
from skinmesh.commands.keeping import print_kept
from skinmesh.commands.stages import shown_stages
from skinmesh.definition.spanwise import constant
from skinmesh.errors import OutputError
from skinmesh.show.picture import SUBJECTS, picture, require_pictures
from skinmesh.write.files import DEFAULT_FORMATS
from skinmesh.write.registry import FORMATS

# Where the parts of a build begin on its progress bar.
_BUILD, _FILES = 0.05, 0.5


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
@click.option("--pictures", is_flag=True, help="Also draw regions, stacks, thickness and e1 (PNG).")
@click.option("--timings", is_flag=True, help="Also print time and peak memory of each stage.")
def build(
    blade_file: Path,
    output: Path | None,
    formats: tuple[str, ...],
    size: float | None,
    keep: Path | None,
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
    """
    start = perf_counter()
    if pictures:
        require_pictures()
    with shown_stages() as stages:
        stages.begin("reading", 0.0)
        blade = skinmesh.load(blade_file)
        directory = output or Path(f"{blade.stem}-mesh")
        _refuse_file_as_directory(directory)
        if size is not None:
            blade = replace(blade, mesh=replace(blade.mesh, size=constant(size)))
        old = None if keep is None else read_built_mesh(keep).mesh
        mesh = skinmesh.build(blade, keep=old, progress=stages.part(_BUILD, _FILES))
        files = skinmesh.write(
            mesh,
            directory,
            formats=formats,
            extras={f"{word}.png": partial(picture, by=by) if pictures else None for by, word in SUBJECTS.items()},
            progress=stages.part(_FILES, 1.0),
        )
        stages.end()
    console = Console(highlight=False, markup=False, emoji=False)
    print_closing(
        console,
        mesh,
        directory=directory,
        files=files,
        seconds=perf_counter() - start,
        solid_mass=_solid_mass(directory / f"{mesh.stem}.summary.json"),
    )
    if old is not None and keep is not None:
        print_kept(console, old, mesh, directory=keep)
    if timings:
        print_timings(console, stages.finished)


def _solid_mass(summary: Path) -> float | None:
    """Mass of the layers as solids from the summary just written, since working it out again takes a while."""
    try:
        return float(json.loads(summary.read_text(encoding="utf-8"))["solid_mass_kg"])
    except OSError:  # moved away meanwhile: no reason to fail a finished build
        return None


def _refuse_file_as_directory(directory: Path) -> None:
    """Say before a long build what writing would say after it."""
    if directory.exists() and not directory.is_dir():
        raise OutputError(f"cannot write into {directory}: it is a file; name a folder with -o")
