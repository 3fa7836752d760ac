"""Limits of the checks: a warning and a failure each, and where they come from."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import isfinite

from skinmesh.errors import InputError, Problem

COMMON = "common practice, no source"
OWN = "our choice, no source"
USER = "set by the user"
SOLVER = "found by experiment with CalculiX 2.20"


@dataclass(frozen=True)
class Limit:
    """Where a measured value becomes a warning and where a failure.

    Attributes
    ----------
    warn, fail : float
        Infinite where there is no such limit. The order of the two says whether a value must stay above or below.
    source : str
    """

    warn: float
    fail: float
    source: str

    @property
    def is_from_below(self) -> bool:
        """Whether small values are the bad ones."""
        return self.warn > self.fail

    @property
    def text(self) -> str:
        """The limits in words."""
        parts = [f"{word} {value:g}" for word, value in (("warn", self.warn), ("fail", self.fail)) if isfinite(value)]
        return ", ".join(parts)


DEFAULT_LIMITS: Mapping[str, Limit] = {
    "aspect": Limit(5.0, 10.0, COMMON),
    "aspect in the edge strips": Limit(10.0, 20.0, COMMON),
    "aspect in the trailing base": Limit(20.0, float("inf"), COMMON),
    "warp": Limit(5.0, 15.0, COMMON),
    "scaled Jacobian": Limit(0.5, 0.3, COMMON),
    "smallest angle": Limit(45.0, 30.0, COMMON),
    "largest angle": Limit(135.0, 150.0, COMMON),
    "scaled Jacobian of triangles": Limit(0.2, 0.1, f"{OWN}: half a rectangle of aspect 5 and 10"),
    "smallest angle of triangles": Limit(11.0, 5.5, f"{OWN}: half a rectangle of aspect 5 and 10"),
    "warp in the trailing base": Limit(15.0, 90.0, OWN),
    "scaled Jacobian in the trailing base": Limit(0.3, 0.0, OWN),
    "smallest angle in the trailing base": Limit(30.0, 0.1, OWN),
    "largest angle in the trailing base": Limit(150.0, 179.9, OWN),
    "across a cap": Limit(6.0, float("-inf"), COMMON),
    "up a web": Limit(6.0, float("-inf"), COMMON),
    "thickness over edge": Limit(1.0, float("inf"), COMMON),
    "thickness over radius": Limit(0.1, float("inf"), "stiffness of a tube meshed on its outer face"),
    "laminate depth over radius": Limit(0.8, 1.0, SOLVER),
    "overlap": Limit(0.05, 0.15, OWN),
    "chord error": Limit(0.002, 0.01, OWN),
    "nodes off the sections": Limit(1e-6, 1e-3, OWN),
    "profile points": Limit(0.0005, 0.005, OWN),
    "chord and twist": Limit(0.01, 0.05, OWN),
    "area against flat pattern": Limit(0.02, 0.1, OWN),
    "ply area": Limit(0.05, 0.25, OWN),
    "ply end move": Limit(0.005, float("inf"), OWN),
    "layers ended at once": Limit(4.0, float("inf"), COMMON),
    "taper": Limit(0.1, float("inf"), COMMON),
    "dip of a material": Limit(0.15, float("inf"), OWN),
    "lap of a material": Limit(0.25, float("inf"), OWN),
    "unbalance": Limit(0.05, float("inf"), OWN),
    "stiffness over the median": Limit(0.1, 0.0, OWN),
    "cap along over across": Limit(0.9, 0.0, OWN),
    "width over thickness": Limit(200.0, float("inf"), OWN),
    "skin under a web's end": Limit(0.5, 0.0, OWN),
    "layer jump": Limit(6.0, float("inf"), SOLVER),
    "knots": Limit(0.5, float("inf"), OWN),
}
"""Every limit that a user may set, by name.

Angles in degrees; the rest are pure numbers. Limits whose warning is above their failure are limits from below.
"""


def set_limits(wanted: Mapping[str, Iterable[float]] | None) -> Mapping[str, Limit]:
    """The default limits with some of them replaced.

    Parameters
    ----------
    wanted : mapping of str to (float, float), optional
        Warning and failure by name.

    Returns
    -------
    mapping of str to Limit

    Raises
    ------
    InputError
        There is no such limit, or a value is not a pair of numbers with the warning first.

    Examples
    --------
    >>> set_limits({"aspect": (8, 16)})["aspect"]
    Limit(warn=8.0, fail=16.0, source='set by the user')
    """
    limits = dict(DEFAULT_LIMITS)
    problems = []
    for name, pair in (wanted or {}).items():
        values = tuple(float(value) for value in pair)
        if name not in limits:
            problems.append(Problem("limits", 0, name, f"no such limit; known: {', '.join(DEFAULT_LIMITS)}"))
        elif len(values) != 2 or any(value != value for value in values):
            problems.append(Problem("limits", 0, name, f"must be a warning and a failure, got {list(values)}"))
        elif (values[0] - values[1]) * (DEFAULT_LIMITS[name].is_from_below - 0.5) < 0.0:
            problems.append(Problem("limits", 0, name, f"the warning must come first, got {list(values)}"))
        else:
            limits[name] = Limit(*values, USER)
    if problems:
        raise InputError(problems)
    return limits
