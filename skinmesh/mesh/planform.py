"""Planform and twist, measured on the node rings of a mesh."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import COUNTER_CLOCKWISE
from skinmesh.frozen import freeze_array
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]

LEADING_EDGE = "leading edge"


@dataclass(frozen=True, eq=False)
class Planform:
    """Numbers of every node ring that has both edges, root first.

    Attributes
    ----------
    z : (r,) float array, m
    leading, trailing : (r,) float array, m
        y of both edges.
    chord : (r,) float array, m
        From the node on the leading edge to the middle of the trailing edge's nodes.
    twist : (r,) float array, rad
        Of that line. A profile that keeps its own axes may have its foremost node some tenths of a degree off them,
        and so does the twist from that of the table.
    thickness : (r,) float array, m
        The section's extent across the chord.
    """

    z: Floats
    leading: Floats
    trailing: Floats
    chord: Floats
    twist: Floats
    thickness: Floats

    def __post_init__(self) -> None:
        for name in ("z", "leading", "trailing", "chord", "twist", "thickness"):
            freeze_array(self, name, shape=(len(self.z),))


def planform(mesh: ShellMesh) -> Planform:
    """Measure leading and trailing edge, chord, twist and thickness of the node rings.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    Planform
        Empty where the mesh has no leading edge.
    """
    seams = mesh.report.seams
    skin = np.flatnonzero(mesh.sheet[: mesh.n_corners] == 0)
    if LEADING_EDGE not in seams or not len(skin):
        return Planform(*np.zeros((6, 0)))
    order = skin[np.lexsort((mesh.seam[skin], np.round(mesh.row[skin], 9)))]
    rows = np.round(mesh.row[order], 9)
    starts = np.flatnonzero(np.r_[True, rows[1:] != rows[:-1]])
    ring = np.cumsum(np.r_[False, rows[1:] != rows[:-1]])
    at_nose = mesh.seam[order] == seams.index(LEADING_EDGE)
    at_tail = (mesh.seam[order] == 0) | (mesh.seam[order] == len(seams) - 1)
    points = mesh.points[order]
    nose, tail = (_ring_means(points, ring, chosen, len(starts)) for chosen in (at_nose, at_tail))
    line = (tail - nose)[:, :2]
    chord = np.hypot(*line.T)
    normal = np.column_stack([-line[:, 1], line[:, 0]]) / np.maximum(chord, 1e-30)[:, None]
    across = np.einsum("nd,nd->n", points[:, :2] - nose[ring, :2], normal[ring])
    thickness = np.maximum.reduceat(across, starts) - np.minimum.reduceat(across, starts)
    hand = -1.0 if mesh.hand == COUNTER_CLOCKWISE else 1.0
    twist = np.arctan2(line[:, 0], hand * line[:, 1])
    has_both = np.isfinite(chord)
    columns = (nose[:, 2], nose[:, 1], tail[:, 1], chord, twist, thickness)
    return Planform(*(column[has_both] for column in columns))


def _ring_means(points: Floats, ring: NDArray[np.int64], chosen: NDArray[np.bool_], n_rings: int) -> Floats:
    """(n_rings, 3) mean of the chosen points of every ring, NaN where a ring has none."""
    count = np.bincount(ring[chosen], minlength=n_rings).astype(float)
    sums = np.column_stack([np.bincount(ring[chosen], weights=axis, minlength=n_rings) for axis in points[chosen].T])
    means: Floats = np.divide(sums, count[:, None], out=np.full(sums.shape, np.nan), where=count[:, None] > 0)
    return means
