"""Seams: the lines along the span that bound regions and carry web feet."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cmp_to_key, reduce
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import (
    PRESSURE,
    SIDE_NAMES,
    SUCTION,
    AcrossCap,
    ArcLength,
    CapRule,
    ChordFraction,
    FromAxis,
    Layout,
    Place,
)
from skinmesh.definition.problems import FieldReport
from skinmesh.errors import InputError
from skinmesh.skin.ruler import Ruler
from skinmesh.skin.spread import spread_seams

Floats = NDArray[np.float64]

LEAST_SPACING = 0.01  # share of the side's arc length
SAME_SEAM = 1e-6  # m
CAP_OVERLAP = 0.1  # of the narrower cap: beyond it two caps want the same place, and no narrow tip explains that
TOLD_MOVE = 1e-4  # moves of a seam below this share of the side's arc length are not worth a warning


@dataclass(frozen=True, eq=False)
class SideSeam:
    """A seam of one side before the sides are joined.

    Attributes
    ----------
    labels : tuple of str
        What lies on it: 'main cap fore edge', 'fore web foot'.
    arc : (m,) float array, m
        Wanted arc length from the leading edge.
    is_edge : bool
        Whether it bounds regions, rather than carrying a web's foot alone.
    span : (float, float), m
        Where it is more than the continuation of something.
    """

    labels: tuple[str, ...]
    arc: Floats
    is_edge: bool
    span: tuple[float, float]


@dataclass(frozen=True, eq=False)
class SeamTable:
    """All seams of the skin at given z, from the pressure trailing edge over the nose to the suction trailing edge.

    Attributes
    ----------
    labels : tuple of str
    t : (m, n) float array
        Surface parameter of each seam.
    arc : (m, n) float array, m
        Arc length from the leading edge, negative on the pressure side.
    gap_names : tuple of (int, str, str)
        Side, region name without side, and kind of each strip between two seams, n − 1 of them.
    feet : mapping of (web name, side) to seam index
    """

    labels: tuple[str, ...]
    t: Floats
    arc: Floats
    gap_names: tuple[tuple[int, str, str], ...]
    feet: dict[tuple[str, int], int]


def place_seams(
    layout: Layout,
    ruler: Ruler,
    *,
    least_spacing: Floats | None,
    report: FieldReport,
    order: tuple[str, ...] = (),
) -> tuple[SeamTable, tuple[str, ...]]:
    """Place every seam at the ruler's sections.

    Parameters
    ----------
    layout : Layout
    ruler : Ruler
    least_spacing : (m,) float array or None, m
        Least distance of two seams, None for one hundredth of the side's arc length.
    report : FieldReport
        Takes mistakes, with the lines of the blade file.
    order : tuple of str
        Labels of the seams as found at other sections of the same blade; without them the seams are put in the order
        of their mean places.

    Returns
    -------
    SeamTable
    tuple of str
        Warnings: seams that were moved to keep the least spacing.

    Raises
    ------
    InputError
        A cap is wider than the skin or lies over another one, webs cross, or the seams of a side do not fit on it at
        their least spacing.
    """
    warnings: list[str] = []
    tables = {}
    for side in (PRESSURE, SUCTION):
        found = _collect(layout, ruler, side, report)
        seams = _in_order(found, order, SIDE_NAMES[side]) if order else _order(found, ruler.z)
        spacing = LEAST_SPACING * ruler.length(side) if least_spacing is None else least_spacing
        tables[side] = (seams, _spread(seams, ruler, side, spacing, warnings, report))
    table = _join(layout, ruler, tables)
    _refuse_crossing_webs(layout, table, report)
    if report.findings.problems:
        raise InputError(report.findings.problems)
    return table, tuple(warnings)


def _collect(layout: Layout, ruler: Ruler, side: int, report: FieldReport) -> list[SideSeam]:
    """Every seam of a side but its ends, in no order."""
    z, length = ruler.z, ruler.length(side)
    whole = (float(z[0]), float(z[-1]))
    seams: list[SideSeam] = []
    if layout.leading_strip is not None:
        seams.append(SideSeam(("leading strip edge",), layout.leading_strip(z), True, whole))
    if layout.trailing_strip is not None:
        seams.append(SideSeam(("trailing strip edge",), length - layout.trailing_strip(z), True, whole))
    edges: dict[str, tuple[Floats, Floats]] = {}
    for cap in layout.caps:
        if side not in cap.sides:
            continue
        width = cap.width(z)
        too_wide = width >= length
        if too_wide.any():
            i = int(np.argmax(width - length))
            report.add(
                ("layout", "caps", cap.name, "width"),
                f"the cap is wider than the {SIDE_NAMES[side]} skin at z = {z[i]:.3f} m: {width[i]:.4f} m on"
                f" {length[i]:.4f} m of arc; make it narrower there",
            )
        centre = _arc_of_place(cap.centre, ruler, side, cap.plane_twist)
        edges[cap.name] = (centre - 0.5 * width, centre + 0.5 * width)
        seams.append(SideSeam((f"{cap.name} fore edge",), edges[cap.name][0], True, whole))
        seams.append(SideSeam((f"{cap.name} aft edge",), edges[cap.name][1], True, whole))
    _refuse_overlapping_caps(edges, z, side, report)
    for web in layout.webs:
        foot = web.feet[side]
        if isinstance(foot, AcrossCap):
            fore, aft = edges[foot.cap]
            arc = fore + foot.across(z) * (aft - fore)
        else:
            arc = _held_beyond(_arc_of_place(foot, ruler, side, web.plane_twist), ruler, side, web.span)
        seams.append(SideSeam((f"{web.name} foot",), arc, False, web.span))
    return seams


def _refuse_overlapping_caps(
    edges: Mapping[str, tuple[Floats, Floats]], z: Floats, side: int, report: FieldReport
) -> None:
    for (first, a), (second, b) in combinations(edges.items(), 2):
        overlap = np.minimum(a[1], b[1]) - np.maximum(a[0], b[0])
        share = overlap / np.minimum(a[1] - a[0], b[1] - b[0])
        i = int(np.argmax(share))
        if share[i] > CAP_OVERLAP:
            report.add(
                ("layout", "caps", second),
                f"lies over the cap '{first}' on the {SIDE_NAMES[side]} side: by {overlap[i]:.4f} m at z = {z[i]:.3f}"
                " m; move their centres apart or make them narrower",
            )


def _refuse_crossing_webs(layout: Layout, table: SeamTable, report: FieldReport) -> None:
    for first, second in combinations(layout.webs, 2):
        if min(first.span[1], second.span[1]) <= max(first.span[0], second.span[0]):
            continue
        on_suction = table.feet[second.name, SUCTION] - table.feet[first.name, SUCTION]
        on_pressure = table.feet[first.name, PRESSURE] - table.feet[second.name, PRESSURE]
        if on_suction * on_pressure < 0:
            report.add(
                ("layout", "webs", second.name, "foot"),
                f"the web crosses '{first.name}': before it on one side of the blade, behind it on the other; webs are"
                " joined to skins alone",
            )


def _arc_of_place(place: Place, ruler: Ruler, side: int, plane_twist: float | None) -> Floats:
    z = ruler.z
    if isinstance(place, ArcLength):
        return place.value(z)
    no_turn = np.zeros_like(z)
    if isinstance(place, ChordFraction):
        tau = ruler.tau_at_distance(side, (place.value(z) - ruler.pitch_axis) * ruler.chord, turn=no_turn)
    elif isinstance(place, FromAxis):
        turn = no_turn if plane_twist is None else ruler.twist - plane_twist
        tau = ruler.tau_at_distance(side, place.value(z), turn=turn)
    else:
        raise TypeError(f"{type(place).__name__} has no arc length of its own")
    return ruler.arc_at(side, tau)


def _held_beyond(arc: Floats, ruler: Ruler, side: int, span: tuple[float, float]) -> Floats:
    """Let a seam run on beyond its span at the share of the side's arc length that it has at the ends of the span."""
    share = arc / ruler.length(side)
    inside = (ruler.z >= span[0] - 1e-9) & (ruler.z <= span[1] + 1e-9)
    if not inside.any():
        return arc
    held = np.interp(ruler.z, ruler.z[inside], share[inside])
    return np.asarray(held * ruler.length(side))


