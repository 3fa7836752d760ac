"""Elements whose laminate is too thick for the surface: by reasoning, and beside CalculiX itself."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest
from sample_meshes import GLASS_UD, box_with_web, sandwich, tube
from solver_runs import needs_ccx, run_solver, twisted_tube

from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.inner_face import (
    centre_normals,
    find_narrow_elements,
    find_thick_elements,
    inner_face_ratio,
    middle_height,
    node_normals,
    shape_functions,
)

GAUSS = 0.5 - 0.5 / np.sqrt(3.0)


def wall(thickness: float, n_layers: int = 1) -> tuple[Layer, ...]:
    """Equal layers that no merging joins."""
    return tuple(Layer(f"layer {k}", GLASS_UD, thickness / n_layers, 0.1 * (-1) ** k) for k in range(n_layers))


@pytest.mark.parametrize(
    ("n_nodes", "corners"), [(8, [[-1, -1], [1, -1], [1, 1], [-1, 1]]), (6, [[0, 0], [1, 0], [0, 1]])]
)
def test_shape_functions_are_one_at_their_own_node(n_nodes, corners):
    corners = np.array(corners, dtype=float)
    nodes = np.vstack([corners, (corners + np.roll(corners, -1, axis=0)) / 2])
    values, first, second = shape_functions(n_nodes, nodes)
    assert values == pytest.approx(np.eye(n_nodes), abs=1e-14)
    step = 1e-6
    places = np.array([[0.21, 0.13], [0.4, 0.35]])
    for axis, derivative in enumerate((shape_functions(n_nodes, places)[1], shape_functions(n_nodes, places)[2])):
        move = step * np.eye(2)[axis]
        slope = (shape_functions(n_nodes, places + move)[0] - shape_functions(n_nodes, places - move)[0]) / (2 * step)
        assert derivative == pytest.approx(slope, abs=1e-8)
    assert first.sum(axis=1) == pytest.approx(0, abs=1e-14)
    assert second.sum(axis=1) == pytest.approx(0, abs=1e-14)


@pytest.mark.parametrize("n_layers", [1, 2, 5])
def test_ratio_on_a_smooth_arc_is_one_minus_depth_over_radius(n_layers):
    radius, thickness = 0.5, 0.3
    mesh = tube(48, 2, radius=radius, length=0.2, layers=wall(thickness, n_layers))
    depth = thickness * (1 - GAUSS / n_layers)
    assert inner_face_ratio(mesh) == pytest.approx(1 - depth / radius, abs=2e-3)


def test_flat_walls_keep_all_of_their_area():
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich()[:2])
    webs = mesh.region == 2
    assert inner_face_ratio(mesh)[webs] == pytest.approx(1.0, abs=1e-12)


def test_knots_stand_where_normals_or_laminates_part():
    smooth = tube(24, 4, layers=sandwich())
    assert sorted(node_normals(smooth).node) == list(range(len(smooth.points)))
    box = box_with_web(layers=sandwich(), web_layers=sandwich())
    n_normals = np.bincount(node_normals(box).node)
    assert n_normals[box.node_sets["fore web suction foot"]].tolist() == [2] * 13
    edge = (np.abs(np.abs(box.points[:, 0]) - 0.2) < 1e-12) & (np.abs(np.abs(box.points[:, 1]) - 0.4) < 1e-12)
    assert np.all(n_normals[edge] == 2)
    assert n_normals.sum() == len(box.points) + 26 + np.count_nonzero(edge)
    banded = tube(24, 4, layers=sandwich(), n_bands=2)
    on_border = np.abs(banded.points[:, 2] - 1.0) < 1e-12
    assert np.bincount(node_normals(banded).node).tolist() == np.where(on_border, 2, 1).tolist()


def test_mean_normals_of_a_tube_point_outward():
    mesh = tube(24, 4, layers=sandwich())
    normals = node_normals(mesh)
    outward = mesh.points[normals.node] * [1, 1, 0] / 0.5
    assert np.einsum("ij,ij->i", normals.normals, outward).min() > 1 - 1e-4
    assert np.einsum("ij,ij->i", centre_normals(mesh), mesh.e3) == pytest.approx(1.0, abs=1e-14)


def test_middle_of_the_laminate_lies_inside_skins_and_on_webs():
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich())
    assert middle_height(mesh)[mesh.region < 2] == pytest.approx(-0.0045)
    assert middle_height(mesh)[mesh.region == 2] == pytest.approx(0.0)


def test_thick_against_curvature_and_against_width():
    assert [len(part) for part in find_thick_elements(tube(24, 4, layers=wall(0.05)))] == [0, 0]
    failing, doubtful = find_thick_elements(tube(24, 4, layers=wall(0.7)))
    assert (len(failing), len(doubtful)) == (96, 0)
    # 0.9 of the radius deep at the innermost level: runs, but doubtful.
    failing, doubtful = find_thick_elements(tube(24, 4, layers=wall(0.45 / (1 - GAUSS))))
    assert (len(failing), len(doubtful)) == (0, 96)
    # Elements 0.01 m long under a wall of 0.02 m.
    mesh = tube(24, 10, length=0.1, layers=wall(0.02))
    assert [len(part) for part in find_thick_elements(mesh)] == [0, 0]
    assert len(find_narrow_elements(mesh)) == 240
    assert len(find_narrow_elements(tube(24, 4, layers=wall(0.02)))) == 0


def test_bare_elements_never_fail():
    mesh = tube(24, 4, radius=0.01)
    assert inner_face_ratio(mesh) == pytest.approx(1.0)
    assert [len(part) for part in find_thick_elements(mesh)] == [0, 0]


def test_ratio_does_not_depend_on_place_size_or_number_of_elements_at_once(monkeypatch):
    mesh = twisted_tube(24, 10, layers=sandwich())
    ratio = inner_face_ratio(mesh)
    turn = np.linalg.qr(np.random.default_rng(1).normal(size=(3, 3)))[0]
    turn *= np.linalg.det(turn)
    moved = replace(mesh, points=mesh.points @ turn.T + [1.0, 2.0, 3.0])
    assert inner_face_ratio(moved) == pytest.approx(ratio, abs=1e-9)
    monkeypatch.setattr("skinmesh.mesh.inner_face._CHUNK", 7)
    assert np.array_equal(inner_face_ratio(mesh), ratio)


def _arc(kind: str, thickness: float, n_layers: int):
    layers = wall(thickness, n_layers)
    if kind == "tube outer":
        return tube(24, 2, radius=0.5, length=0.2, layers=layers)
    if kind == "tube coarse":
        return tube(10, 2, radius=0.5, length=0.2, layers=layers)
    if kind == "tube triangles":
        return tube(24, 2, radius=0.5, length=0.2, layers=layers, shape="triangle")
    if kind == "tube middle":
        mesh = tube(24, 2, radius=0.5, length=0.2, layers=layers)
        return replace(mesh, offset=np.zeros(len(mesh.cells)))
    if kind == "cone":
        return tube(24, 2, radius=0.5, length=0.4, layers=layers, taper=0.6)
    shape = "triangle" if kind == "band of triangles" else "quad"
    mesh = tube(64, 1, radius=0.5, length=0.05, layers=layers, shape=shape)
    if kind == "ellipse":
        return replace(mesh, points=mesh.points * [0.3, 1.0, 1.0])
    # One thick band between thin ones, on an ellipse.
    thin = Stack((Layer("thin", GLASS_UD, 0.002, 0.0),))
    stack = np.where(np.arange(len(mesh.cells)) % 64 < 20, 0, 1)
    return replace(mesh, points=mesh.points * [0.3, 1.0, 1.0], stacks=(*mesh.stacks, thin), stack=stack)


def _thickness_at_failure(kind: str, n_layers: int) -> float:
    low, high = 0.001, 4.0
    for _ in range(40):
        middle = (low + high) / 2
        fails = len(find_thick_elements(_arc(kind, middle, n_layers))[0]) > 0
        low, high = (low, middle) if fails else (middle, high)
    return high


@pytest.mark.solver
@needs_ccx
@pytest.mark.parametrize("n_layers", [1, 2, 5])
@pytest.mark.parametrize(
    "kind",
    ["tube outer", "tube coarse", "tube triangles", "tube middle", "cone", "ellipse", "band", "band of triangles"],
)
def test_the_solver_stops_exactly_where_the_check_says(tmp_path, kind, n_layers):
    limit = _thickness_at_failure(kind, n_layers)
    for share in (0.7, 0.99, 1.01, 1.4):
        mesh = _arc(kind, share * limit, n_layers)
        log = run_solver(mesh, tmp_path / f"{share}").log
        refused = {int(number) for number in re.findall(r"nonpositive jacobian\s+determinant in element +(\d+)", log)}
        failing = find_thick_elements(mesh)[0]
        assert refused == set(mesh.element_number[failing].tolist())
        assert bool(refused) == (share > 1.0)


def test_known_limits_of_a_smooth_arc():
    """Thickness over radius at failure, measured with CalculiX 2.20: 1.27 with one layer, 1.12 with two."""
    for n_layers, limit in ((1, 1.27), (2, 1.12)):
        assert _thickness_at_failure("tube outer", n_layers) / 0.5 == pytest.approx(limit, abs=0.01)
