"""A mesh or a part of it as VTK's unstructured grid: cells of one kind, arrays by name, and the names of numbers."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from xml.sax.saxutils import quoteattr

import meshio
import numpy as np
from numpy.typing import NDArray

from skinmesh.frozen import freeze_array
from skinmesh.mesh.shellmesh import ShellMesh

Ints = NDArray[np.int64]
Arrays = Mapping[str, NDArray[np.generic]]

SHELL_KINDS: Mapping[int, str] = {3: "triangle", 4: "quad", 6: "triangle6", 8: "quad8"}
"""meshio's name of a shell element, by its number of nodes."""
POINT_KIND = "vertex"
_NOT_XML = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
_GRID = b"<UnstructuredGrid>"


@dataclass(frozen=True, eq=False)
class Grid:
    """Points, cells of one kind, and arrays on both.

    Attributes
    ----------
    kind : str
        meshio's name of the cells.
    points : (n, 3) float array, m
    cells : (m, k) int array
    point_arrays, cell_arrays : mapping of str to array
        Of n and m entries.
    """

    kind: str
    points: NDArray[np.float64]
    cells: Ints
    point_arrays: Arrays
    cell_arrays: Arrays

    def __post_init__(self) -> None:
        freeze_array(self, "points", shape=(None, 3))
        freeze_array(self, "cells", shape=(None, None), dtype=np.int64)


def mesh_grid(mesh: ShellMesh) -> Grid:
    """All elements of a mesh, with every array that viewers get.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    Grid
        Cell arrays ``region`` and ``stack`` (one-based, 0 where no ply lies), ``side``, ``thickness`` (m),
        ``areal_mass`` (kg/m²), ``plies``, ``e1``, ``e2``, ``e3``, ``element``, ``offset`` (height of the reference
        surface over the laminate's middle, as a share of the thickness); point arrays ``sheet``, ``row``, ``seam``,
        ``node``.
    """
    n = mesh.n_nodes
    return Grid(
        SHELL_KINDS[mesh.connectivity.shape[1]],
        mesh.nodes,
        mesh.connectivity,
        {
            "sheet": mesh.sheet[:n].astype(np.int32),
            "row": mesh.row[:n],
            "seam": mesh.seam[:n],
            "node": mesh.node_number[:n],
        },
        {
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
        },
    )


def part_of(grid: Grid, cells: Ints) -> Grid:
    """Some cells of a grid, with the points that they use, both in their order.

    Parameters
    ----------
    grid : Grid
    cells : (p,) int array
        Indices of cells.

    Returns
    -------
    Grid

    Examples
    --------
    >>> points = np.eye(4, 3)
    >>> two = Grid("triangle", points, np.array([[0, 1, 2], [0, 2, 3]]), {"node": np.arange(4)}, {})
    >>> one = part_of(two, np.array([1]))
    >>> one.cells.tolist(), one.point_arrays["node"].tolist()
    ([[0, 1, 2]], [0, 2, 3])
    """
    used = np.zeros(len(grid.points), dtype=bool)
    used[grid.cells[cells]] = True
    place = np.cumsum(used) - 1
    return Grid(
        grid.kind,
        grid.points[used],
        place[grid.cells[cells]],
        {name: array[used] for name, array in grid.point_arrays.items()},
        {name: array[cells] for name, array in grid.cell_arrays.items()},
    )


def points_of(grid: Grid, points: Ints) -> Grid:
    """Some points of a grid, each a cell of its own, without arrays on the cells.

    Parameters
    ----------
    grid : Grid
    points : (p,) int array
        Indices of points.

    Returns
    -------
    Grid
    """
    return Grid(
        POINT_KIND,
        grid.points[points],
        np.arange(len(points))[:, None],
        {name: array[points] for name, array in grid.point_arrays.items()},
        {},
    )


def write_grid(grid: Grid, path: Path, *, names: Mapping[str, Ints]) -> None:
    """Write a grid as a VTU file, compressed.

    Parameters
    ----------
    grid : Grid
    path : Path
    names : mapping of str to int array
        The field data. Text arrays would be plainer for names, but meshio refuses a file that has any, so what is told
        is the name of an array and the numbers in it.
    """
    meshio.vtu.write(
        str(path),
        meshio.Mesh(
            grid.points,
            [(grid.kind, grid.cells)],
            point_data=grid.point_arrays,
            cell_data={name: [array] for name, array in grid.cell_arrays.items()},
        ),
        binary=True,
        compression="zlib",
    )
    # meshio does not write field data, so they are put where the grid begins.
    block = "".join(_field_array(name, values) for name, values in names.items())
    before, opening, after = path.read_bytes().partition(_GRID)
    with path.open("wb") as file:
        file.writelines((before, opening, f"\n<FieldData>\n{block}</FieldData>".encode(), after))


def quoted(text: str) -> str:
    r"""Text as an attribute of XML, in quotes; a space for every character that XML cannot hold.

    >>> quoted("cap & web \x00")
    '"cap &amp; web  "'
    """
    return quoteattr(_NOT_XML.sub(" ", text))


def _field_array(name: str, values: Ints) -> str:
    numbers = " ".join(map(str, values.tolist())) or " "  # meshio stumbles over an element without text
    attributes = f'type="Int64" Name={quoted(name)} NumberOfTuples="{len(values)}" format="ascii"'
    return f"<DataArray {attributes}>{numbers}</DataArray>\n"
