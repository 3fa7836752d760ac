"""The skin map: from parametric coordinates (row, seam) to points of the blade, and which strip is which region."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.skin.divisions import GapDivisions, Levels
from skinmesh.skin.rows import Rows
from skinmesh.skin.seams import SeamTable
from skinmesh.surface.loft import Surface

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

SKIN = 0


@dataclass(frozen=True)
class Strip:
    """A band of the blade between two seams, or a web: the unit that one sequence of stacks along the span covers.

    Attributes
    ----------
    name : str
        Full name of its region.
    side : int
    kind : str
    """

    name: str
    side: int
    kind: str


@dataclass(frozen=True)
class WebSheet:
    """A web between its two foot seams.

    Attributes
    ----------
    name : str
    sheet : int
        1 for the first web.
    pressure_seam, suction_seam : int
    first_row, last_row : int
    n_height : int
        Elements from foot to foot.
    """

    name: str
    sheet: int
    pressure_seam: int
    suction_seam: int
    first_row: int
    last_row: int
    n_height: int


@dataclass(frozen=True)
class BaseSpan:
    """A part of the span with an open trailing edge, by rows.

    Attributes
    ----------
    first_row, last_row : int
        Ends of the part with its full gap.
    root_apex, tip_apex : bool
        Whether the gap closes within the row band before and after it.
    """

    first_row: int
    last_row: int
    root_apex: bool
    tip_apex: bool


@dataclass(frozen=True, eq=False)
class SkinMap:
    """Everything that turns parametric coordinates into points.

    A point of the skin has the coordinates row = i + share between rows i and i + 1, and seam = k + share between
    seams k and k + 1; beyond the last seam the trailing base runs back to the first one. On a web the seam coordinate
    is the height, 0 at the pressure foot and 1 at the suction foot. None of them carries a length.

    Attributes
    ----------
    surface : Surface
    rows : Rows
    levels : Levels
    seams : SeamTable
        At the levels' z.
    gaps : GapDivisions
    webs : tuple of WebSheet
    bases : tuple of BaseSpan
    n_base : int
        Elements across the trailing base.
    closing : (2 Σn + 1,) float array
        At the levels: 0 where the trailing edge has its full gap, 1 where it is closed.
    pull : (2 Σn + 1, 3) float array, m
        At the levels: how far the suction trailing edge is moved to close the gap; the pressure one moves against it.
    strips : tuple of Strip
        One a gap between seams, then the trailing base, then one a web.
    """

    surface: Surface
    rows: Rows
    levels: Levels
    seams: SeamTable
    gaps: GapDivisions
    webs: tuple[WebSheet, ...]
    bases: tuple[BaseSpan, ...]
    n_base: int
    closing: Floats
    pull: Floats
    strips: tuple[Strip, ...]

    @property
    def n_seams(self) -> int:
        """Seams of the skin, both trailing edges included."""
        return len(self.seams.labels)

    @property
    def base_strip(self) -> int:
        """Index of the trailing base among the strips."""
        return self.n_seams - 1

    def web_strip(self, web: WebSheet) -> int:
        """Index of a web among the strips."""
        return self.n_seams - 1 + web.sheet

    def z_at(self, row: Floats) -> Floats:
        """z of row coordinates, m."""
        return np.asarray(np.interp(row, self.levels.row, self.levels.z))

    def points(self, sheet: Ints, row: Floats, seam: Floats) -> Floats:
        """Points of parametric coordinates.

        Parameters
        ----------
        sheet : (n,) int array
            0 skin, k the k-th web.
        row, seam : (n,) float array

        Returns
        -------
        (n, 3) float array, m
        """
        out = np.empty((len(row), 3))
        on_skin = sheet == SKIN
        on_base = on_skin & (seam > self.n_seams - 1)
        out[on_skin & ~on_base] = self._skin_points(row[on_skin & ~on_base], seam[on_skin & ~on_base])
        share = (seam[on_base] - (self.n_seams - 1))[:, None]
        edges = [self._skin_points(row[on_base], np.full(share.size, q)) for q in (self.n_seams - 1.0, 0.0)]
        out[on_base] = edges[0] * (1.0 - share) + edges[1] * share
        for web in self.webs:
            own = sheet == web.sheet
            height = seam[own][:, None]
            feet = [
                self._skin_points(row[own], np.full(height.size, float(k)))
                for k in (web.pressure_seam, web.suction_seam)
            ]
            out[own] = feet[0] * (1.0 - height) + feet[1] * height
        return out

    def surface_parameter(self, row: Floats, seam: Floats) -> Floats:
        """Surface parameter t of parametric coordinates on the skin, (n,)."""
        gap = np.clip(np.floor(seam).astype(int), 0, self.n_seams - 2)
        share = seam - gap
        t = np.empty_like(row)
        for k in range(self.n_seams - 1):
            own = gap == k
            low, high = (np.interp(row[own], self.levels.row, self.seams.t[:, j]) for j in (k, k + 1))
            x = np.linspace(0.0, 1.0, self.gaps.grading.shape[1])
            t[own] = low + np.interp(share[own], x, self.gaps.grading[k]) * (high - low)
        return t

    def _skin_points(self, row: Floats, seam: Floats) -> Floats:
        z = self.z_at(row)
        points = self.surface.points(z, self.surface_parameter(row, seam))
        # the pull on the edges fades linearly to the next seam of each side
        last = self.n_seams - 1
        share = np.clip(seam - last + 1.0, 0.0, 1.0) - np.clip(1.0 - seam, 0.0, 1.0)
        moved = np.flatnonzero(share)
        for axis in range(3):
            points[moved, axis] += share[moved] * np.interp(row[moved], self.levels.row, self.pull[:, axis])
        return np.asarray(points)
