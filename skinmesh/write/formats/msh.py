"""MSH 4.1, binary, through gmsh's own API: a named physical group for every region and node set."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import OutputError
from skinmesh.mesh.kernel import gmsh_session
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.registry import register_format

_SHELL = {3: 2, 4: 3, 6: 9, 8: 16}
"""gmsh's element type by number of nodes; 16 is the quadrilateral without a middle node."""
_POINT = 15
_NAME_BYTES = 127
"""gmsh 4.15 reads no more of a group's name."""


def write_msh(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as MSH 4.1, and read it back to see that everything arrived.

    A region is a physical surface. A node set is a physical point group of one-node elements, which are numbered behind
    the shell elements. Node and element numbers are the mesh's own. A double quote in a name becomes a single one, for
    the format knows no escape, and a name longer than 127 bytes is cut.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path

    Raises
    ------
    MeshError
        gmsh failed or warned.
    OutputError
        The file does not hold what was written.
    """
    regions = np.unique(mesh.region)
    names = group_names([*(mesh.regions[region].name for region in regions), *mesh.node_sets])
    region_names, set_names = names[: len(regions)], names[len(regions) :]
    with gmsh_session() as gmsh:
        _add_regions(gmsh, mesh, regions, region_names)
        _add_node_sets(gmsh, mesh, set_names)
        gmsh.option.setNumber("Mesh.Binary", 1)
        gmsh.write(str(path))
    with gmsh_session() as gmsh:
        gmsh.merge(str(path))
        found = _counts(gmsh)
    wanted = {
        "nodes": mesh.n_nodes,
        "elements": len(mesh.cells),
        "members of node sets": sum(len(mesh.node_set(name)) for name in mesh.node_sets),
        "groups": sorted([(2, name) for name in region_names] + [(0, name) for name in set_names]),
    }
    wrong = [f"{key}: wrote {wanted[key]}, found {found[key]}" for key in wanted if wanted[key] != found[key]]
    if wrong:
        raise OutputError(f"{path.name} does not hold what was written: {'; '.join(wrong)}")


def group_names(names: Iterable[str]) -> list[str]:
    """Names as the format can hold them: on one line, without double quotes, short enough, and still distinct.

    Parameters
    ----------
    names : iterable of str

    Returns
    -------
    list of str

    Examples
    --------
    >>> group_names(['the "cap"', "the 'cap'"])
    ["the 'cap'", "the 'cap' (2)"]
    """
    found: dict[str, None] = {}
    for name in names:
        plain = " ".join(name.replace('"', "'").split())
        fitting, copy = _cut(plain, _NAME_BYTES), 1
        while fitting in found:
            copy += 1
            mark = f" ({copy})"
            fitting = _cut(plain, _NAME_BYTES - len(mark)) + mark
        found[fitting] = None
    return list(found)


def _cut(text: str, n_bytes: int) -> str:
    """The beginning of a text that takes at most so many bytes."""
    return text.encode()[:n_bytes].decode(errors="ignore")


def _add_regions(gmsh: Any, mesh: ShellMesh, regions: NDArray[np.int64], names: Sequence[str]) -> None:
    """One discrete surface a region; a node belongs to the first region that uses it."""
    tags = np.arange(len(mesh.regions)) + 1
    cells = mesh.connectivity
    owner = np.full(mesh.n_nodes, len(mesh.regions))
    np.minimum.at(owner, cells, mesh.region[:, None])
    for region, name in zip(regions, names, strict=True):
        tag = int(tags[region])
        gmsh.model.addDiscreteEntity(2, tag)
        own = np.flatnonzero(owner == region)
        gmsh.model.mesh.addNodes(2, tag, mesh.node_number[own], mesh.points[own].ravel())
        gmsh.model.addPhysicalGroup(2, [tag], tag, name)
    for region in regions:
        own = np.flatnonzero(mesh.region == region)
        gmsh.model.mesh.addElementsByType(
            int(tags[region]),
            _SHELL[cells.shape[1]],
            mesh.element_number[own],
            mesh.node_number[cells[own]].ravel(),
        )


def _add_node_sets(gmsh: Any, mesh: ShellMesh, names: Sequence[str]) -> None:
    next_element = int(mesh.element_number.max(initial=0)) + 1
    for tag, (key, name) in enumerate(zip(mesh.node_sets, names, strict=True), start=1):
        nodes = mesh.node_number[mesh.node_set(key)]
        gmsh.model.addDiscreteEntity(0, tag)
        gmsh.model.mesh.addElementsByType(tag, _POINT, next_element + np.arange(len(nodes)), nodes)
        gmsh.model.addPhysicalGroup(0, [tag], tag, name)
        next_element += len(nodes)


def _counts(gmsh: Any) -> dict[str, Any]:
    """What the open model holds."""
    points, shells = (gmsh.model.mesh.getElements(dim)[1] for dim in (0, 2))
    return {
        "nodes": len(gmsh.model.mesh.getNodes()[0]),
        "elements": sum(len(tags) for tags in shells),
        "members of node sets": sum(len(tags) for tags in points),
        "groups": sorted((dim, gmsh.model.getPhysicalName(dim, tag)) for dim, tag in gmsh.model.getPhysicalGroups()),
    }


register_format("msh", summary="MSH 4.1 binary, opens in gmsh", write=write_msh)
