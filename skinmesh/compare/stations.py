"""Changes of the station table, as the summaries of both meshes carry it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import isclose
from typing import Any, TypeGuard

from skinmesh.compare.values import CHANGED, GONE, NEW, Entry, Value

COLUMNS: Mapping[str, tuple[str, str]] = {
    "z_m": ("z", "m"),
    "chord_m": ("chord", "m"),
    "twist_deg": ("twist", "°"),
    "pitch_axis": ("pitch axis", ""),
    "profile": ("profile", ""),
    "thickness_ratio": ("thickness ratio", ""),
    "prebend_m": ("prebend", "m"),
    "sweep_m": ("sweep", "m"),
}
"""Columns of the table in the summary: their name in words and their unit."""


@dataclass(frozen=True)
class ColumnChange:
    """How one column of the table changed.

    Attributes
    ----------
    name, unit : str
    stations : int
        How many changed.
    of : int
        How many both tables have.
    z : (float, float), m
        Range of those that changed, on the new table.
    difference : (float, float) or None
        Least and largest difference; None for words or where a value is missing.
    share : (float, float) or None
        Least and largest difference over the old value; None where that is nought somewhere.
    words : str
        For profiles: which took the place of which.
    """

    name: str
    unit: str
    stations: int
    of: int
    z: tuple[float, float]
    difference: tuple[float, float] | None
    share: tuple[float, float] | None
    words: str


@dataclass(frozen=True)
class StationChange:
    """What changed in the station table.

    Attributes
    ----------
    is_known : bool
        Whether both summaries carry the table; those of earlier versions do not.
    columns : tuple of ColumnChange
    entries : tuple of Entry
        Every station that is gone, new or changed.
    """

    is_known: bool
    columns: tuple[ColumnChange, ...]
    entries: tuple[Entry, ...]


def compare_stations(old: Mapping[str, Any], new: Mapping[str, Any]) -> StationChange:
    """Compare the station tables of two summaries.

    Stations of tables of one length are compared one by one, even where their z changed; otherwise those of equal z.

    Parameters
    ----------
    old, new : mapping
        Summaries as they stand.

    Returns
    -------
    StationChange
    """
    before, after = old.get("stations"), new.get("stations")
    if not (_is_table(before) and _is_table(after)):
        return StationChange(False, (), ())
    pairs = _pairs(before, after)
    entries = []
    shared = []
    for first, second in pairs:
        values = tuple(
            Value(name, unit, first.get(key) if first else None, second.get(key) if second else None)
            for key, (name, unit) in COLUMNS.items()
        )
        at = (second or first or {}).get("z_m")
        state = CHANGED if first and second else GONE if first else NEW
        entry = Entry(f"z = {at} m", state, values)
        if state == CHANGED:
            shared.append(entry)
        if state != CHANGED or not all(value.is_equal for value in values):
            entries.append(entry)
    columns = [_column(name, unit, shared) for name, unit in COLUMNS.values()]
    return StationChange(True, tuple(column for column in columns if column is not None), tuple(entries))


def _is_table(stations: Any) -> TypeGuard[list[Mapping[str, Any]]]:
    return isinstance(stations, list) and all(
        isinstance(station, Mapping) and isinstance(station.get("z_m"), float | int) for station in stations
    )


def _pairs(
    before: Sequence[Mapping[str, Any]], after: Sequence[Mapping[str, Any]]
) -> list[tuple[Mapping[str, Any] | None, Mapping[str, Any] | None]]:
    if len(before) == len(after):
        return list(zip(before, after, strict=True))
    known = {float(station["z_m"]): station for station in after}
    pairs: list[tuple[Mapping[str, Any] | None, Mapping[str, Any] | None]] = [
        (station, known.pop(float(station["z_m"]), None)) for station in before
    ]
    pairs += [(None, station) for station in known.values()]
    return sorted(pairs, key=lambda pair: float((pair[1] or pair[0] or {})["z_m"]))


def _column(name: str, unit: str, entries: Sequence[Entry]) -> ColumnChange | None:
    changed = [entry for entry in entries if not entry.value(name).is_equal]
    if not changed:
        return None
    values = [entry.value(name) for entry in changed]
    z = [float(entry.value("z").new or 0.0) for entry in changed]
    differences = [value.difference for value in values if value.difference is not None]
    shares = [value.share for value in values if value.share is not None]
    words = dict.fromkeys(f"{value.old or 'blended'} to {value.new or 'blended'}" for value in values)
    return ColumnChange(
        name=name,
        unit=unit,
        stations=len(changed),
        of=len(entries),
        z=(min(z), max(z)),
        difference=(min(differences), max(differences)) if len(differences) == len(values) else None,
        share=(min(shares), max(shares)) if len(shares) == len(values) else None,
        words=", ".join(words) if name == "profile" else "",
    )


def is_one(pair: tuple[float, float]) -> bool:
    """Whether a range is one number, but for the digits that a table rounds off.

    Examples
    --------
    >>> is_one((0.06998, 0.0701)), is_one((0.05, 0.07))
    (True, False)
    """
    return isclose(*pair, rel_tol=5e-3, abs_tol=1e-9)
