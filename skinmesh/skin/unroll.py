"""From a blade and its surface to the skin map."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import PRESSURE, SIDE_NAMES, SUCTION, BladeDefinition
from skinmesh.definition.problems import FieldReport, Findings
from skinmesh.errors import InputError, LayoutChanged, Problem
from skinmesh.skin.divisions import divide_gaps, divide_rows, least_across
from skinmesh.skin.kept import WAYS_OUT, KeptLayout, LayoutComparison
from skinmesh.skin.plyspans import ply_ends
from skinmesh.skin.rows import Rows, join_rows
from skinmesh.skin.ruler import measure_sections
from skinmesh.skin.seams import SeamTable, place_seams
from skinmesh.skin.skinmap import BaseSpan, SkinMap, Strip, WebSheet
from skinmesh.skin.trailing import OpenSpan, closing_pull, find_open_spans, trailing_gap
from skinmesh.surface.loft import Surface

Floats = NDArray[np.float64]

N_SPAN_SAMPLES = 240
MOST_ELEMENTS = 4_000_000
NEAR_ROW = 0.1  # a web end nearer to a station than this share of the size is moved onto it


def unroll_skin(
    blade: BladeDefinition, surface: Surface, *, kept: KeptLayout | None = None
) -> tuple[SkinMap, tuple[str, ...]]:
    """Lay out rows, seams and their divisions.

    Parameters
    ----------
    blade : BladeDefinition
    surface : Surface
    kept : KeptLayout, optional
        Layout of an earlier mesh whose divisions are to be used again.

    Returns
    -------
    SkinMap
    tuple of str
        Warnings, each with place and amount.

    Raises
    ------
    InputError
        The layout does not fit on the skin, or the mesh would be far too large.
    LayoutChanged
        The layout is not the kept one.
    """
    rule, file = blade.mesh, blade.sources[0].file if blade.sources else blade.stem
    report = FieldReport(file, blade.lines or {}, Findings())
    rows, spans, warnings = _find_rows(blade, surface)
    bases = _bases(rows, spans)
    samples = np.union1d(rows.z, np.linspace(surface.z_ends[0], surface.z_ends[1], N_SPAN_SAMPLES))
    ruler = measure_sections(surface, samples)
    coarse, _ = place_seams(blade.layout, ruler, least_spacing=_spacing(blade, samples), report=report)
    if kept is not None:
        _refuse_other_layout(blade, kept, rows, coarse, bases, file)
    gaps = divide_gaps(ruler, coarse, rule)
    if kept is not None:
        gaps = replace(gaps, n=kept.n_gaps)
    forced = {base.first_row - 1: 2 for base in bases if base.root_apex} | {
        base.last_row: 2 for base in bases if base.tip_apex
    }
    counts = {} if kept is None else dict(enumerate(kept.n_levels.tolist()))
    levels = divide_rows(rows, forced, ruler, coarse, gaps.n, rule, counts=counts)
    n_elements = int(levels.n.sum()) * int(gaps.n.sum())
    if n_elements > MOST_ELEMENTS:
        report.add(("mesh", "size"), f"would make {n_elements / 1e6:.1f} million elements; take a larger size")
        raise InputError(report.findings.problems)
    seams, seam_warnings = place_seams(
        blade.layout,
        measure_sections(surface, levels.z),
        least_spacing=_spacing(blade, levels.z),
        report=report,
        order=coarse.labels,
    )
    webs = _webs(blade, surface, rows, levels.z, seams)
    closes = any(base.root_apex or base.tip_apex for base in bases)
    n_base = 2 if closes else max(1, _base_count(blade, surface, levels.z))
    if kept is not None:
        n_base = kept.n_base if bases else n_base
        webs = tuple(replace(web, n_height=n) for web, n in zip(webs, kept.n_heights, strict=True))
    strips = (
        *(Strip(f"{SIDE_NAMES[side]} {name}", side, kind) for side, name, kind in seams.gap_names),
        Strip("trailing base", 0, "base"),
        *(Strip(web.name, 0, "web") for web in blade.layout.webs),
    )
    closing = _closing(rows, bases, levels.row)
    pull = closing_pull(surface, levels.z, closing)
    skin = SkinMap(surface, rows, levels, seams, gaps, webs, bases, n_base, closing, pull, strips)
    return skin, (*warnings, *seam_warnings)


def _refuse_other_layout(
    blade: BladeDefinition, kept: KeptLayout, rows: Rows, seams: SeamTable, bases: tuple[BaseSpan, ...], file: str
) -> None:
    comparison = LayoutComparison()
    comparison.compare("rows", kept.rows, rows.labels)
    comparison.compare("seams", kept.seams, seams.labels)
    comparison.compare("webs", kept.webs, [web.name for web in blade.layout.webs])
    if not comparison.changes:
        open_bands = {
            band for base in bases for band in range(base.first_row - base.root_apex, base.last_row + base.tip_apex)
        }
        for band in sorted(open_bands ^ set(kept.open_bands)):
            was, now = ("closed", "open") if band in open_bands else ("open", "closed")
            place = f"between rows '{rows.labels[band]}' and '{rows.labels[band + 1]}'"
            comparison.changes.append(f"the trailing edge {place} was {was} and is {now}")
    if comparison.changes:
        text = "the layout is not that of the mesh to keep: " + "; ".join(comparison.changes)
        raise LayoutChanged([Problem(file, 0, "--keep", f"{text}. {WAYS_OUT}")], changes=comparison.changes)


def _spacing(blade: BladeDefinition, z: Floats) -> Floats | None:
    return None if blade.mesh.least_spacing is None else blade.mesh.least_spacing(z)


def _find_rows(blade: BladeDefinition, surface: Surface) -> tuple[Rows, tuple[OpenSpan, ...], tuple[str, ...]]:
    z_stations, rule = surface.stations, blade.mesh
    wanted = [(float(z), f"station {i:02d}") for i, z in enumerate(z_stations)]
    warnings: list[str] = []
    for web in blade.layout.webs:
        for z, name in zip(web.span, ("root end", "tip end"), strict=True):
            nearest = float(z_stations[np.argmin(np.abs(z_stations - z))])
            near = abs(nearest - z) < NEAR_ROW * float(rule.size(z))
            if near and nearest != z:
                warnings.append(
                    f"{web.name} {name}: moved by {abs(nearest - z):.4f} m onto the station at z = {nearest:.3f} m"
                )
            wanted.append((nearest if near else float(z), f"{web.name} {name}"))
    if rule.cut_at_ply_ends:
        wanted.extend((z, f"end of {name}") for z, name in ply_ends(blade))
    fixed = np.array([z for z, _ in wanted])
    size = float(np.min(rule.size(z_stations)))
    spans, gap_warnings = find_open_spans(surface, rule.close_gap, size=size, fixed=fixed)
    for span in spans:
        if span.root_apex is not None:
            wanted += [(span.root_apex, "trailing base root apex"), (span.root, "trailing base root end")]
        if span.tip_apex is not None:
            wanted += [(span.tip, "trailing base tip end"), (span.tip_apex, "trailing base tip apex")]
    return join_rows(wanted), spans, (*warnings, *gap_warnings)


def _bases(rows: Rows, spans: tuple[OpenSpan, ...]) -> tuple[BaseSpan, ...]:
    return tuple(
        BaseSpan(rows.index(span.root), rows.index(span.tip), span.root_apex is not None, span.tip_apex is not None)
        for span in spans
    )


def _closing(rows: Rows, bases: tuple[BaseSpan, ...], row: Floats) -> Floats:
    at_rows = np.ones(len(rows.z))
    for base in bases:
        at_rows[base.first_row : base.last_row + 1] = 0.0
    return np.asarray(np.interp(row, np.arange(len(rows.z)), at_rows))


def _base_count(blade: BladeDefinition, surface: Surface, z: Floats) -> int:
    wanted = least_across("trailing base", "trailing base", "base", blade.mesh.across)
    return max(wanted, int(np.ceil(np.max(trailing_gap(surface, z) / blade.mesh.size(z)) - 1e-6)))


def _webs(blade: BladeDefinition, surface: Surface, rows: Rows, z: Floats, seams: SeamTable) -> tuple[WebSheet, ...]:
    webs = []
    for i, web in enumerate(blade.layout.webs):
        low, high = seams.feet[web.name, PRESSURE], seams.feet[web.name, SUCTION]
        ends = [
            j
            for j, label in enumerate(rows.labels)
            if any(part in (f"{web.name} root end", f"{web.name} tip end") for part in label.split(" + "))
        ]
        inside = (z >= rows.z[ends[0]] - 1e-9) & (z <= rows.z[ends[1]] + 1e-9)
        feet = surface.section(z[inside], seams.t[inside, low]), surface.section(z[inside], seams.t[inside, high])
        n = int(np.ceil(np.max(np.abs(feet[0] - feet[1]) / blade.mesh.size(z[inside])) - 1e-6))
        webs.append(
            WebSheet(
                web.name,
                i + 1,
                low,
                high,
                ends[0],
                ends[1],
                max(n, least_across(web.name, web.name, "web", blade.mesh.across)),
            )
        )
    return tuple(webs)
