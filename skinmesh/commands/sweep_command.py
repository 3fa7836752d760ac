"""``skinmesh sweep``: many variants of one blade, and one table of them."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from time import perf_counter

import click
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn, TimeRemainingColumn
from rich.table import Table
from rich.text import Text

from skinmesh.commands.closing import CAUTION, grouped, printable, significant
from skinmesh.errors import MissingExtra
from skinmesh.show.sweep_plot import sweep_plot
from skinmesh.sweep.metrics import NUMBER
from skinmesh.sweep.read import load_sweep
from skinmesh.sweep.run import Sweep, run_sweep
from skinmesh.sweep.table import ResultTable
from skinmesh.sweep.variant import FAILED, OK
from skinmesh.write.placing import new_file

DONE, SOMETHING_FAILED, INTERRUPTED = 0, 1, 130
MOST_TOLD = 12
_RANGES = (
    ("mass", "solid_mass_kg", "kg"),
    ("tip, flap-wise, a newton there", "tip_flap_m_per_N", "m"),
    ("tip, edge-wise, a newton there", "tip_edge_m_per_N", "m"),
    ("first frequency", "frequency_1_Hz", "Hz"),
    ("second frequency", "frequency_2_Hz", "Hz"),
    ("largest aspect", "worst_aspect", ""),
    ("least scaled Jacobian", "least_scaled_jacobian", ""),
)


@click.command()
@click.argument("sweep_file", metavar="SWEEP.yaml", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    metavar="DIR",
    type=click.Path(path_type=Path),
    help="Folder for the results; by default the sweep file's stem + '-sweep', in the current folder.",
)
@click.option("--workers", metavar="N", type=click.IntRange(1, 512), help="Processes here; by default one a processor.")
@click.option(
    "--scheduler",
    metavar="ADDRESS",
    help="A scheduler of dask.distributed that runs already, such as tcp://host:8786, instead of this machine. Its"
    " workers need skinmesh, and none of your files.",
)
@click.option("--picture/--no-picture", default=None, help="Draw the results (PNG); by default where that is possible.")
def sweep(
    sweep_file: Path, output: Path | None, workers: int | None, scheduler: str | None, picture: bool | None
) -> int:
    """Build and measure many variants of one blade: SWEEP.yaml names a base blade and what to change.

    Writes one table of all variants as CSV and as Parquet, and a picture. Every result is on disk before the next one;
    type the same command again after a stop, or after a change of SWEEP.yaml, and only what is missing is done. A
    variant that fails is a row with its reason.

    Exit status: 0 all variants are built and no check failed; 1 one failed, or has a failed check; 2 wrong input.

    \b
    Examples:
      skinmesh sweep chord-and-cap.yaml
      skinmesh sweep chord-and-cap.yaml -o results --workers 4
      skinmesh sweep chord-and-cap.yaml --scheduler tcp://127.0.0.1:8786
    """
    if workers is not None and scheduler is not None:
        raise click.UsageError("--workers are those of this machine; a scheduler has its own.")
    start = perf_counter()
    plan = load_sweep(sweep_file)
    directory = output or Path(f"{plan.stem}-sweep")
    try:
        with _shown_progress() as tell:
            done = run_sweep(plan, directory, workers=workers, scheduler=scheduler, progress=tell)
    except KeyboardInterrupt:
        click.echo("Stopped. Every finished variant is kept; type the same command to go on.", err=True)
        return INTERRUPTED
    no_picture = _draw(done.table, directory / f"{plan.stem}.png", picture)
    _print(done, directory, no_picture, seconds=perf_counter() - start)
    return SOMETHING_FAILED if _n_failed(done.table) or _with_failures(done.table) else DONE


@contextmanager
def _shown_progress() -> Iterator[Callable[[int, int], None] | None]:
    """A bar on standard error with what is done and how long the rest will take; nothing in a pipe."""
    if not sys.stderr.isatty():
        yield None
        return
    columns = (
        TextColumn("{task.description}"),
        BarColumn(bar_width=30),
        MofNCompleteColumn(),
        TimeElapsedColumn(),
        TextColumn("left:"),
        TimeRemainingColumn(),
    )
    with Progress(*columns, console=Console(stderr=True), transient=True, speed_estimate_period=600) as progress:
        task = progress.add_task("variants", total=None)

        def tell(n_done: int, n: int) -> None:
            progress.update(task, total=n, completed=n_done)

        yield tell


def _draw(table: ResultTable, path: Path, wanted: bool | None) -> str | None:
    """Draw the results; the reason where no picture was drawn, empty where none was wanted."""
    if wanted is False:
        return ""
    try:
        with new_file(path) as unfinished:
            sweep_plot(table, unfinished)
    except MissingExtra as error:
        if wanted:
            raise
        return str(error)
    return None


def _n_failed(table: ResultTable) -> int:
    return sum(row["status"] == FAILED for row in table.rows)


def _with_failures(table: ResultTable) -> list[tuple[int, str]]:
    """Variants that were built and have failed checks, or a trial with failures."""
    told = [
        (row["variant"], "; ".join(text for text in (row.get("failed_checks"), row.get("trial_failures")) if text))
        for row in table.rows
    ]
    return [(number, text) for number, text in told if text]


def _print(done: Sweep, directory: Path, no_picture: str | None, *, seconds: float) -> None:
    console = Console(highlight=False, markup=False, emoji=False)
    table, stem = done.table, done.plan.stem
    n, n_failed = len(table.rows), _n_failed(table)
    kept = sum(row.get("numbering") == "kept" for row in table.rows)
    console.print(Text(printable(table.title), style="bold"))
    console.print(
        Text(
            f"  {grouped(n)} variants: {grouped(n - n_failed)} built, {grouped(kept)} of them with the base's numbers;"
            f" {grouped(n_failed)} failed"
        )
    )
    console.print(Text(f"  {grouped(done.n_before)} were done before, {grouped(done.n_now)} built now"))
    rows = _range_table(table)
    if rows.row_count:
        console.print(rows)
    failed = [(row["variant"], row["reason"]) for row in table.rows if row["status"] == FAILED]
    _print_list(console, failed, "failed")
    _print_list(console, _with_failures(table), "with failed checks")
    names = [f"{stem}.csv", f"{stem}.parquet", *([f"{stem}.png"] if no_picture is None else [])]
    console.print(Text(printable(f"In {directory}: {', '.join(names)}")))
    if no_picture:
        console.print(Text(f"  no picture: {no_picture}"))
    console.print(Text(f"Done in {seconds:.1f} s"))
    console.print(Text(CAUTION, style="dim"))


def _range_table(table: ResultTable) -> Table:
    """Least and largest value of a few columns, with the variant that has it."""
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    for head, justify in (
        ("", "left"),
        ("least", "right"),
        ("variant", "right"),
        ("largest", "right"),
        ("variant", "right"),
        ("", "left"),
    ):
        rows.add_column(head, justify=justify)  # type: ignore[arg-type]
    kinds = {column.name: column.kind for column in table.columns}
    for name, column, unit in _RANGES:
        known = [(row[column], row["variant"]) for row in table.rows if row["status"] == OK and row[column] is not None]
        if known and kinds[column] == NUMBER:
            (low, first), (high, last) = min(known), max(known)
            rows.add_row(name, significant(low), str(first), significant(high), str(last), unit)
    return rows


def _print_list(console: Console, told: list[tuple[int, str]], what: str) -> None:
    """Say of which variants a text is true, each text once."""
    numbers: dict[str, list[int]] = {}
    for number, text in told:
        numbers.setdefault(text, []).append(number)
    for text, found in list(numbers.items())[:MOST_TOLD]:
        named = ", ".join(map(str, found[:MOST_TOLD])) + (f", … ({len(found)})" if len(found) > MOST_TOLD else "")
        word = "variant" if len(found) == 1 else "variants"
        console.print(Text(printable(f"  {word} {named} {what}: {text}"), style="red"))
    if len(numbers) > MOST_TOLD:
        console.print(Text(f"  … and {len(numbers) - MOST_TOLD} more; the table has them all", style="red"))
