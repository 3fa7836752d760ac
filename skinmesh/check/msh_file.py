"""The MSH file, read back by gmsh, against the VTU and the summary."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from skinmesh.check.deck import DeckError, compare_geometry, compare_sets, lines_of_deck, sorted_geometry
from skinmesh.check.finding import Finding
from skinmesh.check.reading import BuiltMesh
from skinmesh.errors import MeshError
from skinmesh.write.formats.msh import group_names
from skinmesh.write.msh_content import MshContent, read_msh

CHECK = "MSH file"


def check_msh_file(built: BuiltMesh, path: Path) -> list[Finding]:
    """Counts, numbers, coordinates, connectivity and named groups of an MSH file.

    Parameters
    ----------
    built : BuiltMesh
    path : Path

    Returns
    -------
    list of Finding
    """
    return lines_of_deck(CHECK, lambda: _compare(built, _read(path)))


def _read(path: Path) -> MshContent:
    try:
        return read_msh(path)
    except MeshError as error:
        raise DeckError(str(error)) from error


def _compare(built: BuiltMesh, found: MshContent) -> list[Finding]:
    mesh = built.mesh
    geometry = sorted_geometry(found.node_number, found.points, found.element_number, found.connectivity)
    present = np.unique(mesh.region)
    names = group_names([*(mesh.regions[i].name for i in present), *mesh.node_sets])
    of_regions, of_sets = names[: len(present)], names[len(present) :]
    wanted = {
        f"region {name}": mesh.element_number[mesh.region == i] for i, name in zip(present, of_regions, strict=True)
    }
    wanted |= {
        f"nodes {name}": mesh.node_number[mesh.node_set(key)] for key, name in zip(mesh.node_sets, of_sets, strict=True)
    }
    have = {f"region {name}": numbers for name, numbers in found.regions.items()}
    have |= {f"nodes {name}": numbers for name, numbers in found.node_sets.items()}
    return [
        compare_geometry(CHECK, built, geometry, has_second_order=False),
        compare_sets(CHECK, have, wanted),
    ]
