"""A straight blade of constant section with two webs in CalculiX, against a hand calculation.

Sources: EI by summing the walls, GJ of three cells by Bredt and Batho (``constant_section.py``); Euler and Bernoulli's
cantilever, PL³/3EI, qL⁴/8EI, βL = 1.8751 (Blevins, Formulas for Natural Frequency and Mode Shape, 1979, table 8-1).
From memory.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from constant_section import ALIKE, LENGTH, by_hand, constant_section
from solver_runs import needs_ccx

from skinmesh.beam.meshcut import mesh_sections
from skinmesh.mesh.build import build_mesh
from skinmesh.trial.report import failures
from skinmesh.trial.run import Trial, run_trial
from skinmesh.write.files import write

COARSE = {"across": ALIKE, "turning": 0.8, "chord_error": 0.02}


@pytest.mark.parametrize(("surface", "limit"), [("mid", 0.005), ("outer", 0.013)])
def test_the_mesh_has_the_sections_of_the_hand_calculation(surface, limit):
    """On the mould face webs reach through the skin, and walls are wider than their laminate: up to 1.2 %."""
    hand = by_hand()
    found = mesh_sections(build_mesh(constant_section(surface=surface)), np.array([LENGTH / 2]))
    assert found.bending[0, 0, 0] == pytest.approx(hand.flap, rel=limit)
    assert found.bending[0, 1, 1] == pytest.approx(hand.edge, rel=limit)
    assert found.torsion[0] == pytest.approx(hand.torsion, rel=limit)
    assert found.mass[0] == pytest.approx(hand.mass, rel=limit)
    # layers in the middle of their laminate would be stiffer by more than that
    assert by_hand(is_at_middle=True).flap > 1.02 * hand.flap


@pytest.fixture(scope="module")
def tried(tmp_path_factory: pytest.TempPathFactory) -> Trial:
    folder: Path = tmp_path_factory.mktemp("two webs")
    write(build_mesh(constant_section(surface="mid", **COARSE)), folder, formats=("vtu", "inp"))
    return run_trial(folder)


@pytest.mark.solver
@needs_ccx
def test_bending_mass_and_weight(tried: Trial):
    hand = by_hand()
    flap, edge, _, weight = tried.statics
    assert failures(tried) == ()
    assert tried.mass_solver == pytest.approx(hand.mass * LENGTH, rel=0.003)
    assert flap.solver == pytest.approx(flap.load[0] * LENGTH**3 / (3 * hand.flap), rel=0.01)
    assert edge.solver == pytest.approx(edge.load[1] * LENGTH**3 / (3 * hand.edge), rel=0.01)
    assert weight.solver == pytest.approx(-9.81 * hand.mass * LENGTH**4 / (8 * hand.flap), rel=0.01)


@pytest.mark.solver
@needs_ccx
def test_twist_of_the_middle_half(tried: Trial):
    """Away from the root, which cannot warp there, and from the tip, whose ring is bent by the forces on it."""
    torque = tried.statics[2]
    z = tried.rings.z
    middle = (z > LENGTH / 4) & (z < 3 * LENGTH / 4)
    rate = np.polyfit(z[middle], torque.line_solver[middle, 5], 1)[0]
    assert rate == pytest.approx(torque.load[5] / by_hand().torsion, rel=0.025)


@pytest.mark.solver
@needs_ccx
def test_lowest_frequencies(tried: Trial):
    hand = by_hand()
    found = {mode.kind: mode.solver for mode in tried.modes[:2]}
    for kind, stiffness in (("flap", hand.flap), ("edge", hand.edge)):
        wanted = 1.8751041**2 * np.sqrt(stiffness / (hand.mass * LENGTH**4)) / (2 * np.pi)
        assert found[kind] == pytest.approx(wanted, rel=0.01)
