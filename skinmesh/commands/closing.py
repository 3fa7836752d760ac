"""The closing summary of a build, for a person to take in at a glance."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import click
import numpy as np
from rich.console import Console, RenderableType
from rich.table import Table
from rich.text import Text

from skinmesh.commands.stages import Stage
from skinmesh.mesh.measure import element_areas, mass_properties
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.files import WrittenFile

MOST_WARNINGS = 10
NOTABLE_CURVATURE = 0.005
"""Share of the mass from which on that of the curved, solid layers is told beside it."""
CAUTION = (
    "An aid only: have model and results verified by a qualified engineer under IEC 61400-5, DNV-ST-0376 and the local "
    "codes. skinmesh certifies nothing."
)
SOLIDS_MEAN = "curvature counted, as CalculiX finds it"
NARROW_SPACE = "\N{NO-BREAK SPACE}"


def printable(text: str) -> str:
    r"""Text without the control characters that would steer a terminal.

    >>> printable("[bold] cap\x1b[2J")
    '[bold] cap�[2J'
    """
    return "".join(letter if letter.isprintable() or letter == "\n" else "\N{REPLACEMENT CHARACTER}" for letter in text)


def grouped(number: int) -> str:
    """A count with its thousands apart.

    >>> grouped(1234567).split()
    ['1', '234', '567']
    """
    return f"{number:,}".replace(",", NARROW_SPACE)


def file_size(size: int) -> str:
    """Size of a file in words.

    >>> file_size(950), file_size(23_456), file_size(1_234_567)
    ('950 B', '23 kB', '1.2 MB')
    """
    if size < 1000:
        return f"{size} B"
    return f"{size / 1e3:.0f} kB" if size < 1e6 else f"{size / 1e6:.1f} MB"


def significant(value: float) -> str:
    """Four significant digits, thousands apart.

    >>> significant(0.01234567), significant(152.349)
    ('0.01235', '152.3')
    """
    return grouped(round(value)) if abs(value) >= 1000 else f"{value:.4g}"


def print_closing(
    console: Console,
    mesh: ShellMesh,
    *,
    directory: Path,
    files: Sequence[WrittenFile],
    seconds: float,
    solid_mass: float | None = None,
) -> None:
    """Print what was built and where it lies.

    Parameters
    ----------
    console : rich Console
    mesh : ShellMesh
    directory : Path
    files : sequence of WrittenFile
    seconds : float
        Time from the start of the command.
    solid_mass : float, optional, kg
        Mass of the layers as solids, where it is known; printed where it is another than that of the surface.
    """
    print_parts(
        console,
        Text(printable(mesh.title), style="bold"),
        _facts(mesh, solid_mass),
        *_warnings(mesh),
        Text(f"{printable(str(directory))}/"),
        _files(files),
        Text(f"Done in {seconds:.1f} s."),
        Text(CAUTION, style="dim"),
    )


def print_timings(console: Console, stages: Sequence[Stage]) -> None:
    """Print what each stage took, and the largest memory of the process by its end."""
    table = Table("stage", box=None, pad_edge=False, padding=(0, 3, 0, 0), header_style="bold")
    table.add_column("s", justify="right")
    table.add_column("peak MB", justify="right")
    for stage in stages:
        peak = "?" if stage.peak_bytes is None else f"{stage.peak_bytes / 1e6:.0f}"
        table.add_row(Text(stage.name), f"{stage.seconds:.2f}", peak)
    table.add_row("in all", f"{sum(stage.seconds for stage in stages):.2f}", "")
    print_parts(console, table)


def print_parts(console: Console, *parts: RenderableType) -> None:
    """Print without the blanks that tables put at the ends of lines.

    Parameters
    ----------
    console : rich Console
    *parts : what rich can print
    """
    with console.capture() as captured:
        for part in parts:
            console.print(part)
    click.echo("\n".join(line.rstrip() for line in captured.get().splitlines()), color=True)


def _facts(mesh: ShellMesh, solid_mass: float | None) -> Table:
    areas = element_areas(mesh)
    web_area = float(areas[np.array([region.kind == "web" for region in mesh.regions])[mesh.region]].sum())
    shape = "quadrilaterals" if mesh.n_sides == 4 else "triangles"
    table = Table.grid(padding=(0, 2, 0, 0))
    table.add_column()
    table.add_column(justify="right", no_wrap=True)
    table.add_column()
    table.add_row("  elements", grouped(len(mesh.cells)), f"{mesh.connectivity.shape[1]}-node {shape}")
    table.add_row("  nodes", grouped(mesh.n_nodes))
    table.add_row(
        "  area", f"{significant(float(areas.sum()))} m²", f"webs {significant(web_area)} m²" * (web_area > 0)
    )
    table.add_row("  regions", grouped(len(mesh.regions)))
    for name, elements in mesh.element_sets.items():
        table.add_row(f"  {printable(name)}", grouped(len(elements)), "element" if len(elements) == 1 else "elements")
    if not mesh.stacks:
        table.add_row("  stacks", "none", "no plies in the blade file: the decks carry no sections")
        return table
    properties = mass_properties(mesh)
    centre = ", ".join(f"{axis} {value:.3f}" for axis, value in zip("xyz", properties.centre, strict=True))
    table.add_row("  mass", f"{significant(properties.mass)} kg", f"centre at {centre} m")
    if solid_mass is not None and abs(solid_mass - properties.mass) > NOTABLE_CURVATURE * properties.mass:
        table.add_row("  mass as solids", f"{significant(solid_mass)} kg", SOLIDS_MEAN)
    table.add_row("  stacks", grouped(len(mesh.stacks)), _range_of_stacks(mesh))
    if mesh.report.ply_end_move > 0:
        move = f"{mesh.report.ply_end_move * 1e3:.0f} mm"
        table.add_row("  ply ends", move, Text(f"moved at most: {printable(mesh.report.ply_end_place)}"))
    return table


def _range_of_stacks(mesh: ShellMesh) -> str:
    layers = [len(stack.layers) for stack in mesh.stacks]
    thickness = [stack.thickness * 1e3 for stack in mesh.stacks]
    return f"{min(layers)} to {max(layers)} layers, {min(thickness):.1f} to {max(thickness):.1f} mm"


def _warnings(mesh: ShellMesh) -> list[RenderableType]:
    sentences = mesh.report.warnings
    if not sentences:
        return [Text("  no warnings")]
    table = Table.grid(padding=(0, 1, 0, 0))
    table.add_column(no_wrap=True)
    table.add_column(overflow="fold")
    for sentence in sentences[:MOST_WARNINGS]:
        table.add_row("  -", Text(printable(sentence)))
    parts: list[RenderableType] = [
        Text(f"  {len(sentences)} warning{'s' * (len(sentences) > 1)}", style="yellow"),
        table,
    ]
    if len(sentences) > MOST_WARNINGS:
        parts.append(Text(f"  and {len(sentences) - MOST_WARNINGS} more in {printable(mesh.stem)}.summary.json"))
    return parts


def _files(files: Sequence[WrittenFile]) -> Table:
    table = Table.grid(padding=(0, 2, 0, 0))
    table.add_column(overflow="fold")
    table.add_column(justify="right", no_wrap=True)
    for file in files:
        table.add_row(Text(f"  {printable(file.name)}"), file_size(file.size))
    return table
