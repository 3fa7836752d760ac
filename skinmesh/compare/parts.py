"""Changes of regions, stacks, plies, materials and of the whole blade, from summaries and tables of stacks."""

from __future__ import annotations

from collections.abc import Mapping
from math import degrees
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.reading import BuiltMesh
from skinmesh.compare.along import Along
from skinmesh.compare.values import CHANGED, GONE, NEW, Entry, Value
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]

_INERTIA = (("xx", 0, 0), ("yy", 1, 1), ("zz", 2, 2), ("xy", 0, 1), ("yz", 1, 2), ("xz", 0, 2))


def whole_values(old: Mapping[str, Any], new: Mapping[str, Any]) -> tuple[Value, ...]:
    """Counts, area, mass, centre and moments of the whole blade.

    Parameters
    ----------
    old, new : mapping
        Summaries as they stand.

    Returns
    -------
    tuple of Value
        Equal ones too.
    """
    values = [
        Value(name, unit, old.get(key), new.get(key))
        for name, unit, key in (("mass", "kg", "mass_kg"), ("mass as solids", "kg", "solid_mass_kg"))
    ]
    for word, key, unit in (("centre", "centre_of_mass_m", "m"), ("static moment", "first_moments_kg_m", "kg m")):
        both = [summary.get(key) or (None, None, None) for summary in (old, new)]
        values += [Value(f"{word} {axis}", unit, both[0][k], both[1][k]) for k, axis in enumerate("xyz")]
    for place in ("origin", "centre"):
        tensors = [summary.get(f"inertia_about_{place}_kg_m2") for summary in (old, new)]
        values += [
            Value(f"inertia {name} about the {place}", "kg m²", *(None if t is None else t[i][k] for t in tensors))
            for name, i, k in _INERTIA
        ]
    values.append(Value("area", "m²", old.get("area_m2"), new.get("area_m2")))
    counts = [dict(summary["counts"]) for summary in (old, new)]
    values += [
        Value(name.replace("_", " "), "", counts[0].get(name), counts[1].get(name)) for name in counts[0] | counts[1]
    ]
    return tuple(values)


def region_entries(old: BuiltMesh, new: BuiltMesh, along: tuple[Along, Along]) -> tuple[Entry, ...]:
    """Regions that came, went or changed: elements, area, mass and span.

    Parameters
    ----------
    old, new : BuiltMesh
    along : (Along, Along)
        Of both.

    Returns
    -------
    tuple of Entry
    """
    tables = []
    for built, measured in zip((old, new), along, strict=True):
        table = {}
        for region in built.summary["regions"]:
            name = str(region["name"])
            span = measured.span_of(name) if name in measured.widths else (None, None)
            table[name] = {
                "elements": region["elements"],
                "area": region["area_m2"],
                "mass": region["mass_kg"],
                "from z": span[0],
                "to z": span[1],
            }
        tables.append(table)
    return _entries(*tables, units={"area": "m²", "mass": "kg", "from z": "m", "to z": "m"})


def stack_entries(old: ShellMesh, new: ShellMesh) -> tuple[Entry, ...]:
    """Stacks that came or went, by their content, and those whose number changed.

    Parameters
    ----------
    old, new : ShellMesh

    Returns
    -------
    tuple of Entry
        The name is that of the content.
    """
    tables = [
        {
            stack.content_name: {
                "number": k + 1,
                "layers": len(stack.layers),
                "thickness": stack.thickness,
                "areal mass": stack.areal_mass,
            }
            for k, stack in enumerate(mesh.stacks)
        }
        for mesh in (old, new)
    ]
    return _entries(*tables, units={"thickness": "m", "areal mass": "kg/m²"})


def ply_entries(old: ShellMesh, new: ShellMesh, along: tuple[Along, Along]) -> tuple[Entry, ...]:
    """Plies of the schedule that came, went or changed: material, thickness, angle, layers, span, area and mass.

    Parameters
    ----------
    old, new : ShellMesh
    along : (Along, Along)
        Of both.

    Returns
    -------
    tuple of Entry
    """
    units = {"thickness": "mm", "angle": "°", "from z": "m", "to z": "m", "layers' area": "m²", "mass": "kg"}
    return _entries(_plies(old, along[0].stack_area), _plies(new, along[1].stack_area), units=units)


