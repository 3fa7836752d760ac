"""The layout of an earlier mesh: what a rebuild with the same numbers must find again."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from difflib import ndiff

import numpy as np
from numpy.typing import NDArray

Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class KeptLayout:
    """Rows, seams and divisions of an earlier mesh.

    Attributes
    ----------
    rows, seams, webs : tuple of str
        Labels of rows and seams, names of webs, in order.
    n_levels : (r − 1,) int array
        Elements between neighbouring rows.
    n_gaps : (k − 1,) int array
        Elements between neighbouring seams.
    n_base : int
        Elements across the trailing base.
    n_heights : tuple of int
        Elements from foot to foot of each web.
    """

    rows: tuple[str, ...]
    seams: tuple[str, ...]
    webs: tuple[str, ...]
    n_levels: Ints
    n_gaps: Ints
    n_base: int
    n_heights: tuple[int, ...]


@dataclass
class LayoutComparison:
    """What differs between the layout of an earlier mesh and that of the blade as it is now.

    Attributes
    ----------
    changes : list of str
        One line a change.
    """

    changes: list[str] = field(default_factory=list)

    def compare(self, kind: str, before: Sequence[str], now: Sequence[str]) -> None:
        """Note the labels that went, came, or changed places."""
        if tuple(before) == tuple(now):
            return
        gone = [label for label in before if label not in now]
        new = [label for label in now if label not in before]
        if not gone and not new:
            moved = [line[2:] for line in ndiff(list(before), list(now)) if line.startswith("+ ")]
            self.changes.append(f"{kind} changed places: {', '.join(moved)}")
        if gone:
            self.changes.append(f"{kind} no longer there: {', '.join(gone)}")
        if new:
            self.changes.append(f"{kind} that were not there: {', '.join(new)}")
