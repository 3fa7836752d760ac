"""A built mesh read back from its files."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from io import StringIO
from itertools import groupby
from math import isfinite, radians
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import Source
from skinmesh.errors import InputError, Problem
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.shellmesh import BuildReport, MeshOrigin, Region, ShellMesh
from skinmesh.write.formats.vtu import VtuContent, read_vtu

Floats = NDArray[np.float64]

SUMMARY = ".summary.json"
_CELL_ARRAYS = ("region", "stack", "offset", "e1", "e2", "e3", "element", "thickness", "areal_mass", "plies", "side")
_POINT_ARRAYS = ("sheet", "row", "seam", "node")
_NODE_SET = "node set: "
_SPREADSHEET_MARK = ("'=", "'+", "'-", "'@", "'\t", "'\n")


@dataclass(frozen=True, eq=False)
class BuiltMesh:
    """A built mesh and what its files say beside it.

    Attributes
    ----------
    directory : Path
    mesh : ShellMesh
        Geometry, sets and axes from the VTU; the plies of its stacks from the table of stacks.
    has_mid_nodes : bool
        Whether the files hold mid nodes. Those of ``mesh`` lie in the middle of straight edges where not.
    vtu : VtuContent
        The arrays as they stand in the VTU.
    contents : tuple of str
        Short name of every stack, as the table of stacks gives it.
    summary : mapping
        The summary as it stands.
    """

    directory: Path
    mesh: ShellMesh
    has_mid_nodes: bool
    vtu: VtuContent
    contents: tuple[str, ...]
    summary: Mapping[str, Any]

    def file(self, ending: str) -> Path:
        """Path of one of the mesh's files."""
        return self.directory / f"{self.mesh.stem}.{ending}"


def read_built_mesh(directory: Path) -> BuiltMesh:
    """Read a mesh from ``stem.vtu``, ``stem.stacks.csv`` and ``stem.summary.json`` of a directory.

    Parameters
    ----------
    directory : Path

    Returns
    -------
    BuiltMesh

    Raises
    ------
    InputError
        A file is missing, cannot be read, or lacks something that a mesh needs.
    """
    stem = _stem_in(directory)
    summary = _read(directory / f"{stem}{SUMMARY}", _parsed_summary)
    vtu = _read_vtu(directory / f"{stem}.vtu")
    _told(f"{stem}{SUMMARY}", _require, summary)
    materials = _told(f"{stem}{SUMMARY}", _materials, summary)
    table = directory / f"{stem}.stacks.csv"
    stacks, contents = _read(table, lambda text: _stacks(table.name, text, materials))
    mesh = _told(f"{stem}{SUMMARY}", _assemble, stem, summary, vtu, stacks, materials)
    return BuiltMesh(directory, mesh, vtu.cells.shape[1] >= 6, vtu, contents, summary)


def _stem_in(directory: Path) -> str:
    if not directory.is_dir():
        kind = "is a file" if directory.exists() else "is not there"
        raise InputError([Problem(str(directory), 0, "", f"{kind}; wanted is a folder that 'skinmesh build' wrote")])
    found = sorted(path.name for path in directory.iterdir() if path.name.endswith(SUMMARY))
    if not found:
        text = f"holds no file *{SUMMARY}; wanted is a folder that 'skinmesh build' wrote"
        raise InputError([Problem(str(directory), 0, "", text)])
    if len(found) > 1:
        text = f"holds {len(found)} meshes ({', '.join(found)}); give each a folder of its own"
        raise InputError([Problem(str(directory), 0, "", text)])
    return found[0].removesuffix(SUMMARY)


