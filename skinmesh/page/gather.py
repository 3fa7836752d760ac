"""Everything that the page shows: words and numbers as plain values, the mesh as arrays."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.reading import BuiltMesh
from skinmesh.laminate.stack import Stack
from skinmesh.mesh.quality import aspect_ratio, corner_points, scaled_jacobian
from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.page.plies import ply_table
from skinmesh.page.spanwise import beam_along, shape_along
from skinmesh.show.develop import DevelopedMesh, develop
from skinmesh.show.outline import border_edges
from skinmesh.show.paint import round_levels
from skinmesh.show.palette import AXIS_COLOURS, BARE, MATERIAL_TONES, part_colours, part_name, scale_colours
from skinmesh.wording import CAUTION

TRIAL_FILE = "trial.json"
_LARGEST_ASPECT = 100.0
_UNIT = 32767
_MOST_SEAM_POINTS = 600


def gather_words(
    built: BuiltMesh, *, findings: list[dict[str, Any]], trial: Mapping[str, Any] | None
) -> dict[str, Any]:
    """What the page says, for JSON.

    Parameters
    ----------
    built : BuiltMesh
    findings : list of dict
        The checks, as ``checks.json`` has them.
    trial : mapping, optional
        The trial run, as ``trial.json`` has it.

    Returns
    -------
    dict
    """
    mesh, summary = built.mesh, built.summary
    developed = develop(mesh)
    plies = list(dict.fromkeys(layer.ply for stack in mesh.stacks for layer in stack.layers))
    materials = list(mesh.materials)
    return {
        "title": mesh.title,
        "stem": mesh.stem,
        "caution": " ".join(CAUTION),
        "hand": mesh.hand,
        "surface": mesh.surface,
        "order": mesh.order,
        "facts": _facts(built),
        "regions": _regions(built),
        "stacks": [
            _stack(stack, told, plies=plies, materials=materials)
            for stack, told in zip(mesh.stacks, summary["stacks"], strict=True)
        ],
        "plies": plies,
        "ply_table": ply_table(mesh),
        "materials": [
            {"name": name, "colour": MATERIAL_TONES[k % len(MATERIAL_TONES)], "density": mesh.materials[name].density}
            for k, name in enumerate(materials)
        ],
        "colours": {"bare": BARE, "axes": list(AXIS_COLOURS), "stack": _hex(8)},
        "values": _value_scales(mesh),
        "seams": _seams(mesh, developed),
        "skin_arc": developed.skin.tolist(),
        "web_heights": {str(region): height for region, height in developed.heights.items()},
        "rows": [{"label": label, "z": z} for label, z in mesh.report.rows],
        "stations": mesh.report.stations.tolist(),
        "shape": shape_along(mesh),
        "beam": beam_along(mesh),
        "findings": findings,
        "trial": trial,
        "warnings": list(mesh.report.warnings),
        "ply_end": [mesh.report.ply_end_move, mesh.report.ply_end_place],
        "versions": dict(summary.get("versions", {})),
        "inputs": [{"file": source.file, "sha256": source.sha256} for source in mesh.sources],
    }


def gather_arrays(mesh: ShellMesh) -> dict[str, NDArray[Any]]:
    """What the page draws: corner nodes, elements, and what belongs to each.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    dict of str to array
        float32 and integers. ``e1`` and ``e3`` are shares of 32 767; ``node_arc`` holds the arc of every node, and
        ``other_corner``, ``other_arc`` that of the corners (element × corners + corner) which see it otherwise: on
        webs, and where trailing edges are joined.
    """
    corners = mesh.cells[:, : mesh.n_sides]
    arc = develop(mesh).arc.astype(np.float32)
    is_plain = np.array([region.kind not in ("web", "base") for region in mesh.regions])[mesh.region]
    node_arc = np.zeros(mesh.n_corners, dtype=np.float32)
    for chosen in (~is_plain, is_plain):
        node_arc[corners[chosen]] = arc[chosen]
    other = np.flatnonzero((node_arc[corners] != arc).ravel())
    shape = corner_points(mesh)
    return {
        "points": mesh.points[: mesh.n_corners].astype(np.float32),
        "cells": corners.astype(np.int32),
        "region": mesh.region.astype(np.uint16),
        "stack": mesh.stack.astype(np.int32),
        "number": mesh.element_number.astype(np.int32),
        "offset": mesh.offset.astype(np.float32),
        "e1": np.rint(mesh.e1 * _UNIT).astype(np.int16),
        "e3": np.rint(mesh.e3 * _UNIT).astype(np.int16),
        "jacobian": scaled_jacobian(shape).astype(np.float32),
        "aspect": aspect_ratio(shape).astype(np.float32),
        "seam": mesh.seam[: mesh.n_corners].astype(np.float32),
        "row": mesh.row[: mesh.n_corners].astype(np.float32),
        "sheet": mesh.sheet[: mesh.n_corners].astype(np.uint16),
        "node_arc": node_arc,
        "other_corner": other.astype(np.int32),
        "other_arc": arc.ravel()[other],
        "region_borders": border_edges(mesh, mesh.region).astype(np.int32),
        "stack_borders": border_edges(mesh, mesh.stack).astype(np.int32),
    }


def read_trial(built: BuiltMesh) -> Mapping[str, Any] | None:
    """The trial run beside a mesh; None where there is none, or one of another mesh."""
    path = built.file(TRIAL_FILE)
    if not path.is_file() or path.stat().st_mtime < built.file("vtu").stat().st_mtime:
        return None
    found = json.loads(path.read_text(encoding="utf-8"))
    return {
        "solver": found["solver"],
        "mass": found["mass_kg"],
        "static": [
            {key: case[key] for key in ("case", "compared", "solver", "theory", "difference")}
            for case in found["static"]
        ],
        "modes": [
            {key: mode[key] for key in ("kind", "solver_Hz", "theory_Hz", "difference")} for mode in found["modes"]
        ],
        "failures": found["failures"],
        "remarks": found["remarks"],
    }


def fresh_checks(built: BuiltMesh, path: Path) -> list[dict[str, Any]] | None:
    """The findings of a checks file; None where there is none, or an older one than the mesh."""
    files = [built.file(ending) for ending in ("vtu", "stacks.csv", "summary.json", "inp", "bdf")]
    newest = max(file.stat().st_mtime for file in files if file.is_file())
    if not path.is_file() or path.stat().st_mtime < newest:
        return None
    found: list[dict[str, Any]] = json.loads(path.read_text(encoding="utf-8"))["findings"]
    return found


def finding_words(finding: Mapping[str, Any]) -> dict[str, Any]:
    """The parts of a finding that the page shows."""
    names = ("check", "verdict", "measured", "limit", "source", "where", "n_elements", "worst_elements")
    return {name: finding.get(name) for name in names}


def _facts(built: BuiltMesh) -> dict[str, Any]:
    mesh, summary = built.mesh, built.summary
    return {
        "elements": len(mesh.cells),
        "nodes": mesh.n_nodes,
        "sides": mesh.n_sides,
        "area": summary["area_m2"],
        "mass": summary["mass_kg"] if mesh.stacks else None,
        "centre": summary.get("centre_of_mass_m") if mesh.stacks else None,
        "length": float(np.ptp(mesh.points[:, 2])),
    }


def _regions(built: BuiltMesh) -> list[dict[str, Any]]:
    mesh = built.mesh
    colours = part_colours(mesh.regions)
    return [
        {
            "name": region.name,
            "part": part_name(region),
            "kind": region.kind,
            "side": region.side,
            "colour": colours[part_name(region)],
            "elements": told["elements"],
            "area": told["area_m2"],
            "mass": told["mass_kg"],
        }
        for region, told in zip(mesh.regions, built.summary["regions"], strict=True)
    ]


def _stack(stack: Stack, told: Mapping[str, Any], *, plies: list[str], materials: list[str]) -> dict[str, Any]:
    return {
        "content": stack.content_name,
        "code": told.get("laminate_code", ""),
        "thickness": stack.thickness,
        "areal_mass": stack.areal_mass,
        "elements": told.get("elements"),
        "layers": [
            [plies.index(layer.ply), materials.index(layer.material.name), layer.thickness, layer.angle_degrees]
            for layer in stack.layers
        ],
    }


def _value_scales(mesh: ShellMesh) -> dict[str, Any]:
    """Steps of every value that colours elements, by the key of its choice."""
    shape = corner_points(mesh)
    covered = mesh.stack != NO_STACK
    values = {
        "thickness": (mesh.thickness[covered] * 1e3, "Thickness of the laminate, mm", False, False),
        "plies": (mesh.n_plies[covered].astype(float), "Layers of the laminate", True, False),
        "jacobian": (scaled_jacobian(shape), "Scaled Jacobian; 1 is a rectangle", False, True),
        "aspect": (np.minimum(aspect_ratio(shape), _LARGEST_ASPECT), "Aspect ratio; 1 is a square", False, False),
    }
    scales = {}
    for name, (found, title, whole, dark_is_low) in values.items():
        if not len(found):
            continue
        levels = round_levels(float(found.min()), float(found.max()), whole=whole)
        colours = _hex(len(levels) - 1)
        scales[name] = {
            "title": title,
            "levels": levels.tolist(),
            "colours": colours[::-1] if dark_is_low else colours,
        }
    return scales


def _seams(mesh: ShellMesh, developed: DevelopedMesh) -> list[dict[str, Any]]:
    seams = []
    for label, line in zip(mesh.report.seams, developed.seams, strict=True):
        chosen = np.unique(np.linspace(0, max(len(line) - 1, 0), min(len(line), _MOST_SEAM_POINTS)).round().astype(int))
        seams.append({"label": label, "line": np.round(line[chosen], 5).tolist()})
    return seams


def _hex(n: int) -> list[str]:
    return ["#" + "".join(f"{round(255 * part):02x}" for part in colour) for colour in scale_colours(n).tolist()]
