"""The command line: what a user types, and the exit status that answers it.

Exit status: 0 done; 1 done, but a check failed; 2 the input is wrong, nothing was written; 3 cannot write; 130 and 143
stopped from outside.
"""

from __future__ import annotations

import json
import signal
import sys
from collections.abc import Sequence
from io import TextIOWrapper
from pathlib import Path
from shlex import quote
from types import FrameType
from typing import NoReturn

import click

import skinmesh
from skinmesh.commands.beam_command import beam
from skinmesh.commands.build_command import build
from skinmesh.commands.check_command import check
from skinmesh.commands.closing import printable
from skinmesh.commands.diff_command import diff
from skinmesh.commands.page_command import page
from skinmesh.commands.starter import write_starter
from skinmesh.commands.sweep_command import sweep
from skinmesh.commands.trial_command import trial
from skinmesh.definition.schema import json_schema
from skinmesh.errors import OutputError, SkinmeshError

DONE, CHECK_FAILED, WRONG_INPUT, CANNOT_WRITE = 0, 1, 2, 3
INTERRUPTED, TERMINATED = 130, 143


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
def schema() -> None:
    """Print the JSON Schema of the blade file, for an editor that checks and completes while you type.

    \b
    Example:
      skinmesh schema > blade.schema.json
    """
    click.echo(json.dumps(json_schema(), indent=2, ensure_ascii=False))


for _command in (build, beam, check, trial, page, diff, sweep):
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


def _say_error(text: str) -> None:
    click.echo(printable(text), err=True)


def _terminate(_signal: int, _frame: FrameType | None) -> NoReturn:
    """End as an exception does, so that no half-written file stays behind."""
    sys.exit(TERMINATED)