def _read(path: Path, parse: Callable[[str], Any]) -> Any:
    try:
        return parse(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise InputError(
            [Problem(path.name, 0, "", f"cannot be read: {error.strerror}; build the mesh again")]
        ) from error
    except (ValueError, csv.Error) as error:
        raise InputError([Problem(path.name, 0, "", f"cannot be read: {error}; build the mesh again")]) from error


def _read_vtu(path: Path) -> VtuContent:
    try:
        vtu = read_vtu(path)
    except OSError as error:
        text = f"cannot be read: {error.strerror}; build the mesh again, with vtu among the formats"
        raise InputError([Problem(path.name, 0, "", text)]) from error
    problems = [
        Problem(path.name, 0, name, f"this {kind} array is missing; build the mesh again")
        for kind, wanted, arrays in (
            ("cell", _CELL_ARRAYS, vtu.cell_arrays),
            ("point", _POINT_ARRAYS, vtu.point_arrays),
        )
        for name in wanted
        if name not in arrays
    ]
    problems += [
        Problem(path.name, 0, name, "holds a value that is no number; build the mesh again")
        for name, array in {"points": vtu.points, **vtu.cell_arrays, **vtu.point_arrays}.items()
        if not np.all(np.isfinite(array.astype(float)))
    ]
    if len(vtu.cells) and not 0 <= int(vtu.cells.min()) <= int(vtu.cells.max()) < len(vtu.points):
        problems.append(Problem(path.name, 0, "cells", "name a node that is not there; build the mesh again"))
    if not len(vtu.cells):
        problems.append(Problem(path.name, 0, "cells", "there are none"))
    if problems:
        raise InputError(problems)
    return vtu


def _told(file: str, make: Callable[..., Any], *arguments: Any) -> Any:
    """What a function makes of a parsed file; a field that is missing or of a wrong kind is an input error."""
    try:
        return make(*arguments)
    except KeyError as error:
        raise InputError([Problem(file, 0, str(error.args[0]), "is missing; build the mesh again")]) from error
    except (TypeError, ValueError, IndexError) as error:
        raise InputError([Problem(file, 0, "", f"does not fit: {error}; build the mesh again")]) from error


def _parsed_summary(text: str) -> Mapping[str, Any]:
    summary = json.loads(text, parse_constant=_refuse_constant)
    if not isinstance(summary, dict):
        raise ValueError("the summary must be an object")
    return summary


def _refuse_constant(text: str) -> float:
    raise ValueError(f"{text} is no number")


def _require(summary: Mapping[str, Any]) -> None:
    """Touch what the checks will look for later, so that a gap is found here."""
    dict(summary["counts"])
    for key in ("mass_kg", "area_m2"):
        float(summary[key])
        for region in summary["regions"]:
            float(region[key])
    for region in summary["regions"]:
        int(region["elements"])
    for stack in summary["stacks"]:
        str(stack["content"])


def _materials(summary: Mapping[str, Any]) -> dict[str, Material]:
    moduli = ("E1", "E2", "E3", "G12", "G13", "G23")
    ratios = ("nu12", "nu13", "nu23")
    return {
        entry["name"]: Material(
            name=entry["name"],
            density=float(entry["density_kg_m3"]),
            is_isotropic=bool(entry["is_isotropic"]),
            source=str(entry["source"]),
            **{name: float(entry[f"{name}_Pa"]) for name in moduli},
            **{name: float(entry[name]) for name in ratios},
        )
        for entry in summary["materials"]
    }


def _stacks(file: str, text: str, materials: Mapping[str, Material]) -> tuple[tuple[Stack, ...], tuple[str, ...]]:
    stacks, contents, problems = [], [], []
    rows = list(csv.DictReader(StringIO(text), strict=True))
    for wanted, (number, group) in enumerate(groupby(rows, key=lambda row: row["stack"]), start=1):
        layers, content = [], ""
        if number != str(wanted):
            problems.append(Problem(file, 0, f"stack {number}", f"out of order; here should be stack {wanted}"))
        for row in group:
            content = row["content"]
            try:
                material = materials[_name(row["material"])]
                layer = _layer(row, material)
            except KeyError:
                problems.append(Problem(file, 0, f"stack {number}", f"no material '{row['material']}' in the summary"))
            except (TypeError, ValueError):
                problems.append(
                    Problem(
                        file,
                        0,
                        f"stack {number}, order {row['order']}",
                        "not a number, or a thickness that is not above 0",
                    )
                )
            else:
                layers.append(layer)
        stacks.append(Stack(tuple(layers)))
        contents.append(content)
    if problems:
        raise InputError(problems)
    return tuple(stacks), tuple(contents)


def _layer(row: Mapping[str, str], material: Material) -> Layer:
    thickness, angle = float(row["thickness_m"]), float(row["angle_deg"])
    if not (isfinite(angle) and isfinite(thickness) and thickness > 0.0):
        raise ValueError("neither nothing nor infinite")
    return Layer(_name(row["ply"]), material, thickness, radians(angle))


def _name(text: str) -> str:
    """A name without the apostrophe that keeps a spreadsheet from taking it for a formula."""
    return text[1:] if text.startswith(_SPREADSHEET_MARK) else text


def _assemble(
    stem: str,
    summary: Mapping[str, Any],
    vtu: VtuContent,
    stacks: tuple[Stack, ...],
    materials: Mapping[str, Material],
) -> ShellMesh:
    region = vtu.cell_arrays["region"].astype(np.int64) - 1
    stack = vtu.cell_arrays["stack"].astype(np.int64) - 1
    regions = tuple(Region(str(r["name"]), int(r["side"]), str(r["kind"])) for r in summary["regions"])
    if not 0 <= region.min() <= region.max() < len(regions):
        raise ValueError("the VTU has more regions than the summary")
    if not -1 <= stack.min() <= stack.max() < len(stacks):
        raise ValueError("the VTU has more stacks than the table of stacks")
    points, cells, values, n_corners = _second_order(vtu)
    order_of_nodes = np.argsort(vtu.point_arrays["node"], kind="stable")
    numbers = vtu.point_arrays["node"].astype(np.int64)[order_of_nodes]
    sets = {
        name.removeprefix(_NODE_SET): order_of_nodes[np.clip(np.searchsorted(numbers, members), 0, len(numbers) - 1)]
        for name, members in vtu.names.items()
        if name.startswith(_NODE_SET)
    }
    return ShellMesh(
        title=str(summary["title"]),
        stem=stem,
        hand=str(summary["hand"]),
        order=2 if vtu.cells.shape[1] >= 6 else 1,
        surface=str(summary["reference_surface"]),
        points=points,
        n_corners=n_corners,
        cells=cells,
        region=region,
        stack=stack,
        offset=vtu.cell_arrays["offset"].astype(float),
        e1=vtu.cell_arrays["e1"].astype(float),
        e2=vtu.cell_arrays["e2"].astype(float),
        e3=vtu.cell_arrays["e3"].astype(float),
        sheet=values["sheet"].astype(np.int64),
        row=values["row"],
        seam=values["seam"],
        regions=regions,
        stacks=stacks,
        materials=materials,
        node_sets=sets,
        element_sets={},
        node_number=values["node"].astype(np.int64),
        element_number=vtu.cell_arrays["element"].astype(np.int64),
        sources=_sources(summary),
        report=_report(summary),
    )


def _sources(entry: Mapping[str, Any]) -> tuple[Source, ...]:
    return tuple(Source(str(s["file"]), str(s["sha256"])) for s in entry["inputs"])


def _report(summary: Mapping[str, Any]) -> BuildReport:
    origin = summary.get("divisions_kept_from")
    return BuildReport(
        divided_by=None if origin is None else MeshOrigin(str(origin["title"]), _sources(origin)),
        warnings=tuple(str(text) for text in summary["warnings"]),
        ply_end_move=float(summary["largest_ply_end_move_m"]),
        ply_end_place=str(summary["largest_ply_end_move_at"]),
        rows=tuple((str(row["label"]), float(row["z_m"])) for row in summary["rows"]),
        seams=tuple(str(seam["label"]) for seam in summary["seams"]),
        stations=np.array(summary["stations_m"], dtype=float),
        developed_areas={
            str(region["name"]): float(region["developed_area_m2"])
            for region in summary["regions"]
            if region["developed_area_m2"] is not None
        },
        ply_areas={str(name): float(area) for name, area in summary["ply_areas_m2"].items()},
    )


def _second_order(vtu: VtuContent) -> tuple[Floats, NDArray[np.int64], dict[str, Floats], int]:
    """Points, cells and values at the nodes with mid nodes; those that the file lacks are put on straight edges."""
    values = {name: vtu.point_arrays[name].astype(float) for name in _POINT_ARRAYS}
    k = vtu.cells.shape[1]
    if k >= 6:
        return vtu.points, vtu.cells, values, int(vtu.cells[:, : k // 2].max()) + 1
    n = len(vtu.points)
    ends = np.sort(np.stack([vtu.cells, np.roll(vtu.cells, -1, axis=1)], axis=-1).reshape(-1, 2), axis=1)
    edges, edge = np.unique(ends[:, 0] * n + ends[:, 1], return_inverse=True)
    first, second = edges // n, edges % n
    cells = np.hstack([vtu.cells, n + edge.reshape(-1, k)])
    top = values["node"].max()
    middle = {name: 0.5 * (array[first] + array[second]) for name, array in values.items()}
    middle["sheet"] = np.maximum(values["sheet"][first], values["sheet"][second])
    middle["node"] = top + 1.0 + np.arange(len(edges))
    values = {name: np.concatenate([array, middle[name]]) for name, array in values.items()}
    return np.vstack([vtu.points, 0.5 * (vtu.points[first] + vtu.points[second])]), cells, values, n
