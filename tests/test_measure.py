"""Areas, mass, centre and inertia against closed forms and their rate of convergence."""

from __future__ import annotations

from dataclasses import replace
from math import cos, pi, sin

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sample_meshes import BALSA, GLASS_UD, box_with_web, sandwich, tube
from scipy.integrate import dblquad

from skinmesh.laminate.stack import Layer
from skinmesh.laminate.theory import mass_moments
from skinmesh.mesh.measure import (
    element_areas,
    element_centres,
    element_masses,
    mass_properties,
    solid_mass,
)
from skinmesh.mesh.shellmesh import ShellMesh

RADIUS, LENGTH, TAPER = 0.5, 2.0, 0.4
SLANT = np.hypot(LENGTH, RADIUS * (1 - TAPER))
CONE_AREA = pi * RADIUS * (1 + TAPER) * SLANT
SHAPES = ["quad", "triangle"]


def cone(n: int, **options: object) -> ShellMesh:
    return tube(n, n // 2, radius=RADIUS, length=LENGTH, taper=TAPER, **options)  # type: ignore[arg-type]


def thick() -> tuple[Layer, ...]:
    """A laminate of a fifth of the radius, dense inside."""
    return (Layer("core", BALSA, 0.06, 0.0), Layer("cap", GLASS_UD, 0.04, 0.0))


def moved(mesh: ShellMesh, turn: np.ndarray, shift: np.ndarray) -> ShellMesh:
    axes = {name: getattr(mesh, name) @ turn.T for name in ("e1", "e2", "e3")}
    return replace(mesh, points=mesh.points @ turn.T + shift, **axes)


@pytest.mark.parametrize("shape", SHAPES)
def test_flat_elements_are_exact(shape: str) -> None:
    for order in (1, 2):
        mesh = box_with_web(4, 2, 6, width=0.8, height=0.4, length=3.0, order=order, shape=shape)
        areas = element_areas(mesh)
        assert areas.sum() == pytest.approx(2 * (0.8 + 0.4) * 3.0 + 0.4 * 3.0, rel=1e-13)
        assert areas[mesh.region == 2].sum() == pytest.approx(0.4 * 3.0, rel=1e-13)
        assert_allclose(areas, areas.min(), rtol=1e-12)


@pytest.mark.parametrize("shape", SHAPES)
def test_straight_elements_of_a_tube_are_a_prism(shape: str) -> None:
    mesh = tube(10, 4, radius=RADIUS, length=LENGTH, order=1, shape=shape)
    assert element_areas(mesh).sum() == pytest.approx(10 * 2 * RADIUS * sin(pi / 10) * LENGTH, rel=1e-13)


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize(("order", "rate"), [(1, 2.0), (2, 4.0)])
def test_area_of_a_cone_converges_at_the_rate_of_its_order(order: int, rate: float, shape: str) -> None:
    errors = [abs(element_areas(cone(n, order=order, shape=shape)).sum() / CONE_AREA - 1) for n in (16, 32)]
    assert np.log2(errors[0] / errors[1]) == pytest.approx(rate, abs=0.15)
    assert errors[1] < (3e-3 if order == 1 else 1e-5)


def test_a_warped_first_order_element_against_adaptive_integration() -> None:
    mesh = tube(4, 1, order=1)
    points = mesh.points + 0.2 * np.random.default_rng(3).uniform(-1, 1, mesh.points.shape)
    mesh = replace(mesh, points=points)
    a, b, c, d = points[mesh.cells[0, :4]]

    def density(y: float, x: float) -> float:
        along_x = (b - a) * (1 - y) + (c - d) * y
        along_y = (d - a) * (1 - x) + (c - b) * x
        return float(np.linalg.norm(np.cross(along_x, along_y)))

    assert element_areas(mesh)[0] == pytest.approx(dblquad(density, 0, 1, 0, 1)[0], rel=1e-6)


def test_mid_nodes_do_not_matter_to_a_first_order_mesh() -> None:
    mesh = cone(12, order=1, layers=sandwich())
    points = mesh.points.copy()
    points[mesh.n_corners :] += 0.01
    other = replace(mesh, points=points)
    assert_allclose(element_areas(other), element_areas(mesh), rtol=0)
    assert_allclose(element_centres(other), element_centres(mesh), rtol=0)
    assert mass_properties(other).mass == mass_properties(mesh).mass


@pytest.mark.parametrize("shape", SHAPES)
def test_centres(shape: str) -> None:
    first, second = (cone(32, order=order, shape=shape) for order in (1, 2))
    assert_allclose(element_centres(first), first.points[first.cells[:, : first.n_sides]].mean(axis=1), atol=1e-15)
    centre = element_centres(second)
    on_cone = RADIUS * (1 - (1 - TAPER) * centre[:, 2] / LENGTH)
    assert_allclose(np.hypot(centre[:, 0], centre[:, 1]), on_cone, rtol=4e-5)


@pytest.mark.parametrize("shape", SHAPES)
def test_mass_centre_and_inertia_of_a_tube(shape: str) -> None:
    """A sheet at the radius of the laminate's mass centre, with the spread of the laminate about it."""
    mesh = tube(48, 8, radius=RADIUS, length=LENGTH, layers=thick(), shape=shape)
    areal, first, second = mass_moments(mesh.stacks)[0]
    assert areal == pytest.approx(0.06 * 110 + 0.04 * 1920)
    height = first / areal
    r2 = (RADIUS - 0.05 + height) ** 2 + second / areal - height**2
    mass = 2 * pi * RADIUS * LENGTH * areal
    found = mass_properties(mesh)
    assert found.area == pytest.approx(2 * pi * RADIUS * LENGTH, rel=2e-6)
    assert found.mass == pytest.approx(mass, rel=2e-6)
    assert_allclose(found.centre, [0, 0, LENGTH / 2], atol=1e-9)
    assert_allclose(found.first_moments, [0, 0, mass * LENGTH / 2], atol=1e-6 * mass, rtol=2e-6)
    assert_allclose(
        found.inertia_centre, mass * np.diag([r2 / 2 + LENGTH**2 / 12] * 2 + [r2]), rtol=1e-5, atol=1e-6 * mass
    )
    assert_allclose(
        found.inertia_origin, mass * np.diag([r2 / 2 + LENGTH**2 / 3] * 2 + [r2]), rtol=1e-5, atol=1e-6 * mass
    )


def test_the_laminate_hangs_inside_the_skin_and_about_the_web() -> None:
    """A box with a heavy suction side would move; here the web alone has mass, then the skin alone."""
    web = box_with_web(web_layers=sandwich(), web_at=1, width=0.8, n_across=4)
    areal, first, _ = mass_moments(web.stacks)[0]
    assert mass_properties(web).centre[1] == pytest.approx(-0.2 - first / areal)

    skin = box_with_web(layers=thick(), width=0.8, height=0.4, length=3.0)
    areal, first, second = mass_moments(skin.stacks)[0]
    depth = 0.05 - first / areal
    found, mass = mass_properties(skin), areal * 3.0 * 2.4
    assert found.mass == pytest.approx(mass)
    x, y = 0.2 - depth, 0.4 - depth
    about_z = areal * 3.0 * 2 * (0.8 * (x**2 + 0.8**2 / 12) + 0.4 * (y**2 + 0.4**2 / 12))
    spread = (second / areal - (first / areal) ** 2) * mass
    assert found.inertia_centre[2, 2] == pytest.approx(about_z + spread)


def test_parts_sum_to_the_whole() -> None:
    mesh = tube(16, 12, layers=sandwich(), taper=0.6, n_bands=3)
    found = mass_properties(mesh)
    assert_allclose(sum(found.region_area.values()), found.area, rtol=1e-13)
    assert_allclose(sum(found.region_mass.values()), found.mass, rtol=1e-13)
    assert_allclose(sum(found.material_mass.values()), found.mass, rtol=1e-13)
    assert_allclose(element_masses(mesh).sum(), found.mass, rtol=1e-13)
    assert list(found.region_mass) == ["suction panel", "pressure panel"]
    core = element_areas(mesh)[mesh.stack < 2].sum() * 0.005 * 110
    assert found.material_mass["balsa"] == pytest.approx(core)


def test_materials_that_lie_nowhere_weigh_nothing() -> None:
    mesh = tube(8, 2, layers=[Layer("cap", GLASS_UD, 0.01, 0.0)])
    mesh = replace(mesh, materials={"balsa": BALSA, "glass UD": GLASS_UD})
    assert mass_properties(mesh).material_mass["balsa"] == 0
    assert mass_properties(mesh).material_mass["glass UD"] == pytest.approx(mass_properties(mesh).mass)


def test_a_mesh_without_plies_has_area_and_no_mass() -> None:
    mesh = tube(8, 2)
    found = mass_properties(mesh)
    assert found.area > 0
    assert found.mass == solid_mass(mesh) == 0
    assert_allclose(found.centre, 0)
    assert_allclose(found.inertia_origin, 0)


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("order", [1, 2])
def test_measures_move_with_the_blade(order: int, shape: str) -> None:
    mesh = cone(12, layers=thick(), order=order, shape=shape)
    turn = np.linalg.qr(np.random.default_rng(5).normal(size=(3, 3)))[0]
    turn *= np.sign(np.linalg.det(turn))
    shift = np.array([1.0, -2.0, 3.0])
    before, after = mass_properties(mesh), mass_properties(moved(mesh, turn, shift))
    assert after.mass == pytest.approx(before.mass, rel=1e-12)
    assert_allclose(after.centre, turn @ before.centre + shift, rtol=1e-10)
    assert_allclose(after.inertia_centre, turn @ before.inertia_centre @ turn.T, rtol=1e-9, atol=1e-9 * before.mass)
    c = after.centre
    assert_allclose(
        after.inertia_origin, after.inertia_centre + after.mass * (c @ c * np.eye(3) - np.outer(c, c)), rtol=1e-10
    )
    assert solid_mass(moved(mesh, turn, shift)) == pytest.approx(solid_mass(mesh), rel=1e-12)


@pytest.mark.parametrize("shape", SHAPES)
def test_solid_mass_of_a_thick_tube(shape: str) -> None:
    mesh = tube(32, 4, radius=RADIUS, length=LENGTH, layers=thick(), shape=shape)
    core = pi * (0.5**2 - 0.44**2) * LENGTH * 110
    cap = pi * (0.44**2 - 0.40**2) * LENGTH * 1920
    assert solid_mass(mesh) == pytest.approx(core + cap, rel=1e-4)
    assert mass_properties(mesh).mass / solid_mass(mesh) > 1.17


@pytest.mark.parametrize("shape", SHAPES)
def test_solid_mass_of_a_cone_converges_to_steiners_formula(shape: str) -> None:
    """∫ κ dA over a cone is 2π cos α × slant, and its Gaussian curvature is nought."""
    cosine = LENGTH / SLANT
    layers = thick()
    tops = (0.0, -0.06)
    exact = sum(
        layer.material.density
        * (CONE_AREA * layer.thickness + 2 * pi * cosine * SLANT * layer.thickness * (top - layer.thickness / 2))
        for layer, top in zip(layers, tops, strict=True)
    )
    errors = [abs(solid_mass(cone(n, layers=layers, shape=shape)) / exact - 1) for n in (16, 32)]
    assert errors[1] < 1e-5
    assert np.log2(errors[0] / errors[1]) > 1.8


def test_flat_walls_and_a_web_need_no_correction() -> None:
    mesh = box_with_web(layers=thick(), web_layers=sandwich())
    assert solid_mass(mesh) == pytest.approx(mass_properties(mesh).mass, rel=1e-12)


def test_solid_mass_does_not_ask_for_the_order() -> None:
    first, second = (cone(16, layers=thick(), order=order) for order in (1, 2))
    assert solid_mass(first) == solid_mass(second)


def test_a_tilted_cone_frustum_against_its_own_closed_form() -> None:
    """Straight-edged cone: a ring of equal trapezoids."""
    n = 16
    mesh = tube(n, 1, radius=RADIUS, length=LENGTH, taper=TAPER, order=1)
    wide, narrow = 2 * RADIUS * sin(pi / n), 2 * RADIUS * TAPER * sin(pi / n)
    height = np.hypot(LENGTH, RADIUS * (1 - TAPER) * cos(pi / n))
    assert_allclose(element_areas(mesh), (wide + narrow) / 2 * height, rtol=1e-12)
