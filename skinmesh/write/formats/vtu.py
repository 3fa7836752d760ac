"""VTU, compressed, for viewers and scripts: every quantity of the mesh as an array, and the names of the numbers.

The one format that holds the whole mesh, and so the one that is read back.
"""

from __future__ import annotations

import zlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from xml.etree.ElementTree import ParseError

import meshio
import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import InputError, Problem
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.grid import SHELL_KINDS, mesh_grid, write_grid
from skinmesh.write.registry import register_format


@dataclass(frozen=True, eq=False)
class VtuContent:
    """What a VTU file of ours holds, as it stands there.

    Attributes
    ----------
    points : (n, 3) float array, m
    cells : (m, k) int array
        k = 3, 4, 6 or 8.
    cell_arrays, point_arrays : mapping of str to array
    names : mapping of str to int array
        The field data.
    """

    points: NDArray[np.float64]
    cells: NDArray[np.int64]
    cell_arrays: Mapping[str, NDArray[np.generic]]
    point_arrays: Mapping[str, NDArray[np.generic]]
    names: Mapping[str, NDArray[np.int64]]


def read_vtu(path: Path) -> VtuContent:
    """Read a VTU file that :func:`write_vtu` wrote.

    Parameters
    ----------
    path : Path

    Returns
    -------
    VtuContent

    Raises
    ------
    InputError
        The file is not readable as VTU, or its cells are not of one kind of shell element.
    OSError
        The file cannot be opened.
    """
    try:
        found = meshio.vtu.read(str(path))
    except (meshio.ReadError, ParseError, zlib.error, ValueError, KeyError, IndexError, AssertionError) as error:
        text = f"cannot be read as VTU ({str(error) or type(error).__name__}); build the mesh again"
        raise InputError([Problem(path.name, 0, "", text)]) from error
    kinds = [block.type for block in found.cells]
    if len(kinds) != 1 or kinds[0] not in SHELL_KINDS.values():
        text = f"holds cells of the kinds {kinds}; wanted is one of {', '.join(SHELL_KINDS.values())}"
        raise InputError([Problem(path.name, 0, "", text)])
    return VtuContent(
        np.asarray(found.points, dtype=float),
        np.asarray(found.cells[0].data, dtype=np.int64),
        {name: np.asarray(blocks[0]) for name, blocks in found.cell_data.items()},
        {name: np.asarray(values) for name, values in found.point_data.items()},
        {name: np.atleast_1d(np.asarray(values)).astype(np.int64) for name, values in found.field_data.items()},
    )


def write_vtu(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as VTU, with the arrays of :func:`skinmesh.write.grid.mesh_grid`.

    The names stand in the file's field data, each as the name of an integer array: ``region: suction main cap`` holds
    the number of that region, ``stack: 1b4f0e98`` that of the stack of this content, ``node set: root`` the solver
    numbers of its nodes, ``title: …`` nothing but a nought.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path
    """
    names = {f"title: {mesh.title}": np.zeros(1, dtype=np.int64)}
    names |= {f"region: {region.name}": np.array([k]) for k, region in enumerate(mesh.regions, start=1)}
    names |= {f"stack: {stack.content_name}": np.array([k]) for k, stack in enumerate(mesh.stacks, start=1)}
    names |= {f"node set: {name}": mesh.node_number[mesh.node_set(name)] for name in mesh.node_sets}
    write_grid(mesh_grid(mesh), path, names=names)


register_format("vtu", summary="VTU, compressed, opens in VTK's viewers", write=write_vtu)
