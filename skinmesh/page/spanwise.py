"""Numbers along the span, measured on the mesh: planform, twist, thickness, mass and stiffness."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.meshcut import element_row_middles, mesh_sections
from skinmesh.definition.blade import COUNTER_CLOCKWISE
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.develop import NOSE

Floats = NDArray[np.float64]

MOST_SECTIONS = 400


def shape_along(mesh: ShellMesh) -> dict[str, Any]:
    """Leading and trailing edge, chord, twist and thickness of every node ring that has both edges.

    The chord runs from the node on the leading edge to the middle of the trailing edge's nodes; the thickness is the
    section's extent across it. A profile that keeps its own axes may have its foremost node some tenths of a degree off
    them, and so does the twist from that of the table.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    dict
        Lists by name, m and degrees; empty where the mesh has no leading edge.
    """
    seams = mesh.report.seams
    names = ("z", "leading", "trailing", "chord", "twist", "thickness")
    if NOSE not in seams:
        return {name: [] for name in names}
    skin = np.flatnonzero(mesh.sheet[: mesh.n_corners] == 0)
    order = skin[np.lexsort((mesh.seam[skin], np.round(mesh.row[skin], 9)))]
    rows = np.round(mesh.row[order], 9)
    start = np.flatnonzero(np.r_[True, rows[1:] != rows[:-1]])
    measured = []
    for nodes in np.split(order, start[1:]):
        place, points = mesh.seam[nodes], mesh.points[nodes]
        nose = points[place == seams.index(NOSE)]
        tail = points[(place == 0) | (place == len(seams) - 1)]
        if not len(nose) or not len(tail):
            continue
        line = (tail.mean(axis=0) - nose[0])[:2]
        chord = float(np.hypot(*line))
        across = (points[:, :2] - nose[0, :2]) @ np.array([-line[1], line[0]]) / max(chord, 1e-30)
        hand = -1.0 if mesh.hand == COUNTER_CLOCKWISE else 1.0
        twist = np.degrees(np.arctan2(line[0], hand * line[1]))
        measured.append((nose[0, 2], nose[0, 1], tail[:, 1].mean(), chord, twist, np.ptp(across)))
    table = np.array(measured).reshape(-1, len(names))
    return {name: _plain(column) for name, column in zip(names, table.T, strict=True)}


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
