"""Beam theory of the trial, held to closed forms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from skinmesh.beam.sections import SectionProperties
from skinmesh.trial.theory import (
    beam_bays,
    deflection,
    kinds_of_motion,
    modal_likeness,
    natural_modes,
    tip_load,
    weight_load,
)

# Blevins, Formulas for Natural Frequency and Mode Shape, 1979, table 8-1: roots of cos βL cosh βL = −1 (from memory).
BETA = np.array([1.8751041, 4.6940911, 7.8547574])
LENGTH, FLAP, EDGE, AXIAL, TWIST, MASS = 10.0, 2.0e6, 5.0e6, 8.0e8, 1.5e6, 30.0


def uniform(n: int, *, tension=(0.0, 0.0), shear=(0.0, 0.0), mass=(0.0, 0.0), inertia=1e-6, turn=0.0, length=LENGTH):
    """A uniform cantilever of n bays; ``turn`` turns the principal axes from x towards y."""
    edges = np.linspace(0.0, length, n + 1)
    axes = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    bending = axes @ np.diag([FLAP, EDGE]) @ axes.T

    def row(value):
        return np.broadcast_to(np.asarray(value, dtype=float), (n, *np.shape(value)))

    lever = np.array(tension)
    stiffness = np.zeros((4, 4))
    stiffness[0, 0], stiffness[3, 3] = AXIAL, TWIST
    stiffness[0, 1:3] = stiffness[1:3, 0] = AXIAL * lever
    stiffness[1:3, 1:3] = bending + AXIAL * np.outer(lever, lever)
    sections = SectionProperties(
        z=0.5 * (edges[1:] + edges[:-1]),
        mass=row(MASS),
        mass_centre=row(mass),
        inertia=row(np.eye(2) * inertia),
        axial=row(AXIAL),
        tension_centre=row(tension),
        bending=row(bending),
        principal=row([FLAP, EDGE]),
        structural_twist=row(turn),
        torsion=row(TWIST),
        shear_centre=row(shear),
        n_cells=np.ones(n, dtype=int),
        n_parts=np.ones(n, dtype=int),
        stiffness=row(stiffness),
    )
    return edges, sections


def test_tip_loads_of_a_uniform_cantilever() -> None:
    # Timoshenko & Young, Elements of Strength of Materials: PL³/3EI, PL²/2EI, TL/GJ, PL/EA (from memory)
    bays = beam_bays(*uniform(7))
    flap = deflection(bays, tip_load(bays, [100.0, 0, 0], [0, 0, 0]))
    assert flap[-1] == pytest.approx([100 * LENGTH**3 / 3 / FLAP, 0, 0, 0, 100 * LENGTH**2 / 2 / FLAP, 0], abs=1e-12)
    edge = deflection(bays, tip_load(bays, [0, 100.0, 0], [0, 0, 0]))
    assert edge[-1] == pytest.approx([0, 100 * LENGTH**3 / 3 / EDGE, 0, -100 * LENGTH**2 / 2 / EDGE, 0, 0], abs=1e-12)
    twist = deflection(bays, tip_load(bays, [0, 0, 500.0], [0, 0, 70.0]))
    assert twist[-1] == pytest.approx([0, 0, 500 * LENGTH / AXIAL, 0, 0, 70 * LENGTH / TWIST], abs=1e-12)
    # the line between: P z² (3L − z) / 6EI
    z = bays.z
    assert flap[:, 0] == pytest.approx(100 * z**2 * (3 * LENGTH - z) / 6 / FLAP, abs=1e-12)


def test_weight_of_a_uniform_cantilever_converges_with_the_square_of_the_bays() -> None:
    exact = 9.81 * MASS * LENGTH**4 / 8 / FLAP
    errors = []
    for n in (10, 20, 40):
        bays = beam_bays(*uniform(n))
        errors.append(abs(deflection(bays, weight_load(bays, [-9.81, 0, 0]))[-1, 0] + exact) / exact)
    assert np.log2(errors[0] / errors[1]) == pytest.approx(2.0, abs=0.05)
    assert np.log2(errors[1] / errors[2]) == pytest.approx(2.0, abs=0.05)
    assert errors[-1] < 5e-4


def test_a_force_beside_the_shear_centre_twists_and_one_beside_the_tension_centre_bends() -> None:
    bays = beam_bays(*uniform(5, shear=(0.2, 0.5), tension=(0.1, 0.3)))
    twisted = deflection(bays, tip_load(bays, [100.0, 0, 0], [0, 0, 0]))
    # about the shear centre: M = −(x Fy − y Fx) = 0.5 Fx
    assert twisted[-1, 5] == pytest.approx(0.5 * 100 * LENGTH / TWIST)
    # the shear centre itself moves as if the force were there: u_x − θ_z y
    assert twisted[-1, 0] - twisted[-1, 5] * 0.5 == pytest.approx(100 * LENGTH**3 / 3 / FLAP)
    stretched = deflection(bays, tip_load(bays, [0, 0, 1000.0], [0, 0, 0]))
    # about the tension centre: M_y = 0.1 × 1000 (bends towards −x … of a fibre at +x in compression), M_x = −0.3 × 1000
    assert stretched[-1, 4] == pytest.approx(0.1 * 1000 * LENGTH / FLAP)
    assert stretched[-1, 3] == pytest.approx(-0.3 * 1000 * LENGTH / EDGE)


def test_principal_axes_may_stand_askew() -> None:
    turn = 0.3
    axes = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    bays = beam_bays(*uniform(5, turn=turn))
    tip = deflection(bays, tip_load(bays, [100.0, 0, 0], [0, 0, 0]))[-1, :2]
    expected = axes @ np.diag([1 / FLAP, 1 / EDGE]) @ axes.T @ [100.0, 0.0] * LENGTH**3 / 3
    assert tip == pytest.approx(expected, rel=1e-10)


def test_a_tapered_cantilever() -> None:
    # EI(z) = EI₀ (1 − z/2L): ∫ P (L − z)² / EI dz = P L³ / EI₀ × ∫ 2 s² / (1 + s) ds over s = 0 … 1
    exact = 100 * LENGTH**3 / FLAP * 2 * (np.log(2.0) - 0.5)
    errors = []
    for n in (50, 100):
        edges, sections = uniform(n)
        share = 1.0 - sections.z / (2 * LENGTH)
        bays = beam_bays(edges, replace(sections, bending=sections.bending * share[:, None, None]))
        errors.append(abs(deflection(bays, tip_load(bays, [100.0, 0, 0], [0, 0, 0]))[-1, 0] - exact) / exact)
    assert errors[1] < 2e-5
    assert np.log2(errors[0] / errors[1]) == pytest.approx(2.0, abs=0.05)


def test_bending_frequencies_of_a_uniform_cantilever() -> None:
    bays = beam_bays(*uniform(200))
    modes = natural_modes(bays, 12)
    share = kinds_of_motion(bays, modes.motion)
    for kind, stiffness in ((0, FLAP), (1, EDGE)):
        found = modes.frequency[share[:, kind] > 0.9][:3]
        exact = BETA**2 * np.sqrt(stiffness / (MASS * LENGTH**4)) / (2 * np.pi)
        assert found == pytest.approx(exact[: len(found)], rel=2e-4)
        assert len(found) >= 3


def test_torsion_and_axial_frequencies_of_a_uniform_cantilever() -> None:
    # Blevins, tables 8-16 and 8-19: c / 4L, 3c / 4L with c² = GJ / polar inertia, EA / mass (from memory)
    inertia = 2.5
    edges, sections = uniform(200, inertia=inertia)
    # so stiff in bending that torsion and stretching come first
    bays = beam_bays(edges, replace(sections, bending=sections.bending * 1e6))
    modes = natural_modes(bays, 3)
    share = kinds_of_motion(bays, modes.motion)
    torsion = np.sqrt(TWIST / (2 * inertia)) / (4 * LENGTH)
    assert modes.frequency[:2] == pytest.approx([torsion, 3 * torsion], rel=1e-4)
    assert share[:2, 2] == pytest.approx([1.0, 1.0])
    stiff = beam_bays(edges, replace(sections, bending=sections.bending * 1e6, torsion=sections.torsion * 1e6))
    axial = natural_modes(stiff, 1)
    assert axial.frequency[0] == pytest.approx(np.sqrt(AXIAL / MASS) / (4 * LENGTH), rel=1e-4)
    assert kinds_of_motion(stiff, axial.motion)[0, 3] == pytest.approx(1.0)


def test_a_mass_beside_the_shear_centre_couples_flap_and_torsion() -> None:
    soft = 0.02

    def modes_of(mass):
        edges, sections = uniform(60, inertia=2.0, mass=mass)
        bays = beam_bays(edges, replace(sections, torsion=soft * sections.torsion))
        modes = natural_modes(bays, 8)
        return modes.frequency, kinds_of_motion(bays, modes.motion)

    (plain, plain_kinds), (beside, beside_kinds) = modes_of((0.0, 0.0)), modes_of((0.0, 0.4))
    assert np.min(np.minimum(plain_kinds[:, 0], plain_kinds[:, 2])) < 1e-9
    assert beside_kinds[0, 2] > 1e-3
    # coupled frequencies repel each other
    assert beside[0] < plain[0]


def test_modes_are_orthonormal_and_alike_only_to_themselves() -> None:
    bays = beam_bays(*uniform(60, mass=(0.02, 0.1), tension=(0.0, 0.05), shear=(0.0, -0.05), inertia=0.5))
    modes = natural_modes(bays, 6)
    assert modal_likeness(bays, modes.motion, modes.motion) == pytest.approx(np.eye(6), abs=1e-8)


def test_where_the_beam_begins_does_not_matter() -> None:
    edges, sections = uniform(20, mass=(0.02, 0.1), tension=(0.0, 0.05), shear=(0.0, -0.05), inertia=0.5)
    here, there = beam_bays(edges, sections), beam_bays(edges + 3.0, sections)
    assert natural_modes(there, 4).frequency == pytest.approx(natural_modes(here, 4).frequency, rel=1e-9)
    load = tip_load(here, [1.0, 2.0, 3.0], [4.0, 5.0, 6.0])
    assert deflection(there, load) == pytest.approx(deflection(here, load), rel=1e-9, abs=1e-15)


def test_shear_adds_its_own_deflection() -> None:
    # Timoshenko, Vibration Problems in Engineering: PL³/3EI + PL/GA (from memory)
    edges, sections = uniform(9)
    shear = np.broadcast_to(np.diag([1 / 4e5, 1 / 9e5]), (9, 2, 2))
    bays = beam_bays(edges, sections, shear=shear)
    tip = deflection(bays, tip_load(bays, [100.0, 50.0, 0], [0, 0, 0]))[-1, :2]
    assert tip[0] == pytest.approx(100 * LENGTH**3 / 3 / FLAP + 100 * LENGTH / 4e5)
    assert tip[1] == pytest.approx(50 * LENGTH**3 / 3 / EDGE + 50 * LENGTH / 9e5)


def test_the_full_matrix_without_couplings_changes_nothing() -> None:
    edges, sections = uniform(5, tension=(0.1, 0.3))
    assert beam_bays(edges, sections, is_coupled=True).compliance == pytest.approx(
        beam_bays(edges, sections).compliance, rel=1e-9
    )


def test_a_bend_twist_coupling_twists_under_bending() -> None:
    edges, sections = uniform(5)
    stiffness = sections.stiffness.copy()
    coupling = 0.3 * np.sqrt(FLAP * TWIST)
    stiffness[:, 1, 3] = stiffness[:, 3, 1] = coupling
    bays = beam_bays(edges, replace(sections, stiffness=stiffness), is_coupled=True)
    tip = deflection(bays, tip_load(bays, [0, 0, 0], [0, 40.0, 0]))[-1]
    # κx = −My / EI(1 − c²), θ' = −coupling κx / GJ
    curvature = -40.0 / (FLAP * (1 - 0.3**2))
    assert tip[4] == pytest.approx(-curvature * LENGTH)
    assert tip[5] == pytest.approx(-coupling * curvature / TWIST * LENGTH)


def test_a_section_that_carries_nothing_is_refused() -> None:
    edges, sections = uniform(3)
    with pytest.raises(ValueError, match="carries nothing"):
        beam_bays(edges, replace(sections, axial=np.zeros(3)))
