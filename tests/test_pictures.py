"""Pictures show what the mesh holds: places to the pixel, colours to the element, lines where labels change."""

from __future__ import annotations

import sys
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_meshes import box_with_web, sandwich, tube

from skinmesh.errors import MissingExtra
from skinmesh.mesh.shellmesh import Region
from skinmesh.show import render as render_module
from skinmesh.show.outline import border_edges, cut_at
from skinmesh.show.paint import PAINTS, paint_regions, paint_thickness, round_levels
from skinmesh.show.palette import part_colours
from skinmesh.show.picture import SUBJECTS, picture, require_pictures
from skinmesh.show.render import Camera, Frame, frame_of, render, shaded

NAMES = ("leading strip", "leading panel", "main cap", "middle panel", "trailing panel", "trailing strip")
REGIONS = (
    *(
        Region(f"{side} {name}", sign, name.split()[1])
        for side, sign in (("suction", 1), ("pressure", -1))
        for name in NAMES
    ),
    Region("trailing base", 0, "base"),
    Region("fore web", 0, "web"),
    Region("aft web", 0, "web"),
)
directions = st.tuples(*[st.floats(-1.0, 1.0)] * 3).filter(lambda v: np.hypot(v[0], v[1]) > 1e-3)


@given(directions)
def test_a_camera_sees_the_pitch_axis_run_to_the_right(towards: tuple[float, float, float]) -> None:
    axes = Camera(towards).axes
    np.testing.assert_allclose(axes @ axes.T, np.eye(3), atol=1e-9)
    assert np.linalg.det(axes) == pytest.approx(1.0)
    assert axes[0, 2] > 0
    assert axes[1, 2] == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize(("towards", "colour"), [((1.0, 0.0, 0.0), 0), ((-1.0, 0.0, 0.0), 1)])
def test_a_tube_stands_on_the_right_pixels_in_the_colour_of_the_side_that_is_seen(
    towards: tuple[float, float, float], colour: int
) -> None:
    mesh = tube(64, 4, radius=0.5, length=2.0)
    points, corners = mesh.points[: mesh.n_corners], mesh.cells[:, :4]
    camera = Camera(towards)
    colours = np.array([[200, 0, 0], [0, 0, 200]], dtype=np.uint8)[mesh.region]
    # 100 pixels a metre, with 50 pixels of margin on the left and 25 below.
    image = render(
        points, corners, colours=colours, camera=camera, frame=Frame(-0.5, -0.75, 3.0, 1.5), pixels=(300, 150)
    )
    assert image.shape == (150, 300, 3)
    inked = np.any(image != 255, axis=2)
    rows, columns = np.flatnonzero(inked.any(axis=1)), np.flatnonzero(inked.any(axis=0))
    assert (columns[0], columns[-1]) == (50, 249)
    assert (rows[0], rows[-1]) == (25, 124)
    assert inked[25:125, 50:250].all()
    assert np.array_equal(image[75, 150], [[200, 0, 0], [0, 0, 200]][colour])


def test_an_inner_face_is_darker_than_the_outer_one() -> None:
    mesh, camera = tube(24, 2), Camera((0.3, 0.3, 1.0))
    seen = mesh.e3[mesh.e3 @ camera.axes[2] > 0]
    grey = np.full((len(seen), 3), 0.6)
    outer, inner = (shaded(grey, normals, camera).astype(float) for normals in (seen, -seen))
    np.testing.assert_allclose(outer - inner, 0.12 * 0.6 * 255, atol=1.0)


def test_a_web_is_hidden_by_the_skin_and_seen_through_the_open_end() -> None:
    mesh = box_with_web()
    points, corners = mesh.points[: mesh.n_corners], mesh.cells[:, :4]
    colours = np.array([[0, 200, 0], [0, 200, 0], [200, 0, 0]], dtype=np.uint8)[mesh.region]

    def red_pixels(camera: Camera) -> int:
        frame = frame_of(points, camera, margin=0.05)
        image = render(points, corners, colours=colours, camera=camera, frame=frame, pixels=(508, 100))
        return int(np.count_nonzero(image[..., 0] > image[..., 1].astype(int) + 50))

    assert red_pixels(Camera((1.0, -0.4, 0.0))) == 0
    assert red_pixels(Camera((0.0, -0.6, 0.8))) > 50


