"""Cuts and developed skin: layers as thick as the stacks say, joints where webs stand, areas to the pixel."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from blades import demonstration
from matplotlib.image import imread
from sample_meshes import box_with_web, sandwich, tube

import skinmesh
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.cuts import draw_cuts
from skinmesh.show.developed import draw_developed
from skinmesh.show.page import Page, round_ticks
from skinmesh.show.palette import part_colours, part_name, rgb
from skinmesh.show.section import Layers, Section, layers_of, outer_faces, section_at


@pytest.fixture(scope="module")
def blade() -> ShellMesh:
    return skinmesh.build(demonstration())


def drawn_thickness(layers: Layers) -> np.ndarray:
    """Distance of each layer's inner from its outer face."""
    along = layers.corners[:, 1] - layers.corners[:, 0]
    across = layers.corners[:, 3] - layers.corners[:, 0]
    area = np.abs(along[:, 0] * across[:, 1] - along[:, 1] * across[:, 0])
    return area / np.linalg.norm(along, axis=1)


def polygon_areas(corners: np.ndarray) -> np.ndarray:
    x, y = corners[..., 0], corners[..., 1]
    return 0.5 * np.abs((x * np.roll(y, -1, axis=1) - np.roll(x, -1, axis=1) * y).sum(axis=1))


@pytest.mark.parametrize("factor", [1.0, 5.0])
@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
def test_every_layer_of_a_cut_is_as_thick_as_the_schedule_says(hand: str, factor: float) -> None:
    mesh = skinmesh.build(replace(demonstration(), hand=hand))
    for z in (0.0, 1.234, 5.0, 9.999):
        section = section_at(mesh, z)
        layers = layers_of(mesh, section, factor=factor)
        wanted = [mesh.stacks[s].layers[k].thickness for s, k in zip(layers.stack, layers.order, strict=True)]
        np.testing.assert_allclose(drawn_thickness(layers), factor * np.array(wanted), rtol=1e-9)
        counts = np.bincount(layers.wall, minlength=len(section.element))
        np.testing.assert_array_equal(counts, mesh.n_plies[section.element])
        # From the outer face of the first layer, which is where the region's line runs.
        first = layers.order == 0
        np.testing.assert_allclose(
            layers.corners[first][:, :2], outer_faces(mesh, section, factor=factor)[layers.wall[first]], atol=1e-12
        )


def test_layers_of_a_tube_fill_its_ring_without_gap_or_overlap() -> None:
    n, radius = 48, 0.5
    mesh = tube(n, 4, radius=radius, layers=sandwich())
    layers = layers_of(mesh, section_at(mesh, 1.1))
    apothem = radius * np.cos(np.pi / n)
    depth = np.r_[0.0, np.cumsum([layer.thickness for layer in sandwich()])]
    # Area of a regular polygon with n sides: n tan(π/n) apothem².
    wanted = n * np.tan(np.pi / n) * (apothem - depth) ** 2
    areas = polygon_areas(layers.corners)
    for k in range(len(sandwich())):
        assert areas[layers.order == k].sum() == pytest.approx(wanted[k] - wanted[k + 1], rel=1e-6)
    assert np.linalg.norm(layers.corners, axis=2).max() == pytest.approx(radius, rel=1e-6)


def test_joints_are_the_feet_of_the_webs(blade: ShellMesh) -> None:
    mesh = box_with_web(layers=sandwich())
    section = section_at(mesh, 1.0)
    feet = [mesh.points[mesh.node_sets[f"fore web {side} foot"]][:, 1::-1] for side in ("suction", "pressure")]
    wanted = np.unique(np.round(np.concatenate(feet), 9), axis=0)
    np.testing.assert_allclose(np.unique(np.round(section.joints, 6), axis=0), wanted, atol=1e-6)
    webs = {name.rsplit(" ", 2)[0] for name in blade.node_sets if name.endswith("pressure foot")}
    assert len(section_at(blade, 5.0).joints) == 2 * len(webs) + 2 * has_base(blade, 5.0)


def has_base(mesh: ShellMesh, z: float) -> bool:
    section: Section = section_at(mesh, z)
    return any(mesh.regions[k].kind == "base" for k in mesh.region[section.element])


def pixels_of(image: np.ndarray, colour: np.ndarray) -> np.ndarray:
    """How many pixels of each row have a colour."""
    return np.count_nonzero(np.abs(image[..., :3] - colour).max(axis=2) < 0.004, axis=1)


@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
def test_regions_fill_their_share_of_the_developed_skin_in_their_place(tmp_path: Path, hand: str) -> None:
    mesh = skinmesh.build(replace(demonstration(), hand=hand, plies=()))
    draw_developed(mesh, tmp_path / "skin.png")
    image = imread(tmp_path / "skin.png")[160:]
    colours = part_colours(mesh.regions)
    of_part = dict.fromkeys(colours, 0.0)
    for region in mesh.regions:
        of_part[part_name(region)] += mesh.report.developed_areas.get(region.name, 0.0)
    panels = [name for name in colours if "panel" in name]
    rows = {name: pixels_of(image, rgb([colour])[0]) for name, colour in colours.items()}
    seen = np.array([rows[name].sum() for name in panels], dtype=float)
    wanted = np.array([of_part[name] for name in panels])
    assert len(panels) >= 2
    # Lines of rows and seams cover a little of each.
    np.testing.assert_allclose(seen / seen.sum(), wanted / wanted.sum(), rtol=0.03)
    # From outside with the root on the left, the suction side of a clockwise blade has its leading edge up. The base
    # lies beyond the suction side: under all panels there, over them on a counter-clockwise one.
    base, panel = (np.flatnonzero(rows[name] > 60) for name in ("trailing base", "trailing panel"))
    assert base.size
    assert base.min() > panel.max() if hand == "clockwise" else base.max() < panel.min()


def test_a_bare_mesh_and_one_without_stations_have_cuts(tmp_path: Path) -> None:
    for mesh in (box_with_web(), replace(box_with_web(layers=sandwich()), hand="counter-clockwise")):
        draw_cuts(mesh, tmp_path / "cuts.png")
        assert imread(tmp_path / "cuts.png").shape[1] == 1600


@pytest.mark.parametrize("most", [1, 4, 14])
def test_ticks_are_few_and_inside(most: int) -> None:
    for low, high in ((-1.9, 0.03), (0.508, 5.029), (0.0, 24.0)):
        ticks = round_ticks(low, high, most=most)
        assert len(ticks) <= most + 1
        assert np.all((ticks >= low - 1e-9) & (ticks <= high + 1e-9))


def test_long_words_lose_their_middle_and_short_ones_nothing() -> None:
    page = Page(100)
    long = page.text(0, 50, "outer primary load-carrying main cap fore edge", most=150)
    assert page.width_of(long) <= 150
    assert re.fullmatch(r"outer.*….*edge", long.get_text())
    assert page.text(0, 50, "main cap", most=150).get_text() == "main cap"
    assert page.text(0, 50, "W" * 9, most=1).get_text() == "W…W"
