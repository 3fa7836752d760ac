"""Beam properties of tubes, elliptic tubes and cones against closed forms, by both roads.

Sources (from memory): Bredt–Batho for a closed cell of any shape, J = 4 A² / ∮ ds / t; thin circular tube of one
laminate, EA = 2πr (A11 − A12²/A22), extension–twist 2πr² (A16 − A12 A26/A22), GJ = 2πr³ (A66 − A26²/A22), from the A
matrix with no hoop force (Kollár & Springer, Mechanics of Composite Structures, ch. 6); Steiner's formulas for parallel
curves; perimeter of the ellipse 4 a E(e); conical shell under end loads (Flügge, Stresses in Shells, ch. 2).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from blades import GLASS, blade, rule, skin_ply, stations, tube
from scipy.integrate import quad
from scipy.special import ellipe

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import mesh_sections
from skinmesh.beam.sections import SectionProperties
from skinmesh.definition.blade import BladeDefinition, CircleProfile, PlyRule
from skinmesh.definition.spanwise import constant
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.laminate.theory import laminate_stiffness
from skinmesh.mesh.build import build_mesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface

RADIUS = 0.5
LIMIT = 0.005


def roads(made: BladeDefinition, z: float) -> tuple[SectionProperties, SectionProperties]:
    skin, _ = unroll_skin(made, loft_surface(made))
    return exact_sections(made, skin, np.array([z])), mesh_sections(build_mesh(made), np.array([z]))


@dataclass(frozen=True)
class Wall:
    """Condensed stiffness of a laminate, written out."""

    axial: float
    shear: float
    coupling: float

    @classmethod
    def of(cls, stack: Stack) -> Wall:
        A = laminate_stiffness([stack]).A[0]
        a11, a22, a12, a16, a26, a66 = A[0, 0], A[1, 1], A[0, 1], A[0, 2], A[1, 2], A[2, 2]
        return cls(a11 - a12**2 / a22, a66 - a26**2 / a22, a16 - a12 * a26 / a22)


@pytest.mark.parametrize("ratio", [0.02, 0.1, 0.2])
def test_circular_tube(ratio: float) -> None:
    """EA of the thick ring itself; EI and GJ within what a thin wall leaves out: (t/r)²/6 less, (t/r)²/12 more."""
    thickness = ratio * RADIUS
    made = tube(radius=RADIUS, plies=[skin_ply(thickness)], mesh=rule(0.1))
    inner = RADIUS - thickness
    area = np.pi * (RADIUS**2 - inner**2)
    second = np.pi / 4 * (RADIUS**4 - inner**4)
    thick = (2 * thickness / (RADIUS + inner)) ** 2
    for road in roads(made, 1.27):
        assert road.mass[0] == pytest.approx(GLASS.density * area, rel=3e-4)
        assert road.axial[0] == pytest.approx(GLASS.E1 * area, rel=3e-4)
        assert road.principal[0] == pytest.approx(GLASS.E1 * second * (1 - thick / 6), rel=5e-4)
        assert road.torsion[0] == pytest.approx(2 * GLASS.G12 * second * (1 + thick / 12), rel=5e-4)
        assert road.inertia[0] == pytest.approx(
            np.eye(2) * GLASS.density * second * (1 - thick / 6), rel=5e-4, abs=0.01
        )
        assert np.isnan(road.structural_twist[0])


@pytest.mark.parametrize("angle", [30.0, -30.0, 45.0])
@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
def test_helical_tube(angle: float, hand: str) -> None:
    """One off-axis ply all round: size and sign of the extension–twist coupling.

    A positive angle turns from e1 to e2 = e3 × e1. With e3 outward and e1 along +z that is clockwise round +z, so a
    stretched tube of positive plies has a shear flow, and with it a torque of the wall, about −z. On the mirrored blade
    the sign turns.
    """
    thickness = 0.01
    made = tube(radius=RADIUS, plies=[skin_ply(thickness, angle)], mesh=rule(0.1), hand=hand)
    wall = Wall.of(Stack((Layer("shell", GLASS, thickness, np.radians(angle)),)))
    r = RADIUS - thickness / 2
    # bending pulls one side and pushes the other: no shear flow runs round, and every wall is free to shear
    free = wall.axial - wall.coupling**2 / wall.shear
    sign = -1.0 if hand == "clockwise" else 1.0
    for road in roads(made, 1.27):
        assert road.axial[0] == pytest.approx(2 * np.pi * r * wall.axial, rel=1e-3)
        assert road.torsion[0] == pytest.approx(2 * np.pi * r**3 * wall.shear, rel=1e-3)
        assert road.stiffness[0, 0, 3] == pytest.approx(sign * 2 * np.pi * r**2 * wall.coupling, rel=1e-3)
        assert np.abs(road.stiffness[0, 1:3, 3]).max() < 1e-3 * RADIUS * abs(road.stiffness[0, 0, 3])
        assert road.bending[0] == pytest.approx(np.eye(2) * np.pi * r**3 * free, rel=1e-3, abs=1e-4 * r**2 * wall.axial)


def test_unsymmetric_tube() -> None:
    """∮ (x² A + 2 x n B + n² D) ds for bending, and for torsion the shear flow at the height B66 / A66 of the wall."""
    plies = [
        PlyRule("outer", GLASS, constant(0.004), constant(1), np.radians(45.0), ("skin",)),
        PlyRule("inner", GLASS, constant(0.012), constant(1), 0.0, ("skin",)),
        PlyRule("back", GLASS, constant(0.004), constant(1), np.radians(-45.0), ("skin",)),
        PlyRule("inmost", GLASS, constant(0.008), constant(1), np.radians(90.0), ("skin",)),
    ]
    made = tube(radius=RADIUS, plies=plies, mesh=rule(0.1))
    stack = Stack(tuple(Layer(p.name, GLASS, float(p.thickness.value[0]), p.angle) for p in plies))
    laminate = laminate_stiffness([stack])
    A, B, D = (getattr(laminate, name)[0] for name in "ABD")
    r = RADIUS - stack.thickness / 2

    def condensed(X, Y, i: int, j: int) -> float:
        return X[i, j] - (A if X is A else B)[i, 1] * (A if Y is A else B)[1, j] / A[1, 1]

    a11, b11, d11 = condensed(A, A, 0, 0), condensed(B, A, 0, 0), D[0, 0] - B[0, 1] ** 2 / A[1, 1]
    a66, b66 = condensed(A, A, 2, 2), condensed(B, A, 2, 2)
    assert abs(b11) > 0.01 * a11 * stack.thickness
    for road in roads(made, 1.27):
        assert road.axial[0] == pytest.approx(2 * np.pi * r * a11, rel=2e-3)
        assert road.principal[0] == pytest.approx(np.pi * (r**3 * a11 + 2 * r**2 * b11 + r * d11), rel=2e-3)
        enclosed = np.pi * (r + b66 / a66) ** 2
        assert road.torsion[0] == pytest.approx(4 * enclosed**2 * a66 / (2 * np.pi * r), rel=LIMIT)


@pytest.mark.parametrize("slimness", [0.3, 0.6])
def test_elliptic_tube(slimness: float) -> None:
    a, b, t = 0.5, 0.5 * slimness, 0.004
    table = stations([0.0, 2.0], [2 * a, 2 * a], ["ring", "ring"], ratio=[slimness, slimness])
    made = blade(table, {"ring": CircleProfile()}, plies=[skin_ply(t)], mesh=rule(0.05))
    half = t / 2
    outer = 4 * a * ellipe(1 - slimness**2)
    # parallel curve at the depth of half of the wall: Steiner
    length, enclosed = outer - 2 * np.pi * half, np.pi * a * b - outer * half + np.pi * half**2

    def second(axis: int) -> float:
        def integrand(angle: float) -> float:
            cos, sin = np.cos(angle), np.sin(angle)
            speed = np.hypot(a * sin, b * cos)
            place = (b * sin - half * a * sin / speed, a * cos - half * b * cos / speed)[axis]
            radius = speed**3 / (a * b)
            return place**2 * speed * (1 - half / radius)

        return 4 * quad(integrand, 0.0, np.pi / 2)[0]

    for road in roads(made, 1.01):
        assert road.mass[0] == pytest.approx(GLASS.density * t * length, rel=LIMIT)
        assert road.axial[0] == pytest.approx(GLASS.E1 * t * length, rel=LIMIT)
        assert road.principal[0] == pytest.approx([GLASS.E1 * t * second(0), GLASS.E1 * t * second(1)], rel=LIMIT)
        assert road.torsion[0] == pytest.approx(4 * enclosed**2 * GLASS.G12 * t / length, rel=LIMIT)
        assert road.structural_twist[0] == pytest.approx(0.0, abs=1e-4)
        for centre in (road.mass_centre, road.tension_centre, road.shear_centre):
            assert np.abs(centre[0]).max() < 1e-4


def test_cone() -> None:
    """A cone of half angle β: EA 2πr E t cos³ β, GJ 2πr³ G t cos β, mass 2πr ρ t / cos β."""
    length, taper, t = 1.0, 0.4, 0.004
    made = tube(radius=RADIUS, length=length, taper=taper, plies=[skin_ply(t)], mesh=rule(0.05))
    z = 0.37
    cosine = np.cos(np.arctan(RADIUS * (1 - taper) / length))
    r = RADIUS * (1 - (1 - taper) * z / length) - t / 2 / cosine
    for road in roads(made, z):
        assert road.mass[0] == pytest.approx(2 * np.pi * r * GLASS.density * t / cosine, rel=1e-3)
        assert road.axial[0] == pytest.approx(2 * np.pi * r * GLASS.E1 * t * cosine**3, rel=1e-3)
        assert road.principal[0] == pytest.approx(np.pi * r**3 * GLASS.E1 * t * cosine**3, rel=2e-3)
        assert road.torsion[0] == pytest.approx(2 * np.pi * r**3 * GLASS.G12 * t * cosine, rel=1e-3)
