"""Points of one mesh at the parametric coordinates of another one of the same layout."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import Akima1DInterpolator, CubicSpline

from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_DIGITS = 9


@dataclass(frozen=True, eq=False)
class SkinGrid:
    """The corner nodes of a skin as rings, without the face of a blunt trailing edge.

    Attributes
    ----------
    row : (r,) float array
        Row coordinate of every ring, root first.
    seam : (s,) float array
        Seam coordinate of every node of a ring, from the pressure trailing edge on.
    node : (r, s) int array
        Index of the node; on a closed ring both ends are the same one.
    """

    row: Floats
    seam: Floats
    node: Ints


def skin_grid(mesh: ShellMesh) -> SkinGrid | None:
    """Lay the skin's corner nodes out by row and seam.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    SkinGrid or None
        None where the nodes are no full grid.
    """
    last = len(mesh.report.seams) - 1.0
    if last < 1.0:
        return None
    on_skin = np.flatnonzero((mesh.sheet[: mesh.n_corners] == 0) & (mesh.seam[: mesh.n_corners] <= last))
    row, seam = (np.round(values[on_skin], _DIGITS) for values in (mesh.row, mesh.seam))
    rows = np.unique(row[(seam > 0) & (seam < last)])
    kept = np.isin(row, rows)
    on_skin, row, seam = on_skin[kept], row[kept], seam[kept]
    # where every ring is closed no node has the last seam for its own
    seams = np.union1d(seam, [last])
    if len(rows) < 2 or len(seams) < 3:
        return None
    node = np.full((len(rows), len(seams)), -1, dtype=np.int64)
    node[np.searchsorted(rows, row), np.searchsorted(seams, seam)] = on_skin
    closed = node[:, -1] < 0
    node[closed, -1] = node[closed, 0]
    if np.any(node < 0):
        return None
    return SkinGrid(rows, seams, node)


def points_at(mesh: ShellMesh, grid: SkinGrid, row: Floats, seam: Floats) -> Floats:
    """Where a mesh has the rings and seam coordinates of another one.

    Parameters
    ----------
    mesh : ShellMesh
    grid : SkinGrid
        Of this mesh.
    row : (r,) float array
    seam : (s,) float array

    Returns
    -------
    (r, s, 3) float array, m

    Notes
    -----
    Cubic splines along every ring over its arc length, as a skin is smooth from one trailing edge to the other; then
    Akima's piecewise cubics along z, where seams may have kinks: one spoils no more than its neighbours (Akima, A new
    method of interpolation and smooth curve fitting, J. ACM 17 (1970), from memory).
    """
    rings = mesh.points[grid.node]
    arc = np.concatenate(
        [np.zeros((len(rings), 1)), np.cumsum(np.linalg.norm(np.diff(rings, axis=1), axis=2), axis=1)], axis=1
    )
    across = np.stack(
        [_smooth(arc[k], rings[k], np.interp(seam, grid.seam, arc[k]), CubicSpline) for k in range(len(rings))]
    )
    z = rings[:, 0, 2]
    return _smooth(z, across, np.interp(row, grid.row, z), Akima1DInterpolator)


def _smooth(at: Floats, values: Floats, wanted: Floats, kind: Callable[..., Any]) -> Floats:
    """Interpolate along the first axis; at points that coincide the first one counts."""
    first = np.r_[True, np.diff(at) > 1e-12]
    at, values = at[first], values[first]
    if len(at) < 3:
        blended = np.stack([np.interp(wanted, at, column) for column in values.reshape(len(at), -1).T], axis=-1)
        return blended.reshape(len(wanted), *values.shape[1:])
    found: Floats = kind(at, values, axis=0)(np.clip(wanted, at[0], at[-1]))
    return found
