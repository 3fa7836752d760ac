"""Rows: the constant-z lines at which something begins or ends."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.frozen import freeze_array

Floats = NDArray[np.float64]

SAME_ROW = 1e-6  # rows nearer to each other than this share of the span are one


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of a blade, root first.

    Attributes
    ----------
    z : (n,) float array, m
        Strictly increasing.
    labels : tuple of str
        What each row is there for; several reasons are joined by ' + '.
    """

    z: Floats
    labels: tuple[str, ...]

    def __post_init__(self) -> None:
        freeze_array(self, "z", shape=(len(self.labels),))

    def index(self, z: float) -> int:
        """Index of the row at z."""
        return int(np.argmin(np.abs(self.z - z)))


def join_rows(wanted: Iterable[tuple[float, str]]) -> Rows:
    """Put rows in order and make one of those that coincide.

    Parameters
    ----------
    wanted : iterable of (float, str)
        z and label; of rows that coincide the first one's z stays.

    Returns
    -------
    Rows

    Examples
    --------
    >>> join_rows([(0.0, "station 00"), (8.0, "station 01"), (8.0, "fore web tip end"), (3.0, "fore web root end")])
    Rows(z=array([0., 3., 8.]), labels=('station 00', 'fore web root end', 'station 01 + fore web tip end'))
    """
    entries = list(wanted)
    span = max(z for z, _ in entries) - min(z for z, _ in entries)
    kept: list[tuple[float, list[str]]] = []
    for z, label in entries:
        same = [reasons for place, reasons in kept if abs(place - z) <= SAME_ROW * span]
        if same:
            same[0].append(label)
        else:
            kept.append((z, [label]))
    kept.sort(key=lambda entry: entry[0])
    return Rows(np.array([z for z, _ in kept]), tuple(" + ".join(reasons) for _, reasons in kept))
