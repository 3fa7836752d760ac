"""CalculiX on our keyword decks against closed forms.

Sources: thin circular tube of one laminate all round, closed form from the A matrix with no hoop force; J = 2πr³t;
Euler–Bernoulli and Timoshenko beams (any handbook). All from memory.
"""

from __future__ import annotations

from math import pi, radians

import numpy as np
import pytest
from sample_meshes import GLASS_UD, box_with_web, sandwich, tube
from solver_runs import (
    STEEL,
    needs_ccx,
    run_solver,
    thin_tube_stiffness,
    tube_strain_and_twist,
    twisted_tube,
)

from skinmesh.laminate.stack import Layer
from skinmesh.mesh.measure import solid_mass

pytestmark = [pytest.mark.solver, needs_ccx]


def _area(mesh) -> np.ndarray:
    """Element areas by 2 × 2 Gauss points of the second-order quadrilateral, written out on their own."""
    total = np.zeros(len(mesh.cells))
    x = mesh.points[mesh.cells]
    corner = [(-1, -1), (1, -1), (1, 1), (-1, 1)]
    for s, t in np.array(corner) / np.sqrt(3.0):
        first, second = np.zeros((2, len(x), 3))
        for k, (a, b) in enumerate(corner):
            first += (a * (1 + b * t) * (2 * a * s + b * t) / 4) * x[:, k]
            second += (b * (1 + a * s) * (a * s + 2 * b * t) / 4) * x[:, k]
        for k, a in ((4, -1), (6, 1)):
            first += -s * (1 + a * t) * x[:, k]
            second += a * (1 - s * s) / 2 * x[:, k]
        for k, a in ((5, 1), (7, -1)):
            first += a * (1 - t * t) / 2 * x[:, k]
            second += -t * (1 + a * s) * x[:, k]
        total += np.linalg.norm(np.cross(first, second), axis=1)
    return total


def test_mass_of_a_twisted_sandwich_tube(tmp_path):
    mesh = twisted_tube(24, 12, layers=sandwich(), n_bands=3)
    run = run_solver(mesh, tmp_path)
    # The solver takes the volume of every layer where it lies, inside the surface.
    assert run.mass == pytest.approx(solid_mass(mesh), rel=5e-4)
    assert run.mass < 0.998 * np.sum(_area(mesh) * mesh.areal_mass)
    assert "WARNING" not in run.log.upper()
    assert "ERROR" not in run.log.upper()


def test_mass_of_a_flat_box_with_web(tmp_path):
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich()[:2])
    assert run_solver(mesh, tmp_path).mass == pytest.approx(np.sum(_area(mesh) * mesh.areal_mass), rel=1e-5)


@pytest.mark.parametrize("shape", ["quad", "triangle"])
@pytest.mark.parametrize("share", [0.02, 0.1])
def test_isotropic_tube_under_axial_load_and_torsion(tmp_path, shape, share):
    thickness, radius, length = share * 0.5, 0.5, 3.0
    mesh = tube(24, 18, radius=radius, length=length, layers=(Layer("wall", STEEL, thickness, 0.0),), shape=shape)
    middle = radius - thickness / 2
    strain, turn = tube_strain_and_twist(mesh, tmp_path / "pull", radius=middle, axial=1e6, tangential=0.0)
    assert strain == pytest.approx(1e6 / (STEEL.E1 * 2 * pi * middle * thickness), rel=0.003)
    assert abs(turn) < 1e-4 * strain / radius
    # Nodal forces act at the middle of the laminate: the torque is force × middle radius.
    strain, turn = tube_strain_and_twist(mesh, tmp_path / "turn", radius=middle, axial=0.0, tangential=1e6)
    polar = 2 * pi * middle**3 * thickness * (1 + (thickness / middle) ** 2 / 4)
    assert turn == pytest.approx(1e6 * middle / (STEEL.G12 * polar), rel=0.003)


