"""A finished mesh read as lattices over its parametric coordinates: which element holds a place."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import SUCTION
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

SKIN, BASE = "skin", "trailing base"
SAME_PLACE = 1e-9  # in row and seam coordinates
_EDGE = 1e-6  # of a cell: a place so near its edge lies in the next one too


@dataclass(frozen=True, eq=False)
class Chart:
    """The skin, the trailing base or a web as a lattice of rows and seams.

    Attributes
    ----------
    rows : (n + 1,) float array
        Row coordinates of the lines across.
    seams : (k + 1,) float array
        Seam coordinates of the lines along, on a web the heights.
    cells : (n, k, s) int array
        Elements in each cell of the lattice: one quadrilateral or two triangles; −1 where there is none.
    """

    rows: Floats
    seams: Floats
    cells: Ints


@dataclass(frozen=True, eq=False)
class Closing:
    """The elements in which the trailing base runs out, cut into triangles.

    Attributes
    ----------
    first, last : float
        Row coordinates of its ends.
    apex : float
        That of the two at which the base has no width.
    element : (t,) int array
    corner : (t, 3) int array
        Which corners of the element the triangle has.
    place : (t, 3, 2) float array
        Their places: share of the way across, narrowing to the apex, and row.
    """

    first: float
    last: float
    apex: float
    element: Ints
    corner: Ints
    place: Floats

    def flattened(self, row: Floats, share: Floats) -> Floats:
        """(n, 2) places in the triangle of the closing."""
        wide = np.abs(row - self.apex) / (self.last - self.first)
        return np.stack([0.5 + (share - 0.5) * wide, row], axis=-1)


@dataclass(frozen=True, eq=False)
class Lattice:
    """Every chart of a mesh.

    Attributes
    ----------
    mesh : ShellMesh
    charts : mapping of str to Chart
        ``SKIN``, ``BASE`` where there is one, and each web by name.
    closings : tuple of Closing
    corner_row, corner_seam : (m, k) float array
        Coordinates of the elements' corners in their own chart, where a joint may have others than its node.
    """

    mesh: ShellMesh
    charts: Mapping[str, Chart]
    closings: tuple[Closing, ...]
    corner_row: Floats
    corner_seam: Floats

    @property
    def last_seam(self) -> float:
        """Seam coordinate of the suction trailing edge, where the skin ends and the base begins."""
        return float(len(self.mesh.report.seams) - 1)

    def skin_points(self) -> Floats:
        """(n + 1, k + 1, 3) points of the skin's lattice, m."""
        chart, mesh = self.charts[SKIN], self.mesh
        grid = np.empty((len(chart.rows), len(chart.seams), 3))
        own = np.isin(mesh.region, [i for i, r in enumerate(mesh.regions) if r.kind not in ("web", "base")])
        i = _line(chart.rows, self.corner_row[own])
        j = _line(chart.seams, self.corner_seam[own])
        grid[i, j] = mesh.points[mesh.cells[own, : mesh.n_sides]]
        return grid

    def locate(self, name: str, row: Floats, seam: Floats) -> tuple[Ints, Floats]:
        """Find the elements that hold places of a chart.

        Parameters
        ----------
        name : str
            Of the chart.
        row, seam : (n,) float array

        Returns
        -------
        (n,) int array
            −1 where the chart has no element, or is not there.
        (n, k) float array
            Weights of the element's corners: what a linear field has at the place is their weighted sum.
        """
        n_sides = self.mesh.n_sides
        element, weight = np.full(len(row), -1), np.zeros((len(row), n_sides))
        if name not in self.charts:
            return element, weight
        chart = self.charts[name]
        u, v = (np.interp(x, lines, np.arange(len(lines))) for x, lines in ((row, chart.rows), (seam, chart.seams)))
        n, k = chart.cells.shape[:2]
        j = np.clip(np.floor(v).astype(int), 0, k - 1)
        for step in (0, -1, 1):  # at the end of a web, or of the base, only the cell on one side is there
            i = np.clip(np.floor(u + step * _EDGE).astype(int), 0, n - 1)
            found = np.flatnonzero((element < 0) & (chart.cells[i, j, 0] >= 0))
            candidates = chart.cells[i[found], j[found]]
            weights = self._weights(candidates, u[found], v[found], chart)
            best = np.argmax(np.min(weights, axis=-1), axis=-1)
            some = np.arange(len(found))
            element[found], weight[found] = candidates[some, best], weights[some, best]
        if name == BASE:
            for closing in self.closings:
                near = (element < 0) & (row >= closing.first - SAME_PLACE) & (row <= closing.last + SAME_PLACE)
                at = np.flatnonzero(near)
                element[at], weight[at] = _in_closing(closing, row[at], seam[at] - self.last_seam, n_sides)
        weight = np.clip(weight, 0.0, None)
        total = weight.sum(axis=1, keepdims=True)
        return element, np.divide(weight, total, out=np.zeros_like(weight), where=total > 0.0)

    def _weights(self, elements: Ints, u: Floats, v: Floats, chart: Chart) -> Floats:
        """(n, s, k) weights of the corners of some elements of the lattice."""
        u_corner = np.interp(self.corner_row[elements], chart.rows, np.arange(len(chart.rows)))
        v_corner = np.interp(self.corner_seam[elements], chart.seams, np.arange(len(chart.seams)))
        u, v = u[:, None, None], v[:, None, None]
        if self.mesh.n_sides == 4:
            return np.asarray((1.0 - np.abs(u - u_corner)) * (1.0 - np.abs(v - v_corner)))
        return _barycentric(np.stack([u_corner, v_corner], axis=-1), np.stack([u, v], axis=-1)[..., 0, :])


