"""Extension and twist of a helical tube, from blade file to solver, on both hands and both reference surfaces.

Source: thin circular tube of one laminate all round, closed form from the A matrix with no hoop force (from memory of
the thin-walled beam theory in Kollár, Springer: Mechanics of Composite Structures, 2003).
"""

from __future__ import annotations

import numpy as np
import pytest
from blades import GLASS, blade, rule, stations
from solver_runs import needs_ccx, thin_tube_stiffness, tube_strain_and_twist

from skinmesh.definition.blade import CircleProfile, PlyRule
from skinmesh.definition.spanwise import constant
from skinmesh.mesh.build import build_mesh

pytestmark = [pytest.mark.solver, needs_ccx]


@pytest.mark.parametrize("surface", ["outer", "mid"])
@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
@pytest.mark.parametrize("angle", [30.0, -20.0])
def test_helical_tube_extends_and_twists_as_theory_has_it(tmp_path, surface, hand, angle):
    radius, thickness = 0.5, 0.006
    definition = blade(
        stations([0, 2, 4, 6], [2 * radius + thickness] * 4, ["ring"] * 4),
        {"ring": CircleProfile()},
        plies=[PlyRule("wall", GLASS, constant(thickness), constant(1), np.radians(angle), ("skin",))],
        mesh=rule(0.3, surface=surface, chord_error=0.02),
        hand=hand,
    )
    mesh = build_mesh(definition)
    found = tube_strain_and_twist(mesh, tmp_path, radius=radius, axial=1e5, tangential=0.0)
    wanted = np.linalg.solve(thin_tube_stiffness(mesh.stacks[0].layers, radius), [1e5, 0.0])
    assert found == pytest.approx(wanted, rel=0.005)
    # the mirror image twists the other way
    sense = 1.0 if hand == "clockwise" else -1.0
    assert np.sign(found[1]) == sense * np.sign(angle)
