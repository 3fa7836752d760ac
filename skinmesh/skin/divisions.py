"""How many elements lie between two seams and between two rows, and how they are spread."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import SIDE_NAMES, MeshRule
from skinmesh.skin.rows import Rows
from skinmesh.skin.ruler import Ruler
from skinmesh.skin.seams import SeamTable

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LEAST_ACROSS: Mapping[str, int] = {"cap": 4, "web": 4}
STRETCH = 5.0  # an element is at most this many times longer along the span than the median one is wide
N_GRADING = 65


@dataclass(frozen=True, eq=False)
class GapDivisions:
    """Elements between neighbouring seams.

    Attributes
    ----------
    n : (k,) int array
        Elements across each gap, the same all along the span.
    grading : (k, N_GRADING) float array
        Share of the gap at which equal steps of the seam coordinate lie.
    """

    n: Ints
    grading: Floats


@dataclass(frozen=True, eq=False)
class Levels:
    """Element rows along the span.

    Attributes
    ----------
    n : (r − 1,) int array
        Elements between neighbouring rows.
    row : (2 Σn + 1,) float array
        Row coordinate of every node line, those of mid nodes included.
    z : (2 Σn + 1,) float array, m
    """

    n: Ints
    row: Floats
    z: Floats

    @property
    def corner_z(self) -> Floats:
        """(Σn + 1,) z of the lines of corner nodes, m."""
        return self.z[::2]

    @property
    def row_starts(self) -> Ints:
        """(r,) index of every row among the lines of corner nodes."""
        return np.concatenate([[0], np.cumsum(self.n)])


def divide_gaps(ruler: Ruler, seams: SeamTable, rule: MeshRule) -> GapDivisions:
    """Choose the elements across each gap from the size, the section's turning and the wanted least numbers.

    Parameters
    ----------
    ruler : Ruler
    seams : SeamTable
        At the ruler's sections.
    rule : MeshRule

    Returns
    -------
    GapDivisions
    """
    size = rule.size(ruler.z)[:, None]
    totals = {}
    for side in SIDE_NAMES:
        curvature = ruler.turning_density(side)
        density = np.maximum(1.0 / size, curvature / rule.turning)
        # an arc of radius R stands off its chord h by h²/8R
        density = np.maximum(density, np.sqrt(curvature / (8.0 * rule.chord_error * ruler.chord[:, None])))
        arc = ruler.arc[(side + 1) // 2]
        steps = 0.5 * (density[:, 1:] + density[:, :-1]) * np.diff(arc, axis=1)
        totals[side] = np.concatenate([np.zeros_like(size), np.cumsum(steps, axis=1)], axis=1)
    n, grading = [], []
    share = np.linspace(0.0, 1.0, N_GRADING)
    for k, (side, _, _) in enumerate(seams.gap_names):
        t0, t1 = seams.t[:, k, None], seams.t[:, k + 1, None]
        passed = _by_row(ruler.tau, totals[side], np.abs(t0 + share * (t1 - t0)))
        passed = np.abs(passed - passed[:, :1])
        n.append(max(1, int(np.ceil(passed[:, -1].max() - 1e-6))))
        mean = np.mean(passed / passed[:, -1:], axis=0)
        grading.append(np.interp(share, mean, share))
    return GapDivisions(_at_least(np.array(n), seams, rule.across), np.array(grading))


def _by_row(grid: Floats, values: Floats, x: Floats) -> Floats:
    """Interpolate each row of values at its own row of x."""
    j = np.clip(np.searchsorted(grid, x, side="right") - 1, 0, len(grid) - 2)
    u = (x - grid[j]) / (grid[j + 1] - grid[j])
    return np.asarray(np.take_along_axis(values, j, axis=1) * (1.0 - u) + np.take_along_axis(values, j + 1, axis=1) * u)


def _at_least(n: Ints, seams: SeamTable, across: Mapping[str, int]) -> Ints:
    n = n.copy()
    for region in dict.fromkeys(seams.gap_names):
        side, name, kind = region
        gaps = [k for k, other in enumerate(seams.gap_names) if other == region]
        wanted = least_across(f"{SIDE_NAMES[side]} {name}", name, kind, across)
        total = int(n[gaps].sum())
        if total < wanted:
            n[gaps] = np.ceil(n[gaps] * wanted / total - 1e-9).astype(int)
    return n


def least_across(full_name: str, name: str, kind: str, across: Mapping[str, int]) -> int:
    """Least number of elements across a region, from the blade file or by its kind."""
    return across.get(full_name, across.get(name, LEAST_ACROSS.get(kind, 1)))


def divide_rows(
    rows: Rows,
    forced: Mapping[int, int],
    ruler: Ruler,
    seams: SeamTable,
    n_gap: Ints,
    rule: MeshRule,
    *,
    counts: Mapping[int, int],
) -> Levels:
    """Choose the element rows.

    Parameters
    ----------
    rows : Rows
    forced : mapping of int to int
        Even divisions that are given, by the row before.
    ruler : Ruler
    seams : SeamTable
        At the ruler's sections.
    n_gap : (k,) int array
        Elements across each gap.
    rule : MeshRule
    counts : mapping of int to int
        Numbers of divisions that are given, by the row before; they are spread by the wanted size.

    Returns
    -------
    Levels
    """
    width = np.median(np.repeat(np.diff(seams.arc, axis=1) / n_gap, n_gap, axis=1), axis=1)
    size = np.minimum(rule.size(ruler.z), STRETCH * width)
    passed = np.concatenate([[0.0], np.cumsum(0.5 * (1.0 / size[1:] + 1.0 / size[:-1]) * np.diff(ruler.z))])
    n, row, z = [], [np.zeros(1)], [rows.z[:1]]
    for i, (low, high) in enumerate(zip(rows.z[:-1], rows.z[1:], strict=True)):
        ends = np.interp([low, high], ruler.z, passed)
        count = forced.get(i) or counts.get(i) or max(1, int(np.ceil(ends[1] - ends[0] - 1e-6)))
        share = np.arange(1, count + 1) / count
        corner = (
            np.interp(ends[0] + share * (ends[1] - ends[0]), passed, ruler.z)
            if i not in forced
            else low + share * (high - low)
        )
        corner[-1] = high
        before = np.concatenate([[low], corner[:-1]])
        z.append(np.column_stack([0.5 * (before + corner), corner]).ravel())
        row.append(i + np.arange(1, 2 * count + 1) / (2 * count))
        n.append(count)
    return Levels(np.array(n), np.concatenate(row), np.concatenate(z))
