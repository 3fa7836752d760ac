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
    lines, element, _ = cut_sides_at(mesh, z)
    return lines, element


def cut_sides_at(mesh: ShellMesh, z: float) -> tuple[Floats, Ints, Ints]:
    """Cut the mesh as ``cut_at`` does, and tell which element sides the plane crosses.

    Parameters
    ----------
    mesh : ShellMesh
    z : float, m

    Returns
    -------
    lines : (k, 2, 2) float array, m
    element : (k,) int array
    sides : (k, 2, 2) int array
        Node indices of the side that each end of a line lies on, the smaller one first.
    """
    nodes = mesh.cells[:, : mesh.n_sides]
    corners = mesh.points[nodes]
    # A hair beside z, so that no corner lies on the plane, and inside the mesh at its two ends.
    span = float(np.ptp(mesh.points[:, 2]))
    root = float(mesh.points[:, 2].min())
    height = corners[:, :, 2] - (min(max(z, root), root + span * (1.0 - 2e-9)) + 1e-9 * span)
    following = np.roll(height, -1, axis=1)
    crossing = (height > 0) != (following > 0)
    element = np.flatnonzero(crossing.sum(axis=1) == 2)
    row, side = np.nonzero(crossing[element])
    row = element[row]
    share = height[row, side] / (height[row, side] - following[row, side])
    start, end = corners[row, side, :2], np.roll(corners, -1, axis=1)[row, side, :2]
    lines = (start + share[:, None] * (end - start)).reshape(-1, 2, 2)
    sides = np.sort(np.column_stack([nodes[row, side], np.roll(nodes, -1, axis=1)[row, side]]), axis=1)
    return lines, element, sides.reshape(-1, 2, 2)
