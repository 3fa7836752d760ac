"""The two tables beside the mesh: the plies of every stack as CSV, and a summary of the build as JSON."""

from __future__ import annotations

import csv
import json
import platform
from collections.abc import Callable, Mapping
from importlib.metadata import PackageNotFoundError, version
from io import StringIO
from math import degrees
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import MeshRule, Source, StationTable
from skinmesh.definition.spanwise import Spanwise
from skinmesh.laminate.code import LaminateCodes, laminate_codes
from skinmesh.laminate.material import Material
from skinmesh.mesh.measure import mass_properties, solid_mass
from skinmesh.mesh.shellmesh import MeshOrigin, ShellMesh
from skinmesh.wording import CAUTION

STACK_COLUMNS = (
    "stack",
    "content",
    "order",
    "ply",
    "material",
    "thickness_m",
    "angle_deg",
    "letter",
    "laminate_code",
)
_DIGITS = 12
"""Significant digits of a number in the summary; enough for every use, and free of the noise of sums."""
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\n")


def stacks_table(mesh: ShellMesh) -> str:
    """The plies of every stack as comma-separated values, one row a ply, from the +e3 face inwards.

    ``stack`` is the one-based number that the other files carry, ``content`` a short name that depends on the content
    alone, ``letter`` what the laminate code calls a ply of this material and thickness. A name that a spreadsheet would
    take for a formula begins with an apostrophe, which shows it as text.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    str
        The header alone where the mesh has no stacks.
    """
    written = laminate_codes(mesh.stacks)
    text = StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(STACK_COLUMNS)
    for number, (stack, code, letters) in enumerate(
        zip(mesh.stacks, written.codes, written.letters, strict=True), start=1
    ):
        table.writerows(
            (
                number,
                stack.content_name,
                order,
                _as_text(layer.ply),
                _as_text(layer.material.name),
                f"{layer.thickness:.9g}",
                f"{layer.angle_degrees:.9g}",
                letter,
                code,
            )
            for order, (layer, letter) in enumerate(zip(stack.layers, letters, strict=True), start=1)
        )
    return text.getvalue()


