"""A comparison as plain values, for JSON."""

from __future__ import annotations

import json
from math import degrees
from typing import Any

import numpy as np

from skinmesh.check.finding import MOST_NAMED
from skinmesh.compare.run import MeshDifference
from skinmesh.compare.surface import Move
from skinmesh.compare.values import Entry, Value

_DIGITS = 9


def diff_json(difference: MeshDifference, *, turn: float) -> str:
    """A comparison as JSON.

    Parameters
    ----------
    difference : MeshDifference
    turn : float, rad
        Elements whose e1 or e3 turned by more than this are counted as turned.

    Returns
    -------
    str
        Lengths in m, angles in degrees, masses in kg, unless a unit stands beside.
    """
    return json.dumps(_plain(difference, turn), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _plain(difference: MeshDifference, turn: float) -> dict[str, Any]:
    numbering, elements, stations = difference.numbering, difference.elements, difference.stations
    new = difference.new.mesh
    return {
        "old": _side(difference.old.mesh.title, str(difference.old.directory)),
        "new": _side(new.title, str(difference.new.directory)),
        "equal": difference.is_equal,
        "same_mesh": difference.is_same_mesh,
        "summary_keys_that_differ": list(difference.summary_keys),
        "numbers": {
            "kept": numbering.is_kept,
            "sentence": numbering.sentence,
            "same_node_numbers": numbering.has_same_nodes,
            "same_parametric_places": numbering.has_same_places,
            "same_elements": numbering.has_same_elements,
            "same_regions_of_elements": numbering.has_same_regions,
            "node_sets_gone": list(numbering.sets_gone),
            "node_sets_new": list(numbering.sets_new),
            "node_sets_of_other_nodes": list(numbering.sets_changed),
            "layout": list(numbering.layout),
        },
        "whole": [_value(value) for value in difference.whole],
        "stations": {
            "known": stations.is_known,
            "columns": [
                {
                    "column": column.name,
                    "unit": column.unit,
                    "stations_changed": column.stations,
                    "stations_in_both": column.of,
                    "z_m": list(column.z),
                    "difference": None if column.difference is None else [_number(v) for v in column.difference],
                    "share": None if column.share is None else [_number(v) for v in column.share],
                    "words": column.words,
                }
                for column in stations.columns
            ],
            "changed": [_entry(entry) for entry in stations.entries],
        },
        "regions": [_entry(entry) for entry in difference.regions],
        "plies": [_entry(entry) for entry in difference.plies],
        "stacks": [_entry(entry) for entry in difference.stacks],
        "materials": [_entry(entry) for entry in difference.materials],
        "settings": [_value(value) for value in difference.settings],
        "inputs": [_entry(entry) for entry in difference.inputs],
        "warnings_gone": list(difference.warnings_gone),
        "warnings_new": list(difference.warnings_new),
        "surface": {
            "nodes": None if difference.surface.nodes is None else _move(difference.surface.nodes),
            "shape": _move(difference.surface.shape)
            | {
                "furthest_outside_m": _number(max(float(difference.surface.height.max(initial=0.0)), 0.0)),
                "furthest_inside_m": _number(max(float(-difference.surface.height.min(initial=0.0)), 0.0)),
            },
        },
        "elements": {
            "paired": elements.pairs.way,
            "compared": len(elements.pairs.new),
            "of": len(new.cells),
            "other_stack": int(np.count_nonzero(elements.stack_changed)),
            "stack_changes": [
                {
                    "what": change.what,
                    "elements": change.elements,
                    "area_m2": _number(change.area),
                    "mass_kg": _number(change.mass),
                    "largest_thickness_m": _number(change.largest_thickness),
                    "regions": list(change.regions),
                    "z_m": [_number(z) for z in change.z],
                }
                for change in elements.stacks
            ],
            "limit_of_turn_deg": _number(degrees(turn)),
            **{
                name: _turned(angle, turn, new.element_number[elements.pairs.new])
                for name, angle in (("e1_turned", elements.turned), ("e3_turned", elements.tilted))
            },
        },
        "along_the_span": {
            name: {"z_m": _number(found.z), "old": _number(found.old), "new": _number(found.new)}
            for name, found in difference.largest.items()
        },
        "files_that_differ": list(difference.files),
        "files_in_one_only": list(difference.files_in_one),
    }


def _side(title: str, directory: str) -> dict[str, str]:
    return {"title": title, "directory": directory}


def _value(value: Value) -> dict[str, Any]:
    return {"name": value.name, "unit": value.unit, "old": value.old, "new": value.new}


def _entry(entry: Entry) -> dict[str, Any]:
    return {"name": entry.name, "state": entry.state, "values": [_value(value) for value in entry.values]}


def _move(move: Move) -> dict[str, Any]:
    return {
        "way": move.way,
        "points": len(move.distance),
        "largest_m": _number(move.largest),
        "rms_m": _number(move.rms),
        "largest_at": move.where,
    }


def _turned(angle: Any, turn: float, numbers: Any) -> dict[str, Any]:
    beyond = np.flatnonzero(angle > turn)
    worst = beyond[np.argsort(-angle[beyond], kind="stable")]
    return {
        "elements": len(beyond),
        "largest_deg": _number(degrees(float(angle.max(initial=0.0)))),
        "rms_deg": _number(degrees(float(np.sqrt(np.mean(angle**2)))) if len(angle) else 0.0),
        "worst": numbers[worst[:MOST_NAMED]].tolist(),
    }


def _number(value: float) -> float:
    return float(f"{value:.{_DIGITS}g}") + 0.0
