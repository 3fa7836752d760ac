"""The ply schedule and the wishes for the mesh: from the fields of the blade file to their rules."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from math import radians
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.along import POSITIVE, RATIO, AlongReader, Bounds
from skinmesh.definition.blade import Layout, MeshRule, PlyRule
from skinmesh.definition.layoutrule import LayoutReader
from skinmesh.definition.names import GROUPS, cover_names, region_names, resolve_cover
from skinmesh.definition.problems import FieldPath, FieldReport, no_such, shown
from skinmesh.definition.schema import MeshFields, PlyFields
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.definition.table import ReadTable
from skinmesh.laminate.material import Material

MOST_LAYERS = 1000
MOST_ELEMENTS = 3_000_000
SIZES_PER_CHORD = 18  # elements along the longest chord where the user gives no size
GIRTH = 2.2  # arc length of a section over its chord, of the order of what profiles have
_LAYERS = Bounds(f"must lie between 0 and {MOST_LAYERS}", lambda value: 0 <= value <= MOST_LAYERS)


def read_plies(
    plies: Iterable[PlyFields],
    *,
    layout: Layout,
    materials: Mapping[str, Material | None],
    table: ReadTable | None,
    reader: LayoutReader,
    along: AlongReader,
) -> tuple[PlyRule, ...]:
    """Make the ply schedule.

    Parameters
    ----------
    plies : iterable of PlyFields
    layout : Layout
    materials : mapping of str to Material or None
        None where a material was refused.
    table : ReadTable or None
    reader : LayoutReader
        For spans.
    along : AlongReader

    Returns
    -------
    tuple of PlyRule
        Without those in which something was refused.
    """
    rules = []
    for i, ply in enumerate(plies):
        rule = _ply(ply, ("plies", i), layout, materials, table, reader, along)
        if rule is not None:
            rules.append(rule)
    return tuple(rules)


def _ply(
    ply: PlyFields,
    path: FieldPath,
    layout: Layout,
    materials: Mapping[str, Material | None],
    table: ReadTable | None,
    reader: LayoutReader,
    along: AlongReader,
) -> PlyRule | None:
    report = reader.report
    thickness = along.read(ply.thickness, (*path, "thickness"), bounds=POSITIVE)
    if thickness is not None and table is not None:
        _check_thickness(thickness, (*path, "thickness"), table, report)
    count = along.read(ply.count, (*path, "count"), kind=RATIO, bounds=_LAYERS)
    if ply.material is not None and ply.material not in materials and report.is_whole("materials"):
        report.add((*path, "material"), no_such("material", ply.material, materials))
    for k, name in enumerate(ply.covers or ()):
        _check_cover(name, layout, (*path, "covers"), report)
        if ply.covers and name in ply.covers[:k]:
            report.add((*path, "covers"), f"{shown(name)} is there twice; keep one")
    span = reader.span(ply.span, (*path, "span"), what="ply")
    material = materials.get(ply.material or "")
    if ply.ply is None or ply.covers is None or thickness is None or material is None:
        return None
    return PlyRule(
        name=ply.ply,
        material=material,
        thickness=thickness,
        count=count or constant(1.0),
        angle=radians(ply.angle or 0.0),
        covers=tuple(ply.covers),
        span=span,
        step_root=(ply.step.root or 0.0) if ply.step else 0.0,
        step_tip=(ply.step.tip or 0.0) if ply.step else 0.0,
    )


def _check_cover(name: str, layout: Layout, path: FieldPath, report: FieldReport) -> None:
    try:
        is_empty = not resolve_cover(name, layout)
    except KeyError:
        if report.is_whole("layout", depth=1):
            report.add(path, no_such("region", name, cover_names(layout)))
        return
    if is_empty and report.is_whole("layout", depth=1):
        report.add(path, f"the layout has no {name}, so {shown(name)} covers nothing")


def _check_thickness(thickness: Spanwise, path: FieldPath, table: ReadTable, report: FieldReport) -> None:
    """A layer as thick as a chord is long was meant in millimetres."""
    chord = table.quantity("chord")
    if chord is None or np.isnan(chord).all():
        return
    limit = 0.5 * float(np.nanmax(chord))
    if thickness.value.max() >= limit:
        thickest = shown(float(thickness.value.max()))
        text = f"{thickest} m is more than half the longest chord; thickness is in m: 0.9 mm is 0.9e-3"
        report.add(path, text)


def read_mesh_rule(
    fields: MeshFields | None, *, layout: Layout, table: ReadTable | None, report: FieldReport, along: AlongReader
) -> MeshRule:
    """Make the wishes for the mesh, with defaults for what is not given.

    Parameters
    ----------
    fields : MeshFields or None
    layout : Layout
    table : ReadTable or None
    report : FieldReport
    along : AlongReader

    Returns
    -------
    MeshRule
    """
    path = ("mesh",)
    given = fields or MeshFields.model_validate({})
    size = along.read(given.size, (*path, "size"), bounds=POSITIVE)
    if size is None:
        size = constant(_usual_size(table))
    elif table is not None:
        _check_number_of_elements(size, table, (*path, "size"), report)
    plain: dict[str, Any] = {
        "order": given.order,
        "shape": given.shape,
        "surface": given.surface,
        "close_gap": given.close_gap,
        "cut_at_ply_ends": given.cut_at_ply_ends,
        "chord_error": given.chord_error,
        "turning": None if given.turning is None else radians(given.turning),
        "least_spacing": along.read(given.least_spacing, (*path, "least_spacing"), bounds=POSITIVE),
    }
    across = _across(given.across or {}, layout, (*path, "across"), report)
    return replace(MeshRule(size, across), **{name: value for name, value in plain.items() if value is not None})


def _across(wanted: Mapping[str, int], layout: Layout, path: FieldPath, report: FieldReport) -> dict[str, int]:
    """Least elements by full name; a region's own name beats a group, its name with its side beats both."""
    full = {region.full for region in region_names(layout)}
    ranked: list[tuple[int, str]] = []
    for name in wanted:
        _check_cover(name, layout, (*path, name), report)
        ranked.append((0 if name in GROUPS else 2 if name in full else 1, name))
    across: dict[str, int] = {}
    for _, name in sorted(ranked, key=lambda entry: entry[0]):
        if name in cover_names(layout):
            across |= dict.fromkeys(sorted(resolve_cover(name, layout)), wanted[name])
    return across


