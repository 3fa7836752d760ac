"""Plies: bare elements, holes, plies that lie twice, stacks that differ within a region, order, areas, offset."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import groupby

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.edges import smooth_pairs
from skinmesh.check.finding import Finding, listed, not_made, span_of, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.spantable import FEW_ROWS, SpanTable
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Ints = NDArray[np.int64]

SCHEDULE = "one ply schedule, region by region"
LEAST_STEP, FLUSH = 0.02, 0.4
NO_PLIES = "the blade file has no plies"


def check_plies(mesh: ShellMesh, table: SpanTable, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Coverage, missing and doubled plies, stacks across a region, order and area of plies, and the offset.

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
        names = (
            "coverage",
            "missing plies",
            "doubled plies",
            "stacks across regions",
            "ply order",
            "ply areas",
            "ply ends",
            "offset",
        )
        return [not_made(name, NO_PLIES) for name in names]
    return [
        _coverage(mesh),
        _missing(mesh, table),
        _doubled(mesh, table),
        _across(mesh, table),
        _order(mesh, table),
        _areas(mesh, table, limits["ply area"]),
        _ends(mesh, table, limits["ply end move"]),
        _offset(mesh),
    ]


def _coverage(mesh: ShellMesh) -> Finding:
    bare = np.flatnonzero(mesh.stack < 0)
    return Finding(
        "coverage",
        f"{len(bare)} of {len(mesh.cells)} elements without plies",
        "none",
        "an element without plies has no stiffness",
        verdict_of(fails=len(bare)),
        span_of(mesh, bare),
        bare,
    )


def _missing(mesh: ShellMesh, table: SpanTable) -> Finding:
    """A ply with element rows before and behind that lack it, between rows that have it."""
    places, elements = [], []
    for region, rows, layers in _by_region(mesh, table):
        has = layers > 0
        before = np.maximum.accumulate(has, axis=0)
        behind = np.maximum.accumulate(has[::-1], axis=0)[::-1]
        hole = before & behind & ~has
        for ply in np.flatnonzero(hole.any(axis=0)):
            lacking = rows[hole[:, ply]]
            places.append(f"'{table.plies[ply]}' on {_row_text(mesh, table, region, lacking)}")
            elements.append(np.flatnonzero((mesh.region == region) & np.isin(table.row, lacking)))
    found = np.unique(np.concatenate(elements)) if elements else np.zeros(0, dtype=np.int64)
    return Finding(
        "missing plies",
        f"{counted(len(places), 'hole')} "
        f"along the span in a ply of a region (two pieces that are meant want two names)",
        "none",
        SCHEDULE,
        verdict_of(fails=len(places)),
        listed(places),
        found,
        {"places": places},
    )


def _doubled(mesh: ShellMesh, table: SpanTable) -> Finding:
    """A ply with twice the layers on a row or two, or more pieces on some, than on the rows at both ends of them."""
    pieces = np.zeros_like(table.counts)
    number = {name: i for i, name in enumerate(table.plies)}
    for s, stack in enumerate(mesh.stacks):
        np.add.at(pieces[s], [number[name] for name, _ in groupby(layer.ply for layer in stack.layers)], 1)
    places, elements, n_split = [], [], 0
    for region, rows, layers in _by_region(mesh, table):
        _, stacks = table.main_stacks(region)
        for ply in range(len(table.plies)):
            for lines in _twice(layers[:, ply], pieces[stacks, ply]):
                doubled = rows[lines]
                is_split = bool(np.any(pieces[stacks[lines], ply] > 1))
                n_split += is_split
                places.append(f"'{table.plies[ply]}' on {_row_text(mesh, table, region, doubled)}")
                elements.append(np.flatnonzero((mesh.region == region) & np.isin(table.row, doubled)))
    found = np.unique(np.concatenate(elements)) if elements else np.zeros(0, dtype=np.int64)
    return Finding(
        "doubled plies",
        f"{counted(len(places), 'ply lies', 'plies lie')} "
        f"twice on a few rows and once on both sides of them, {n_split} of these in two pieces",
        "warn 1, fail 1 in two pieces",
        SCHEDULE,
        verdict_of(fails=n_split, warns=len(places)),
        listed(places),
        found,
        {"places": places},
    )


def _twice(layers: Ints, pieces: Ints) -> Iterator[slice]:
    """Runs of rows with twice the layers, or more pieces, than the runs before and behind, which are alike.

    Twice the layers on a long run is a ply whose count rises and falls along the span, as schedules have it.
    """
    both = np.column_stack([layers, pieces])
    starts = np.concatenate([[0], np.flatnonzero(np.any(np.diff(both, axis=0) != 0, axis=1)) + 1, [len(both)]])
    runs = both[starts[:-1]]
    for i in range(1, len(runs) - 1):
        before, own, behind = runs[i - 1 : i + 2]
        is_short = starts[i + 1] - starts[i] <= FEW_ROWS
        is_twice = (is_short and own[0] == 2 * before[0]) or own[1] > before[1]
        if np.array_equal(before, behind) and before[0] > 0 and is_twice:
            yield slice(int(starts[i]), int(starts[i + 1]))


def _across(mesh: ShellMesh, table: SpanTable) -> Finding:
    """Elements of one region and one element row whose stack is not that of most of them."""
    main = np.full((len(mesh.regions), table.n_rows), -1)
    for region in range(len(mesh.regions)):
        rows, stacks = table.main_stacks(region)
        main[region, rows] = stacks
    stack = np.where(mesh.stack < 0, len(mesh.stacks), mesh.stack)
    # An element without plies is for the check of coverage to name.
    beyond = np.flatnonzero((stack != main[mesh.region, table.row]) & (mesh.stack >= 0))
    return Finding(
        "stacks across regions",
        f"{counted(len(beyond), 'element has', 'elements have')} "
        f"another stack than most of their region on the same element row",
        "none",
        SCHEDULE,
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
    )


def _order(mesh: ShellMesh, table: SpanTable) -> Finding:
    """Stacks whose plies do not follow the schedule from the +e3 face inwards."""
    number = {name: i for i, name in enumerate(table.plies)}
    pieces = [[number[name] for name, _ in groupby(layer.ply for layer in stack.layers)] for stack in mesh.stacks]
    # A name that comes back within one stack stands for several lines of the schedule and says nothing of order.
    repeated = {ply for listed_plies in pieces for ply in listed_plies if listed_plies.count(ply) > 1}
    wrong = np.array(
        [bool(np.any(np.diff([ply for ply in listed_plies if ply not in repeated]) < 0)) for listed_plies in pieces]
    )
    # A stack that lies nowhere is of an earlier schedule: a rebuild kept its number.
    wrong &= np.bincount(mesh.stack[mesh.stack >= 0], minlength=len(wrong)) > 0
    beyond = np.flatnonzero(np.append(wrong, False)[mesh.stack])
    names = listed(f"stack {k + 1}" for k in np.flatnonzero(wrong))
    return Finding(
        "ply order",
        f"{np.count_nonzero(wrong)} of {len(mesh.stacks)} stacks against the order of the schedule",
        "none",
        "plies are listed from the +e3 face inwards",
        verdict_of(fails=wrong.any()),
        f"{names}; {span_of(mesh, beyond)}" if wrong.any() else "",
        beyond,
    )


def _areas(mesh: ShellMesh, table: SpanTable, limit: Limit) -> Finding:
    """Area of each ply over the elements against its flat pattern at its exact ends."""
    flat = mesh.report.ply_areas
    if not flat:
        return not_made("ply areas", "the summary has no flat-pattern areas")
    laid = (
        np.bincount(
            np.where(mesh.stack < 0, len(mesh.stacks), mesh.stack),
            weights=element_areas(mesh),
            minlength=len(table.counts),
        )
        @ table.counts
    )
    wanted = np.array([flat.get(name, 0.0) for name in table.plies])
    off = np.abs(laid - wanted) / np.where(wanted > 0, wanted, np.maximum(laid, 1e-30))
    worst = int(off.argmax())
    return Finding(
        "ply areas",
        f"area of a ply on the elements off from its flat pattern by {100 * off[worst]:.2f} % at most",
        limit.text,
        f"{limit.source}; ply ends move to element rows, here by {mesh.report.ply_end_move:.3g} m at most",
        verdict_of(fails=off[worst] > limit.fail, warns=off[worst] > limit.warn),
        f"ply '{table.plies[worst]}': {laid[worst]:.4g} m² laid, {wanted[worst]:.4g} m² in the pattern",
        details={
            "plies": [
                {"ply": name, "laid_m2": float(a), "pattern_m2": float(b)}
                for name, a, b in zip(table.plies, laid, wanted, strict=True)
            ]
        },
    )


def _ends(mesh: ShellMesh, table: SpanTable, limit: Limit) -> Finding:
    """How far ends of plies went to meet a row of elements, as a share of the blade's length."""
    move = mesh.report.ply_end_move
    share = move / max(float(np.ptp(table.z)), 1e-30)
    return Finding(
        "ply ends",
        f"ply ends moved to element rows by {move:.3f} m at most, {share:.4f} of the blade's length",
        limit.text,
        f"{limit.source}; a smaller mesh size, or cut_at_ply_ends, moves them less",
        verdict_of(fails=share > limit.fail, warns=share > limit.warn),
        mesh.report.ply_end_place,
    )


