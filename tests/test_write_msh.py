"""MSH read back by gmsh itself and by meshio; gmsh's global state left alone."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import gmsh
import meshio
import numpy as np
import pytest
from numpy.testing import assert_array_equal
from sample_meshes import box_with_web, numbered_box, sandwich, tube

from skinmesh.errors import OutputError
from skinmesh.mesh.kernel import gmsh_session
from skinmesh.mesh.shellmesh import Region, ShellMesh
from skinmesh.write.formats import msh as msh_format
from skinmesh.write.formats.msh import write_msh

GMSH_TYPE = {("quad", 1): 3, ("quad", 2): 16, ("triangle", 1): 2, ("triangle", 2): 9}


@pytest.fixture
def kernel() -> Iterator[Any]:
    """gmsh, opened by somebody else."""
    gmsh.initialize(readConfigFiles=False, interruptible=False)
    gmsh.option.setNumber("General.Terminal", 0)
    yield gmsh
    gmsh.finalize()


def plain(name: str) -> str:
    return name.replace('"', "'")


@pytest.mark.parametrize(("shape", "order"), GMSH_TYPE)
def test_gmsh_finds_everything(tmp_path: Path, kernel: Any, shape: str, order: int) -> None:
    mesh = numbered_box(order, shape)
    path = tmp_path / "box.msh"
    write_msh(mesh, path)
    kernel.open(str(path))
    tags, coordinates, _ = kernel.model.mesh.getNodes()
    by_tag = np.argsort(tags)
    by_number = np.argsort(mesh.node_number[: mesh.n_nodes])
    assert_array_equal(tags[by_tag], mesh.node_number[by_number])
    assert_array_equal(coordinates.reshape(-1, 3)[by_tag], mesh.points[by_number])

    groups = {kernel.model.getPhysicalName(*group): group for group in kernel.model.getPhysicalGroups()}
    assert set(groups) == {plain(region.name) for region in mesh.regions} | set(mesh.node_sets)
    for k, region in enumerate(mesh.regions):
        dim, tag = groups[plain(region.name)]
        assert (dim, tag) == (2, k + 1)
        (entity,) = kernel.model.getEntitiesForPhysicalGroup(dim, tag)
        (kind,), (elements,), (nodes,) = kernel.model.mesh.getElements(dim, entity)
        own = np.flatnonzero(mesh.region == k)
        assert kind == GMSH_TYPE[shape, order]
        assert_array_equal(elements, mesh.element_number[own])
        assert_array_equal(nodes.reshape(len(own), -1), mesh.node_number[mesh.connectivity[own]])
    for name in mesh.node_sets:
        dim, tag = groups[name]
        assert dim == 0
        assert_array_equal(
            np.sort(kernel.model.mesh.getNodesForPhysicalGroup(dim, tag)[0]), mesh.node_number[mesh.node_set(name)]
        )


def test_element_numbers_are_unique_in_the_file(tmp_path: Path, kernel: Any) -> None:
    write_msh(numbered_box(), tmp_path / "box.msh")
    kernel.open(str(tmp_path / "box.msh"))
    numbers = np.concatenate(kernel.model.mesh.getElements()[1])
    assert len(np.unique(numbers)) == len(numbers) == 84 + 4 * 27 + 2 * 13


@pytest.mark.parametrize("order", [1, 2])
def test_meshio_finds_regions_and_sets(tmp_path: Path, order: int) -> None:
    mesh = numbered_box(order)
    write_msh(mesh, tmp_path / "box.msh")
    found = meshio.read(tmp_path / "box.msh")
    assert len(found.points) == mesh.n_nodes
    assert {"quad", "vertex"} == {block.type.rstrip("8") for block in found.cells}
    for k, region in enumerate(mesh.regions):
        sets = zip(found.cells, found.cell_sets[plain(region.name)], strict=True)
        (cells,) = [block.data[members] for block, members in sets if len(members)]
        assert_array_equal(found.points[cells], mesh.points[mesh.connectivity[mesh.region == k]])
        assert_array_equal(found.field_data[plain(region.name)], [k + 1, 2])
    for name in mesh.node_sets:
        sets = zip(found.cells, found.cell_sets[name], strict=True)
        (nodes,) = [block.data[members].ravel() for block, members in sets if len(members)]
        assert_array_equal(found.points[nodes], mesh.points[mesh.node_set(name)])


def test_the_file_is_binary_4_1(tmp_path: Path) -> None:
    write_msh(tube(8, 2), tmp_path / "tube.msh")
    assert (tmp_path / "tube.msh").read_bytes().startswith(b"$MeshFormat\n4.1 1 8\n")


def test_a_region_that_owns_no_node(tmp_path: Path) -> None:
    """One element across: all its nodes belong to its neighbours."""
    mesh = tube(8, 2, order=1)
    region = mesh.region.copy()
    region[0] = 2
    mesh = replace(mesh, region=region, regions=(*mesh.regions, Region("trailing base", 0, "base")))
    write_msh(mesh, tmp_path / "tube.msh")
    sets = meshio.read(tmp_path / "tube.msh").cell_sets["trailing base"]
    assert sum(len(members) for members in sets) == 1


def test_long_and_clashing_names_stay_distinct(tmp_path: Path) -> None:
    names = ("ä" * 100 + "1", "ä" * 100 + "2", 'a "b"')
    box = box_with_web(layers=sandwich())
    mesh = replace(
        box,
        regions=tuple(replace(region, name=name) for region, name in zip(box.regions, names, strict=True)),
        node_sets={"a": box.node_sets["root"], "a 'b'": box.node_sets["tip"]},
    )
    write_msh(mesh, tmp_path / "box.msh")
    found = meshio.read(tmp_path / "box.msh").field_data
    names = [name for name in found if name != "gmsh:bounding_entities"]
    assert sorted(names) == sorted(["ä" * 63, "ä" * 61 + " (2)", "a 'b'", "a", "a 'b' (2)"])
    assert_array_equal(found["ä" * 61 + " (2)"], [2, 2])
    assert_array_equal(found["a 'b' (2)"], [2, 0])


def test_what_gmsh_loses_is_noticed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(msh_format, "_NAME_BYTES", 500)
    box = tube(8, 2)
    mesh = replace(box, regions=(Region("x" * 200, 1, "panel"), box.regions[1]))
    with pytest.raises(OutputError, match="does not hold what was written"):
        write_msh(mesh, tmp_path / "tube.msh")


def test_the_same_mesh_gives_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a.msh", "b.msh"):
        write_msh(numbered_box(), tmp_path / name)
    assert (tmp_path / "a.msh").read_bytes() == (tmp_path / "b.msh").read_bytes()


def test_an_open_gmsh_is_left_as_it_was(tmp_path: Path, kernel: Any) -> None:
    kernel.model.add("theirs")
    kernel.model.occ.addBox(0, 0, 0, 1, 1, 1)
    kernel.model.occ.synchronize()
    kernel.option.setNumber("Mesh.Binary", 0)
    kernel.option.setNumber("Mesh.MshFileVersion", 2.2)
    kernel.option.setNumber("General.NumThreads", 2)
    kernel.logger.start()
    before = (kernel.model.list(), kernel.model.getCurrent(), kernel.model.getEntities())
    write_msh(numbered_box(), tmp_path / "box.msh")
    assert (kernel.model.list(), kernel.model.getCurrent(), kernel.model.getEntities()) == before
    assert kernel.option.getNumber("Mesh.Binary") == 0
    assert kernel.option.getNumber("Mesh.MshFileVersion") == 2.2
    assert kernel.option.getNumber("General.NumThreads") == 2
    kernel.logger.write("still listening")
    assert kernel.logger.get()[-1].endswith("still listening")
    kernel.logger.stop()
    assert (tmp_path / "box.msh").read_bytes().startswith(b"$MeshFormat\n4.1 1 8\n")


def test_gmsh_is_closed_where_it_was_closed(tmp_path: Path) -> None:
    assert not gmsh.isInitialized()
    write_msh(tube(8, 2), tmp_path / "tube.msh")
    assert not gmsh.isInitialized()


def test_writing_from_threads(tmp_path: Path) -> None:
    mesh: ShellMesh = numbered_box()
    write_msh(mesh, tmp_path / "main.msh")
    threads = [threading.Thread(target=write_msh, args=(mesh, tmp_path / f"{k}.msh")) for k in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert {(tmp_path / f"{k}.msh").read_bytes() for k in range(3)} == {(tmp_path / "main.msh").read_bytes()}


def test_an_error_of_ours_passes_through_a_session() -> None:
    with pytest.raises(KeyError), gmsh_session():
        raise KeyError("ours")
    assert not gmsh.isInitialized()
