"""Trial runs in CalculiX, held to closed forms."""

from __future__ import annotations

import json
import stat
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import blades
import numpy as np
import pytest
from click.testing import CliRunner
from solver_runs import needs_ccx

from skinmesh.commands.trial_command import trial as trial_command
from skinmesh.definition.blade import (
    PRESSURE,
    SUCTION,
    BladeDefinition,
    CapRule,
    CircleProfile,
    FromAxis,
    Layout,
    NacaProfile,
    PlyRule,
    WebRule,
)
from skinmesh.definition.spanwise import constant
from skinmesh.errors import InputError
from skinmesh.laminate.material import Material
from skinmesh.mesh.build import build_mesh
from skinmesh.trial.report import failures, mass_difference, parts_of_difference, remarks, trial_json
from skinmesh.trial.run import Trial, run_trial
from skinmesh.trial.solver import NoSolverError
from skinmesh.write.files import write

pytestmark = pytest.mark.solver

STEEL = Material("steel", 210e9, 210e9, 210e9, 0.3, 0.3, 0.3, *[210e9 / 2.6] * 3, 7850.0, True, "handbook values")
# Blevins, Formulas for Natural Frequency and Mode Shape, 1979, table 8-1 (from memory)
BETA = np.array([1.8751041, 4.6940911, 7.8547574])
RADIUS, WALL, LENGTH = 0.25, 0.02, 10.0


def tried(blade: BladeDefinition, folder: Path, **more) -> Trial:
    write(build_mesh(blade), folder, formats=("vtu", "inp"))
    return run_trial(folder, **more)


def steel_tube(*, hand: str = "clockwise", shape: str = "quad") -> BladeDefinition:
    table = blades.stations([0.0, LENGTH], [2 * RADIUS] * 2, ["ring"] * 2)
    wall = PlyRule("wall", STEEL, constant(WALL), constant(1), 0.0, ("skin",))
    mesh = blades.rule(0.5, shape=shape)
    blade = blades.blade(table, {"ring": CircleProfile()}, plies=(wall,), mesh=mesh, hand=hand)
    return replace(blade, materials={"steel": STEEL})


@pytest.fixture(scope="module")
def tube(tmp_path_factory: pytest.TempPathFactory) -> Trial:
    return tried(steel_tube(), tmp_path_factory.mktemp("tube"))


@needs_ccx
def test_a_slender_steel_tube_against_closed_forms(tube: Trial) -> None:
    # Timoshenko & Young, Elements of Strength of Materials (from memory), on the exact ring: I = π (R⁴ − r⁴) / 4
    inertia = np.pi * (RADIUS**4 - (RADIUS - WALL) ** 4) / 4
    area = np.pi * (RADIUS**2 - (RADIUS - WALL) ** 2)
    EI, GJ = 210e9 * inertia, 210e9 / 2.6 * 2 * inertia
    flap, edge, torque, weight = tube.statics
    assert flap.solver == pytest.approx(flap.load[0] * LENGTH**3 / (3 * EI), rel=0.01)
    assert edge.solver == pytest.approx(edge.load[1] * LENGTH**3 / (3 * EI), rel=0.01)
    assert torque.solver == pytest.approx(torque.load[5] * LENGTH / GJ, rel=0.005)
    assert weight.solver == pytest.approx(-9.81 * 7850 * area * LENGTH**4 / (8 * EI), rel=0.015)
    assert tube.mass_solver == pytest.approx(7850 * area * LENGTH, rel=2e-3)
    found = np.array([mode.solver for mode in tube.modes if mode.kind in ("flap", "edge")])
    exact = BETA**2 * np.sqrt(EI / (7850 * area * LENGTH**4)) / (2 * np.pi)
    assert found[:2] == pytest.approx(exact[[0, 0]], rel=0.01)
    # the second bending mode is as much shear and rotary inertia as Timoshenko has it
    assert found[2:4] == pytest.approx(exact[[1, 1]], rel=0.03)


@needs_ccx
def test_the_tube_carries_its_loads_and_its_mass(tube: Trial) -> None:
    assert failures(tube) == ()
    assert abs(mass_difference(tube)) < 1e-5
    for case in tube.statics:
        assert case.imbalance < 1e-5
        assert case.reaction[:3] == pytest.approx(-case.load[:3], abs=1e-5 * np.linalg.norm(case.load))
    # tip loads: forces at the span's lever are moments at the root
    flap = tube.statics[0]
    assert np.linalg.norm(flap.load[3:]) < 1e-6 * flap.load[0]


