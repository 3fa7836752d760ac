"""Numbers along the span as the page has them: planform, twist, thickness, mass and stiffness."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.meshcut import element_row_middles, mesh_sections
from skinmesh.mesh.planform import planform
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]

MOST_SECTIONS = 400


def shape_along(mesh: ShellMesh) -> dict[str, list[float | None]]:
    """Leading and trailing edge, chord, twist and thickness of every node ring that has both edges.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    dict of str to list
        Lists by name, m and degrees, as ``skinmesh.mesh.planform`` measures them.
    """
    shape = planform(mesh)
    columns = {name: getattr(shape, name) for name in ("z", "leading", "trailing", "chord", "thickness")}
    columns["twist"] = np.degrees(shape.twist)
    return {name: _plain(column) for name, column in columns.items()}


def beam_along(mesh: ShellMesh) -> dict[str, Any]:
    """Mass and stiffness of sections at the middle of element rows, summed over the elements.

    At most ``MOST_SECTIONS`` of them, evenly chosen; those are exact for their row.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    dict
        Lists by name, SI units; ``rows`` is how many element rows there are. Empty lists without plies.
    """
    names = ("z", "mass", "EA", "EI_small", "EI_large", "GJ")
    if not mesh.stacks:
        return {**{name: [] for name in names}, "rows": 0}
    middles, _ = element_row_middles(mesh)
    chosen = np.unique(np.linspace(0, len(middles) - 1, min(len(middles), MOST_SECTIONS)).round().astype(int))
    sections = mesh_sections(mesh, middles[chosen])
    columns = (
        sections.z,
        sections.mass,
        sections.axial,
        sections.principal[:, 0],
        sections.principal[:, 1],
        sections.torsion,
    )
    return {**{name: _plain(column) for name, column in zip(names, columns, strict=True)}, "rows": len(middles)}


def _plain(values: Floats) -> list[float | None]:
    return [None if not np.isfinite(value) else float(f"{value:.7g}") for value in values.tolist()]
