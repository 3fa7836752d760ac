"""One line of the report: what was measured, its limit, the verdict, and where the worst is."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh

PASS, WARN, FAIL, NOT_MADE = "pass", "warn", "fail", "not made"
VERDICTS = (PASS, WARN, FAIL, NOT_MADE)
MOST_NAMED = 8
"""Places or numbers that one line names; the JSON file and the set of elements have more."""


@dataclass(frozen=True, eq=False)
class Finding:
    """One line of the report.

    Attributes
    ----------
    check : str
        The check that it belongs to: 'joints', 'element quality'.
    measured : str
        What was measured, with its value.
    limit : str
        Empty where nothing could be measured.
    source : str
        Where the limit comes from.
    verdict : str
        PASS, WARN, FAIL or NOT_MADE.
    where : str
        Place of the worst.
    elements : (k,) int array
        Indices of the elements that are beyond the limit, the worst first.
    details : mapping
        More for the JSON file, plain Python values only.
    """

    check: str
    measured: str
    limit: str
    source: str
    verdict: str
    where: str = ""
    elements: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    details: Mapping[str, Any] = field(default_factory=dict)

    def __post_init__(self) -> None:
        if self.verdict not in VERDICTS:
            raise ValueError(f"no verdict '{self.verdict}'")


def not_made(check: str, reason: str) -> Finding:
    """The line of a check that cannot be made: it is no pass.

    Examples
    --------
    >>> not_made("ply drops", "the blade has no plies").verdict
    'not made'
    """
    return Finding(check, reason, "", "", NOT_MADE)


def verdict_of(*, fails: object, warns: object = False) -> str:
    """FAIL before WARN before PASS.

    Examples
    --------
    >>> verdict_of(fails=0, warns=2)
    'warn'
    """
    return FAIL if fails else WARN if warns else PASS


def place_of(mesh: ShellMesh, element: int) -> str:
    """Region, z of the middle and solver number of an element."""
    z = mesh.points[mesh.cells[element, : mesh.n_sides], 2].mean()
    return f"{mesh.regions[mesh.region[element]].name}, z = {z:.3f} m, element {mesh.element_number[element]}"


def regions_of(mesh: ShellMesh, elements: NDArray[np.int64]) -> str:
    """Range of z and regions of some elements; empty where there are none."""
    if not len(elements):
        return ""
    z = mesh.points[mesh.cells[elements, : mesh.n_sides], 2]
    regions = listed((mesh.regions[i].name for i in np.unique(mesh.region[elements])), most=4)
    return f"z = {z.min():.3f} to {z.max():.3f} m, on {regions}"


def span_of(mesh: ShellMesh, elements: NDArray[np.int64]) -> str:
    """Regions and range of z of some elements, and the numbers of the first ones; empty where there are none."""
    if not len(elements):
        return ""
    z = mesh.points[mesh.cells[elements, : mesh.n_sides], 2]
    regions = listed(mesh.regions[i].name for i in np.unique(mesh.region[elements]))
    numbers = listed(str(number) for number in mesh.element_number[elements])
    word = "element" if len(elements) == 1 else "elements"
    return f"{regions}, z = {z.min():.3f} to {z.max():.3f} m, {word} {numbers}"


def listed(names: Iterable[str], *, most: int = MOST_NAMED) -> str:
    """Names with commas between, the first few of them.

    Examples
    --------
    >>> listed("abcd", most=2)
    'a, b, … (4)'
    """
    all_names = list(names)
    shown = ", ".join(all_names[:most])
    return shown if len(all_names) <= most else f"{shown}, … ({len(all_names)})"


def shortened(text: str, most: int) -> str:
    """The first words of a long sentence.

    Examples
    --------
    >>> shortened("the cap is wider than the skin", 20)
    'the cap is wider …'
    """
    return text if len(text) <= most else f"{text[:most].rsplit(' ', 1)[0]} …"