@needs_ccx
def test_the_tubes_differences_are_shear_and_nothing_else(tube: Trial) -> None:
    for case in (*tube.statics, *tube.modes):
        parts = parts_of_difference(case)
        if parts:
            assert abs(parts["left"]) < 6e-3
            assert abs(parts["coupling"]) < 1e-6
    assert 0.001 < parts_of_difference(tube.statics[0])["shear"] < 0.01
    # Timoshenko, GA of a thin tube with a shear factor of a half: PL³/3EI + 2PL/GA
    middle, flap = RADIUS - WALL / 2, tube.statics[0]
    shear = 3 * 210e9 * np.pi * middle**3 * WALL / (210e9 / 2.6 * np.pi * middle * WALL * LENGTH**2)
    assert parts_of_difference(flap)["shear"] == pytest.approx(shear, rel=0.02)


@needs_ccx
def test_the_tubes_line_is_the_cubic(tube: Trial) -> None:
    flap, z = tube.statics[0], tube.rings.z
    cubic = z**2 * (3 * LENGTH - z) / (2 * LENGTH**3) * flap.line_theory[-1, 0]
    assert flap.line_theory[:, 0] == pytest.approx(cubic, abs=1e-4 * abs(cubic[-1]))
    assert flap.line_solver[:, 0] == pytest.approx(flap.line_refined[:, 0], abs=3e-3 * abs(cubic[-1]))
    assert flap.line_solver[:, 4] == pytest.approx(flap.line_refined[:, 4], abs=3e-3 * abs(flap.line_theory[-1, 4]))


@needs_ccx
def test_the_report_is_complete_json(tube: Trial) -> None:
    document = json.loads(trial_json(tube))
    assert [case["case"] for case in document["static"]] == [case.name for case in tube.statics]
    assert len(document["modes"]) == 6
    assert document["solver"]["version"] != "unknown"
    assert document["failures"] == []
    assert "qualified engineer" in document["caution"]
    assert len(document["rings_z_m"]) == len(document["static"][0]["line_solver"])


@needs_ccx
def test_layered_triangles_print_no_mass_and_bend_alike(tmp_path: Path, tube: Trial) -> None:
    found = tried(steel_tube(shape="triangle"), tmp_path)
    assert np.isnan(found.mass_solver)
    assert failures(found) == ()
    assert json.loads(trial_json(found))["mass_kg"]["solver"] is None
    for case, other in zip(found.statics, tube.statics, strict=True):
        assert case.solver / case.load[case.component or 0] == pytest.approx(
            other.solver / other.load[other.component or 0], rel=0.01
        )


def helical(angle_degrees: float, *, hand: str = "clockwise") -> BladeDefinition:
    table = blades.stations([0.0, 4.0], [0.6, 0.6], ["ring"] * 2)
    return blades.blade(
        table,
        {"ring": CircleProfile()},
        plies=(blades.skin_ply(0.006, angle_degrees),),
        mesh=blades.rule(0.25),
        hand=hand,
    )


@needs_ccx
def test_couplings_of_off_axis_plies_are_named(tmp_path: Path) -> None:
    found = tried(helical(30.0), tmp_path)
    torque = found.statics[2]
    parts = parts_of_difference(torque)
    # a tube that stretches as it twists is softer in twist than one kept from it
    assert parts["coupling"] > 0.1
    assert abs(parts["left"]) < 0.02
    assert any("couplings within the sections" in sentence for sentence in remarks(found))


def two_webs(*, size: float = 0.12) -> BladeDefinition:
    """A straight blade of constant section with two webs from root to tip."""
    glass = blades.GLASS
    layout = Layout(
        caps=(CapRule("main cap", FromAxis(constant(0.0)), constant(0.2), (SUCTION, PRESSURE)),),
        webs=tuple(
            WebRule(f"{name} web", blades.foot(FromAxis(constant(place))), (0.0, 9.0))
            for name, place in (("fore", -0.07), ("aft", 0.07))
        ),
    )
    plies = (
        PlyRule("plus", glass, constant(0.0015), constant(1), np.radians(45.0), ("skin", "webs")),
        PlyRule("minus", glass, constant(0.0015), constant(1), np.radians(-45.0), ("skin", "webs")),
        PlyRule("cap", glass, constant(0.006), constant(1), 0.0, ("main cap",)),
    )
    table = blades.stations([0.0, 9.0], [0.6, 0.6], ["section"] * 2, pitch_axis=0.33)
    return blades.blade(
        table,
        {"section": NacaProfile("0024", 0.003)},
        layout=layout,
        plies=plies,
        mesh=blades.rule(size, close_gap=0.003),
    )