def _order(seams: list[SideSeam], z: Floats) -> list[SideSeam]:
    """Sort the seams from the leading edge aft and make one of those that coincide."""

    def difference(a: SideSeam, b: SideSeam) -> float:
        low, high = max(a.span[0], b.span[0]), min(a.span[1], b.span[1])
        both = (z >= low - 1e-9) & (z <= high + 1e-9)
        gap = (a.arc - b.arc)[both] if both.any() else a.arc - b.arc
        return 0.0 if np.max(np.abs(gap)) < SAME_SEAM else float(np.mean(gap))

    ordered: list[SideSeam] = []
    for seam in sorted(seams, key=cmp_to_key(lambda a, b: float(np.sign(difference(a, b))))):  # type: ignore[arg-type,return-value]
        if ordered and difference(ordered[-1], seam) == 0.0:
            seam = _joined(ordered.pop(), seam)
        ordered.append(seam)
    return ordered


def _in_order(seams: list[SideSeam], order: tuple[str, ...], side_name: str) -> list[SideSeam]:
    """Sort and join the seams as labels say that were found before."""
    by_label = {f"{side_name} {seam.labels[0]}": seam for seam in seams}
    ordered = []
    for labels in order if side_name == SIDE_NAMES[SUCTION] else order[::-1]:
        parts = labels.removeprefix(f"{side_name} ").split(" + ")
        own = [by_label[f"{side_name} {part}"] for part in parts if f"{side_name} {part}" in by_label]
        if labels.startswith(side_name) and own:
            ordered.append(reduce(_joined, own))
    return ordered


def _joined(first: SideSeam, second: SideSeam) -> SideSeam:
    """One seam of two that coincide; an edge leads a foot."""
    leader = first if first.is_edge or not second.is_edge else second
    span = (min(first.span[0], second.span[0]), max(first.span[1], second.span[1]))
    return SideSeam(first.labels + second.labels, leader.arc, first.is_edge or second.is_edge, span)


