"""VTM: one named block a region and one a node set, so that viewers of VTK's files list them and switch them.

The file itself holds names only; the blocks are VTU files in a folder beside it.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterable
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from pathlib import Path

import numpy as np

from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.write.grid import Grid, Ints, mesh_grid, part_of, points_of, quoted, write_grid
from skinmesh.write.registry import parts_folder, register_format

NODE_SETS = "node sets"
_REGION, _NODES = "region", "nodes"
_NOT_PLAIN = re.compile("[^a-z0-9]+")
_MOST_LETTERS = 40


def write_vtm(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as VTM, its blocks into the folder ``path`` + ``.d``.

    The blocks are the regions by name, in the order of their numbers, and last the block ``node sets`` with one named
    block a set. A region's block holds the same arrays as the VTU file, with the points that its elements use: points
    on a border stand in both blocks, under the same ``node``. A node set's block holds its points, each as a cell, with
    the point arrays. A region without elements is named and empty.

    Names stand in the blocks as in the VTU file, as the names of field data: in a region's block its own and those of
    its stacks, in a node set's block its own.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path
    """
    folder = parts_folder(path)
    folder.mkdir()
    grid = mesh_grid(mesh)
    # Nearly all of the work is compression, during which other threads can run.
    with ThreadPoolExecutor(os.cpu_count()) as pool:
        region_files = pool.map(partial(_write_region, mesh, grid, folder), range(len(mesh.regions)))
        set_files = pool.map(partial(_write_node_set, mesh, grid, folder), range(len(mesh.node_sets)))
        names = [region.name for region in mesh.regions]
        regions = [_line(name, folder, file) for name, file in zip(names, region_files, strict=True)]
        sets = [_line(name, folder, file) for name, file in zip(mesh.node_sets, set_files, strict=True)]
    path.write_text(
        '<?xml version="1.0"?>\n'
        '<VTKFile type="vtkMultiBlockDataSet" version="1.0">\n'
        "<vtkMultiBlockDataSet>\n"
        f"{_numbered(regions)}"
        f'<Block index="{len(regions)}" name={quoted(NODE_SETS)}>\n'
        f"{_numbered(sets)}"
        "</Block>\n"
        "</vtkMultiBlockDataSet>\n"
        "</VTKFile>\n",
        encoding="utf-8",
        newline="\n",
    )


def _write_region(mesh: ShellMesh, grid: Grid, folder: Path, k: int) -> str:
    """Write the block of a region; its file, or nothing where the region has no elements."""
    own = np.flatnonzero(mesh.region == k)
    if not len(own):
        return ""
    name = mesh.regions[k].name
    stacks = np.unique(mesh.stack[own])
    names = _title(mesh) | {f"region: {name}": np.array([k + 1])}
    names |= {f"stack: {mesh.stacks[s].content_name}": np.array([s + 1]) for s in stacks if s != NO_STACK}
    file = _file_name(_REGION, k, len(mesh.regions), name)
    write_grid(part_of(grid, own), folder / file, names=names)
    return file


def _write_node_set(mesh: ShellMesh, grid: Grid, folder: Path, k: int) -> str:
    """Write the block of a node set; its file."""
    name = list(mesh.node_sets)[k]
    nodes = mesh.node_set(name)
    file = _file_name(_NODES, k, len(mesh.node_sets), name)
    names = _title(mesh) | {f"node set: {name}": mesh.node_number[nodes]}
    write_grid(points_of(grid, nodes), folder / file, names=names)
    return file


def _title(mesh: ShellMesh) -> dict[str, Ints]:
    return {f"title: {mesh.title}": np.zeros(1, dtype=np.int64)}


def _file_name(kind: str, index: int, count: int, name: str) -> str:
    """Name of a block's file: its number, and so much of its name as every system can hold.

    >>> _file_name("region", 2, 13, "suction main cap"), _file_name("nodes", 0, 1, "Ω")
    ('region-03-suction-main-cap.vtu', 'nodes-1.vtu')
    """
    plain = _NOT_PLAIN.sub("-", name.lower())[:_MOST_LETTERS].strip("-")
    number = f"{index + 1:0{len(str(count))}}"
    return f"{'-'.join(filter(None, (kind, number, plain)))}.vtu"


def _line(name: str, folder: Path, file: str) -> str:
    place = f" file={quoted(f'{folder.name}/{file}')}" if file else ""
    return f"name={quoted(name)}{place}"


def _numbered(lines: Iterable[str]) -> str:
    return "".join(f'<DataSet index="{k}" {line}/>\n' for k, line in enumerate(lines))


register_format(
    "vtm",
    summary="VTM, a named block a region and a node set, opens in VTK's viewers",
    write=write_vtm,
    parts=f"({_REGION}|{_NODES})-[0-9]+(-[a-z0-9-]+)?[.]vtu",
)
