"""What an MSH file holds, as gmsh itself reads it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import MeshError
from skinmesh.mesh.kernel import gmsh_session

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_SURFACE, _POINT = 2, 0


@dataclass(frozen=True, eq=False)
class MshContent:
    """Nodes, shell elements and named groups of an MSH file.

    Attributes
    ----------
    node_number : (n,) int array
    points : (n, 3) float array, m
    element_number : (m,) int array
    connectivity : (m, k) int array
        Numbers of the nodes.
    regions, node_sets : mapping of str to int array
        Numbers of the elements of each named surface, and of the nodes of each named set of points.
    """

    node_number: Ints
    points: Floats
    element_number: Ints
    connectivity: Ints
    regions: Mapping[str, Ints]
    node_sets: Mapping[str, Ints]


def read_msh(path: Path) -> MshContent:
    """Read an MSH file of any version, binary or text, through gmsh's own API.

    Parameters
    ----------
    path : Path

    Returns
    -------
    MshContent

    Raises
    ------
    MeshError
        gmsh cannot read the file or warns of it, or its surface elements are not of one kind.
    """
    with gmsh_session() as gmsh:
        gmsh.merge(str(path))
        nodes, coordinates, _ = gmsh.model.mesh.getNodes()
        points = np.array(coordinates, dtype=float).reshape(-1, 3)
        kinds, numbers, corners = gmsh.model.mesh.getElements(_SURFACE)
        if len(kinds) != 1:
            raise MeshError(f"it has surface elements of {len(kinds)} kinds")
        regions = {name: _elements(gmsh, entities) for name, entities in _groups(gmsh, _SURFACE).items()}
        node_sets = {name: _nodes(gmsh, entities) for name, entities in _groups(gmsh, _POINT).items()}
    elements = numbers[0].astype(np.int64)
    connectivity = corners[0].astype(np.int64).reshape(len(elements), -1)
    return MshContent(nodes.astype(np.int64), points, elements, connectivity, regions, node_sets)


def _groups(gmsh: Any, dimension: int) -> dict[str, list[int]]:
    """Entities of every named group; a name that comes twice stands for both."""
    found: dict[str, list[int]] = {}
    for _, tag in gmsh.model.getPhysicalGroups(dimension):
        name = gmsh.model.getPhysicalName(dimension, tag)
        found.setdefault(name, []).extend(gmsh.model.getEntitiesForPhysicalGroup(dimension, tag))
    return found


def _elements(gmsh: Any, entities: list[int]) -> Ints:
    numbers = [part for entity in entities for part in gmsh.model.mesh.getElements(_SURFACE, entity)[1]]
    return np.concatenate([np.zeros(0, dtype=np.int64), *numbers]).astype(np.int64)


def _nodes(gmsh: Any, entities: list[int]) -> Ints:
    numbers = [part for entity in entities for part in gmsh.model.mesh.getElements(_POINT, entity)[2]]
    return np.concatenate([np.zeros(0, dtype=np.int64), *numbers]).astype(np.int64)