def _spread(
    seams: list[SideSeam],
    ruler: Ruler,
    side: int,
    spacing: Floats,
    warnings: list[str],
    report: FieldReport,
) -> Floats:
    """(m, k + 2) arc lengths with the leading and the trailing edge at the ends, at least the spacing apart."""
    length = ruler.length(side)
    wanted = np.column_stack([np.zeros_like(length), *(seam.arc for seam in seams), length])
    room = length - spacing * (len(seams) + 1)
    if np.any(room < 0.0):
        i = int(np.argmin(room))
        report.add(
            ("layout",),
            f"{len(seams)} seams do not fit on the {SIDE_NAMES[side]} side at z = {ruler.z[i]:.3f} m: its"
            f" {length[i]:.4f} m of arc leave less than the least spacing of {spacing[i]:.4f} m; take fewer regions"
            " or a smaller mesh.least_spacing",
        )
        return wanted
    is_edge = np.array([True, *(seam.is_edge for seam in seams), True])
    kept = spread_seams(wanted, is_edge, spacing)
    for k, seam in enumerate(seams):
        active = (ruler.z >= seam.span[0] - 1e-9) & (ruler.z <= seam.span[1] + 1e-9)
        move = np.where(active, kept[:, k + 1] - wanted[:, k + 1], 0.0)
        told = np.abs(move) > TOLD_MOVE * length
        if told.any():
            i = int(np.argmax(np.abs(move)))
            warnings.append(
                f"{SIDE_NAMES[side]} {' + '.join(seam.labels)}: moved by up to {abs(move[i]):.4f} m (at z ="
                f" {ruler.z[i]:.3f} m, between z = {ruler.z[told].min():.3f} and {ruler.z[told].max():.3f} m) to keep"
                f" {spacing[i]:.4f} m from its neighbours; give it a place of its own there, or a smaller"
                " mesh.least_spacing"
            )
    return np.asarray(kept)


def _join(layout: Layout, ruler: Ruler, tables: dict[int, tuple[list[SideSeam], Floats]]) -> SeamTable:
    labels: dict[int, list[str]] = {}
    names: dict[int, list[tuple[int, str, str]]] = {}
    feet: dict[tuple[str, int], int] = {}
    n_pressure = len(tables[PRESSURE][0])
    for side, (seams, _) in tables.items():
        prefix = SIDE_NAMES[side]
        labels[side] = [f"{prefix} {' + '.join(seam.labels)}" for seam in seams]
        names[side] = [(side, *region) for region in _regions(layout, seams, side)]
        for k, seam in enumerate(seams):
            position = n_pressure - k if side == PRESSURE else n_pressure + 2 + k
            for web in layout.webs:
                if f"{web.name} foot" in seam.labels:
                    feet[web.name, side] = position
    tau = {
        side: np.column_stack([ruler.tau_at_arc(side, column) for column in arc.T]) for side, (_, arc) in tables.items()
    }
    for values in tau.values():
        values[:, 0], values[:, -1] = 0.0, 1.0
    return SeamTable(
        labels=(
            "pressure trailing edge",
            *labels[PRESSURE][::-1],
            "leading edge",
            *labels[SUCTION],
            "suction trailing edge",
        ),
        t=np.hstack([-tau[PRESSURE][:, :0:-1], tau[SUCTION]]),
        arc=np.hstack([-tables[PRESSURE][1][:, :0:-1], tables[SUCTION][1]]),
        gap_names=(*names[PRESSURE][::-1], *names[SUCTION]),
        feet=feet,
    )


def _regions(layout: Layout, seams: list[SideSeam], side: int) -> list[tuple[str, str]]:
    """Name and kind of the strip before each seam and of the last one, from the leading edge aft."""
    caps: list[CapRule] = [cap for cap in layout.caps if side in cap.sides]
    cap_labels = {f"{cap.name} fore edge": cap.name for cap in caps}
    n_middle = sum(any(label in cap_labels for label in seam.labels) for seam in seams) - 1
    regions: list[tuple[str, str]] = []
    n_past = 0
    current = ("leading strip", "strip") if layout.leading_strip is not None else _panel(0, len(caps), n_middle)
    for seam in seams:
        regions.append(current)
        for label in seam.labels:  # at most one edge ends and one begins on a seam
            if label == "leading strip edge" or (label.endswith(" aft edge") and current[1] == "cap"):
                current = _panel(n_past, len(caps), n_middle)
        for label in seam.labels:
            if label in cap_labels:
                current, n_past = (cap_labels[label], "cap"), n_past + 1
            elif label == "trailing strip edge":
                current = ("trailing strip", "strip")
    return [*regions, current]


def _panel(n_past: int, n_caps: int, n_middle: int) -> tuple[str, str]:
    """The panel after a number of caps."""
    if n_caps == 0:
        return "panel", "panel"
    if n_past == 0:
        return "leading panel", "panel"
    if n_past == n_caps:
        return "trailing panel", "panel"
    return (f"middle panel {n_past}" if n_middle > 1 else "middle panel"), "panel"
