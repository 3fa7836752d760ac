"""VTU, compressed, for viewers and scripts: every quantity of the mesh as an array, and the names of the numbers."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from pathlib import Path
from xml.sax.saxutils import quoteattr

import meshio
import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.registry import register_format

_CELL = {3: "triangle", 4: "quad", 6: "triangle6", 8: "quad8"}
_NOT_XML = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
_GRID = b"<UnstructuredGrid>"


def write_vtu(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as VTU.

    Cell arrays: ``region`` and ``stack`` (one-based, 0 where no ply lies), ``side``, ``thickness`` (m), ``areal_mass``
    (kg/m²), ``plies``, ``e1``, ``e2``, ``e3``, ``element``. Point arrays: ``sheet``, ``row``, ``seam``, ``node``.

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