@needs_ccx
@pytest.mark.slow
def test_a_straight_blade_of_constant_section_with_two_webs(tmp_path: Path) -> None:
    found = tried(two_webs(), tmp_path)
    assert failures(found) == ()
    for case in found.statics:
        assert abs(case.difference) < 0.02, case.name
    lowest = [mode for mode in found.modes if mode.kind != "shell"][:2]
    assert {mode.kind for mode in lowest} == {"flap", "edge"}
    for mode in lowest:
        assert abs(mode.difference) < 0.02


@needs_ccx
@pytest.mark.slow
def test_the_demonstration_blade_coarse(tmp_path: Path) -> None:
    blade = blades.demonstration(mesh=blades.rule(0.8, turning=0.7, chord_error=0.02, close_gap=0.012))
    found = tried(blade, tmp_path)
    assert failures(found) == ()
    flap, edge, torque, weight = found.statics
    assert abs(flap.difference) < 0.03
    assert abs(weight.difference) < 0.03
    assert abs(edge.difference) < 0.06
    assert abs(torque.difference) < 0.06
    assert [mode.kind for mode in found.modes[:3]] == ["flap", "edge", "flap"]
    assert all(mode.likeness > 0.95 for mode in found.modes[:3])
    assert abs(mass_difference(found)) < 1e-4
    told = " ".join(remarks(found))
    assert "Soft cores (foam)" in told
    assert "rigid knots" in told


@needs_ccx
def test_the_command_prints_writes_and_replaces(tmp_path: Path) -> None:
    write(build_mesh(helical(0.0)), tmp_path / "mesh", formats=("vtu", "inp"))
    (tmp_path / "mesh" / "test.trial.png").write_bytes(b"old")
    (tmp_path / "mesh" / "notes.txt").write_text("mine")
    done = run_command([str(tmp_path / "mesh"), "--no-picture"])
    assert done.return_value == 0
    for words in ("flap-wise tip load", "tip torque", "weight", "mode 6", "mass:", "reactions", "qualified engineer"):
        assert words in done.output
    names = sorted(path.name for path in (tmp_path / "mesh").iterdir() if ".trial." in path.name)
    assert names == ["test.trial.json", "test.trial.log"]
    assert "CalculiX" in (tmp_path / "mesh" / "test.trial.log").read_text()
    assert (tmp_path / "mesh" / "notes.txt").read_text() == "mine"
    pytest.importorskip("matplotlib")
    assert run_command([str(tmp_path / "mesh"), "--picture"]).return_value == 0
    assert (tmp_path / "mesh" / "test.trial.png").read_bytes()[:4] == b"\x89PNG"


def test_the_command_keeps_the_log_of_a_solver_that_fails(tmp_path: Path) -> None:
    write(build_mesh(helical(0.0)), tmp_path / "mesh", formats=("vtu", "inp"))
    fake = tmp_path / "fake"
    fake.write_text("#!/bin/sh\necho ' *ERROR in e_c3d: nonpositive jacobian'\nexit 201\n")
    fake.chmod(fake.stat().st_mode | stat.S_IEXEC)
    done = run_command([str(tmp_path / "mesh"), "--solver", str(fake)])
    assert done.return_value == 1
    assert "nonpositive jacobian" in done.stderr
    assert "nonpositive jacobian" in (tmp_path / "mesh" / "test.trial.log").read_text()
    assert not (tmp_path / "mesh" / "test.trial.json").exists()


def test_the_command_refuses_what_is_no_mesh(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    fake = tmp_path / "ccx"
    fake.write_text("#!/bin/sh\n")
    fake.chmod(fake.stat().st_mode | stat.S_IEXEC)
    with pytest.raises(InputError, match="skinmesh build"):
        trial_command.main([str(tmp_path), "--solver", str(fake)], standalone_mode=False)
    monkeypatch.setenv("PATH", "")
    with pytest.raises(NoSolverError, match="apt-get install calculix-ccx"):
        trial_command.main([str(tmp_path)], standalone_mode=False)


def run_command(arguments: Sequence[str]):
    return CliRunner().invoke(trial_command, list(arguments), standalone_mode=False, catch_exceptions=False)
