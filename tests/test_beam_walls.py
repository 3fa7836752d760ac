"""Both solvers of thin-walled sections on straight walls, against closed forms and against each other.

Closed forms from Megson, Aircraft Structures for Engineering Students, chapters on open and closed thin-walled beams,
and Roark's Formulas for Stress and Strain, table of shear centres (from memory).
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from wall_sections import both_methods, isotropic, plate, straight_walls

from skinmesh.beam.cells import find_cells
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack

METAL = isotropic()
E, G, RHO = METAL.E1, METAL.G12, METAL.density
T = 0.002
CARBON = Material("carbon", 130e9, 9e9, 9e9, 0.3, 0.3, 0.4, 5e9, 5e9, 3e9, 1600.0)


def box(width: float, height: float):
    nodes = [(0, 0), (width, 0), (width, height), (0, height)]
    return nodes, [(0, 1), (1, 2), (2, 3), (3, 0)]


def test_box() -> None:
    b, h = 0.4, 0.15
    nodes, joins = box(b, h)
    for road in both_methods(straight_walls(nodes, joins, [plate(T)] * 4)):
        area = 2 * (b + h) * T
        assert road.axial[0] == pytest.approx(E * area, rel=1e-12)
        assert road.mass[0] == pytest.approx(RHO * area, rel=1e-12)
        i_about_x = 2 * b * T * (h / 2) ** 2 + 2 * T * h**3 / 12 + 2 * b * T**3 / 12
        i_about_y = 2 * h * T * (b / 2) ** 2 + 2 * T * b**3 / 12 + 2 * h * T**3 / 12
        # a plate's bending stiffness is that of plane strain: its own thin part is stiffer by 1 / (1 − ν²) at most
        assert road.bending[0, 1, 1] == pytest.approx(E * i_about_x, rel=1e-5)
        assert road.bending[0, 0, 0] == pytest.approx(E * i_about_y, rel=1e-5)
        assert road.principal[0] == pytest.approx([E * i_about_x, E * i_about_y], rel=1e-5)
        closed = 4 * (b * h) ** 2 * G * T / (2 * (b + h))
        assert road.torsion[0] == pytest.approx(closed + G * 2 * (b + h) * T**3 / 3, rel=1e-12)
        for centre in (road.mass_centre, road.tension_centre, road.shear_centre):
            assert centre[0] == pytest.approx([b / 2, h / 2], abs=1e-12)
        # the larger stiffness acts along x: a quarter of a turn from the chord line
        assert abs(np.degrees(road.structural_twist[0])) == pytest.approx(90.0)
        assert (road.n_cells[0], road.n_parts[0]) == (1, 1)


def test_two_equal_cells_twist_as_the_outer_box_does() -> None:
    nodes = [(0, 0), (0.2, 0), (0.4, 0), (0.4, 0.2), (0.2, 0.2), (0, 0.2)]
    joins = [(0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (5, 0), (1, 4)]
    for road in both_methods(straight_walls(nodes, joins, [plate(T)] * 7)):
        bredt = 4 * 0.08**2 * G * T / 1.2
        assert road.torsion[0] == pytest.approx(bredt + G * 1.4 * T**3 / 3, rel=1e-12)
        assert road.n_cells[0] == 2


def test_two_unequal_cells_after_batho() -> None:
    """Square cell of side a beside a rectangle of width 2a, web of three times the thickness."""
    a = 0.1
    nodes = [(0, 0), (a, 0), (3 * a, 0), (3 * a, a), (a, a), (0, a)]
    joins = [(0, 1), (1, 2), (2, 3), (3, 4), (4, 5), (5, 0), (1, 4)]
    # q1 (3 + 1/3) − q2 / 3 = 2 a t G θ', q2 (5 + 1/3) − q1 / 3 = 4 a t G θ'
    q1, q2 = np.linalg.solve([[10 / 3, -1 / 3], [-1 / 3, 16 / 3]], np.array([2.0, 4.0]) * a * T * G)
    bredt = 2 * a**2 * q1 + 4 * a**2 * q2
    loose = G * (8 * a * T**3 + a * (3 * T) ** 3) / 3
    for road in both_methods(straight_walls(nodes, joins, [plate(T)] * 6 + [plate(3 * T)])):
        assert road.torsion[0] == pytest.approx(bredt + loose, rel=1e-12)


def test_channel() -> None:
    """Shear centre of a channel 3 b² / (h + 6 b) outside its web; open torsion Σ s t³ / 3."""
    b, h = 0.08, 0.2
    nodes = [(b, 0), (0, 0), (0, h), (b, h)]
    for road in both_methods(straight_walls(nodes, [(0, 1), (1, 2), (2, 3)], [plate(1e-4)] * 3)):
        assert road.shear_centre[0] == pytest.approx([-3 * b**2 / (h + 6 * b), h / 2], rel=1e-5)
        assert road.tension_centre[0] == pytest.approx([b**2 / (h + 2 * b), h / 2], rel=1e-12)
        assert road.torsion[0] == pytest.approx(G * (h + 2 * b) * 1e-12 / 3, rel=1e-9)
        assert road.n_cells[0] == 0


def test_slit_tube() -> None:
    """Shear centre of a slit tube two radii from its centre, opposite to the slit."""
    n, r = 720, 0.1
    angle = np.linspace(0, 2 * np.pi, n + 1)
    nodes = [(r * np.cos(a), r * np.sin(a)) for a in angle]
    joins = [(k, k + 1) for k in range(n)]
    for road in both_methods(straight_walls(nodes, joins, [plate(1e-4)] * n)):
        assert road.shear_centre[0] == pytest.approx([-2 * r, 0.0], abs=1e-4 * r)
        assert road.n_cells[0] == 0
    closed = [*joins[:-1], (n - 1, 0)]
    for road in both_methods(straight_walls(nodes[:-1], closed, [plate(1e-4)] * n)):
        assert road.torsion[0] == pytest.approx(2 * np.pi * r**3 * 1e-4 * G, rel=1e-4)
        assert road.shear_centre[0] == pytest.approx([0.0, 0.0], abs=1e-12)


def test_walls_meeting_in_a_point_have_their_shear_centre_there() -> None:
    nodes = [(0.3, 0.2), (0.5, 0.2), (0.3, 0.45), (0.1, 0.1)]
    for road in both_methods(straight_walls(nodes, [(0, 1), (0, 2), (3, 0)], [plate(1e-4), plate(3e-4), plate(2e-4)])):
        assert road.shear_centre[0] == pytest.approx([0.3, 0.2], abs=1e-6)


def test_box_with_one_stiff_wall() -> None:
    """Shear centre of a box with one web k times as thick as the rest: the flows of a force along y written out."""
    b, h, k = 0.3, 0.1, 4.0
    nodes, joins = box(b, h)
    t = 1e-4
    road, other = both_methods(straight_walls(nodes, joins, [plate(t), plate(k * t), plate(t), plate(t)]))
    inertia = 2 * b * t * (h / 2) ** 2 + t * h**3 / 12 * (1 + k)
    # slit in the middle of the thin web, at x = 0: round from there the flow grows down the web, along the flange, and
    # up to the middle of the thick web, and falls likewise
    flange = np.array([t * h**2 / 8, t * h**2 / 8 + t * b * h / 2]) / inertia
    at_middle = flange[1] + k * t * h**2 / 8 / inertia
    thick = flange[1] + (at_middle - flange[1]) * 2 / 3
    thin = flange[0] / 3
    # no twist: the mean of flow / thickness round the cell vanishes
    q0 = -(2 * b * flange.mean() + h * thick / k + h * thin) / (2 * b + h + h / k)
    # about the thin web's foot the upper flange and the thick web turn
    expected = (thick + q0) * h * b + (flange.mean() + q0) * b * h
    assert road.shear_centre[0, 1] == pytest.approx(h / 2, abs=1e-9)
    assert other.shear_centre[0] == pytest.approx(road.shear_centre[0], abs=1e-9)
    assert road.shear_centre[0, 0] == pytest.approx(expected, rel=1e-4)


def test_moving_and_turning_a_section() -> None:
    """Parallel axes: stiffnesses stay, centres move along, the matrix about the pitch axis follows Steiner."""
    nodes = np.array([(0, 0), (0.3, 0.02), (0.33, 0.12), (0.05, 0.15), (0.4, 0.3)])
    joins = [(0, 1), (1, 2), (2, 3), (3, 0), (2, 4), (1, 3)]
    stacks = [Stack((Layer("p", CARBON, 1e-3 * (1 + k), 0.3 * k), Layer("q", METAL, 1e-3, 0.0))) for k in range(6)]
    angle, shift = 0.7, np.array([3.0, -2.0])
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    for here, there in zip(
        both_methods(straight_walls(nodes.tolist(), joins, stacks)),
        both_methods(straight_walls((nodes @ turn.T + shift).tolist(), joins, stacks)),
        strict=True,
    ):
        for name in ("mass", "axial", "torsion", "principal"):
            assert getattr(there, name)[0] == pytest.approx(getattr(here, name)[0], rel=1e-9)
        for name in ("mass_centre", "tension_centre", "shear_centre"):
            assert getattr(there, name)[0] == pytest.approx(turn @ getattr(here, name)[0] + shift, abs=1e-9)
        for name in ("bending", "inertia"):
            assert np.allclose(getattr(there, name)[0], turn @ getattr(here, name)[0] @ turn.T, rtol=1e-9)
        # x = r cos, y = r sin: turned by +angle about z, the chord direction y turns towards −x
        assert there.structural_twist[0] == pytest.approx(here.structural_twist[0] - angle, abs=1e-9)
        centre = there.tension_centre[0]
        steiner = there.bending[0] + there.axial[0] * np.outer(centre, centre)
        assert np.allclose(there.stiffness[0, 1:3, 1:3], steiner, rtol=1e-9)
        assert there.stiffness[0, 3, 3] == pytest.approx(here.stiffness[0, 3, 3], rel=1e-9)
        assert there.stiffness[0, 0, 3] == pytest.approx(here.stiffness[0, 0, 3], rel=1e-9)


def test_lengths_in_other_units() -> None:
    """All lengths times k: EA grows by k², EI and GJ by k⁴, mass by k², mass moments by k⁴."""
    nodes, joins = box(0.4, 0.15)
    k = 3.0
    small = both_methods(straight_walls(nodes, joins, [plate(T)] * 4))
    large = both_methods(straight_walls((k * np.array(nodes)).tolist(), joins, [plate(k * T)] * 4))
    for one, other in zip(small, large, strict=True):
        for name, power in (("mass", 2), ("axial", 2), ("principal", 4), ("torsion", 4), ("inertia", 4)):
            assert np.allclose(getattr(other, name), k**power * getattr(one, name), rtol=1e-12, atol=1e-12)


def test_direction_of_a_wall_does_not_matter() -> None:
    nodes, joins = box(0.4, 0.15)
    stack = Stack((Layer("a", CARBON, 1e-3, 0.5),))
    plain = both_methods(straight_walls(nodes, joins, [stack] * 4))
    # e3 turns over with the wall: the mirrored angle is the same laminate in space
    other = Stack((Layer("a", CARBON, 1e-3, -0.5),))
    turned = [(0, 1), (2, 1), (2, 3), (0, 3)]
    for one, two in zip(plain, both_methods(straight_walls(nodes, turned, [stack, other, stack, other])), strict=True):
        assert np.allclose(two.stiffness, one.stiffness, rtol=1e-9, atol=1e-9 * np.abs(one.stiffness).max())


@st.composite
def graphs(draw):
    """A connected section of up to eight nodes with laminates of any angle."""
    n = draw(st.integers(3, 8))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    nodes = rng.uniform(-0.5, 0.5, (n, 2))
    joins = [(int(rng.integers(0, k)), k) for k in range(1, n)]
    joins += [pair for pair in ((a, b) for a in range(n) for b in range(a)) if rng.random() < 0.35]
    joins = list(dict.fromkeys(tuple(sorted(pair)) for pair in joins))
    stacks = [
        Stack(
            tuple(
                Layer(f"p{k}", CARBON, float(rng.uniform(0.5e-3, 4e-3)), float(rng.uniform(-1.5, 1.5)))
                for k in range(int(rng.integers(1, 4)))
            )
        )
        for _ in joins
    ]
    return nodes.tolist(), joins, stacks


@settings(max_examples=60, deadline=None)
@given(graphs())
def test_force_and_displacement_method_agree(section) -> None:
    """Complementary methods: all of stiffness, and the shear centre, whatever the graph and the laminates."""
    nodes, joins, stacks = section
    cells, warping = both_methods(straight_walls(nodes, joins, stacks))
    assert cells.n_cells[0] == warping.n_cells[0] == len(joins) - len(nodes) + 1
    scale = np.sqrt(np.einsum("mii->mi", cells.stiffness))
    difference = (cells.stiffness - warping.stiffness) / (scale[:, :, None] * scale[:, None, :])
    assert np.abs(difference).max() < 1e-8
    # the stiffness of a section is positive, whichever couplings it has
    assert np.linalg.eigvalsh(cells.stiffness / (scale[:, :, None] * scale[:, None, :])).min() > 0.0
    assert np.allclose(cells.shear_centre, warping.shear_centre, atol=2e-6)


def test_loose_parts_are_counted() -> None:
    nodes = [(0, 0), (0.1, 0), (0.1, 0.1), (0.5, 0.5), (0.6, 0.5)]
    for road in both_methods(straight_walls(nodes, [(0, 1), (1, 2), (2, 0), (3, 4)], [plate(T)] * 4)):
        assert (road.n_cells[0], road.n_parts[0]) == (1, 2)


def test_cells_are_closed_ways() -> None:
    ends = np.array([[0, 1], [2, 1], [2, 3], [0, 3], [3, 1], [4, 0], [5, 4]])
    cells = find_cells(ends)
    balance = np.zeros((6, len(ends)))
    balance[ends[:, 0], np.arange(len(ends))] -= 1
    balance[ends[:, 1], np.arange(len(ends))] += 1
    assert cells.cycles.shape == (2, len(ends))
    assert np.all(cells.cycles @ balance.T == 0)
    assert np.linalg.matrix_rank(cells.cycles) == 2
    assert cells.n_parts == 1
