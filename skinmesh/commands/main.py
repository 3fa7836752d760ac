"""The command line: what a user types, and the exit status that answers it.

Exit status: 0 done; 1 done, but a check failed; 2 the input is wrong, nothing was written; 3 cannot write; 130 and 143
stopped from outside.
"""

from __future__ import annotations

import json
import signal
import sys
from collections.abc import Sequence
from dataclasses import replace
from difflib import get_close_matches
from functools import partial
from io import TextIOWrapper
from math import isfinite
from pathlib import Path
from shlex import quote
from time import perf_counter
from types import FrameType
from typing import NoReturn

import click
from rich.console import Console

import skinmesh
from skinmesh.check.reading import read_built_mesh
from skinmesh.commands.beam_command import beam
from skinmesh.commands.check_command import check
from skinmesh.commands.closing import print_closing, print_timings, printable
from skinmesh.commands.keeping import print_kept
from skinmesh.commands.page_command import page
from skinmesh.commands.stages import shown_stages
from skinmesh.commands.starter import write_starter
from skinmesh.commands.trial_command import trial
from skinmesh.definition.schema import json_schema
from skinmesh.definition.spanwise import constant
from skinmesh.errors import OutputError, SkinmeshError
from skinmesh.show.picture import SUBJECTS, picture, require_pictures
from skinmesh.write.files import DEFAULT_FORMATS
from skinmesh.write.registry import FORMATS

DONE, CHECK_FAILED, WRONG_INPUT, CANNOT_WRITE = 0, 1, 2, 3
INTERRUPTED, TERMINATED = 130, 143

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


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(skinmesh.__version__, message="skinmesh %(version)s")
def cli() -> None:
    """Layered shell meshes of rotor blades, from a station table and a ply schedule.

    \b
    Start with the demonstration blade:
      skinmesh new my-blade
      skinmesh build my-blade/marram-24.yaml

    \b
    Exit status: 0 done; 1 done, but a check failed; 2 the input is wrong,
    nothing was written; 3 cannot write.
    """


@cli.command()
@click.argument("directory", metavar="DIR", type=click.Path(path_type=Path))
@click.option("--table", metavar="TABLE.csv", type=click.Path(path_type=Path), help="Your own station table.")
@click.option("--profiles", metavar="FOLDER", type=click.Path(path_type=Path), help="Your own profile files.")
def new(directory: Path, table: Path | None, profiles: Path | None) -> None:
    """Write a complete, commented starter blade into DIR.

    Without options it is the demonstration blade; with --table and --profiles a first blade file round your own station
    table and profile files, which builds at once.

    \b
    Examples:
      skinmesh new my-blade
      skinmesh new my-blade --table stations.csv --profiles airfoils
    """
    paths = write_starter(directory, table=table, profiles=profiles)
    for path in paths:
        click.echo(printable(str(path)))
    click.echo(printable(f"Next: skinmesh build {quote(str(paths[0]))}"))


@cli.command()
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


@cli.command()
def schema() -> None:
    """Print the JSON Schema of the blade file, for an editor that checks and completes while you type.

    \b
    Example:
      skinmesh schema > blade.schema.json
    """
    click.echo(json.dumps(json_schema(), indent=2, ensure_ascii=False))


for _command in (beam, check, trial, page):
    cli.add_command(_command)


def main(arguments: Sequence[str] | None = None) -> NoReturn:
    """Run the command line and end the process with its exit status.

    A known error becomes a message and a status; a bug shows its traceback.

    Parameters
    ----------
    arguments : sequence of str
        What was typed after ``skinmesh``; by default that of the process.
    """
    signal.signal(signal.SIGTERM, _terminate)
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper):
            stream.reconfigure(errors="replace")
    try:
        status = cli.main(arguments, prog_name="skinmesh", standalone_mode=False)
    except click.ClickException as error:
        error.show()
        sys.exit(error.exit_code)
    except click.Abort:
        _say_error("Stopped. Nothing was written.")
        sys.exit(INTERRUPTED)
    except OutputError as error:
        _say_error(str(error))
        sys.exit(CANNOT_WRITE)
    except SkinmeshError as error:
        _say_error(f"{error}\nNothing was written.")
        sys.exit(WRONG_INPUT)
    sys.exit(status if isinstance(status, int) else DONE)


def _solid_mass(summary: Path) -> float | None:
    """Mass of the layers as solids from the summary just written, since working it out again takes a while."""
    try:
        return float(json.loads(summary.read_text(encoding="utf-8"))["solid_mass_kg"])
    except OSError:  # moved away meanwhile: no reason to fail a finished build
        return None


def _say_error(text: str) -> None:
    click.echo(printable(text), err=True)


def _terminate(_signal: int, _frame: FrameType | None) -> NoReturn:
    """End as an exception does, so that no half-written file stays behind."""
    sys.exit(TERMINATED)


def _refuse_file_as_directory(directory: Path) -> None:
    """Say before a long build what writing would say after it."""
    if directory.exists() and not directory.is_dir():
        raise OutputError(f"cannot write into {directory}: it is a file; name a folder with -o")
