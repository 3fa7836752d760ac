"""The layout of an earlier mesh: what a rebuild with the same numbers must find again."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from difflib import ndiff
from functools import partial

import numpy as np
from numpy.typing import NDArray

Ints = NDArray[np.int64]

WAYS_OUT = "Undo the change, build without --keep, or add --map: a new mesh, and a table from old numbers to new ones"


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
    open_bands : tuple of int
        Rows after which there is a trailing base.
    """

    rows: tuple[str, ...]
    seams: tuple[str, ...]
    webs: tuple[str, ...]
    n_levels: Ints
    n_gaps: Ints
    n_base: int
    n_heights: tuple[int, ...]
    open_bands: tuple[int, ...]


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
        """Note the labels that went, came, joined, parted, or changed places."""
        if tuple(before) == tuple(now):
            return
        names = seam_names if kind == "seams" else partial(str.split, sep=" + ")
        reasons = [[part for label in labels for part in names(label)] for labels in (before, now)]
        gone = [part for part in reasons[0] if part not in reasons[1]]
        new = [part for part in reasons[1] if part not in reasons[0]]
        if gone:
            self.changes.append(f"{kind} no longer there: {', '.join(gone)}")
        if new:
            self.changes.append(f"{kind} that were not there: {', '.join(new)}")
        if gone or new:
            return
        if sorted(before) == sorted(now):
            moved = [line[2:] for line in ndiff(list(before), list(now)) if line.startswith("+ ")]
            self.changes.append(f"{kind} changed places: {', '.join(moved)}")
            return
        joined = [label for label in (*before, *now) if " + " in label and (label in before) != (label in now)]
        self.changes.append(f"{kind} joined or parted: {', '.join(joined)}")


def seam_names(label: str) -> list[str]:
    """The names of a seam, each with its side.

    >>> seam_names("pressure main cap aft edge + aft web foot")
    ['pressure main cap aft edge', 'pressure aft web foot']
    """
    side, _, rest = label.partition(" ")
    if side not in ("pressure", "suction"):
        return [label]
    return [f"{side} {part}" for part in rest.split(" + ")]


@dataclass(frozen=True)
class MatchedLines:
    """Rows or seams of two meshes that are the same by name.

    Attributes
    ----------
    pairs : tuple of (int, int)
        Index before and now, both strictly increasing.
    gone, new : tuple of str
        Names that only the earlier one, and only the present one has.
    """

    pairs: tuple[tuple[int, int], ...]
    gone: tuple[str, ...]
    new: tuple[str, ...]


def match_lines(before: Sequence[Sequence[str]], now: Sequence[Sequence[str]]) -> MatchedLines:
    """Find the lines that two meshes share.

    Parameters
    ----------
    before, now : sequence of sequences of str
        The names of every line, in order. Where lines have changed places, stations and edges of regions stay pairs
        rather than ends and feet of webs.

    Returns
    -------
    MatchedLines

    Examples
    --------
    >>> match_lines([["root"], ["web end"], ["tip"]], [["root"], ["step"], ["tip"]])
    MatchedLines(pairs=((0, 0), (2, 2)), gone=('web end',), new=('step',))
    """
    places = [{name: i for i, names in enumerate(lines) for name in names} for lines in (before, now)]
    shared = [name for name in places[0] if name in places[1]]
    pairs: list[tuple[int, int]] = []
    for name in sorted(shared, key=_rank):
        i, j = places[0][name], places[1][name]
        if all((i - a) * (j - b) > 0 for a, b in pairs):
            pairs.append((i, j))
    gone, new = (tuple(name for name in places[k] if name not in places[1 - k]) for k in (0, 1))
    return MatchedLines(tuple(sorted(pairs)), gone, new)


def _rank(name: str) -> int:
    """Stations and edges of regions before ends and feet of webs, where both cannot hold."""
    return int(name.endswith((" foot", " end", " apex")) or name.startswith("end of "))
