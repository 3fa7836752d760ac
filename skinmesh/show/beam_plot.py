"""The beam table as curves along the span."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.table import BeamTable, beam_difference
from skinmesh.show.page import MARGIN, Page
from skinmesh.show.palette import AXIS_COLOURS, QUIET
from skinmesh.show.panel import HEIGHT, panel
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]

COLOURS = (*AXIS_COLOURS[:2], "#009e73")


def beam_plot(table: BeamTable, path: Path) -> None:
    """Draw the beam table and write the picture as PNG, 1600 pixels wide.

    Lines are the theory on the exact sections, dots the sum over the mesh.

    Parameters
    ----------
    table : BeamTable
    path : Path

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    page = Page(HEIGHT)
    page.text(MARGIN, 40, table.title, size=26)
    page.text(
        MARGIN,
        78,
        "Beam properties along the span. Lines: thin-wall theory on the exact sections. Dots: the mesh's own elements.",
        colour=QUIET,
    )
    exact, mesh, difference = table.exact, table.mesh, beam_difference(table)
    _curves(page, 0, table.z, "mass, kg/m", {"": (exact.mass, mesh.mass)})
    _curves(page, 1, table.z, "axial stiffness EA, N", {"": (exact.axial, mesh.axial)}, is_log=True)
    bending = {
        "EI, larger": (exact.principal[:, 1], mesh.principal[:, 1]),
        "EI, smaller": (exact.principal[:, 0], mesh.principal[:, 0]),
        "GJ": (exact.torsion, mesh.torsion),
    }
    _curves(page, 2, table.z, "bending and torsional stiffness, N m²", bending, is_log=True)
    centres = {
        "mass": (exact.mass_centre[:, 1], mesh.mass_centre[:, 1]),
        "tension": (exact.tension_centre[:, 1], mesh.tension_centre[:, 1]),
        "shear": (exact.shear_centre[:, 1], mesh.shear_centre[:, 1]),
    }
    _curves(page, 3, table.z, "y of the centres, m", centres)
    twist = {"structural": tuple(np.degrees(road.structural_twist) for road in (exact, mesh))}
    axes = _curves(page, 4, table.z, "twist, °", twist)
    axes.plot(table.z, np.degrees(table.twist), color=QUIET, linewidth=1.0, linestyle="--", label="of the chord")
    axes.legend(frameon=False, fontsize=10)
    shares = {
        "mass": 100.0 * difference.mass,
        "EI, both": 100.0 * np.abs(difference.principal).max(axis=1),
        "GJ": 100.0 * difference.torsion,
    }
    axes = _curves(page, 5, table.z, "mesh over theory, %", {})
    for colour, (label, values) in zip(COLOURS, shares.items(), strict=True):
        axes.plot(table.z, values, color=colour, linewidth=1.2, label=label)
    axes.legend(frameon=False, fontsize=10)
    page.text(MARGIN, HEIGHT - 25, CAUTION[0], size=14, colour=QUIET)
    page.save(path)


def _curves(
    page: Page, place: int, z: Floats, title: str, curves: Mapping[str, tuple[Floats, ...]], *, is_log: bool = False
) -> Any:
    """One panel: a line and dots for each pair of values."""
    axes = panel(page, place, title, (float(z[0]), float(z[-1])), is_log=is_log)
    for colour, (label, (exact, mesh)) in zip(COLOURS, curves.items(), strict=False):
        axes.plot(z, exact, color=colour, linewidth=1.4, label=label)
        axes.plot(z, mesh, ".", color=colour, markersize=3.5)
    if len(curves) > 1:
        axes.legend(frameon=False, fontsize=10)
    return axes