def _usual_size(table: ReadTable | None) -> float:
    chord = None if table is None else table.quantity("chord")
    if chord is None or np.isnan(chord).all():
        return 1.0  # the table was refused; nothing will be built
    return round(float(np.nanmax(chord)) / SIZES_PER_CHORD, 4) or float(np.nanmax(chord)) / SIZES_PER_CHORD


def _check_number_of_elements(size: Spanwise, table: ReadTable, path: FieldPath, report: FieldReport) -> None:
    z, chord = table.quantity("z"), table.quantity("chord")
    if not table.is_sound or z is None or chord is None:
        return
    grid = np.union1d(np.linspace(z[0], z[-1], 201), np.clip(size.z, z[0], z[-1]))
    girth = GIRTH * np.interp(grid, z, chord)
    # in this form no size is too small for the arithmetic
    n = _integral(grid, girth / size(grid) / size(grid)) if size.value.min() > 1e-150 else np.inf
    if n > MOST_ELEMENTS:
        coarser = float(np.sqrt(_integral(grid, girth) / MOST_ELEMENTS))
        many = f"some {n / 1e6:.3g} million" if n < 1e12 else "far too many"
        text = (
            f"{shown(float(size.value.min()))} m would make {many} elements, more than the"
            f" {MOST_ELEMENTS // 1_000_000} million that are allowed; take {_round_up(coarser)} m or more"
            f" (the usual size is {_usual_size(table):g} m)"
        )
        report.add(path, text)


def _integral(x: NDArray[np.float64], y: NDArray[np.float64]) -> float:
    return float(np.sum(0.5 * (y[1:] + y[:-1]) * np.diff(x)))


def _round_up(value: float) -> str:
    step = 10.0 ** (np.floor(np.log10(value)) - 1)
    return f"{np.ceil(value / step) * step:g}"