def _plies(mesh: ShellMesh, area: Floats) -> dict[str, dict[str, Any]]:
    n = len(mesh.stacks)
    has_stack = mesh.stack >= 0
    z = mesh.points[mesh.cells[has_stack, : mesh.n_sides], 2]
    low, high = np.full(n, np.inf), np.full(n, -np.inf)
    np.minimum.at(low, mesh.stack[has_stack], z.min(axis=1))
    np.maximum.at(high, mesh.stack[has_stack], z.max(axis=1))
    found: dict[str, dict[str, Any]] = {}
    for name, layers in _layers_by_ply(mesh).items():
        stacks = [k for k, _ in layers if np.isfinite(low[k])]
        if not stacks:
            continue
        each = [layer for _, layer in layers]
        found[name] = {
            "material": "/".join(dict.fromkeys(layer.material.name for layer in each)),
            "thickness": _range([1e3 * layer.thickness for layer in each]),
            "angle": "/".join(dict.fromkeys(f"{degrees(layer.angle):.6g}" for layer in each)),
            "most layers": int(np.bincount(stacks).max()),
            "from z": float(low[stacks].min()),
            "to z": float(high[stacks].max()),
            "layers' area": float(sum(area[k] for k, _ in layers)),
            "mass": float(sum(area[k] * layer.thickness * layer.material.density for k, layer in layers)),
        }
    return found


def _layers_by_ply(mesh: ShellMesh) -> dict[str, list[tuple[int, Any]]]:
    found: dict[str, list[tuple[int, Any]]] = {}
    for k, stack in enumerate(mesh.stacks):
        for layer in stack.layers:
            found.setdefault(layer.ply, []).append((k, layer))
    return found


def _range(values: list[float]) -> str:
    low, high = f"{min(values):.9g}", f"{max(values):.9g}"
    return low if low == high else f"{low} to {high}"


def material_entries(old: Mapping[str, Any], new: Mapping[str, Any]) -> tuple[Entry, ...]:
    """Materials that came, went or changed: constants and mass.

    Parameters
    ----------
    old, new : mapping
        Summaries as they stand.

    Returns
    -------
    tuple of Entry
    """
    tables = []
    units: dict[str, str] = {"mass": "kg"}
    for summary in (old, new):
        table = {}
        for material in summary["materials"]:
            constants = {}
            for key, value in material.items():
                name, _, unit = key.partition("_")
                unit = {"Pa": "Pa", "kg": "kg", "kg_m3": "kg/m³"}.get(unit, "")
                name = name if unit else key.replace("_", " ")
                units[name] = unit
                constants[name] = str(value) if isinstance(value, bool) else value
            table[str(constants.pop("name"))] = constants
        tables.append(table)
    return _entries(*tables, units=units)


def setting_values(old: Mapping[str, Any], new: Mapping[str, Any]) -> tuple[Value, ...]:
    """Title, hand, reference surface, order and mesh settings that changed.

    Parameters
    ----------
    old, new : mapping
        Summaries as they stand.

    Returns
    -------
    tuple of Value
    """
    names = ("title", "hand", "reference_surface", "order")
    values = [Value(name.replace("_", " "), "", old.get(name), new.get(name)) for name in names]
    rules = [_flat(summary.get("mesh") or {}) for summary in (old, new)]
    values += [Value(f"mesh.{name}", "", rules[0].get(name), rules[1].get(name)) for name in rules[0] | rules[1]]
    return tuple(value for value in values if not value.is_equal)


def _flat(rule: Mapping[str, Any]) -> dict[str, float | int | str | None]:
    found: dict[str, float | int | str | None] = {}
    for name, value in rule.items():
        if isinstance(value, Mapping):
            found |= {f"{name}.{part}": entry for part, entry in value.items()}
        else:
            found[name] = str(value) if isinstance(value, list | bool) else value
    return found


def input_entries(old: ShellMesh, new: ShellMesh) -> tuple[Entry, ...]:
    """Input files of another content, by name.

    Parameters
    ----------
    old, new : ShellMesh

    Returns
    -------
    tuple of Entry
    """
    tables = [{source.file: {"sha256": source.sha256} for source in mesh.sources} for mesh in (old, new)]
    return _entries(*tables, units={})


def _entries(
    old: Mapping[str, Mapping[str, Any]], new: Mapping[str, Mapping[str, Any]], *, units: Mapping[str, str]
) -> tuple[Entry, ...]:
    """Compare two tables by the names of their lines."""
    found = []
    for name in dict.fromkeys([*old, *new]):
        before, after = old.get(name), new.get(name)
        columns = dict.fromkeys([*(before or {}), *(after or {})])
        values = tuple(
            Value(column, units.get(column, ""), (before or {}).get(column), (after or {}).get(column))
            for column in columns
        )
        state = NEW if before is None else GONE if after is None else CHANGED
        if state != CHANGED or not all(value.is_equal for value in values):
            found.append(Entry(name, state, values))
    return tuple(found)
