"""Unsymmetric laminates in CalculiX: bending and twisting of a flat strip and of a tube under pull.

Source: classical laminate theory, ε and κ from the inverse of A, B, D (Jones, Mechanics of Composite Materials, ch. 4,
from memory), written out here on its own. Under an even end load the strip strains evenly, so that the theory is exact
there for any width. The tube is a nest of thin tubes, one a layer, that share the axial strain and the rate of twist.
How much each is widened by differs by the thinning of the layers (σ3 = 0): without it the twist would come out 11 %
too large, for the order of the layers acts through the wall's thickness alone.
"""

from __future__ import annotations

from math import cos, pi, radians, sin

import numpy as np
import pytest
from blades import GLASS, blade, rule, skin_ply, stations
from sample_meshes import strip
from solver_runs import all_moves, needs_ccx, reduced_stiffness, run_solver, tube_strain_and_twist

from skinmesh.definition.blade import CircleProfile
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.build import build_mesh

pytestmark = [pytest.mark.solver, needs_ccx]

WIDTH, LENGTH, PULL = 0.3, 1.0, 1e4  # m, m, N/m
TOLERANCE = 2e-3
STACKS = {
    "cross-ply": (("first", 0.002, 0.0), ("second", 0.002, 90.0)),
    "angle-ply": (("first", 0.002, 45.0), ("second", 0.002, -45.0)),
    "no symmetry at all": (("first", 0.001, 0.0), ("second", 0.002, 30.0), ("third", 0.003, -60.0)),
}


def laminate(name: str, *, is_flipped: bool = False) -> tuple[Layer, ...]:
    layers = tuple(Layer(ply, GLASS, thickness, radians(angle)) for ply, thickness, angle in STACKS[name])
    return layers[::-1] if is_flipped else layers


def strains_under_pull(layers: tuple[Layer, ...], *, is_coupled: bool = True) -> np.ndarray:
    """(ε1, ε2, γ12, κ1, κ2, κ12) about the middle under a force per width along e1 alone."""
    total = sum(layer.thickness for layer in layers)
    stiffness = np.zeros((6, 6))
    top = total / 2  # the first layer lies at the face that +e3 points to
    for layer in layers:
        bottom = top - layer.thickness
        powers = [(top ** (k + 1) - bottom ** (k + 1)) / (k + 1) for k in range(3)]
        stiffness += np.kron([[powers[0], powers[1]], [powers[1], powers[2]]], reduced_stiffness(layer))
        top = bottom
    if not is_coupled:
        stiffness[:3, 3:] = stiffness[3:, :3] = 0.0
    return np.linalg.solve(stiffness, [PULL, 0, 0, 0, 0, 0])


@pytest.mark.parametrize("offset", [0.0, 0.5])
@pytest.mark.parametrize("name", STACKS)
def test_a_strip_bends_and_twists_under_pull(tmp_path, name, offset):
    layers = laminate(name)
    mesh = strip(4, 10, width=WIDTH, length=LENGTH, layers=layers, offset=offset)
    y, z = mesh.points[:, 1], mesh.points[:, 2]
    lines = ["*STEP\n*STATIC\n*CLOAD"]
    for end, sign in ((0.0, -1.0), (LENGTH, 1.0)):
        ring = np.flatnonzero(z == end)
        size = np.where(ring < mesh.n_corners, 2.0, 4.0) * WIDTH / 4 / 6
        size[np.abs(y[ring]) > WIDTH / 2 - 1e-9] /= 2
        assert size.sum() == pytest.approx(WIDTH)
        lines += [f"{node + 1},3,{sign * PULL * share:.12g}" for node, share in zip(ring, size, strict=True)]

    def node(across: float, along: float) -> int:
        return int(np.argmin(np.hypot(y - across, z - along))) + 1

    # held at three nodes, just so that it cannot move as a rigid body
    held = f"*BOUNDARY\n{node(0, 0)},1,3\n{node(0, LENGTH)},1,2\n{node(WIDTH / 2, 0)},1,1\n"
    step = held + "\n".join(lines) + "\n*NODE PRINT,NSET=ALL\nU\n*END STEP\n"
    moves = all_moves(run_solver(mesh, tmp_path, step=step, drop_clamp=True), mesh)

    one = np.ones_like(y)
    plane = np.column_stack([one, y, z])
    (_, uy_y, uy_z), (_, uz_y, uz_z) = (np.linalg.lstsq(plane, moves[:, k], rcond=None)[0] for k in (1, 2))
    quadratic = np.column_stack([plane, y * y, y * z, z * z])
    (*_, yy, yz, zz), left, *_ = np.linalg.lstsq(quadratic, moves[:, 0], rcond=None)
    assert np.sqrt(left[0] / len(y)) < 1e-4 * np.abs(moves[:, 0]).max()
    # e1 is z, e3 is x, and e2 = e3 × e1 is −y
    found = np.array([uz_z, uy_y, -(uy_z + uz_y), -2 * zz, -2 * yy, 2 * yz])

    wanted = strains_under_pull(layers)
    scale = np.repeat([np.abs(wanted[:3]).max(), np.abs(wanted[3:]).max()], 3)
    assert found / scale == pytest.approx(wanted / scale, abs=TOLERANCE)
    for wrong in (strains_under_pull(laminate(name, is_flipped=True)), strains_under_pull(layers, is_coupled=False)):
        assert np.abs((found - wrong) / scale).max() > 0.5


