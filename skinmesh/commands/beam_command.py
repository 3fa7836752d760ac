"""``skinmesh beam``: the blade's properties as a beam, from two independent roads."""

from __future__ import annotations

from pathlib import Path

import click
import numpy as np
from rich.console import Console, RenderableType
from rich.table import Table
from rich.text import Text

import skinmesh
from skinmesh.beam.csvtext import beam_csv
from skinmesh.beam.table import BeamTable, beam_difference, beam_table
from skinmesh.commands.closing import CAUTION, print_parts, printable, significant
from skinmesh.commands.stages import shown_stages
from skinmesh.errors import OutputError
from skinmesh.show.beam_plot import beam_plot
from skinmesh.show.page import Page
from skinmesh.write.placing import new_file

SHOWN_ROWS = 14


@click.command()
@click.argument("blade_file", metavar="BLADE.yaml", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    metavar="FILE.csv",
    type=click.Path(path_type=Path),
    help="File for the table; by default the blade file's stem + '-beam.csv', in the current folder.",
)
@click.option(
    "--at",
    "places",
    type=click.Choice(["rows", "stations"]),
    default="rows",
    show_default=True,
    help="Sections at the middle of every element row, or at the stations.",
)
@click.option("--picture", is_flag=True, help="Also draw the table, beside it (PNG).")
def beam(blade_file: Path, output: Path | None, places: str, picture: bool) -> None:
    """Work out the beam properties of BLADE.yaml along its span.

    Mass, centres, axial, bending and torsional stiffness and rotary inertia, from thin-wall laminate theory on the
    exact sections and from the elements of the mesh, side by side, with the difference.

    \b
    Examples:
      skinmesh beam marram-24.yaml
      skinmesh beam marram-24.yaml -o table.csv --at stations --picture
    """
    if picture:
        Page(16)  # says at once where the extra is missing
    with shown_stages() as stages:
        stages.begin("reading", 0.0)
        blade = skinmesh.load(blade_file)
        path = output or Path(f"{blade.stem}-beam.csv")
        if path.is_dir() or not path.resolve().parent.is_dir():
            raise OutputError(f"cannot write {path}: name a file in a folder that exists, with -o")
        mesh = skinmesh.build(blade, progress=stages.part(0.05, 0.7))
        stages.begin("sections", 0.7)
        table = beam_table(blade, mesh, z=blade.stations.z if places == "stations" else None)
        stages.begin("writing", 0.9)
        written = [path]
        _write(path, beam_csv(table))
        if picture:
            written.append(path.with_suffix(".png"))
            _draw(written[-1], table)
        stages.end()
    console = Console(highlight=False, markup=False, emoji=False)
    print_parts(console, *_shown(table), *(Text(printable(str(file))) for file in written), Text(CAUTION, style="dim"))


def _write(path: Path, text: str) -> None:
    with new_file(path) as unfinished:
        unfinished.write_text(text, encoding="utf-8")


def _draw(path: Path, table: BeamTable) -> None:
    with new_file(path) as unfinished:
        beam_plot(table, unfinished)


def _shown(table: BeamTable) -> tuple[RenderableType, ...]:
    """Some sections, the largest differences, and the totals."""
    shown = np.unique(np.linspace(0, len(table.z) - 1, SHOWN_ROWS).round().astype(int))
    road = table.exact
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    for head in ("z m", "kg/m", "EA N", "EI small", "EI large", "GJ N m²", "twist °", "cells"):
        rows.add_column(head, justify="right")
    for k in shown:
        twist = np.degrees(road.structural_twist[k])
        rows.add_row(
            f"{table.z[k]:.3f}",
            f"{road.mass[k]:.2f}",
            *(f"{value:.3e}" for value in (road.axial[k], *road.principal[k], road.torsion[k])),
            "" if np.isnan(twist) else f"{twist:.2f}",
            str(road.n_cells[k]),
        )
    return Text(printable(table.title), style="bold"), rows, _differences(table), _totals(table)


def _differences(table: BeamTable) -> Table:
    difference = beam_difference(table)
    shares = {
        "mass": difference.mass,
        "EA": difference.axial,
        "EI small": difference.principal[:, 0],
        "EI large": difference.principal[:, 1],
        "GJ": difference.torsion,
        "mass centre / chord": difference.mass_centre,
        "tension centre / chord": difference.tension_centre,
        "shear centre / chord": difference.shear_centre,
    }
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    rows.add_column("mesh against theory")
    for head in ("half of the sections within", "largest", "at z m"):
        rows.add_column(head, justify="right")
    for name, values in shares.items():
        size = np.nan_to_num(np.abs(values))
        worst = int(np.argmax(size))
        rows.add_row(name, f"{100 * np.median(size):.3f} %", f"{100 * size[worst]:.2f} %", f"{table.z[worst]:.3f}")
    return rows


def _totals(table: BeamTable) -> Table:
    rows = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    rows.add_column("whole blade")
    for head in ("kg", "centre x m", "y m", "z m", "static moment at the root kg m"):
        rows.add_column(head, justify="right")
    for name, totals in (("theory", table.exact_totals), ("mesh", table.mesh_totals)):
        moment = significant(float(totals.first_moments[2]))
        rows.add_row(name, significant(totals.mass), *(f"{value:.3f}" for value in totals.centre), moment)
    return rows
