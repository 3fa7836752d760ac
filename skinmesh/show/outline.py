"""Lines of a mesh: borders between unlike elements, and cuts at constant z."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


def border_edges(mesh: ShellMesh, label: Ints) -> Ints:
    """Edges where the label of the elements changes, or where the mesh ends.

    Parameters
    ----------
    mesh : ShellMesh
    label : (m,) int array

    Returns
    -------
    (k, 2) int array
        Node indices of both ends.
    """
    corners = mesh.cells[:, : mesh.n_sides]
    ends = np.sort(np.stack([corners, np.roll(corners, -1, axis=1)], axis=-1).reshape(-1, 2), axis=1)
    owner = np.repeat(label, mesh.n_sides)
    order = np.lexsort((owner, ends[:, 1], ends[:, 0]))
    ends, owner = ends[order], owner[order]
    first = np.r_[True, np.any(ends[1:] != ends[:-1], axis=1)]
    start = np.flatnonzero(first)
    count = np.diff(np.r_[start, len(ends)])
    last = start + count - 1
    at_border = (count == 1) | (owner[start] != owner[last])
    return np.asarray(ends[start[at_border]])


def cut_at(mesh: ShellMesh, z: float) -> tuple[Floats, Ints]:
    """Cut the mesh, its element sides taken as straight, with a plane of constant z.

    Parameters
    ----------
    mesh : ShellMesh
    z : float, m

    Returns
    -------
    lines : (k, 2, 2) float array, m
        (x, y) of both ends of the line through each element that is cut.
    element : (k,) int array
    """
    corners = mesh.points[mesh.cells[:, : mesh.n_sides]]
    # A hair beside z, so that no corner lies on the plane.
    height = corners[:, :, 2] - (z + 1e-9 * np.ptp(mesh.points[:, 2]))
    following = np.roll(height, -1, axis=1)
    crossing = (height > 0) != (following > 0)
    element = np.flatnonzero(crossing.sum(axis=1) == 2)
    row, side = np.nonzero(crossing[element])
    row = element[row]
    share = height[row, side] / (height[row, side] - following[row, side])
    start, end = corners[row, side, :2], np.roll(corners, -1, axis=1)[row, side, :2]
    return (start + share[:, None] * (end - start)).reshape(-1, 2, 2), element
