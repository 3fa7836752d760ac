"""VTU, compressed, for viewers and scripts: every quantity of the mesh as an array, and the names of the numbers.

The one format that holds the whole mesh, and so the one that is read back.
"""

from __future__ import annotations

import re
import zlib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from xml.etree.ElementTree import ParseError
from xml.sax.saxutils import quoteattr

import meshio
import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import InputError, Problem
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.registry import register_format

_CELL = {3: "triangle", 4: "quad", 6: "triangle6", 8: "quad8"}
_NOT_XML = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
_GRID = b"<UnstructuredGrid>"


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
    if len(kinds) != 1 or kinds[0] not in _CELL.values():
        text = f"holds cells of the kinds {kinds}; wanted is one of {', '.join(_CELL.values())}"
        raise InputError([Problem(path.name, 0, "", text)])
    return VtuContent(
        np.asarray(found.points, dtype=float),
        np.asarray(found.cells[0].data, dtype=np.int64),
        {name: np.asarray(blocks[0]) for name, blocks in found.cell_data.items()},
        {name: np.asarray(values) for name, values in found.point_data.items()},
        {name: np.atleast_1d(np.asarray(values)).astype(np.int64) for name, values in found.field_data.items()},
    )


def write_vtu(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as VTU.

    Cell arrays: ``region`` and ``stack`` (one-based, 0 where no ply lies), ``side``, ``thickness`` (m), ``areal_mass``
    (kg/m²), ``plies``, ``e1``, ``e2``, ``e3``, ``element``, ``offset`` (height of the reference surface over the
    laminate's middle, as a share of the thickness). Point arrays: ``sheet``, ``row``, ``seam``, ``node``.

    The names stand in the file's field data, each as the name of an integer array: ``region: suction main cap`` holds
    the number of that region, ``stack: 1b4f0e98`` that of the stack of this content, ``node set: root`` the solver
    numbers of its nodes, ``title: …`` nothing but a nought. Text arrays would be plainer, but meshio refuses a file
    that has any.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path
    """
    meshio.vtu.write(
        str(path),
        meshio.Mesh(
            mesh.nodes,
            [(_CELL[mesh.connectivity.shape[1]], mesh.connectivity)],
            point_data=_point_arrays(mesh),
            cell_data={name: [array] for name, array in _cell_arrays(mesh).items()},
        ),
        binary=True,
        compression="zlib",
    )
    _insert_names(mesh, path)


def _cell_arrays(mesh: ShellMesh) -> dict[str, NDArray[np.generic]]:
    return {
        "region": (mesh.region + 1).astype(np.int32),
        "stack": (mesh.stack + 1).astype(np.int32),
        "side": mesh.side.astype(np.int32),
        "thickness": mesh.thickness,
        "areal_mass": mesh.areal_mass,
        "plies": mesh.n_plies.astype(np.int32),
        "e1": mesh.e1,
        "e2": mesh.e2,
        "e3": mesh.e3,
        "element": mesh.element_number,
        "offset": mesh.offset,
    }


def _point_arrays(mesh: ShellMesh) -> dict[str, NDArray[np.generic]]:
    n = mesh.n_nodes
    return {
        "sheet": mesh.sheet[:n].astype(np.int32),
        "row": mesh.row[:n],
        "seam": mesh.seam[:n],
        "node": mesh.node_number[:n],
    }


def _insert_names(mesh: ShellMesh, path: Path) -> None:
    """Put the field data, which meshio does not write, where the grid begins."""
    block = "".join(_field_array(name, values) for name, values in _named_numbers(mesh))
    before, grid, after = path.read_bytes().partition(_GRID)
    with path.open("wb") as file:
        file.writelines((before, grid, f"\n<FieldData>\n{block}</FieldData>".encode(), after))


def _named_numbers(mesh: ShellMesh) -> Iterator[tuple[str, Iterable[int]]]:
    yield f"title: {mesh.title}", [0]
    for number, region in enumerate(mesh.regions, start=1):
        yield f"region: {region.name}", [number]
    for number, stack in enumerate(mesh.stacks, start=1):
        yield f"stack: {stack.content_name}", [number]
    for name in mesh.node_sets:
        yield f"node set: {name}", mesh.node_number[mesh.node_set(name)].tolist()


def _field_array(name: str, values: Iterable[int]) -> str:
    numbers = [str(value) for value in values]
    text = " ".join(numbers) or " "  # meshio stumbles over an element without text
    attributes = (
        f'type="Int64" Name={quoteattr(_NOT_XML.sub(" ", name))} NumberOfTuples="{len(numbers)}" format="ascii"'
    )
    return f"<DataArray {attributes}>{text}</DataArray>\n"


register_format("vtu", summary="VTU, compressed, opens in VTK's viewers", write=write_vtu)
