"""``skinmesh trial``: a built model in an open solver, beside beam theory."""

from __future__ import annotations

from math import isnan
from pathlib import Path

import click
from rich.console import Console
from rich.table import Table
from rich.text import Text

from skinmesh.commands.closing import CAUTION, grouped, printable, significant
from skinmesh.commands.stages import shown_stages
from skinmesh.errors import InputError, MissingExtra, OutputError, Problem
from skinmesh.show.page import Page
from skinmesh.show.trial_plot import trial_plot
from skinmesh.trial.beamside import EXACT
from skinmesh.trial.compare import ModeCase, StaticCase
from skinmesh.trial.form import form_parts
from skinmesh.trial.report import (
    LOOK,
    failures,
    mass_difference,
    parts_of_difference,
    remarks,
    solver_version,
    trial_json,
)
from skinmesh.trial.run import Trial, run_trial
from skinmesh.trial.solver import SolverError, find_solver
from skinmesh.write.placing import new_files

DONE, FAILED = 0, 1
_ENDINGS = ("trial.json", "trial.log", "trial.png")
_UNITS = {0: (1e3, "mm"), 1: (1e3, "mm"), 5: (57.29577951308232, "°")}


@click.command()
@click.argument("directory", metavar="DIR", type=click.Path(path_type=Path))
@click.option("--solver", metavar="PATH", type=click.Path(path_type=Path), help="CalculiX; by default ccx on the path.")
@click.option(
    "--blade",
    "blade_file",
    metavar="BLADE.yaml",
    type=click.Path(path_type=Path),
    help="Blade file, for theory on the exact sections. Looked for in the current folder, beside DIR and in DIR; where"
    " it is not found the sections of the mesh are taken.",
)
@click.option(
    "--hold-shape",
    is_flag=True,
    help="Run it a second time with sections that keep their form, to tell what their change of form makes different.",
)
@click.option("--picture/--no-picture", default=None, help="Draw the trial (PNG); by default where that is possible.")
def trial(directory: Path, solver: Path | None, blade_file: Path | None, hold_shape: bool, picture: bool | None) -> int:
    """Run the built model in DIR in CalculiX and set it beside beam theory.

    The root held: flap-wise and edge-wise tip load, tip torque, weight, six natural frequencies; beside Euler–Bernoulli
    theory on the beam table, with reactions against loads and the solver's mass against the mesh's. Writes
    stem.trial.json, stem.trial.log and stem.trial.png into DIR. It factors the stiffness matrix five times: minutes and
    gigabytes for some ten thousand elements.

    \b
    Examples:
      skinmesh trial marram-24-mesh
      skinmesh trial marram-24-mesh --blade marram-24.yaml --solver ~/bin/ccx_2.20
      skinmesh trial marram-24-mesh --hold-shape
    """
    no_picture = _picture_hindrance(picture)
    console = Console(highlight=False, markup=False, emoji=False)
    stem = ""
    try:
        with shown_stages() as stages:
            program = find_solver(solver)
            done = run_trial(
                directory, solver=program, blade_file=blade_file, hold_shape=hold_shape, progress=stages.begin
            )
            stages.end()
    except SolverError as error:
        stem = _stem(directory)
        written = _write(directory, stem, {"trial.log": error.log})
        click.echo(printable(f"{error}\nThe whole log: {written[0]}"), err=True)
        return FAILED
    stem = done.model.mesh.stem
    logs = [done.run.log, *([done.held.run.log] if done.held else [])]
    files = {"trial.json": trial_json(done), "trial.log": "\n".join(logs)}
    written = _write(directory, stem, files, plot=None if no_picture is not None else done)
    _print(console, done)
    for path in written:
        console.print(Text(f"  {printable(path.name)}"))
    if no_picture:
        console.print(Text(f"  no picture: {no_picture}"))
    console.print(Text(CAUTION, style="dim"))
    return FAILED if failures(done) else DONE


def _picture_hindrance(wanted: bool | None) -> str | None:
    """Why no picture will be drawn: None where one will be, empty where none is wanted."""
    if wanted is False:
        return ""
    try:
        Page(16)
    except MissingExtra as error:
        if wanted:
            raise
        return str(error)
    return None


def _stem(directory: Path) -> str:
    decks = sorted(directory.glob("*.summary.json"))
    if not decks:
        raise InputError([Problem(str(directory), 0, "", "holds no mesh")])
    return decks[0].name.removesuffix(".summary.json")


