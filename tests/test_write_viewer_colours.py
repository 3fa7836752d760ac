"""Colours for viewers: every region by its number and name, in the colour that pictures and page give it."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import gmsh
import numpy as np
import pytest
import pyvista
from numpy.testing import assert_allclose, assert_array_equal
from sample_meshes import HOSTILE, numbered_box, tube

from skinmesh.mesh.shellmesh import Region
from skinmesh.show.paint import paint_regions
from skinmesh.show.viewer_colours import region_colours, write_gmsh_colours, write_paraview_colours
from skinmesh.write.formats.msh import write_msh
from skinmesh.write.formats.vtm import write_vtm


@pytest.fixture
def viewer() -> Iterator[Any]:
    gmsh.initialize(readConfigFiles=False, interruptible=False)
    gmsh.option.setNumber("General.Terminal", 0)
    yield gmsh
    gmsh.finalize()


def test_regions_have_the_colours_of_the_pictures() -> None:
    mesh = numbered_box()
    assert_array_equal(region_colours(mesh)[mesh.region], paint_regions(mesh).colours)


def test_paraview_finds_number_name_and_colour_of_every_block(tmp_path: Path) -> None:
    """The preset speaks of the array ``region`` of the blocks."""
    mesh = numbered_box()
    write_vtm(mesh, tmp_path / "box.vtm")
    write_paraview_colours(mesh, tmp_path / "box.colours.json")
    (preset,) = json.loads((tmp_path / "box.colours.json").read_text(encoding="utf-8"))
    assert preset["Name"] == "sample regions"
    numbers, names = preset["Annotations"][::2], preset["Annotations"][1::2]
    blocks = pyvista.read(tmp_path / "box.vtm")
    assert names == list(HOSTILE) == blocks.keys()[:-1]
    assert [int(number) for number in numbers] == [blocks[k].cell_data["region"][0] for k in range(len(HOSTILE))]
    assert_allclose(np.reshape(preset["IndexedColors"], (-1, 3)), region_colours(mesh), atol=1e-6)


def test_gmsh_shows_every_region_in_its_colour(tmp_path: Path, viewer: Any) -> None:
    """It reads the options by itself, for they are named after the mesh."""
    mesh = numbered_box()
    write_msh(mesh, tmp_path / "box.msh")
    write_gmsh_colours(mesh, tmp_path / "box.msh.opt")
    viewer.option.setNumber("Mesh.SurfaceFaces", 0)
    viewer.open(str(tmp_path / "box.msh"))
    assert viewer.option.getNumber("Mesh.SurfaceFaces") == 1
    colours = np.rint(255 * region_colours(mesh)).astype(int)
    assert len({tuple(colour) for colour in colours}) == len(mesh.regions)
    for k, colour in enumerate(colours, start=1):
        (entity,) = viewer.model.getEntitiesForPhysicalGroup(2, k)
        assert viewer.model.getColor(2, entity)[:3] == tuple(colour)


def test_a_region_without_elements_and_a_name_that_is_a_script(tmp_path: Path, viewer: Any) -> None:
    """gmsh runs the options: what it is told has no names in it, and nothing that it does not know."""
    script = f'x\n"; SystemCall "touch {tmp_path}/done"; //'
    mesh = tube(8, 2)
    regions = (Region(script, 1, "panel"), Region("trailing base", 0, "base"), *mesh.regions[1:])
    mesh = replace(mesh, regions=regions, region=2 * mesh.region)
    write_msh(mesh, tmp_path / "tube.msh")
    write_gmsh_colours(mesh, tmp_path / "tube.msh.opt")
    viewer.logger.start()
    viewer.open(str(tmp_path / "tube.msh"))
    assert not [line for line in viewer.logger.get() if line.startswith(("Warning", "Error"))]
    assert {path.name for path in tmp_path.iterdir()} == {"tube.msh", "tube.msh.opt"}
    assert viewer.model.getColor(2, 3)[:3] == tuple(np.rint(255 * region_colours(mesh)[2]).astype(int))


@pytest.mark.parametrize("write", [write_paraview_colours, write_gmsh_colours])
def test_the_same_mesh_gives_the_same_bytes(tmp_path: Path, write: Any) -> None:
    for name in ("a", "b"):
        write(numbered_box(), tmp_path / name)
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()
