"""``skinmesh check``: whether a built mesh can be trusted."""

from __future__ import annotations

from pathlib import Path
from time import perf_counter

import click
from rich.console import Console, RenderableType
from rich.table import Table
from rich.text import Text

from skinmesh.check.finding import FAIL, NOT_MADE, PASS, WARN, Finding, shortened
from skinmesh.check.run import CheckReport, check_directory, write_checks
from skinmesh.commands.closing import CAUTION, grouped, print_parts, print_timings, printable
from skinmesh.commands.stages import shown_stages

CHECK_FAILED = 1
PIPE_WIDTH = 160
LONGEST_LINE = 240
"""Letters of a line of the list of what to look at first; the table has all."""
COLOURS = {PASS: "green", WARN: "yellow", FAIL: "bold red", NOT_MADE: "dim"}


@click.command()
@click.argument("directory", metavar="DIR", type=click.Path(path_type=Path))
@click.option(
    "--inputs",
    metavar="FOLDER",
    type=click.Path(path_type=Path),
    multiple=True,
    help="Where the input files lie, to compare them with the hashes of the build, and the mesh with their sections; "
    "may be given again.",
)
@click.option("--timings", is_flag=True, help="Also print time and peak memory of each stage.")
@click.pass_context
def check(context: click.Context, directory: Path, inputs: tuple[Path, ...], timings: bool) -> None:
    """Check the built mesh in DIR from its files alone.

    Prints a table: what was measured, the limit and where it comes from, the verdict, and where the worst is. The
    same goes into DIR as checks.json, and the elements beyond a limit as named sets into checks.inp. Below the table,
    failures and warnings once more in short. Ends with exit status 1 when a check failed.

    Where the input files of the build are found, in FOLDER, here or beside DIR, the mesh's sections are measured
    against the station table and the profiles; where not, that line says so.

    \b
    Examples:
      skinmesh check marram-24-mesh
      skinmesh check marram-24-mesh --inputs my-blade
    """
    start = perf_counter()
    with shown_stages() as stages:
        report = check_directory(directory, input_folders=[*inputs, Path.cwd()], progress=stages.part(0.0, 0.95))
        stages.begin("writing", 0.95)
        paths = write_checks(report)
        stages.end()
    console = Console(highlight=False, markup=False, emoji=False, soft_wrap=False)
    if not console.is_terminal:
        console = Console(highlight=False, markup=False, emoji=False, width=PIPE_WIDTH)
    print_report(console, report)
    print_parts(
        console,
        Text(f"Written: {', '.join(printable(str(path)) for path in paths)}"),
        Text(f"Done in {perf_counter() - start:.1f} s."),
        Text(CAUTION, style="dim"),
    )
    if timings:
        print_timings(console, stages.finished)
    if report.has_failed:
        context.exit(CHECK_FAILED)


def print_report(console: Console, report: CheckReport) -> None:
    """Print every line of a report as a table, and how many there are of each verdict.

    Parameters
    ----------
    console : rich Console
    report : CheckReport
    """
    mesh = report.built.mesh
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    table.add_column("verdict", no_wrap=True)
    table.add_column("check", no_wrap=True)
    table.add_column("measured", ratio=5, overflow="fold")
    table.add_column("limit (from)", ratio=4, overflow="fold")
    table.add_column("worst at", ratio=4, overflow="fold")
    previous = ""
    for finding in report.findings:
        source = f" ({finding.source})" if finding.source else ""
        table.add_row(
            Text(finding.verdict, style=COLOURS[finding.verdict]),
            Text(finding.check if finding.check != previous else ""),
            Text(printable(finding.measured)),
            Text(printable(f"{finding.limit}{source}")),
            Text(printable(finding.where)),
        )
        previous = finding.check
    counts = report.counts
    words = (f"{counts[PASS]} passed", f"{counts[WARN]} warn", f"{counts[FAIL]} failed", f"{counts[NOT_MADE]} not made")
    if counts[NOT_MADE]:
        words = (*words[:-1], f"{words[-1]}, which is no pass")
    print_parts(
        console,
        Text(f"{printable(mesh.title)}: {grouped(len(mesh.cells))} elements", style="bold"),
        table,
        *_look_first(report),
        Text(", ".join(words) + ".", style="bold red" if report.has_failed else "bold"),
    )


def _look_first(report: CheckReport) -> list[RenderableType]:
    """Failures, then warnings, one line a check: the table is long."""
    table = Table.grid(padding=(0, 2, 0, 0))
    for verdict in (FAIL, WARN):
        found: dict[str, list[Finding]] = {}
        for finding in report.findings:
            if finding.verdict == verdict:
                found.setdefault(finding.check, []).append(finding)
        for name, own in found.items():
            more = f" ({len(own)} lines)" if len(own) > 1 else ""
            measured = own[0].measured.partition(";")[0]
            told = shortened(": ".join(part for part in (measured, own[0].where) if part), LONGEST_LINE)
            table.add_row(Text(verdict, style=COLOURS[verdict]), Text(f"{name}{more}"), Text(printable(told)))
    return [Text("Look first at", style="bold"), table] if table.row_count else []
