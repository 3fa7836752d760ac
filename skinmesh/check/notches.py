"""Where a material is thinner, or much thicker, than on both sides along the span: gaps and laps of plies."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import Finding, listed, not_made, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.spantable import FEW_ROWS, SpanTable
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_PLACES = 3
LONGEST_GAP, LONGEST_LAP = 0.25, 0.1
"""Shares of the blade's length. A longer thin stretch lies between root and tip as designed, a longer thick one too."""


def check_notches(mesh: ShellMesh, table: SpanTable, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Thickness of each material in each region along the span: dips, and short bumps.

    A gap between two plies that follow each other is a dip, and where they overlap there is a bump, whatever the plies
    are called.

    Parameters
    ----------
    mesh : ShellMesh
    table : SpanTable
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    if not mesh.stacks:
        return [not_made("gaps and laps", "the blade file has no plies")]
    materials = tuple(dict.fromkeys(layer.material.name for stack in mesh.stacks for layer in stack.layers))
    laid = _Laid(table, materials, *_by_material(mesh, table, materials))
    length = float(np.ptp(table.z))
    dips: list[dict[str, Any]] = []
    laps: list[dict[str, Any]] = []
    for region, named in enumerate(mesh.regions):
        rows, stacks = table.main_stacks(region)
        for stretch in np.split(np.arange(len(rows)), np.flatnonzero(np.diff(rows) != 1) + 1):
            own_rows, own_stacks = rows[stretch], stacks[stretch]
            for m in range(len(materials)):
                own = laid.thickness[own_stacks, m]
                ends = np.append(table.z[own_rows], table.z[own_rows[-1] + 1])
                short = [
                    (low, high, shoulder)
                    for low, high, shoulder in _laps(own, limits["lap of a material"].warn)
                    if ends[high] - ends[low] <= LONGEST_LAP * length
                ]
                # What is thinner than a lap alone is no gap.
                level = own.copy()
                for low, high, shoulder in short:
                    level[low:high] = shoulder
                gaps = [
                    (low, high, shoulder)
                    for low, high, shoulder in _dips(level, limits["dip of a material"].warn)
                    if ends[high] - ends[low] <= LONGEST_GAP * length
                ]
                for runs, found in ((gaps, dips), (short, laps)):
                    found += [
                        {"region": named.name, **laid.entry(own_rows, own_stacks, m, slice(low, high), shoulder)}
                        for low, high, shoulder in runs
                        if not laid.is_told_elsewhere(own_stacks, slice(low, high))
                    ]
    return [
        _line(
            mesh,
            table,
            dips,
            limits["dip of a material"],
            f"thinner than on both sides, on {LONGEST_GAP * length:.2g} m or less, as in a gap between plies",
        ),
        _line(
            mesh,
            table,
            laps,
            limits["lap of a material"],
            f"thicker than on both sides, on {LONGEST_LAP * length:.2g} m or less, as where plies lie twice",
        ),
    ]


@dataclass(frozen=True, eq=False)
class _Laid:
    """What each stack has of each material, and which plies are of it.

    Attributes
    ----------
    table : SpanTable
    materials : tuple of str
    thickness : (s + 1, k) float array, m
    is_of : (p, k) bool array
        Whether a ply is of a material.
    """

    table: SpanTable
    materials: tuple[str, ...]
    thickness: Floats
    is_of: NDArray[np.bool_]

    def is_told_elsewhere(self, stacks: Ints, run: slice) -> bool:
        """Whether a ply of one name is missing on the run, or lies twice on few rows: checks of plies tell of that."""
        own = self.table.counts[stacks[run]]
        before, behind = self.table.counts[stacks[run.start - 1]], self.table.counts[stacks[run.stop]]
        is_missing = np.any((own == 0).all(axis=0) & (before > 0) & (behind > 0))
        is_double = len(own) <= FEW_ROWS and np.any((own == 2 * before).all(axis=0) & (before == behind) & (before > 0))
        return bool(is_missing or is_double)

    def entry(self, rows: Ints, stacks: Ints, m: int, run: slice, shoulder: float) -> dict[str, Any]:
        """What is to be told of a run of rows: place, thicknesses, and the plies that change at its ends."""
        counts = self.table.counts
        changes = [
            counts[stacks[run.start]] - counts[stacks[run.start - 1]],
            counts[stacks[run.stop]] - counts[stacks[run.stop - 1]],
        ]
        names = [[self.table.plies[p] for p in np.flatnonzero((change != 0) & self.is_of[:, m])] for change in changes]
        own = self.thickness[stacks[run], m]
        return {
            "material": self.materials[m],
            "z_m": [float(self.table.z[rows[run.start]]), float(self.table.z[rows[run.stop - 1] + 1])],
            "thickness_m": round(float(own.min()), 9),
            "beside_m": round(shoulder, 9),
            "change": round(float(np.abs(own - shoulder).max() / shoulder), 6),
            "plies_at_root_end": names[0],
            "plies_at_tip_end": names[1],
            "rows": [int(rows[run.start]), int(rows[run.stop - 1])],
        }


def _by_material(mesh: ShellMesh, table: SpanTable, materials: tuple[str, ...]) -> tuple[Floats, NDArray[np.bool_]]:
    number = {name: i for i, name in enumerate(materials)}
    ply = {name: i for i, name in enumerate(table.plies)}
    thickness = np.zeros((len(mesh.stacks) + 1, len(materials)))
    is_of = np.zeros((len(table.plies), len(materials)), dtype=bool)
    for s, stack in enumerate(mesh.stacks):
        for layer in stack.layers:
            thickness[s, number[layer.material.name]] += layer.thickness
            is_of[ply[layer.ply], number[layer.material.name]] = True
    return thickness, is_of


def _dips(own: Floats, least: float) -> Iterator[tuple[int, int, float]]:
    """Runs that are thinner by a share than the lower of what lies before and behind.

    Examples
    --------
    >>> list(_dips(np.array([2.0, 4.0, 1.0, 3.0, 3.0]), 0.1))
    [(2, 3, 3.0)]
    """
    before = np.maximum.accumulate(own)
    behind = np.maximum.accumulate(own[::-1])[::-1]
    shoulder = np.minimum(before, behind)
    is_low = own < (1.0 - least) * shoulder
    for low, high in _runs(is_low):
        yield low, high, float(shoulder[low:high].max())


def _laps(own: Floats, least: float) -> Iterator[tuple[int, int, float]]:
    """Runs that are thicker by a share than the thicker of their two neighbours, which have the material too.

    Examples
    --------
    >>> list(_laps(np.array([2.0, 4.0, 4.0, 2.0, 3.0, 0.0]), 0.25))
    [(1, 3, 2.0)]
    """
    for low in np.flatnonzero(np.diff(own) > 0) + 1:
        lower = np.flatnonzero(own[low:] < own[low])
        if not len(lower):
            continue
        high = int(low + lower[0])
        shoulder = float(max(own[low - 1], own[high]))
        if min(own[low - 1], own[high]) > 0 and own[low] > (1.0 + least) * shoulder:
            yield int(low), high, shoulder


def _runs(wanted: NDArray[np.bool_]) -> Iterator[tuple[int, int]]:
    ends = np.flatnonzero(np.diff(np.concatenate([[False], wanted, [False]]).astype(int)))
    yield from zip(ends[::2].tolist(), ends[1::2].tolist(), strict=True)


def _line(mesh: ShellMesh, table: SpanTable, found: list[dict[str, Any]], limit: Limit, text: str) -> Finding:
    number = {region.name: i for i, region in enumerate(mesh.regions)}
    on_rows = np.zeros((len(mesh.regions), table.n_rows), dtype=bool)
    places: dict[str, list[str]] = {}
    for entry in sorted(found, key=lambda entry: -float(entry["change"])):
        first, last = entry["rows"]
        on_rows[number[entry["region"]], first : last + 1] = True
        plies = dict.fromkeys([*entry["plies_at_root_end"], *entry["plies_at_tip_end"]])
        place = (
            f"z = {entry['z_m'][0]:.3f} to {entry['z_m'][1]:.3f} m: {1e3 * entry['thickness_m']:.2f} mm of "
            f"{entry['material']}, beside {1e3 * entry['beside_m']:.2f} mm ({', '.join(plies)})"
        )
        places.setdefault(place, []).append(entry["region"])
    largest = max((float(entry["change"]) for entry in found), default=0.0)
    return Finding(
        "gaps and laps",
        f"{counted(len(found), 'place')} where a material of a region is {text}"
        + (f"; by {100 * largest:.0f} % at most" if found else ""),
        limit.text,
        f"{limit.source}, as a share of what lies beside",
        verdict_of(fails=largest > limit.fail, warns=len(found)),
        "; ".join(f"{place} on {listed(regions, most=3)}" for place, regions in list(places.items())[:MOST_PLACES]),
        np.flatnonzero(on_rows[mesh.region, table.row]),
        {"places": [{key: value for key, value in entry.items() if key != "rows"} for entry in found]},
    )
