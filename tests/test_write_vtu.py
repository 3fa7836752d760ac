"""VTU read back by VTK and by meshio."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import meshio
import numpy as np
import pytest
import pyvista
from numpy.testing import assert_array_equal
from sample_meshes import numbered_box, tube

from skinmesh.errors import InputError
from skinmesh.mesh.shellmesh import Region, ShellMesh
from skinmesh.write.formats.vtu import read_vtu, write_vtu

VTK_TYPE = {("quad", 1): 9, ("quad", 2): 23, ("triangle", 1): 5, ("triangle", 2): 22}


def expected_cell_arrays(mesh: ShellMesh) -> dict[str, np.ndarray]:
    return {
        "region": mesh.region + 1,
        "stack": mesh.stack + 1,
        "side": mesh.side,
        "thickness": mesh.thickness,
        "areal_mass": mesh.areal_mass,
        "plies": mesh.n_plies,
        "e1": mesh.e1,
        "e2": mesh.e2,
        "e3": mesh.e3,
        "element": mesh.element_number,
        "offset": mesh.offset,
    }


def expected_point_arrays(mesh: ShellMesh) -> dict[str, np.ndarray]:
    n = mesh.n_nodes
    return {"sheet": mesh.sheet[:n], "row": mesh.row[:n], "seam": mesh.seam[:n], "node": mesh.node_number[:n]}


def expected_field_data(mesh: ShellMesh) -> dict[str, np.ndarray]:
    found = {f"title: {mesh.title}": np.array([0])}
    found |= {f"region: {region.name}": np.array([k + 1]) for k, region in enumerate(mesh.regions)}
    found |= {f"stack: {stack.content_name}": np.array([k + 1]) for k, stack in enumerate(mesh.stacks)}
    return found | {f"node set: {name}": mesh.node_number[mesh.node_set(name)] for name in mesh.node_sets}


@pytest.mark.parametrize(("shape", "order"), VTK_TYPE)
def test_vtk_finds_everything(tmp_path: Path, shape: str, order: int) -> None:
    mesh = numbered_box(order, shape)
    path = tmp_path / "box.vtu"
    write_vtu(mesh, path)
    grid = pyvista.read(path)
    assert_array_equal(grid.points, mesh.points[: mesh.n_nodes])
    assert set(grid.celltypes) == {VTK_TYPE[shape, order]}
    assert_array_equal(grid.cells.reshape(len(mesh.cells), -1)[:, 1:], mesh.connectivity)
    for data, expected in (
        (grid.cell_data, expected_cell_arrays(mesh)),
        (grid.point_data, expected_point_arrays(mesh)),
        (grid.field_data, expected_field_data(mesh)),
    ):
        assert list(data.keys()) == list(expected)
        for name, array in expected.items():
            assert_array_equal(np.asarray(data[name]), array, err_msg=name)
    for name in ("region", "stack", "side", "plies", "element"):
        assert np.issubdtype(grid.cell_data[name].dtype, np.integer)


def test_vtk_sees_the_area_of_the_box(tmp_path: Path) -> None:
    mesh = numbered_box(1)
    write_vtu(mesh, tmp_path / "box.vtu")
    assert pyvista.read(tmp_path / "box.vtu").area == pytest.approx(2 * (0.8 + 0.4) * 3 + 0.4 * 3)


@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_meshio_finds_everything(tmp_path: Path, shape: str) -> None:
    mesh = numbered_box(2, shape)
    write_vtu(mesh, tmp_path / "box.vtu")
    found = meshio.read(tmp_path / "box.vtu")
    (block,) = found.cells
    assert_array_equal(block.data, mesh.connectivity)
    assert block.type == ("quad8" if shape == "quad" else "triangle6")
    for name, array in expected_cell_arrays(mesh).items():
        assert_array_equal(found.cell_data[name][0], array, err_msg=name)
    for name, array in expected_point_arrays(mesh).items():
        assert_array_equal(found.point_data[name], array, err_msg=name)
    for name, array in expected_field_data(mesh).items():
        assert_array_equal(found.field_data[name], array, err_msg=name)


def test_a_mesh_without_plies(tmp_path: Path) -> None:
    mesh = tube(8, 2)
    write_vtu(mesh, tmp_path / "bare.vtu")
    grid = pyvista.read(tmp_path / "bare.vtu")
    for name in ("stack", "thickness", "areal_mass", "plies"):
        assert_array_equal(grid.cell_data[name], 0)
    assert not [name for name in grid.field_data if name.startswith("stack")]


def test_characters_that_xml_cannot_hold_become_spaces(tmp_path: Path) -> None:
    mesh = replace(
        tube(4, 1), title="a\x00b\x1bc\ufffed", regions=(Region("x\ny", 1, "panel"), Region("z", -1, "panel"))
    )
    write_vtu(mesh, tmp_path / "odd.vtu")
    names = list(pyvista.read(tmp_path / "odd.vtu").field_data)
    assert names[:3] == ["title: a b c d", "region: x\ny", "region: z"]


def test_the_same_mesh_gives_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a.vtu", "b.vtu"):
        write_vtu(numbered_box(), tmp_path / name)
    assert (tmp_path / "a.vtu").read_bytes() == (tmp_path / "b.vtu").read_bytes()


@pytest.mark.parametrize(("shape", "order"), VTK_TYPE)
def test_our_own_reader_finds_everything(tmp_path: Path, shape: str, order: int) -> None:
    mesh = numbered_box(order, shape)
    write_vtu(mesh, tmp_path / "box.vtu")
    found = read_vtu(tmp_path / "box.vtu")
    assert_array_equal(found.points, mesh.nodes)
    assert_array_equal(found.cells, mesh.connectivity)
    for arrays, expected in (
        (found.cell_arrays, expected_cell_arrays(mesh)),
        (found.point_arrays, expected_point_arrays(mesh)),
        (found.names, expected_field_data(mesh)),
    ):
        assert set(arrays) == set(expected)
        for name, array in expected.items():
            assert_array_equal(arrays[name], array, err_msg=name)


@pytest.mark.parametrize("spoil", [lambda data: data[: len(data) // 2], lambda data: data[:0], lambda data: data[500:]])
def test_a_spoiled_file_is_an_input_error(tmp_path: Path, spoil: Callable[[bytes], bytes]) -> None:
    path = tmp_path / "box.vtu"
    write_vtu(numbered_box(), path)
    path.write_bytes(spoil(path.read_bytes()))
    with pytest.raises(InputError, match=r"box\.vtu: 1 problem\n  cannot be read as VTU"):
        read_vtu(path)