def thinning(layer: Layer) -> np.ndarray:
    """(3,) strain through the thickness of a layer under unit stresses σ1, σ2, τ12 in element axes."""
    material, c, s = layer.material, cos(layer.angle), sin(layer.angle)
    along, across = -material.nu13 / material.E1, -material.nu23 / material.E2
    return np.array([c * c * along + s * s * across, s * s * along + c * c * across, 2 * c * s * (along - across)])


def pull_of_nested_tubes(layers: tuple[Layer, ...], outer_radius: float, force: float) -> np.ndarray:
    """Axial strain and rate of twist about +z of tubes one inside another, the first layer outermost.

    Unknown are the axial strain, the widening and the twist; e2 runs against the turn about +z. Each layer hands the
    widening of its outer face, less its own thinning, on to the next.
    """
    stiffness = np.zeros((3, 3))
    outside, widening = outer_radius, np.array([0.0, 1.0, 0.0])
    for layer in layers:
        t, Q = layer.thickness, reduced_stiffness(layer)
        radius = outside - t / 2
        even = np.array([[1, 0, 0], widening / radius, [0, 0, -radius]])
        slope = thinning(layer) @ Q @ even
        strain = even - [[0, 0, 0], slope * t / 2 / radius, [0, 0, 0]]
        virtual = np.array([[1, 0, 0], [0, 1 / radius, 0], [0, 0, -radius]])
        stiffness += 2 * pi * radius * t * virtual.T @ Q @ strain
        outside, widening = outside - t, widening - slope * t
    strain, _, twist = np.linalg.solve(stiffness, [force, 0.0, 0.0])
    return np.array([strain, twist])


@pytest.mark.parametrize(
    ("surface", "hand", "angles"),
    [
        ("outer", "clockwise", (45.0, -45.0)),
        ("mid", "counter-clockwise", (45.0, -45.0)),
        ("mid", "clockwise", (60.0, 10.0, -60.0, -10.0)),
    ],
)
def test_a_balanced_tube_twists_under_pull_by_the_order_of_its_layers(tmp_path, surface, hand, angles):
    """As many fibres turn one way as the other: only which lie outside makes the twist, and its sign."""
    radius, thickness = 0.5, 0.05
    definition = blade(
        stations([0, 2, 4, 6], [2 * radius + thickness] * 4, ["ring"] * 4),
        {"ring": CircleProfile()},
        plies=[skin_ply(thickness / len(angles), angle) for angle in angles],
        mesh=rule(0.3, surface=surface),
        hand=hand,
    )
    found = np.array(tube_strain_and_twist(build_mesh(definition), tmp_path, radius=radius, axial=1e5, tangential=0.0))
    # the mirror image turns its fibres the other way
    sense = 1.0 if hand == "clockwise" else -1.0
    layers = tuple(Layer("", GLASS, thickness / len(angles), sense * radians(angle)) for angle in angles)
    wanted = pull_of_nested_tubes(layers, radius + thickness / 2, 1e5)
    assert found == pytest.approx(wanted, rel=0.02)
    assert np.sign(found[1]) == sense * np.sign(angles[0])
    flipped = pull_of_nested_tubes(layers[::-1], radius + thickness / 2, 1e5)
    assert abs(found[1] - flipped[1]) > 1.8 * abs(found[1])