def test_lines_are_drawn_on_top_of_the_surface() -> None:
    mesh = tube(16, 4, radius=0.5, length=2.0)
    points, corners, camera = mesh.points[: mesh.n_corners], mesh.cells[:, :4], Camera((1.0, 0.0, 0.0))
    rings = border_edges(mesh, np.floor(mesh.points[corners, 2].mean(axis=1)).astype(np.int64))
    image = render(
        points,
        corners,
        colours=np.full((len(corners), 3), 250, dtype=np.uint8),
        camera=camera,
        frame=Frame(-0.5, -0.75, 3.0, 1.5),
        pixels=(300, 150),
        lines=rings,
        line_colour="#000000",
        line_width=2.0,
    )
    dark = image.max(axis=2) < 150
    # The ring in the middle and both ends, each a full diameter tall, and nothing between.
    assert dark[26:124, [50, 150, 249]].all()
    assert not dark[:, 55:145].any()
    assert not dark[:, 155:245].any()


def test_borders_lie_where_the_label_changes_and_where_the_mesh_ends() -> None:
    mesh = tube(12, 6, n_bands=3, layers=sandwich())
    ends = border_edges(mesh, mesh.stack)
    z = mesh.points[ends, 2]
    assert np.all(z[:, 0] == z[:, 1])
    levels, counts = np.unique(np.round(z[:, 0], 9), return_counts=True)
    np.testing.assert_allclose(levels, [0.0, 2 / 3, 4 / 3, 2.0], atol=1e-9)
    assert counts.tolist() == [12, 12, 12, 12]
    assert len(np.unique(ends, axis=0)) == len(ends)


def test_the_feet_of_a_web_are_borders_of_its_region() -> None:
    mesh = box_with_web(n_along=6)
    ends = set(map(tuple, border_edges(mesh, mesh.region).tolist()))
    for name in ("fore web suction foot", "fore web pressure foot"):
        foot = mesh.node_sets[name]
        foot = foot[foot < mesh.n_corners]
        foot = foot[np.argsort(mesh.points[foot, 2])]
        assert {tuple(sorted(pair)) for pair in pairwise(foot.tolist())} <= ends


@pytest.mark.parametrize("z", [0.0, 0.3, 1.0, 1.999])
def test_a_cut_through_a_tube_is_its_polygon(z: float) -> None:
    mesh = tube(48, 4, radius=0.5, length=2.0)
    lines, element = cut_at(mesh, z)
    assert len(element) == 48
    length = np.linalg.norm(lines[:, 1] - lines[:, 0], axis=1).sum()
    assert length == pytest.approx(48 * 2 * 0.5 * np.sin(np.pi / 48), rel=1e-9)
    np.testing.assert_allclose(np.linalg.norm(lines, axis=2), 0.5, rtol=1e-6)


def test_a_cut_meets_the_web() -> None:
    mesh = box_with_web(n_up=4)
    lines, element = cut_at(mesh, 1.3)
    in_web = mesh.region[element] == 2
    assert in_web.sum() == 4
    height = np.linalg.norm(lines[in_web, 1] - lines[in_web, 0], axis=1).sum()
    assert height == pytest.approx(0.4, rel=1e-9)


def test_a_part_keeps_its_colour_whatever_the_order_and_on_both_sides() -> None:
    assert part_colours(REGIONS[::-1])["main cap"] == part_colours(REGIONS[:4])["main cap"]
    forward, short = part_colours(REGIONS), part_colours(REGIONS[2:9])
    assert all(forward[name] == short[name] for name in short)
    assert len(set(forward.values())) == len(forward) == len(NAMES) + 3


