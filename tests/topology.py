"""What a mesh's edges say of its joints, for tests."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh


def edges(mesh: ShellMesh) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Every distinct edge by its corner nodes, how many elements share it, and which element holds it first."""
    k = mesh.n_sides
    corners = mesh.cells[:, :k]
    pairs = np.sort(np.stack([corners, np.roll(corners, -1, axis=1)], axis=-1).reshape(-1, 2), axis=1)
    unique, first, count = np.unique(pairs, axis=0, return_index=True, return_counts=True)
    return unique, count, first // k


def stray_free_edges(mesh: ShellMesh) -> int:
    """Free edges that lie neither at root or tip nor at the end of a web."""
    pairs, count, owner = edges(mesh)
    free = count == 1
    row = mesh.row[pairs[free]]
    on_end = np.all(row == 0.0, axis=1) | np.all(row == mesh.row.max(), axis=1)
    strays = 0
    for r, element in zip(row[~on_end], owner[free][~on_end], strict=True):
        web = mesh.regions[mesh.region[element]]
        own_rows = mesh.row[mesh.cells[mesh.region == mesh.region[element]]]
        at_web_end = web.kind == "web" and r[0] == r[1] and r[0] in (own_rows.min(), own_rows.max())
        strays += not at_web_end
    return strays


def consistent_orientation(mesh: ShellMesh) -> bool:
    """Whether every two skin elements with a common edge run along it in opposite senses."""
    k = mesh.n_sides
    on_skin = np.array([region.kind != "web" for region in mesh.regions])[mesh.region]
    corners = mesh.cells[on_skin, :k]
    directed = np.stack([corners, np.roll(corners, -1, axis=1)], axis=-1).reshape(-1, 2)
    return len(np.unique(directed, axis=0)) == len(directed)


def outward_share(mesh: ShellMesh) -> float:
    """Share of the skin's elements whose e3 points out of their own section.

    Of each element the edge on its root-side ring of nodes is looked at: a small step from the edge's middle along e3
    must leave the ring's polygon. The few elements without such an edge, where a trailing edge closes, are left to
    ``consistent_orientation``.
    """
    k = mesh.n_sides
    on_skin = np.flatnonzero(np.array([region.kind != "web" for region in mesh.regions])[mesh.region])
    corners = mesh.cells[on_skin, :k]
    row = mesh.row[corners]
    at_low = row == row.min(axis=1, keepdims=True)
    has_edge = at_low.sum(axis=1) == 2
    ends = np.sort(np.where(at_low[has_edge], corners[has_edge], -1), axis=1)[:, -2:]
    middle = mesh.points[ends].mean(axis=1)
    low, e3 = row.min(axis=1)[has_edge], mesh.e3[on_skin][has_edge]
    ring_nodes = np.flatnonzero((mesh.sheet == 0) & (np.arange(len(mesh.points)) < mesh.n_corners))
    outside = 0
    for r in np.unique(low):
        ring = ring_nodes[mesh.row[ring_nodes] == r]
        polygon = shapely.Polygon(mesh.points[ring[np.argsort(mesh.seam[ring])], :2])
        assert polygon.is_valid
        own = low == r
        step = 1e-6 * np.sqrt(polygon.area)
        outside += int(np.sum(~shapely.contains_xy(polygon, middle[own, :2] + step * e3[own, :2])))
    return outside / int(has_edge.sum())
