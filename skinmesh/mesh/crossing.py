"""Parametric coordinates of one mesh in another one of the same blade, whose layout may be another."""

from __future__ import annotations

from collections import Counter

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.lattice import BASE, SKIN, Lattice
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.kept import MatchedLines, match_lines, seam_names

Floats = NDArray[np.float64]

Block = tuple[tuple[int, int], tuple[int, int]]
"""Two matched lines that follow each other: (old, new) index of each."""

_SAME_STATION = 1e-6  # of the blade's length
_ALIKE = 0.02  # of a cell: divisions that lie so near each other are the same


class Crossing:
    """Carries parametric coordinates from one lattice to another.

    Rows and seams are matched by name: a web more or less shifts the integers, not the names. Stations are matched by
    number where both blades have equally many, else by z, or by the share of the length. Between two matched lines a
    place is carried by its share of the way, along z or along the arc; where lines and divisions are those of before,
    its coordinates stay, as in a rebuild that keeps numbers.

    Parameters
    ----------
    old, new : Lattice

    Attributes
    ----------
    matched_rows, matched_seams : MatchedLines
    """

    def __init__(self, old: Lattice, new: Lattice) -> None:
        self.old, self.new = old, new
        is_same = _is_same_lattice(old, new)
        self.matched_rows = rows = match_lines(*_row_names(old.mesh, new.mesh, with_base=is_same))
        self.matched_seams = seams = match_lines(
            *([seam_names(label) for label in mesh.report.seams] for mesh in (old.mesh, new.mesh))
        )
        grids = old.skin_points(), new.skin_points()
        lines = old.charts[SKIN].rows, new.charts[SKIN].rows
        self._row_table = _row_table(lines, rows, [grid[..., 2].mean(axis=1) for grid in grids], is_same=is_same)
        self._arcs = [
            np.concatenate(
                [np.zeros((len(grid), 1)), np.cumsum(np.linalg.norm(np.diff(grid, axis=1), axis=2), axis=1)], axis=1
            )
            for grid in grids
        ]
        self._blocks = list(zip(seams.pairs[:-1], seams.pairs[1:], strict=True))
        lines = old.charts[SKIN].seams, new.charts[SKIN].seams
        arcs = [arc.mean(axis=0) for arc in self._arcs]
        self._moved = [
            block
            for block in self._blocks
            if not (is_same or _is_divided_alike(block, _block_shares(lines, arcs, block)))
        ]

    @property
    def names(self) -> list[str]:
        """Charts of either mesh."""
        return list(dict.fromkeys([*self.old.charts, *self.new.charts]))

    def rows(self, row: Floats) -> Floats:
        """Row coordinates in the new mesh."""
        return np.asarray(np.interp(row, *self._row_table))

    def rows_back(self, row: Floats) -> Floats:
        """Row coordinates in the old mesh."""
        return np.asarray(np.interp(row, *self._row_table[::-1]))

    def seam_lines(self, name: str, row: Floats) -> Floats:
        """(n, k) new seam coordinates of a chart's old lines at n old rows."""
        lines = self.old.charts[name].seams
        if name == BASE:
            return np.tile(lines + (self.new.last_seam - self.old.last_seam), (len(row), 1))
        if name != SKIN:
            return np.tile(lines, (len(row), 1))
        direct = np.interp(lines, *np.array([end for block in self._blocks for end in block], dtype=float).T)
        table = np.tile(direct, (len(row), 1))
        new_lines = self.new.charts[SKIN].seams
        if not self._moved:
            return table
        for k, (before, now) in enumerate(zip(row, self.rows(row), strict=True)):
            arc, new_arc = (
                _between(lattice.charts[SKIN].rows, arcs, at)
                for lattice, arcs, at in zip((self.old, self.new), self._arcs, (before, now), strict=True)
            )
            for a, b in self._moved:
                own = (lines >= a[0]) & (lines <= b[0])
                ends, new_ends = np.interp((a[0], b[0]), lines, arc), np.interp((a[1], b[1]), new_lines, new_arc)
                share = (arc[own] - ends[0]) / (ends[1] - ends[0])
                table[k, own] = np.interp(new_ends[0] + share * (new_ends[1] - new_ends[0]), new_arc, new_lines)
        return table

    def seams(self, name: str, row: Floats, seam: Floats) -> Floats:
        """New seam coordinates of old places of a chart."""
        at, which = np.unique(row, return_inverse=True)
        lines = self.old.charts[name].seams
        index = np.interp(seam, lines, np.arange(len(lines)))
        low = np.minimum(index.astype(int), len(lines) - 2)
        table = self.seam_lines(name, at)
        first, second = table[which, low], table[which, low + 1]
        return np.asarray(first + (index - low) * (second - first))


