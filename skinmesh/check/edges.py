"""Every edge of a mesh once, with the elements that share it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh

Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class EdgeTable:
    """The edges of some elements of a mesh, by their corner nodes.

    Attributes
    ----------
    ends : (e, 2) int array
        Corner nodes of every edge, the lower index first.
    count : (e,) int array
        Elements that share it.
    uses_edge : (u,) int array
        Edge of every use, ordered by edge: an element uses each of its edges once.
    uses_element : (u,) int array
    uses_forward : (u,) bool array
        Whether the element runs along the edge from its lower to its higher node.
    uses_middle : (u,) int array
        Mid node that the element has on the edge.
    """

    ends: Ints
    count: Ints
    uses_edge: Ints
    uses_element: Ints
    uses_forward: NDArray[np.bool_]
    uses_middle: Ints

    @property
    def first_use(self) -> Ints:
        """(e,) int array: where the uses of each edge begin."""
        return np.concatenate([[0], np.cumsum(self.count)[:-1]]).astype(np.int64)

    def pairs(self) -> tuple[Ints, Ints]:
        """Edges that exactly two elements share, and those elements.

        Returns
        -------
        edge : (p,) int array
        elements : (p, 2) int array
        """
        edge = np.flatnonzero(self.count == 2)
        start = self.first_use[edge]
        return edge, np.column_stack([self.uses_element[start], self.uses_element[start + 1]])


def edge_table(mesh: ShellMesh, elements: Ints | None = None) -> EdgeTable:
    """Tabulate the edges of a mesh, or of some of its elements.

    Parameters
    ----------
    mesh : ShellMesh
    elements : int array, optional
        All by default.

    Returns
    -------
    EdgeTable
    """
    k = mesh.n_sides
    elements = np.arange(len(mesh.cells)) if elements is None else elements
    corners, middles = mesh.cells[elements, :k], mesh.cells[elements, k:]
    start, stop = corners.ravel(), np.roll(corners, -1, axis=1).ravel()
    low, high = np.minimum(start, stop), np.maximum(start, stop)
    n = len(mesh.points)
    keys, edge, count = np.unique(low * n + high, return_inverse=True, return_counts=True)
    edge = edge.ravel()
    order = np.argsort(edge, kind="stable")
    return EdgeTable(
        ends=np.column_stack([keys // n, keys % n]),
        count=count,
        uses_edge=edge[order],
        uses_element=np.repeat(elements, k)[order],
        uses_forward=(start < stop)[order],
        uses_middle=middles.ravel()[order],
    )


def smooth_pairs(mesh: ShellMesh) -> tuple[EdgeTable, Ints, Ints]:
    """Edges of the skin between two elements, but for those on the trailing edges, where the section has its corners.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    table : EdgeTable
        Of the skin.
    edge : (p,) int array
    elements : (p, 2) int array
    """
    table = edge_table(mesh, skin_elements(mesh))
    edge, pair = table.pairs()
    last = float(len(mesh.report.seams) - 1)
    seam = mesh.seam[table.ends[edge]]
    is_corner = np.all((seam <= 0.0) | (seam >= last), axis=1)
    return table, edge[~is_corner], pair[~is_corner]


def skin_elements(mesh: ShellMesh) -> Ints:
    """Elements of the skin, the trailing base included: all but webs."""
    is_web = np.array([region.kind == "web" for region in mesh.regions])
    return np.flatnonzero(~is_web[mesh.region])