def _write(directory: Path, stem: str, files: dict[str, str], *, plot: Trial | None = None) -> tuple[Path, ...]:
    """Put the files of a trial in place, and take those of an earlier one away."""
    own = {f"{stem}.{ending}" for ending in _ENDINGS}
    try:
        with new_files(directory, is_own=own.__contains__) as stage:
            for ending, text in files.items():
                (stage / f"{stem}.{ending}").write_text(text, encoding="utf-8", newline="\n")
            if plot is not None:
                trial_plot(plot, stage / f"{stem}.trial.png")
            names = [path.name for path in sorted(stage.iterdir())]
    except OSError as error:
        raise OutputError(f"cannot write into {directory}: {error.strerror or error}") from error
    return tuple(directory / name for name in names)


def _print(console: Console, done: Trial) -> None:
    console.print(Text(printable(done.model.mesh.title), style="bold"))
    peak = f", {done.run.peak_bytes / 1e9:.1f} GB" if done.run.peak_bytes else ""
    console.print(
        Text(
            f"  {grouped(len(done.model.mesh.cells))} elements in CalculiX {solver_version(done.run.log)}:"
            f" {done.run.seconds:.0f} s{peak}"
        )
    )
    console.print(Text(f"  theory: Euler–Bernoulli; {printable(done.beams.note)}"))
    console.print(_table(done))
    console.print(_parts_table(done))
    if done.held is not None:
        console.print(_held_table(done))
    difference = mass_difference(done)
    if isnan(difference):
        words = "the solver prints none for layered triangles"
    else:
        words = f"{significant(done.mass_solver)} kg in the solver, {difference:+.4%}"
    console.print(Text(f"  mass: {significant(done.mass_mesh)} kg in the mesh; {words}"))
    worst = max(done.statics, key=lambda case: case.imbalance)
    console.print(Text(f"  reactions against loads: within {worst.imbalance:.1e} of the load ({worst.name})"))
    for sentence in remarks(done):
        console.print(Text(f"  - {printable(sentence)}"))
    for sentence in failures(done):
        console.print(Text(f"  FAILED {printable(sentence)}", style="bold red"))


def _table(done: Trial) -> Table:
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    rows.add_column("")
    for head in ("load", "solver", "theory", "difference"):
        rows.add_column(head, justify="right", no_wrap=True)
    for case in done.statics:
        factor, unit = _UNITS[case.component]
        rows.add_row(
            case.name,
            _load_words(case),
            f"{factor * case.solver:.5g} {unit}",
            f"{factor * case.theory:.5g} {unit}",
            _marked(case),
        )
    for number, mode in enumerate(done.modes, start=1):
        theory = "-" if isnan(mode.theory) else f"{mode.theory:.5g} Hz"
        rows.add_row(f"mode {number}: {mode.kind}", "", f"{mode.solver:.5g} Hz", theory, _marked(mode))
    return rows


def _parts_table(done: Trial) -> Table:
    """What refined beam theory says of each difference."""
    has_exact = done.beams.road == EXACT
    heads = {"shear": "shear", "coupling": "coupling", **({"mesh": "mesh"} if has_exact else {}), "left": "left"}
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    rows.add_column("beam theory with")
    for head in heads.values():
        rows.add_column(head, justify="right")
    named = [(case.name, parts_of_difference(case)) for case in done.statics]
    named += [(f"mode {k}: {mode.kind}", parts_of_difference(mode)) for k, mode in enumerate(done.modes, start=1)]
    for name, parts in named:
        if parts:
            rows.add_row(name, *(f"{parts[head]:+.2%}" for head in heads))
    return rows


def _held_table(done: Trial) -> Table:
    """The second run: sections that keep their form."""
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    rows.add_column("sections keep their form")
    for head in ("solver", "theory", "difference", "left", "form"):
        rows.add_column(head, justify="right", no_wrap=True)
    scales = [_UNITS[case.component] for case in done.statics] + [(1.0, "Hz")] * len(done.modes)
    for name, part, (factor, unit) in zip(_names(done), form_parts(done), scales, strict=True):
        if part is None:
            rows.add_row(name, *"-----")
            continue
        words = [f"{factor * value:.5g} {unit}" for value in (part.solver, part.theory)]
        rows.add_row(name, *words, *(f"{share:+.2%}" for share in (part.difference, part.left, part.form)))
    return rows


def _names(done: Trial) -> list[str]:
    modes = [f"mode {number}: {mode.kind}" for number, mode in enumerate(done.modes, start=1)]
    return [*(case.name for case in done.statics), *modes]


def _load_words(case: StaticCase) -> str:
    if case.component == 5:
        return f"{significant(float(case.load[5]))} N m"
    return f"{significant(float(case.load[case.component]))} N"


def _marked(case: StaticCase | ModeCase) -> Text:
    if isnan(case.difference):
        return Text("-")
    look = abs(case.difference) > LOOK
    return Text(f"{'! ' if look else ''}{case.difference:+.2%}", style="yellow" if look else "")