def _between(lines: Floats, values: Floats, at: float) -> Floats:
    i = min(max(int(np.searchsorted(lines, at, side="right")) - 1, 0), len(lines) - 2)
    u = (at - lines[i]) / (lines[i + 1] - lines[i])
    return np.asarray((1.0 - u) * values[i] + u * values[i + 1])


def _is_same_lattice(old: Lattice, new: Lattice) -> bool:
    """Whether rows, seams and divisions are the same, as after a rebuild that kept numbers."""
    labels = [([label for label, _ in mesh.report.rows], mesh.report.seams) for mesh in (old.mesh, new.mesh)]
    return labels[0] == labels[1] and all(
        np.array_equal(getattr(old.charts[SKIN], kind), getattr(new.charts[SKIN], kind)) for kind in ("rows", "seams")
    )


def _block_shares(lines: tuple[Floats, Floats], along: list[Floats], block: Block) -> list[Floats]:
    """Shares of the way from one matched line to the next at all lines of both lattices between them."""
    shares = []
    for x, values, low, high in zip(lines, along, *block, strict=True):
        start, end = np.interp((low, high), x, values)
        shares.append((values[(x >= low) & (x <= high)] - start) / (end - start))
    return shares


def _is_divided_alike(block: Block, shares: list[Floats]) -> bool:
    """Whether the lines between neighbours lie at the same shares of the way, but for a small part of a cell."""
    (a, c), (b, d) = block
    n = [len(own) for own in shares]
    return (b - a, d - c) == (1, 1) and n[0] == n[1] and bool(np.abs(shares[0] - shares[1]).max() * n[0] < _ALIKE)


def _row_table(
    lines: tuple[Floats, Floats], rows: MatchedLines, z: list[Floats], *, is_same: bool
) -> tuple[Floats, Floats]:
    """Old row coordinates, and the new ones of the same places, straight between."""
    parts = []
    for block in zip(rows.pairs[:-1], rows.pairs[1:], strict=True):
        (a, c), (b, d) = block
        shares = _block_shares(lines, z, block)
        if is_same or _is_divided_alike(block, shares):
            parts.append(np.array([[a, b], [c, d]], dtype=float))
            continue
        own = [x[(x >= low) & (x <= high)] for x, low, high in zip(lines, *block, strict=True)]
        every = np.union1d(*shares)
        parts.append(np.array([np.interp(every, share, x) for share, x in zip(shares, own, strict=True)]))
    table = np.concatenate(parts, axis=1)
    return table[0], table[1]


def _row_names(old: ShellMesh, new: ShellMesh, *, with_base: bool) -> tuple[list[list[str]], list[list[str]]]:
    """Names of all rows; a reason that stands twice gets a number, and stations names that both meshes share.

    Where the trailing base runs out depends on the element size too, so that its ends are no places of the blade.
    """
    names: tuple[list[list[str]], list[list[str]]] = ([], [])
    pairs = dict(_same_stations(old.report.stations, new.report.stations))
    shared = {f"station {j:02d}": f"station {i:02d}" for i, j in pairs.items()}
    for own, mesh in zip(names, (old, new), strict=True):
        seen: Counter[str] = Counter()
        for label, _ in mesh.report.rows:
            parts = []
            for part in label.split(" + "):
                if part.startswith(f"{BASE} ") and not with_base:
                    continue
                seen[part] += 1
                name = part if seen[part] == 1 else f"{part} ({seen[part]})"
                if part.startswith("station ") and mesh is new:
                    name = shared.get(part, f"{part}, new")
                elif part.startswith("station ") and int(part.removeprefix("station ")) not in pairs:
                    name = f"{part}, gone"
                parts.append(name)
            own.append(parts)
    return names


def _same_stations(old: Floats, new: Floats) -> list[tuple[int, int]]:
    if len(old) == len(new):
        return [(i, i) for i in range(len(old))]
    pairs: dict[int, int] = {}
    for before, now in ((old, new), (old / old[-1], new / new[-1])):
        apart = np.abs(before[:, None] - now[None])
        same = np.argwhere(apart <= _SAME_STATION * now[-1])
        if len(same) > len(pairs):
            pairs = {int(i): int(j) for i, j in same}
    return sorted({**pairs, 0: 0, len(old) - 1: len(new) - 1}.items())