def _offset(mesh: ShellMesh) -> Finding:
    if mesh.surface == "mid":
        return _offset_in_the_middle(mesh)
    if mesh.surface != "outer":
        return not_made("offset", f"no rule for a reference surface '{mesh.surface}'")
    is_web = np.array([region.kind == "web" for region in mesh.regions])[mesh.region]
    beyond = np.flatnonzero(np.abs(mesh.offset - np.where(is_web, 0.0, 0.5)) > 1e-9)
    values = listed(f"{value:g}" for value in np.unique(np.round(mesh.offset, 6)))
    return Finding(
        "offset",
        f"height of the nodes over the laminate's middle, in thicknesses: {values}; "
        f"{counted(len(beyond), 'element')} beyond",
        "0.5 on skins, 0 on webs",
        "nodes on the outward face of the skin, in the middle of webs",
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
    )


def _offset_in_the_middle(mesh: ShellMesh) -> Finding:
    """Whether outer faces stay flush at steps of thickness: the face lies (½ − offset) thicknesses over the nodes.

    Nodes at a step lie at the mean depth. An element beside it has half of its nodes there, and its face may differ
    from its neighbour's by a quarter of the step; without offsets it is half of it, with the wrong sign three quarters.
    """
    _, _, pair = smooth_pairs(mesh)
    thickness = mesh.thickness[pair]
    face = (0.5 - mesh.offset[pair]) * thickness
    step = np.abs(thickness[:, 0] - thickness[:, 1])
    at_step = step > LEAST_STEP * thickness.max(axis=1)
    if not at_step.any():
        return not_made("offset", "the skin has no step in thickness by which to judge the offset")
    jump = np.abs(face[:, 0] - face[:, 1])
    share = float(jump[at_step].sum() / step[at_step].sum())
    beyond = np.unique(pair[at_step & (jump > FLUSH * step)])
    fails = share > FLUSH
    return Finding(
        "offset",
        f"at steps of thickness the outer face jumps by {share:.2f} of the step in the mean",
        f"fail {FLUSH:g}",
        "0.25 where offsets keep the face flush, 0.5 without offsets, 0.75 with the wrong sign",
        verdict_of(fails=fails),
        span_of(mesh, beyond) if fails else "",
        beyond if fails else np.zeros(0, dtype=np.int64),
        {"share": share},
    )


def _by_region(mesh: ShellMesh, table: SpanTable) -> Iterator[tuple[int, Ints, Ints]]:
    for region in range(len(mesh.regions)):
        rows, layers = table.layers(region)
        if len(rows):
            yield region, rows, layers


def _row_text(mesh: ShellMesh, table: SpanTable, region: int, rows: Ints) -> str:
    low, high = table.z[rows.min()], table.z[rows.max() + 1]
    return f"{mesh.regions[region].name}, z = {low:.3f} to {high:.3f} m"
