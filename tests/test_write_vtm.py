"""VTM read back by VTK: the blocks are the regions and node sets by name, and together they are the VTU file."""

from __future__ import annotations

import shutil
from dataclasses import replace
from pathlib import Path

import meshio
import numpy as np
import pytest
import pyvista
from numpy.testing import assert_array_equal
from sample_meshes import HOSTILE, numbered_box, tube

from skinmesh.mesh.shellmesh import Region
from skinmesh.write.formats.vtm import write_vtm
from skinmesh.write.formats.vtu import write_vtu

SHAPES = [("quad", 1), ("quad", 2), ("triangle", 1), ("triangle", 2)]


def read(path: Path) -> pyvista.MultiBlock:
    """The blocks as VTK's own reader finds them, which puts None where a block has no file."""
    return pyvista.MultiBlock(pyvista.read(path))


@pytest.mark.parametrize(("shape", "order"), SHAPES)
def test_the_regions_together_are_the_vtu_file(tmp_path: Path, shape: str, order: int) -> None:
    mesh = numbered_box(order, shape)
    write_vtm(mesh, tmp_path / "box.vtm")
    write_vtu(mesh, tmp_path / "box.vtu")
    blocks, whole = read(tmp_path / "box.vtm"), pyvista.read(tmp_path / "box.vtu")
    assert blocks.keys() == [*HOSTILE, "node sets"]
    cells = whole.cells.reshape(whole.n_cells, -1)[:, 1:]
    kind = set(whole.celltypes)
    seen = []
    for k in range(len(HOSTILE)):
        block = blocks[k]
        # The VTU's own cells of the region, in its order, at the points that these use.
        own = np.flatnonzero(whole.cell_data["region"] == k + 1)
        used = np.unique(cells[own])
        assert_array_equal(block.points, whole.points[used])
        assert set(block.celltypes) == kind
        assert_array_equal(used[block.cells.reshape(block.n_cells, -1)[:, 1:]], cells[own])
        assert list(block.cell_data) == list(whole.cell_data)
        assert list(block.point_data) == list(whole.point_data)
        for name, array in whole.cell_data.items():
            assert_array_equal(block.cell_data[name], array[own], err_msg=name)
            assert block.cell_data[name].dtype == array.dtype
        for name, array in whole.point_data.items():
            assert_array_equal(block.point_data[name], array[used], err_msg=name)
            assert block.point_data[name].dtype == array.dtype
        seen.append(own)
    assert_array_equal(np.sort(np.concatenate(seen)), np.arange(whole.n_cells))
    assert sum(blocks[k].area for k in range(len(HOSTILE))) == pytest.approx(whole.area)


@pytest.mark.parametrize(("shape", "order"), SHAPES)
def test_the_node_sets_are_those_of_the_vtu_file(tmp_path: Path, shape: str, order: int) -> None:
    mesh = numbered_box(order, shape)
    write_vtm(mesh, tmp_path / "box.vtm")
    write_vtu(mesh, tmp_path / "box.vtu")
    sets, whole = read(tmp_path / "box.vtm")["node sets"], pyvista.read(tmp_path / "box.vtu")
    named = {
        name.removeprefix("node set: "): numbers
        for name, numbers in whole.field_data.items()
        if name.startswith("node set: ")
    }
    assert sets.keys() == list(named) == list(mesh.node_sets)
    place = {number: k for k, number in enumerate(whole.point_data["node"])}
    for name, numbers in named.items():
        block = sets[name]
        assert_array_equal(block.point_data["node"], numbers)
        at = [place[number] for number in numbers]
        assert_array_equal(block.points, whole.points[at])
        assert list(block.point_data) == list(whole.point_data)
        for array in whole.point_data:
            assert_array_equal(block.point_data[array], whole.point_data[array][at], err_msg=array)
        assert_array_equal(block.celltypes, np.full(len(numbers), pyvista.CellType.VERTEX))
        assert_array_equal(block.cells.reshape(-1, 2)[:, 1], np.arange(len(numbers)))


def test_the_blocks_name_together_what_the_vtu_file_names(tmp_path: Path) -> None:
    mesh = numbered_box()
    write_vtm(mesh, tmp_path / "box.vtm")
    write_vtu(mesh, tmp_path / "box.vtu")
    blocks, whole = read(tmp_path / "box.vtm"), pyvista.read(tmp_path / "box.vtu")
    regions = [blocks[k] for k in range(len(HOSTILE))]
    found: dict[str, list[int]] = {}
    for block in [*regions, *blocks["node sets"]]:
        for name, numbers in block.field_data.items():
            assert found.setdefault(name, numbers.tolist()) == numbers.tolist()
    assert found == {name: numbers.tolist() for name, numbers in whole.field_data.items()}
    for k, block in enumerate(regions):
        assert [name for name in block.field_data if name.startswith("region: ")] == [f"region: {HOSTILE[k]}"]
        stacks = sorted(int(n[0]) for name, n in block.field_data.items() if name.startswith("stack: "))
        assert stacks == sorted(set(block.cell_data["stack"]))


def test_meshio_reads_every_block(tmp_path: Path) -> None:
    mesh = numbered_box()
    write_vtm(mesh, tmp_path / "box.vtm")
    files = sorted((tmp_path / "box.vtm.d").iterdir())
    assert len(files) == len(mesh.regions) + len(mesh.node_sets)
    for file in files:
        (block,) = meshio.read(file).cells
        assert block.type == ("quad8" if file.name.startswith("region") else "vertex")


def test_a_region_without_elements_is_named_and_empty(tmp_path: Path) -> None:
    mesh = tube(8, 2)
    regions = (*mesh.regions[:1], Region("trailing base", 0, "base"), *mesh.regions[1:])
    write_vtm(replace(mesh, regions=regions, region=2 * mesh.region), tmp_path / "tube.vtm")
    blocks = read(tmp_path / "tube.vtm")
    assert blocks.keys() == ["suction panel", "trailing base", "pressure panel", "node sets"]
    assert blocks[1] is None
    assert set(blocks[2].cell_data["region"]) == {3}
    assert {path.name.split("-")[1] for path in (tmp_path / "tube.vtm.d").glob("region-*")} == {"1", "3"}


def test_the_files_may_be_moved_together_and_carry_any_stem(tmp_path: Path) -> None:
    """The blocks are found beside the file, wherever that lies and whatever it is called."""
    stem = 'Blatt "ä" & <1>'
    mesh = numbered_box(1)
    (tmp_path / "here").mkdir()
    write_vtm(mesh, tmp_path / "here" / f"{stem}.vtm")
    shutil.move(tmp_path / "here", tmp_path / "there")
    assert [read(tmp_path / "there" / f"{stem}.vtm")[k].n_cells for k in range(3)] == np.bincount(mesh.region).tolist()


def test_names_of_files_are_plain_and_apart(tmp_path: Path) -> None:
    mesh = tube(8, 2)
    long = 300 * "x"
    regions = (Region(f"../{long} CON", 1, "panel"), Region(f"../{long} con", -1, "panel"))
    write_vtm(replace(mesh, regions=regions), tmp_path / "tube.vtm")
    names = sorted(path.name for path in (tmp_path / "tube.vtm.d").glob("region*"))
    assert names == [f"region-{k}-{39 * 'x'}.vtu" for k in (1, 2)]
    assert read(tmp_path / "tube.vtm").keys()[:2] == [region.name for region in regions]
