"""Two solvers on the same tubes: NASTRAN-95 on the bulk data, CalculiX on the keyword deck, from blade definitions.

Sources: thin circular tube of one laminate all round, closed form from the A matrix with no hoop force; cantilever of
Euler and Bernoulli, βL = 1.8751; torsion of a uniform bar, (1/4L) √(G/ρ). All from memory. The tests of
``test_deck_readers.py`` have more on what NASTRAN-95 can and cannot do: its flat elements keep the width of the
reference surface, and with ZOFFS they are too soft in torsion, so that twist under torque on ``outer`` is left out.
"""

from __future__ import annotations

import numpy as np
import pytest
from blades import GLASS, blade, rule, stations
from nastran95_runs import frequencies_by_nastran95, needs_nastran95, strain_and_twist
from solver_runs import STEEL, needs_ccx, run_solver, thin_tube_stiffness, tube_strain_and_twist

from skinmesh.definition.blade import CircleProfile, PlyRule
from skinmesh.definition.spanwise import constant
from skinmesh.laminate.material import Material
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.shellmesh import ShellMesh

pytestmark = [pytest.mark.solver, pytest.mark.reader, needs_ccx, needs_nastran95]

RADIUS = 0.5  # of the middle of the wall, m


def tube(
    order: int,
    *,
    surface: str,
    material: Material,
    angles: tuple[float, ...],
    thickness: float,
    length: float,
    size: float,
) -> ShellMesh:
    """Layers of equal thickness, the outermost first."""
    plies = [
        PlyRule(f"layer {k}", material, constant(thickness / len(angles)), constant(1), np.radians(angle), ("skin",))
        for k, angle in enumerate(angles)
    ]
    definition = blade(
        stations(np.linspace(0, length, 4), [2 * RADIUS + thickness] * 4, ["ring"] * 4),
        {"ring": CircleProfile()},
        plies=plies,
        mesh=rule(size, surface=surface, order=order, chord_error=0.02, turning=np.pi / 12),
    )
    return build_mesh(definition)


@pytest.mark.parametrize(("surface", "angles"), [("mid", (30.0,)), ("outer", (30.0,)), ("mid", (30.0, 0.0))])
def test_both_solvers_pull_and_twist_a_helical_tube_alike(tmp_path, surface, angles):
    what = {"surface": surface, "material": GLASS, "angles": angles, "thickness": 0.01, "length": 3.0, "size": 0.25}
    flat, curved = tube(1, **what), tube(2, **what)
    wanted = np.linalg.solve(thin_tube_stiffness(curved.stacks[0].layers, RADIUS), np.diag([1e4, 1e4 * RADIUS]))
    for k, (axial, tangential) in enumerate(((1e4, 0.0), (0.0, 1e4))):
        second = np.array(strain_and_twist(flat, tmp_path / f"n{k}", axial=axial, tangential=tangential))
        first = np.array(
            tube_strain_and_twist(curved, tmp_path / f"c{k}", radius=RADIUS, axial=axial, tangential=tangential)
        )
        assert first == pytest.approx(wanted[:, k], rel=0.01)
        if surface == "mid" or k == 0:
            assert second == pytest.approx(wanted[:, k], rel=0.02)
            assert second == pytest.approx(first, rel=0.02)


def test_both_solvers_swing_an_isotropic_tube_alike(tmp_path):
    """Of two equal frequencies NASTRAN-95's method may find one alone: each that it finds is set beside the nearest."""
    length, thickness = 12.0, 0.05
    what = {
        "surface": "mid",
        "material": STEEL,
        "angles": (0.0,),
        "thickness": thickness,
        "length": length,
        "size": 1.0,
    }
    first = run_solver(tube(2, **what), tmp_path / "c", step="*STEP\n*FREQUENCY\n6\n*END STEP\n").frequencies
    second = frequencies_by_nastran95(tube(1, **what), tmp_path / "n", 8)
    bending = 1.8751041**2 * RADIUS * np.sqrt(STEEL.E1 / STEEL.density / 2) / (2 * np.pi * length**2)
    torsion = np.sqrt(STEEL.G12 / STEEL.density) / (4 * length)
    for wanted in (bending, torsion):
        for found in (first, second):
            assert np.abs(found / wanted - 1).min() < 0.025
    for each in np.unique(np.round(first[:5], 2)):
        assert np.abs(second / each - 1).min() < 0.02
