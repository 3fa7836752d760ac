"""A blade mirrored, and a blade pitched, in CalculiX: the same numbers, mirrored and turned.

No source is needed: neither a reflection nor a rotation of blade and loads together can change what a structure does.
The skin's fibres are all inclined, so that bending twists the blade, and a mirror image that kept its laminate would
answer differently. Conventions from the axes of the blade file: twist turns the section by −twist about z, the other
hand is the mirror image in y = 0.
"""

from __future__ import annotations

from dataclasses import replace
from math import cos, radians, sin
from pathlib import Path

import numpy as np
import pytest
from blades import skin_ply
from constant_section import ALIKE, constant_section
from numpy.typing import NDArray
from solver_runs import all_moves, needs_ccx, ring_of, run_solver

from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.shellmesh import ShellMesh

pytestmark = [pytest.mark.solver, needs_ccx]

LENGTH = 3.0
LOADS = ("pull", "flap", "edge", "torque", "weight")


def turn(degrees: float) -> NDArray:
    """Rotation of a section with a twist: by −twist about z."""
    c, s = cos(radians(-degrees)), sin(radians(-degrees))
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def mesh_of(*, twist: float = 0.0, hand: str = "clockwise", angle: float = 30.0) -> ShellMesh:
    definition = constant_section(
        length=LENGTH, twist_degrees=twist, hand=hand, across=ALIKE, turning=1.0, chord_error=0.03
    )
    return build_mesh(replace(definition, plies=(skin_ply(0.001, angle), *definition.plies)))


def answers(mesh: ShellMesh, move: NDArray, folder: Path) -> tuple[NDArray, NDArray]:
    """(5, n, 3) displacements under loads that are moved with the blade, and frequencies."""
    at_home = mesh.points @ move
    corners, middles = ring_of(mesh, LENGTH)
    tip = np.concatenate([corners, middles])
    share = np.repeat([1 / 3 / len(corners), 2 / 3 / len(middles)], [len(corners), len(middles)])[:, None]
    arm = np.cross([0.0, 0.0, 1.0], at_home[tip])
    forces = [share * 1e4 * np.array(each) for each in ([0, 0, 1.0], [1.0, 0, 0], [0, 1.0, 0], arm)]
    steps = []
    for force in forces:
        moved = force @ move.T
        lines = [
            f"{mesh.node_number[node]},{axis + 1},{moved[k, axis]:.14g}"
            for k, node in enumerate(tip)
            for axis in range(3)
        ]
        steps.append("*CLOAD,OP=NEW\n" + "\n".join(lines) + "\n")
    down = move @ [-1.0, 0.5, 0.0]
    steps.append("*CLOAD,OP=NEW\n*DLOAD\nALL,GRAV,9.81," + ",".join(f"{part:.14g}" for part in down) + "\n")
    text = "".join(f"*STEP\n*STATIC\n{step}*NODE PRINT,NSET=ALL\nU\n*END STEP\n" for step in steps)
    text += "*STEP\n*FREQUENCY\n6\n*END STEP\n"
    run = run_solver(mesh, folder, step=text)
    return np.array([all_moves(run, mesh, step) for step in range(len(LOADS))]), run.frequencies


@pytest.fixture(scope="module")
def home(tmp_path_factory: pytest.TempPathFactory) -> tuple[ShellMesh, NDArray, NDArray]:
    mesh = mesh_of()
    return mesh, *answers(mesh, np.eye(3), tmp_path_factory.mktemp("home"))


@pytest.mark.parametrize(("twist", "hand"), [(37.0, "clockwise"), (0.0, "counter-clockwise")])
def test_a_moved_blade_answers_as_the_blade_at_home(tmp_path, home, twist, hand):
    mesh, moves, frequencies = home
    mirror = np.diag([1.0, 1.0 if hand == "clockwise" else -1.0, 1.0])
    move = mirror @ turn(twist)
    other = mesh_of(twist=twist, hand=hand)
    assert other.points == pytest.approx(mesh.points @ move.T, abs=1e-9)
    found, own_frequencies = answers(other, move, tmp_path)
    for name, wanted, got in zip(LOADS, moves, found @ move, strict=True):
        assert got == pytest.approx(wanted, abs=3e-6 * np.abs(wanted).max()), name
    assert own_frequencies == pytest.approx(frequencies, rel=3e-6)


def test_fibres_that_are_not_mirrored_with_the_blade_show(tmp_path, home):
    """What the tests above would find if the plies of the other hand kept their angle."""
    _, moves, _ = home
    mirror = np.diag([1.0, -1.0, 1.0])
    wrong = mesh_of(hand="counter-clockwise", angle=-30.0)
    found, _ = answers(wrong, mirror, tmp_path)
    off = np.abs(found @ mirror - moves).max(axis=(1, 2)) / np.abs(moves).max(axis=(1, 2))
    assert off[LOADS.index("pull")] > 0.1