@given(st.floats(-1e3, 1e3), st.floats(0.0, 1e3), st.booleans())
def test_levels_hold_all_values_in_few_round_steps(low: float, span: float, whole: bool) -> None:
    if whole:
        low, span = float(np.floor(low)), float(np.floor(span))
    levels = round_levels(low, low + span, whole=whole)
    assert 2 <= len(levels) <= 9
    assert np.all(np.diff(levels) > 0)
    assert levels[0] <= low + 1e-6 * span + 1e-9
    assert levels[-1] >= low + span - 1e-6 * span - 1e-9
    if whole:
        assert np.all(levels == np.rint(levels))
        assert levels[-1] > low + span


def test_thickness_is_painted_in_the_step_that_holds_it() -> None:
    mesh = tube(12, 6, n_bands=3, layers=sandwich())
    paint = paint_thickness(mesh)
    step = np.array([int(np.flatnonzero(np.all(paint.steps == colour, axis=1))[0]) for colour in paint.colours])
    millimetres = np.round(mesh.thickness * 1e3, 9)
    assert np.all(paint.levels[step] <= millimetres)
    assert np.all(millimetres <= paint.levels[step + 1])
    assert len(np.unique(step)) == 2  # 3 mm, and 8 and 9 mm


def test_bare_elements_are_grey_and_named() -> None:
    mesh = box_with_web(layers=sandwich())
    paint = paint_thickness(mesh)
    assert list(paint.names) == ["no plies"]
    bare = mesh.region == 2
    assert np.all(paint.colours[bare] == paint.names["no plies"])
    assert not np.any(np.all(paint.colours[~bare] == paint.names["no plies"], axis=1))


def test_regions_are_painted_by_name() -> None:
    mesh = box_with_web()
    paint = paint_regions(mesh)
    assert list(paint.names) == ["panel", "fore web"]
    assert np.all(paint.colours[mesh.region == 2] == paint.names["fore web"])


@pytest.mark.parametrize(("shape", "hand"), [("quad", "clockwise"), ("triangle", "counter-clockwise")])
def test_every_subject_of_every_mesh_makes_a_picture(tmp_path: Path, shape: str, hand: str) -> None:
    mesh = replace(box_with_web(layers=sandwich(), shape=shape), hand=hand, title="Box [bold] $x_1$")
    for by in SUBJECTS:
        path = tmp_path / f"{by}.png"
        picture(mesh, path, by=by)
        head = path.read_bytes()[:24]
        assert head[:8] == b"\x89PNG\r\n\x1a\n"
        assert int.from_bytes(head[16:20], "big") == 1600


def test_the_same_mesh_makes_the_same_bytes(tmp_path: Path) -> None:
    mesh = box_with_web(layers=sandwich())
    for name in ("a.png", "b.png"):
        picture(mesh, tmp_path / name, by="thickness")
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()


def test_an_unknown_subject_names_the_known_ones(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="no subject 'plies'; known: region, stack, thickness, e1, cut, developed"):
        picture(tube(8, 2), tmp_path / "x.png", by="plies")
    assert set(PAINTS) | {"cut", "developed"} == set(SUBJECTS)


@pytest.mark.skipif(sys.platform != "linux", reason="VTK draws through EGL on Linux")
def test_nothing_to_draw_with_is_said_before_vtk_ends_the_process(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("DISPLAY", raising=False)
    monkeypatch.setattr(render_module, "EGL", "libNoSuchThing.so.1")
    with pytest.raises(MissingExtra, match="apt-get install libegl1"):
        require_pictures()


@pytest.mark.parametrize("library", ["pyvista", "matplotlib.figure"])
def test_a_missing_library_is_named_with_its_install_line(monkeypatch: pytest.MonkeyPatch, library: str) -> None:
    monkeypatch.setitem(sys.modules, library, None)
    with pytest.raises(MissingExtra, match="pip install pyvista matplotlib"):
        require_pictures()