def summary_table(mesh: ShellMesh) -> str:
    """What was built, in numbers: counts, names behind the integers, areas, mass and moments, warnings, provenance.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    str
        JSON with the same bytes for the same mesh and the same versions.
    """
    return json.dumps(_summary(mesh), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _summary(mesh: ShellMesh) -> dict[str, Any]:
    mass = mass_properties(mesh)
    written = laminate_codes(mesh.stacks)
    report = mesh.report
    return {
        "title": mesh.title,
        "caution": " ".join(CAUTION),
        "hand": mesh.hand,
        "reference_surface": mesh.surface,
        "order": mesh.order,
        "mesh": None if report.mesh_rule is None else _mesh_rule(report.mesh_rule),
        "divisions_kept_from": None if report.divided_by is None else _origin(report.divided_by),
        "counts": {
            "nodes": mesh.n_nodes,
            "elements": len(mesh.cells),
            "quadrilaterals": len(mesh.cells) if mesh.n_sides == 4 else 0,
            "triangles": len(mesh.cells) if mesh.n_sides == 3 else 0,
            "regions": len(mesh.regions),
            "stacks": len(mesh.stacks),
            "elements_without_plies": int(np.count_nonzero(mesh.stack < 0)),
            "node_sets": len(mesh.node_sets),
        },
        "area_m2": _number(mass.area),
        "mass_kg": _number(mass.mass),
        "solid_mass_kg": _number(solid_mass(mesh)),
        "centre_of_mass_m": _numbers(mass.centre),
        "first_moments_kg_m": _numbers(mass.first_moments),
        "inertia_about_origin_kg_m2": _numbers(mass.inertia_origin),
        "inertia_about_centre_kg_m2": _numbers(mass.inertia_centre),
        "notes": {
            "mass_kg": "area on the reference surface x areal mass",
            "solid_mass_kg": "every layer at its own depth, as a solver finds it that builds the laminate up as solids",
            "inertia": "tensor: the products of inertia carry the minus sign",
        },
        "regions": _regions(mesh, mass.region_area, mass.region_mass),
        "stacks": _stacks(mesh, written, mass.stack_area),
        "laminate_code_letters": dict(written.legend),
        "materials": [
            {"name": name, "mass_kg": _number(value), **_constants(mesh.materials[name])}
            for name, value in mass.material_mass.items()
        ],
        "node_sets": [{"name": name, "nodes": len(mesh.node_set(name))} for name in mesh.node_sets],
        "element_sets": [{"name": name, "elements": len(found)} for name, found in mesh.element_sets.items()],
        "rows": [{"row": k, "label": label, "z_m": _number(z)} for k, (label, z) in enumerate(report.rows)],
        "seams": [{"seam": k, "label": label} for k, label in enumerate(report.seams)],
        "stations_m": _numbers(report.stations),
        "stations": None if report.table is None else _station_table(report.table),
        "ply_areas_m2": {name: _number(value) for name, value in report.ply_areas.items()},
        "largest_ply_end_move_m": _number(report.ply_end_move),
        "largest_ply_end_move_at": report.ply_end_place,
        "warnings": list(report.warnings),
        "versions": _versions(),
        "inputs": _inputs(mesh.sources),
    }


def _inputs(sources: tuple[Source, ...]) -> list[dict[str, str]]:
    return [{"file": source.file, "sha256": source.sha256} for source in sources]


def _origin(origin: MeshOrigin) -> dict[str, Any]:
    """The build that divided the mesh; sizes in the part ``mesh`` are then not those of the divisions."""
    return {"title": origin.title, "inputs": _inputs(origin.sources)}


def _mesh_rule(rule: MeshRule) -> dict[str, Any]:
    """The part ``mesh`` of the blade file, with what it left to the defaults."""
    return {
        "size": _along(rule.size),
        "across": dict(rule.across),
        "order": rule.order,
        "shape": rule.shape,
        "surface": rule.surface,
        "close_gap": _number(rule.close_gap),
        "cut_at_ply_ends": rule.cut_at_ply_ends,
        "chord_error": _number(rule.chord_error),
        "turning": _number(degrees(rule.turning)),
        "least_spacing": None if rule.least_spacing is None else _along(rule.least_spacing),
    }


def _station_table(table: StationTable) -> list[dict[str, Any]]:
    """The station table, one entry a station; None for a profile that is blended, or a ratio that was not given."""
    columns = {
        "z_m": table.z,
        "chord_m": table.chord,
        "twist_deg": np.degrees(table.twist),
        "pitch_axis": table.pitch_axis,
        "thickness_ratio": table.thickness_ratio,
        "prebend_m": table.prebend,
        "sweep_m": table.sweep,
    }
    return [
        {
            **{name: None if np.isnan(column[k]) else _number(column[k]) for name, column in columns.items()},
            "profile": profile,
        }
        for k, profile in enumerate(table.profile)
    ]


def _along(quantity: Spanwise) -> float | list[Any]:
    """A number, or pairs of z and value."""
    if quantity.is_constant:
        return _number(float(quantity.value[0]))
    return _numbers(np.column_stack([quantity.z, quantity.value]))


def _regions(mesh: ShellMesh, area: Mapping[str, float], mass: Mapping[str, float]) -> list[dict[str, Any]]:
    elements = np.bincount(mesh.region, minlength=len(mesh.regions))
    developed = mesh.report.developed_areas
    return [
        {
            "number": number,
            "name": region.name,
            "kind": region.kind,
            "side": region.side,
            "elements": int(count),
            "area_m2": _number(area[region.name]),
            "developed_area_m2": _number(developed[region.name]) if region.name in developed else None,
            "mass_kg": _number(mass[region.name]),
        }
        for number, (region, count) in enumerate(zip(mesh.regions, elements, strict=True), start=1)
    ]


def _stacks(mesh: ShellMesh, written: LaminateCodes, area: NDArray[np.float64]) -> list[dict[str, Any]]:
    elements = np.bincount(mesh.stack[mesh.stack >= 0], minlength=len(mesh.stacks))
    return [
        {
            "number": k + 1,
            "content": stack.content_name,
            "laminate_code": written.codes[k],
            "plies": len(stack.layers),
            "thickness_m": _number(stack.thickness),
            "areal_mass_kg_m2": _number(stack.areal_mass),
            "elements": int(elements[k]),
            "area_m2": _number(area[k]),
        }
        for k, stack in enumerate(mesh.stacks)
    ]


def _constants(material: Material) -> dict[str, Any]:
    elastic = ("E1", "E2", "E3", "G12", "G13", "G23")
    ratios = ("nu12", "nu13", "nu23")
    return {
        **{f"{name}_Pa": getattr(material, name) for name in elastic},
        **{name: getattr(material, name) for name in ratios},
        "density_kg_m3": material.density,
        "is_isotropic": material.is_isotropic,
        "source": material.source,
    }


def _versions() -> dict[str, str]:
    packages = ("skinmesh", "numpy", "scipy", "gmsh", "meshio", "shapely")
    return {name: _version(name) for name in packages} | {"python": platform.python_version()}


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:  # a system's own build of a library may carry no metadata
        return "unknown"


def _number(value: float) -> float:
    return float(f"{value:.{_DIGITS}g}") + 0.0


def _numbers(values: NDArray[np.float64]) -> list[Any]:
    """A vector or tensor, its entries nought where they are nothing beside the largest."""
    size = np.abs(values).max(initial=0.0)
    listed: list[Any] = np.where(np.abs(values) < 10.0**-_DIGITS * size, 0.0, values).tolist()
    return _rounded(listed)


def _rounded(listed: list[Any]) -> list[Any]:
    return [_rounded(entry) if isinstance(entry, list) else _number(entry) for entry in listed]


def _as_text(name: str) -> str:
    """A name that no spreadsheet takes for a formula."""
    # Readers of CSV refuse a lone carriage return.
    name = name.replace("\r\n", "\n").replace("\r", "\n")
    return f"'{name}" if name.startswith(_FORMULA_STARTS) else name


TABLES: Mapping[str, Callable[[ShellMesh], str]] = {"stacks.csv": stacks_table, "summary.json": summary_table}
"""The tables that stand beside every mesh, by the ending of their files."""
