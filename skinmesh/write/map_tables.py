"""The files of a mesh map: what an owner of loads, results and sets of an earlier mesh needs on the new one."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.carry import MeshMap
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.kept import MatchedLines
from skinmesh.write.registry import Writer

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MAP_FILES = ("map-nodes.csv", "map-elements.csv", "map.json")
_AT_ONCE = 20_000


def map_files(carried: MeshMap) -> Mapping[str, Writer]:
    """Writers of a map's files, as extras of :func:`skinmesh.write`.

    Parameters
    ----------
    carried : MeshMap
        Its new mesh is the one that is written.

    Returns
    -------
    mapping of str to callable
        By the ending of the file: those of ``MAP_FILES``.
    """
    texts = (nodes_table, elements_table, map_summary)
    return {ending: partial(_write, make, carried) for ending, make in zip(MAP_FILES, texts, strict=True)}


def _write(make: Any, carried: MeshMap, _mesh: ShellMesh, path: Path) -> None:
    path.write_text(make(carried), encoding="utf-8", newline="\n")


def nodes_table(carried: MeshMap) -> str:
    """One row an old node, in the order of the old mesh.

    ``place`` is 'same' where the new node has the very parametric coordinates of the old one, 'near' where it is the
    nearest of the element that holds the place, 'gone' where the new mesh has no such place: then the rest is blank.
    ``row_offset`` and ``seam_offset`` are its coordinates less those of the place, ``distance_m`` its distance from the
    old node, the change of the surface included. A force at the old node may go to the corners of ``in_element`` by
    their shares, whose sum is 1.

    Parameters
    ----------
    carried : MeshMap

    Returns
    -------
    str
        Comma-separated values with numbers of solvers, one-based.
    """
    nodes, new = carried.nodes, carried.new
    k = new.n_sides
    corners = [name for i in range(1, k + 1) for name in (f"corner_{i}", f"share_{i}")]
    header = ["old_node", "place", "new_node", "row_offset", "seam_offset", "distance_m", "in_element", *corners]
    there = ~nodes.is_gone
    place = np.where(nodes.is_same, "same", "near")[there].tolist()
    held = new.cells[nodes.element[there], :k]
    columns: list[Sequence[Any]] = [
        carried.old.node_number[: carried.old.n_nodes][there].tolist(),
        place,
        new.node_number[nodes.nearest[there]].tolist(),
        *(values[there].tolist() for values in (nodes.row_offset, nodes.seam_offset, nodes.distance)),
        new.element_number[nodes.element[there]].tolist(),
    ]
    for i in range(k):
        columns += [new.node_number[held[:, i]].tolist(), nodes.weight[there, i].tolist()]
    pattern = "%d,%s,%d,%.6g,%.6g,%.6g,%d" + ",%d,%.9g" * k
    lines = np.empty(len(there), dtype=object)
    lines[there] = _formatted(pattern, columns)
    gone = np.flatnonzero(~there)
    blanks = "," * (len(header) - 2)
    lines[gone] = [f"{number},gone{blanks}" for number in carried.old.node_number[gone].tolist()]
    return "\n".join([",".join(header), *lines.tolist(), ""])


def elements_table(carried: MeshMap) -> str:
    """One row a pair of elements that share places, by the new ones; then the old ones whose place is gone.

    All rows of an element add up to 1 in its share, so that blank numbers count: they stand for places that the other
    mesh does not have. A pressure, a strain or a stress of a new element is the sum of ``share_of_new`` times that of
    the old one; of a force of an old element ``share_of_old`` goes to each new one.

    Parameters
    ----------
    carried : MeshMap

    Returns
    -------
    str
        Comma-separated values with numbers of solvers, one-based.
    """
    pairs = carried.elements
    number = [
        np.where(own >= 0, mesh.element_number[own], -1)
        for own, mesh in ((pairs.new, carried.new), (pairs.old, carried.old))
    ]
    both = (pairs.new >= 0) & (pairs.old >= 0)
    lines = np.empty(len(both), dtype=object)
    for own, pattern, columns in (
        (both, "%d,%d,%.9g,%.9g", (*number, pairs.share_of_new, pairs.share_of_old)),
        (pairs.old < 0, "%d,,%.9g,", (number[0], pairs.share_of_new)),
        (pairs.new < 0, ",%d,,%.9g", (number[1], pairs.share_of_old)),
    ):
        lines[own] = _formatted(pattern, [column[own].tolist() for column in columns])
    return "\n".join(["new_element,old_element,share_of_new,share_of_old", *lines.tolist(), ""])


def map_summary(carried: MeshMap) -> str:
    """What the map rests on, what is gone and what is new, and how far nodes lie from their places.

    Parameters
    ----------
    carried : MeshMap

    Returns
    -------
    str
        JSON.
    """
    return json.dumps(_summary(carried), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _summary(carried: MeshMap) -> dict[str, Any]:
    old, new, nodes, pairs = carried.old, carried.new, carried.nodes, carried.elements
    gone, same = nodes.is_gone, nodes.is_same
    distance = nodes.distance[~gone]
    return {
        "old": _mesh(old),
        "new": _mesh(new),
        "is_identity": carried.is_identity,
        "nodes": {
            "same": int(same.sum()),
            "near": int((~gone & ~same).sum()),
            "gone": int(gone.sum()),
            "largest_distance_m": float(f"{distance.max(initial=0.0):.6g}"),
        },
        "elements": {
            "old_with_places_gone": len(np.unique(pairs.old[pairs.new < 0])),
            "new_with_places_that_were_not_there": len(np.unique(pairs.new[pairs.old < 0])),
        },
        "rows": _lines(carried.rows, [[label for label, _ in mesh.report.rows] for mesh in (old, new)]),
        "seams": _lines(carried.seams, [list(mesh.report.seams) for mesh in (old, new)]),
        "regions": _names([region.name for region in old.regions], [region.name for region in new.regions]),
        "node_sets": _names(list(old.node_sets), list(new.node_sets)),
    }


def _mesh(mesh: ShellMesh) -> dict[str, Any]:
    return {
        "title": mesh.title,
        "nodes": mesh.n_nodes,
        "elements": len(mesh.cells),
        "inputs": [{"file": source.file, "sha256": source.sha256} for source in mesh.sources],
    }


def _lines(matched: MatchedLines, labels: list[list[str]]) -> dict[str, Any]:
    return {
        "matched": [{"old": labels[0][i], "new": labels[1][j]} for i, j in matched.pairs],
        "gone": list(matched.gone),
        "new": list(matched.new),
    }


def _names(before: list[str], now: list[str]) -> dict[str, list[str]]:
    return {
        "in_both": [name for name in before if name in now],
        "gone": [name for name in before if name not in now],
        "new": [name for name in now if name not in before],
    }


def _formatted(pattern: str, columns: Sequence[Sequence[Any]]) -> list[str]:
    """A line a row; formatted many at once, since one by one takes thrice as long."""
    rows = list(zip(*columns, strict=True))
    lines: list[str] = []
    for start in range(0, len(rows), _AT_ONCE):
        part = rows[start : start + _AT_ONCE]
        lines += ("\n".join([pattern] * len(part)) % tuple(value for row in part for value in row)).split("\n")
    return lines
