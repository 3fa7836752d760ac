"""Which stacks lie in each region on each element row."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

FEW_ROWS = 2
"""Element rows on which a ply that lies twice is a mistake and not a schedule that rises and falls."""


@dataclass(frozen=True, eq=False)
class SpanTable:
    """The stacks of each region along the span.

    Attributes
    ----------
    row : (m,) int array
        Element row of every element, root first.
    z : (r + 1,) float array, m
        Ends of the element rows.
    region, at_row, stack, elements : (t,) int array
        Every combination that occurs, by region, then row, and how many elements it has.
    plies : tuple of str
        Names of all plies, in the order of the schedule.
    counts : (s + 1, p) int array
        Layers of each ply in each stack; the last line, for elements without plies, is nought.
    """

    row: Ints
    z: Floats
    region: Ints
    at_row: Ints
    stack: Ints
    elements: Ints
    plies: tuple[str, ...]
    counts: Ints

    @property
    def n_rows(self) -> int:
        """Number of element rows."""
        return len(self.z) - 1

    def layers(self, region: int) -> tuple[Ints, Ints]:
        """Element rows of a region, and the layers of every ply on them: the most that any element there has.

        Returns
        -------
        rows : (r,) int array
        layers : (r, p) int array
        """
        own = self.region == region
        rows, line = np.unique(self.at_row[own], return_inverse=True)
        layers = np.zeros((len(rows), len(self.plies)), dtype=np.int64)
        np.maximum.at(layers, line.ravel(), self.counts[self.stack[own]])
        return rows, layers

    def z_text(self, rows: Ints) -> str:
        """Range of z of some element rows."""
        return f"z = {self.z[rows.min()]:.3f} to {self.z[rows.max() + 1]:.3f} m"

    def main_stacks(self, region: int) -> tuple[Ints, Ints]:
        """Element rows of a region, and the stack that most of its elements there have."""
        own = np.flatnonzero(self.region == region)
        ordered = own[np.lexsort((-self.elements[own], self.at_row[own]))]
        rows, first = np.unique(self.at_row[ordered], return_index=True)
        return rows, self.stack[ordered[first]]


def span_table(mesh: ShellMesh) -> SpanTable:
    """Tabulate the stacks of each region along the span.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    SpanTable
    """
    row, z = element_rows(mesh)
    n_rows, n_stacks = len(z) - 1, len(mesh.stacks)
    key = (mesh.region * n_rows + row) * (n_stacks + 1) + np.where(mesh.stack < 0, n_stacks, mesh.stack)
    kinds, elements = np.unique(key, return_counts=True)
    plies = tuple(
        dict.fromkeys([*mesh.report.ply_areas, *(layer.ply for stack in mesh.stacks for layer in stack.layers)])
    )
    number = {name: i for i, name in enumerate(plies)}
    counts = np.zeros((n_stacks + 1, len(plies)), dtype=np.int64)
    for s, stack in enumerate(mesh.stacks):
        np.add.at(counts[s], [number[layer.ply] for layer in stack.layers], 1)
    region, rest = np.divmod(kinds, n_rows * (n_stacks + 1))
    at_row, stack_number = np.divmod(rest, n_stacks + 1)
    return SpanTable(row, z, region, at_row, stack_number, elements, plies, counts)


def region_widths(mesh: ShellMesh, table: SpanTable) -> Floats:
    """Width of every region on every element row, across the span: the mean of both ends of the row.

    Parameters
    ----------
    mesh : ShellMesh
    table : SpanTable

    Returns
    -------
    (g, r) float array, m
        Nought where a region has no elements.
    """
    corners = mesh.cells[:, : mesh.n_sides]
    ends = np.roll(corners, -1, axis=1)
    is_across = mesh.row[corners] == mesh.row[ends]
    length = np.linalg.norm(mesh.points[ends] - mesh.points[corners], axis=2) * is_across
    key = mesh.region * table.n_rows + table.row
    size = len(mesh.regions) * table.n_rows
    total = np.bincount(key, weights=length.sum(axis=1), minlength=size)
    return np.asarray(0.5 * total.reshape(len(mesh.regions), table.n_rows))


def element_rows(mesh: ShellMesh) -> tuple[Ints, Floats]:
    """Element row of every element, and z of the rows' ends.

    The rows are those of the skin without its trailing base, where the elements that close an edge lie between rows.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    row : (m,) int array
    z : (r + 1,) float array, m
    """
    last_seam = max(len(mesh.report.seams) - 1, 1)
    corners = np.arange(len(mesh.points)) < mesh.n_corners
    nodes = np.flatnonzero(corners & (mesh.sheet == 0) & (mesh.seam <= last_seam))
    levels, first = np.unique(mesh.row[nodes], return_index=True)
    lowest = mesh.row[mesh.cells[:, : mesh.n_sides]].min(axis=1)
    row = np.clip(np.searchsorted(levels, lowest, side="right") - 1, 0, max(len(levels) - 2, 0))
    return row.astype(np.int64), mesh.points[nodes[first], 2]