def read_lattice(mesh: ShellMesh) -> Lattice:
    """Read the lattices off the parametric coordinates of a mesh.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    Lattice
    """
    corners = mesh.cells[:, : mesh.n_sides]
    row, seam = mesh.row[corners], _own_seams(mesh, corners)
    last = float(len(mesh.report.seams) - 1)
    is_corner = np.arange(len(mesh.points)) < mesh.n_corners
    lines = np.unique(mesh.row[is_corner & (mesh.sheet == 0) & (mesh.seam == 0.0)])
    kinds = np.array([region.kind for region in mesh.regions])[mesh.region]
    base = np.flatnonzero(kinds == "base")
    closings = []
    for first, apex in _closing_bands(mesh):
        closes = (row[base].min(axis=1) >= first) & (row[base].max(axis=1) <= first + 1.0)
        closings.append(_closing(first, apex, base[closes], row, seam - last))
        base = base[~closes]
    groups = {SKIN: np.flatnonzero((kinds != "web") & (kinds != "base")), BASE: base}
    groups |= {r.name: np.flatnonzero(mesh.region == i) for i, r in enumerate(mesh.regions) if r.kind == "web"}
    charts = {
        name: _chart(row[own], seam[own], own, lines, np.array([last, last + 1.0]), mesh.n_sides)
        for name, own in groups.items()
        if len(own) or (name == BASE and closings)
    }
    return Lattice(mesh, charts, tuple(closings), row, seam)


def _own_seams(mesh: ShellMesh, corners: Ints) -> Floats:
    """Seam coordinates in the element's own chart: joints carry the skin's."""
    seam = mesh.seam[corners].copy()
    last = float(len(mesh.report.seams) - 1)
    for i, region in enumerate(mesh.regions):
        own = np.flatnonzero(mesh.region == i)
        values = seam[own]
        if region.kind == "web":
            suction = np.zeros(len(mesh.points), dtype=bool)
            suction[mesh.node_set(f"{region.name} suction foot")] = True
            at_foot = mesh.sheet[corners[own]] == 0
            values = np.where(at_foot, np.where(suction[corners[own]], 1.0, 0.0), values)
        elif region.kind == "base":
            values = np.where(values == 0.0, last + 1.0, values)
        elif region.side == SUCTION:
            # where the edges are closed they have the pressure side's seam, 0
            values = np.where(values == 0.0, last, values)
        seam[own] = values
    return seam


def _line(lines: Floats, values: Floats) -> Ints:
    return np.asarray(np.rint(np.interp(values, lines, np.arange(len(lines)))).astype(np.int64))


def _chart(row: Floats, seam: Floats, elements: Ints, lines: Floats, ends: Floats, n_sides: int) -> Chart:
    across = np.unique(seam) if len(elements) else ends
    per_cell = 1 if n_sides == 4 else 2
    cells = np.full((len(lines) - 1, len(across) - 1, per_cell), -1)
    i, j = _line(lines, row.min(axis=1)), _line(across, seam.min(axis=1))
    order = np.lexsort((elements, j, i))
    cells[i[order], j[order], np.arange(len(elements)) % per_cell] = elements[order]
    return Chart(lines, across, cells)


def _closing_bands(mesh: ShellMesh) -> list[tuple[float, float]]:
    """First row and apex of every band in which the trailing base runs out."""
    reasons = [label.split(" + ") for label, _ in mesh.report.rows]
    at_root = [(float(i), float(i)) for i, own in enumerate(reasons) if f"{BASE} root apex" in own]
    return at_root + [(i - 1.0, float(i)) for i, own in enumerate(reasons) if f"{BASE} tip apex" in own]


def _closing(first: float, apex: float, elements: Ints, row: Floats, share: Floats) -> Closing:
    n_sides = row.shape[1]
    corner = np.array([[0, 1, 2], [0, 2, 3]] if n_sides == 4 else [[0, 1, 2]])
    element, corner = np.repeat(elements, len(corner)), np.tile(corner, (len(elements), 1))
    closing = Closing(first, first + 1.0, apex, element, corner, np.zeros((len(element), 3, 2)))
    place = closing.flattened(row[element[:, None], corner], share[element[:, None], corner])
    return replace(closing, place=place)


def _in_closing(closing: Closing, row: Floats, share: Floats, n_sides: int) -> tuple[Ints, Floats]:
    """Elements of a closing that hold some places, and the weights of their corners."""
    inside = _barycentric(closing.place[None], closing.flattened(row, share)[:, None, :])
    best = np.argmax(np.min(inside, axis=-1), axis=-1)
    some = np.arange(len(row))
    weight = np.zeros((len(row), n_sides))
    weight[some[:, None], closing.corner[best]] = inside[some, best]
    return closing.element[best], weight


def _barycentric(corners: Floats, place: Floats) -> Floats:
    """(…, 3) barycentric coordinates of places (…, 2) in triangles (…, 3, 2)."""
    a, b, c = corners[..., 0, :], corners[..., 1, :], corners[..., 2, :]

    def twice_area(p: Floats, q: Floats, r: Floats) -> Floats:
        return (q - p)[..., 0] * (r - p)[..., 1] - (q - p)[..., 1] * (r - p)[..., 0]

    parts = [twice_area(place, b, c), twice_area(a, place, c), twice_area(a, b, place)]
    return np.stack(np.broadcast_arrays(*parts), axis=-1) / twice_area(a, b, c)[..., None]
