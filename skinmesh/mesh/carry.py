"""From nodes and elements of an earlier mesh to those of another one of the same blade, by parametric coordinates."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.crossing import Crossing
from skinmesh.mesh.lattice import BASE, SAME_PLACE, SKIN, Lattice, read_lattice
from skinmesh.mesh.plane import with_middles
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.kept import MatchedLines

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_THIN = 1e-9  # of a cell: what overlaps by less is beside it
# Four points of a cell: a quarter of it each, and two in either half, whichever way a diagonal cuts it.
_QUARTERS = np.array([[0.5, 1 / 6], [5 / 6, 0.5], [0.5, 5 / 6], [1 / 6, 0.5]])
_BASE_SAMPLES = np.stack(np.meshgrid(*[(np.arange(8) + 0.5) / 8.0] * 2), axis=-1).reshape(-1, 2)


@dataclass(frozen=True, eq=False)
class NodeMap:
    """Where the places of old nodes lie in another mesh.

    Attributes
    ----------
    nearest : (n,) int array
        The nearest node of the element that holds the place, as an index; −1 where the place is gone.
    row_offset, seam_offset : (n,) float array
        Its parametric coordinates less those of the place; NaN where the place is gone. On webs ``seam`` is the height.
    distance : (n,) float array, m
        From the old node to it, the change of the surface included; NaN where the place is gone.
    element : (n,) int array
        The element that holds the place; −1 where the place is gone.
    weight : (n, k) float array
        Shares of that element's corners, of sum 1: a force at the old node goes to the corners by these shares, and a
        field of the new nodes has this weighted sum at the place. 0 where the place is gone.
    """

    nearest: Ints
    row_offset: Floats
    seam_offset: Floats
    distance: Floats
    element: Ints
    weight: Floats

    @property
    def is_same(self) -> NDArray[np.bool_]:
        """(n,) bool array: the nearest node has the very parametric coordinates of the old one."""
        moved = np.maximum(np.abs(self.row_offset), np.abs(self.seam_offset))
        return np.asarray((self.nearest >= 0) & (np.nan_to_num(moved) <= SAME_PLACE))

    @property
    def is_gone(self) -> NDArray[np.bool_]:
        """(n,) bool array: the new mesh has no such place."""
        return self.nearest < 0


@dataclass(frozen=True, eq=False)
class ElementMap:
    """Elements of two meshes that share places, pair by pair, in the order of the new ones.

    Attributes
    ----------
    new, old : (p,) int array
        Indices; −1 where the other mesh has no such place.
    share_of_new, share_of_old : (p,) float array
        Share of the element's parametric area that the pair has in common. All pairs of one element add up to 1. A
        pressure or a result of a new element is the sum of ``share_of_new`` times the old one's; a force of an old
        element gives ``share_of_old`` of it to each new one.
    """

    new: Ints
    old: Ints
    share_of_new: Floats
    share_of_old: Floats


@dataclass(frozen=True, eq=False)
class MeshMap:
    """An earlier mesh on another one.

    Attributes
    ----------
    old, new : ShellMesh
    rows, seams : MatchedLines
        What the two have in common; between these lines a place is carried by its share of the way.
    nodes : NodeMap
    elements : ElementMap
    """

    old: ShellMesh
    new: ShellMesh
    rows: MatchedLines
    seams: MatchedLines
    nodes: NodeMap
    elements: ElementMap

    @property
    def is_identity(self) -> bool:
        """Whether every node and every element has its earlier number and place."""
        old, new, pairs = self.old, self.new, self.elements
        return bool(
            old.n_nodes == new.n_nodes
            and len(old.cells) == len(new.cells) == len(pairs.new)
            and self.nodes.is_same.all()
            and np.array_equal(new.node_number[self.nodes.nearest], old.node_number[: old.n_nodes])
            and np.all(pairs.new >= 0)
            and np.all(pairs.old >= 0)
            and np.array_equal(new.element_number[pairs.new], old.element_number[pairs.old])
        )


def map_meshes(old: ShellMesh, new: ShellMesh) -> MeshMap:
    """Carry nodes and elements of a mesh to another one of the same blade, whose layout may have changed.

    Places are matched as :class:`skinmesh.mesh.crossing.Crossing` says: by the names of rows and seams.

    Parameters
    ----------
    old, new : ShellMesh

    Returns
    -------
    MeshMap
    """
    crossing = Crossing(read_lattice(old), read_lattice(new))
    nodes, elements = _map_nodes(crossing), _map_elements(crossing)
    return MeshMap(old, new, crossing.matched_rows, crossing.matched_seams, nodes, elements)


def _map_nodes(crossing: Crossing) -> NodeMap:
    old, new = crossing.old.mesh, crossing.new.mesh
    n = old.n_nodes
    row, seam, sheet = old.row[:n], old.seam[:n], old.sheet[:n]
    webs = [region.name for region in old.regions if region.kind == "web"]
    on_base = (sheet == 0) & (seam > crossing.old.last_seam)
    groups = {SKIN: (sheet == 0) & ~on_base, BASE: on_base}
    groups |= {name: sheet == k for k, name in enumerate(webs, start=1)}
    new_row, new_seam = crossing.rows(row), np.full(n, np.nan)
    element, weight = np.full(n, -1), np.zeros((n, new.n_sides))
    for name, own in groups.items():
        if own.any():
            new_seam[own] = crossing.seams(name, row[own], seam[own])
            element[own], weight[own] = crossing.new.locate(name, new_row[own], new_seam[own])
    nearest, offsets, distance = np.full(n, -1), np.full((n, 2), np.nan), np.full(n, np.nan)
    there = np.flatnonzero(element >= 0)
    held = element[there]
    straight = new.points[new.cells[held, : new.n_sides]]
    place = np.einsum("nk,nkx->nx", weight[there], straight)
    coordinates = [getattr(crossing.new, f"corner_{kind}")[held] for kind in ("row", "seam")]
    if new.order == 2:
        straight = np.concatenate([straight, 0.5 * (straight + np.roll(straight, -1, axis=1))], axis=1)
        coordinates = [with_middles(values) for values in coordinates]
        # where the base runs out, the middle of an edge to the apex lies on the line of the edge's other end
        in_base = np.array([region.kind == "base" for region in new.regions])[new.region[held]]
        own_seam = new.seam[new.cells[held[in_base]]]
        coordinates[1][in_base] = np.where(own_seam == 0.0, crossing.new.last_seam + 1.0, own_seam)
    pick = np.argmin(np.sum((straight - place[:, None]) ** 2, axis=2), axis=1)
    some = np.arange(len(there))
    nearest[there] = new.connectivity[held, pick]
    for k, values in enumerate((new_row, new_seam)):
        offsets[there, k] = coordinates[k][some, pick] - values[there]
    offsets[np.abs(offsets) <= SAME_PLACE] = 0.0
    distance[there] = np.linalg.norm(new.points[nearest[there]] - old.points[there], axis=1)
    return NodeMap(nearest, offsets[:, 0], offsets[:, 1], distance, element, weight)


def _map_elements(crossing: Crossing) -> ElementMap:
    found = [np.concatenate(part) for part in zip(*(_overlaps(crossing, name) for name in crossing.names), strict=True)]
    old, new, of_old, of_new = found
    n_old, n_new = len(crossing.old.mesh.cells), len(crossing.new.mesh.cells)
    pairs, which = np.unique((new + 1) * (n_old + 1) + old + 1, return_inverse=True)
    new, old = pairs // (n_old + 1) - 1, pairs % (n_old + 1) - 1
    shares = []
    for own, values, n in ((new, of_new, n_new), (old, of_old, n_old)):
        sums = np.bincount(which, weights=values, minlength=len(pairs))
        total = np.bincount(own + 1, weights=sums, minlength=n + 1)[own + 1]
        shares.append(np.where(own >= 0, sums / np.where(total > 0.0, total, 1.0), 0.0))
    keep = np.maximum(*shares) > _THIN
    order = np.lexsort((old, new, new < 0))
    order = order[keep[order]]
    return ElementMap(new[order], old[order], shares[0][order], shares[1][order])


def _overlaps(crossing: Crossing, name: str) -> tuple[Ints, Ints, Floats, Floats]:
    """Pieces of a chart, each within one element of both meshes at most: elements, and sizes in cells of each."""
    lattices = crossing.old, crossing.new
    if name not in crossing.old.charts or name not in crossing.new.charts:
        is_new = name in crossing.new.charts
        chart = lattices[is_new].charts[name]
        own = np.concatenate([chart.cells[chart.cells >= 0], *_closing_elements(lattices[is_new], name)])
        nothing, ones = np.full(len(own), -1), np.ones(len(own))
        return (nothing, own, ones, ones) if is_new else (own, nothing, ones, ones)
    old, new = (lattice.charts[name] for lattice in lattices)
    u, u_old, u_new = _merged(crossing.rows(old.rows)[None], new.rows)
    middle = 0.5 * (u[0, 1:] + u[0, :-1])
    _, v_old, v_new = _merged(crossing.seam_lines(name, crossing.rows_back(middle)), new.seams)
    size = [np.diff(along, axis=1).T * np.diff(across, axis=1) for along, across in ((u_old, v_old), (u_new, v_new))]
    i, j = np.nonzero((size[0] > _THIN) & (size[1] > _THIN))
    sizes = size[0][i, j], size[1][i, j]
    if name != BASE and old.cells.shape[2] == new.cells.shape[2] == 1:
        cell = [
            ((along[0, i] + along[0, i + 1]) / 2.0, (across[i, j] + across[i, j + 1]) / 2.0)
            for along, across in ((u_old, v_old), (u_new, v_new))
        ]
        elements = [
            chart.cells[a.astype(int), b.astype(int), 0] for chart, (a, b) in zip((old, new), cell, strict=True)
        ]
        return (*elements, *sizes)
    samples = _BASE_SAMPLES if name == BASE else _QUARTERS
    pieces = []
    for lattice, chart, along, across, own in zip(
        lattices, (old, new), (u_old, u_new), (v_old, v_new), sizes, strict=True
    ):
        a = along[0, i, None] + samples[:, 0] * (along[0, i + 1] - along[0, i])[:, None]
        b = across[i, j, None] + samples[:, 1] * (across[i, j + 1] - across[i, j])[:, None]
        row, seam = (
            np.interp(x.ravel(), np.arange(len(lines)), lines) for x, lines in ((a, chart.rows), (b, chart.seams))
        )
        weight = np.repeat(own, len(samples)) * _width(lattice, name, row)
        pieces.append((lattice.locate(name, row, seam)[0], weight))
    return pieces[0][0], pieces[1][0], pieces[0][1], pieces[1][1]


def _merged(carried: Floats, lines: Floats) -> tuple[Floats, Floats, Floats]:
    """All lines of both lattices in new coordinates, (n, k), and the same in cells of the old and of the new one."""
    both = np.concatenate([carried, np.tile(lines, (len(carried), 1))], axis=1)
    order = np.argsort(both, axis=1, kind="stable")
    both = np.take_along_axis(both, order, axis=1)
    in_old = np.stack([np.interp(at, own, np.arange(len(own))) for at, own in zip(both, carried, strict=True)])
    return both, in_old, np.interp(both, lines, np.arange(len(lines)))


def _width(lattice: Lattice, name: str, row: Floats) -> Floats:
    """Width of the base where it runs out, as a share of the full one."""
    width = np.ones(len(row))
    if name == BASE:
        for closing in lattice.closings:
            inside = (row >= closing.first) & (row <= closing.last)
            width[inside] = np.abs(row[inside] - closing.apex)
    return width


def _closing_elements(lattice: Lattice, name: str) -> Iterator[Ints]:
    if name == BASE:
        yield from (np.unique(closing.element) for closing in lattice.closings)