@pytest.mark.parametrize("shape", ["quad", "triangle"])
@pytest.mark.parametrize("angle", [45.0, -45.0, 20.0])
def test_helical_tube_twists_under_pull(tmp_path, shape, angle):
    radius, thickness = 0.5, 0.004
    layers = (Layer("wall", GLASS_UD, thickness, radians(angle)),)
    mesh = tube(32, 24, radius=radius, length=3.0, layers=layers, shape=shape)
    middle = radius - thickness / 2
    wanted = np.linalg.solve(thin_tube_stiffness(layers, middle), [1e5, 0.0])
    found = tube_strain_and_twist(mesh, tmp_path, radius=middle, axial=1e5, tangential=0.0)
    assert found == pytest.approx(wanted, rel=0.01)
    assert np.sign(found[1]) == np.sign(angle)


def test_layers_are_counted_from_the_outward_face(tmp_path):
    """Bending of a wall with a stiff face tells inside from outside: the free tube under pull bows accordingly."""
    stiff, soft = Layer("stiff", STEEL, 0.002, 0.0), Layer("soft", GLASS_UD, 0.02, 0.0)
    radius = 0.5
    for layers in ((stiff, soft), (soft, stiff)):
        mesh = tube(24, 18, radius=radius, length=3.0, layers=layers)
        steel_at = radius - 0.001 if layers[0] is stiff else radius - 0.021
        glass_at = radius - 0.012 if layers[0] is stiff else radius - 0.01
        # The torque is carried at the radius of each layer; the forces act at the middle of the laminate.
        polar = 2 * pi * (steel_at**3 * 0.002 * STEEL.G12 + glass_at**3 * 0.02 * GLASS_UD.G12)
        middle = radius - 0.011
        folder = tmp_path / layers[0].ply
        _, turn = tube_strain_and_twist(mesh, folder, radius=middle, axial=0.0, tangential=1e5)
        assert turn == pytest.approx(1e5 * middle / polar, rel=0.004)


def test_extension_of_a_box_with_web(tmp_path):
    wall, web = Layer("wall", STEEL, 0.006, 0.0), Layer("web", GLASS_UD, 0.03, 0.0)
    mesh = box_with_web(4, 2, 6, width=0.8, height=0.4, length=3.0, layers=(wall,), web_layers=(web,))
    # Ends free to contract: every section keeps plane, so the reaction is Σ E A δ / L.
    step = (
        "*BOUNDARY\nROOT,3,3\n1,1,2\n2,1,1\n*STEP\n*STATIC\n*BOUNDARY\nTIP,3,3,0.003\n"
        "*NODE PRINT,NSET=TIP,TOTALS=ONLY\nRF\n*END STEP\n"
    )
    run = run_solver(mesh, tmp_path, step=step, drop_clamp=True)
    force = run.block("total force (fx,fy,fz) for set TIP")[0, 2]
    stiffness = STEEL.E1 * 2 * 1.2 * 0.006 + GLASS_UD.E1 * 0.4 * 0.03
    assert force == pytest.approx(stiffness * 0.003 / 3.0, rel=0.004)


def test_box_with_web_bends_under_its_weight(tmp_path):
    wall, web = Layer("wall", STEEL, 0.006, 0.0), Layer("web", STEEL, 0.012, 0.0)
    length, side = 8.0, 0.4
    mesh = box_with_web(4, 4, 24, width=side, height=side, length=length, layers=(wall,), web_layers=(web,))
    run = run_solver(mesh, tmp_path)
    second = 2 * side * 0.006 * (side / 2 - 0.003) ** 2 + (2 * 0.006 + 0.012) * side**3 / 12
    load = 9.81 * STEEL.density * (4 * side * 0.006 + side * 0.012)
    bending = load * length**4 / (8 * STEEL.E1 * second)
    shear = load * length**2 / (2 * STEEL.G12 * side * (2 * 0.006 + 0.012))
    assert -run.displacements("TIP")[:, 1].mean() == pytest.approx(bending + shear, rel=0.015)
