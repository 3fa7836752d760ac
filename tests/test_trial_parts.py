"""Parts of the trial run without a solver: rings, loads, the deck read back, what is printed, a solver that fails."""

from __future__ import annotations

import re
import stat
from dataclasses import replace
from pathlib import Path

import blades
import numpy as np
import pytest
from solver_runs import read_keyword_deck

from skinmesh.beam.meshcut import mesh_walls
from skinmesh.definition.read import load_blade
from skinmesh.errors import InputError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import solid_mass
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.trial.beamside import EXACT, MESH, find_blade_file, make_beams, shear_compliance
from skinmesh.trial.loads import tip_forces
from skinmesh.trial.model import TrialModel, read_model
from skinmesh.trial.rings import best_rigid_motion, find_rings, solver_places
from skinmesh.trial.solver import INSTALL_LINE, NoSolverError, SolverError, find_solver, run_solver
from skinmesh.trial.steps import MARKER, RING_SET, read_printed, steps_text
from skinmesh.write.files import write

RADIUS, THICKNESS, LENGTH = 0.3, 0.004, 2.0


def written(folder: Path, mesh: ShellMesh) -> Path:
    write(mesh, folder, formats=("vtu", "inp"))
    return folder


@pytest.fixture(scope="module")
def tube_mesh() -> ShellMesh:
    return build_mesh(blades.tube(radius=RADIUS, length=LENGTH, mesh=blades.rule(0.2)))


@pytest.fixture(scope="module")
def tube(tube_mesh: ShellMesh, tmp_path_factory: pytest.TempPathFactory) -> TrialModel:
    return read_model(written(tmp_path_factory.mktemp("tube"), tube_mesh))


@pytest.fixture(scope="module")
def whole_mesh() -> ShellMesh:
    return build_mesh(blades.demonstration(mesh=blades.rule(0.6, close_gap=0.012)))


@pytest.fixture(scope="module")
def whole(whole_mesh: ShellMesh, tmp_path_factory: pytest.TempPathFactory) -> TrialModel:
    return read_model(written(tmp_path_factory.mktemp("whole"), whole_mesh))


# The model read back


@pytest.mark.parametrize("order", [1, 2])
def test_the_deck_gives_the_second_order_mesh_whatever_the_order(tmp_path: Path, order: int) -> None:
    mesh = build_mesh(blades.demonstration(mesh=blades.rule(0.8, order=order, close_gap=0.012)))
    read = read_model(written(tmp_path, mesh)).mesh
    assert read.order == 2
    assert np.array_equal(read.cells, mesh.cells)
    assert read.points == pytest.approx(mesh.points, abs=1e-12)
    assert read.row == pytest.approx(mesh.row, abs=1e-9)
    assert solid_mass(read) == pytest.approx(solid_mass(mesh), rel=1e-9)


def test_only_the_walls_may_turn_at_the_root(tube: TrialModel) -> None:
    boundary = tube.head.split("*BOUNDARY\n")[1].splitlines()[0]
    assert boundary == "ROOT,1,3"
    assert "*STEP" not in tube.head


def test_rows_end_at_every_station(whole: TrialModel) -> None:
    levels, z = whole.row_ends
    assert np.all(np.diff(levels) > 0)
    assert np.all(np.diff(z) > 0)
    gaps = np.abs(z[:, None] - whole.mesh.report.stations).min(axis=0)
    assert gaps.max() < 1e-9


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda text: text.replace("ROOT,1,6", "ROOT,1,2"), "the root is not clamped"),
        (lambda text: text.partition("*STEP")[0], "has no step"),
        (lambda text: text.replace("*NODE,NSET=ALL", "*NODE,NSET=SOME"), "is missing"),
        (lambda text: text.replace("\n7,", "\n7,x", 1), "not as we write it"),
        (lambda text: text.replace("\n7,", "\n7007,", 1), "do not fit"),
        (lambda text: re.sub(r"\n7,[^,]+,", "\n7,0.123,", text, count=1), "different meshes"),
    ],
)
def test_a_deck_that_was_changed_is_refused(tmp_path: Path, tube_mesh: ShellMesh, change, words: str) -> None:
    deck = written(tmp_path, tube_mesh) / "test.inp"
    deck.write_text(change(deck.read_text()))
    with pytest.raises(InputError, match=words):
        read_model(tmp_path)


def test_missing_files_and_bare_elements_are_told(tmp_path: Path, tube_mesh: ShellMesh) -> None:
    write(tube_mesh, tmp_path, formats=("vtu",))
    with pytest.raises(InputError, match="with inp among the formats"):
        read_model(tmp_path)
    bare = build_mesh(blades.tube(mesh=blades.rule(0.5), plies=()))
    with pytest.raises(InputError, match="carry no ply"):
        read_model(written(tmp_path / "bare", bare))


# Rings


def test_rings_measure_round_the_tube(tube: TrialModel) -> None:
    rings = find_rings(tube.mesh, *tube.row_ends)
    lengths = np.bincount(rings.ring, weights=rings.weight)
    # the middle of the laminate; sixteen or more parabolic edges
    assert lengths == pytest.approx(np.full(len(rings.z), 2 * np.pi * (RADIUS - THICKNESS / 2)), rel=2e-3)
    radius = np.hypot(*rings.place[:, :2].T)
    assert radius == pytest.approx(np.full(len(radius), RADIUS - THICKNESS / 2), abs=1e-6)


def test_rings_of_a_blade_have_skin_and_webs(whole: TrialModel) -> None:
    rings = find_rings(whole.mesh, *whole.row_ends)
    at = np.argmin(np.abs(rings.z - 9.0))
    assert set(whole.mesh.sheet[rings.node[rings.ring == at]]) == {0, 1, 2}
    assert np.ptp(whole.mesh.points[rings.node[rings.ring == at], 2]) < 1e-9


def test_best_rigid_motion_finds_every_rigid_motion(whole: TrialModel) -> None:
    rings = find_rings(whole.mesh, *whole.row_ends)
    rng = np.random.default_rng(1)
    motion = rng.normal(size=(3, len(rings.z), 6))
    arm = rings.place - np.column_stack([np.zeros((len(rings.ring), 2)), rings.z[rings.ring]])
    moved = motion[:, rings.ring, :3] + np.cross(motion[:, rings.ring, 3:], arm)
    found = best_rigid_motion(rings, moved)
    assert found.motion == pytest.approx(motion, abs=1e-9)
    assert found.ovalisation.max() < 1e-9
    assert found.warping.max() < 1e-9


def test_ovalisation_and_warping_are_no_rigid_motion(tube: TrialModel) -> None:
    rings = find_rings(tube.mesh, *tube.row_ends)
    angle = np.arctan2(rings.place[:, 1], rings.place[:, 0])
    oval = np.column_stack([np.cos(2 * angle) * np.cos(angle), np.cos(2 * angle) * np.sin(angle), 0 * angle])
    warp = np.column_stack([0 * angle, 0 * angle, np.sin(2 * angle)])
    found = best_rigid_motion(rings, np.stack([oval, warp]))
    assert np.abs(found.motion).max() < 2e-3
    assert found.ovalisation[0] == pytest.approx(np.full(len(rings.z), np.sqrt(0.5)), rel=2e-3)
    assert found.warping[1] == pytest.approx(np.full(len(rings.z), np.sqrt(0.5)), rel=2e-3)
    assert found.warping[0].max() < 1e-9
    assert found.ovalisation[1].max() < 1e-9


def test_loads_act_in_the_middle_at_ordinary_nodes_and_on_the_node_at_knots(whole: TrialModel) -> None:
    mesh = whole.mesh
    shift = np.linalg.norm(solver_places(mesh) - mesh.points, axis=1)
    feet = np.concatenate([whole.built.mesh.node_sets[f"{web} web suction foot"] for web in ("fore", "aft")])
    assert shift[feet].max() == 0.0
    half = np.unique(mesh.thickness / 2)
    ordinary = shift[shift > 0]
    assert len(ordinary) > 0.5 * len(shift)
    assert np.abs(ordinary[:, None] - half).min(axis=1).max() < 1e-9


# Loads


@pytest.mark.parametrize("wanted", np.eye(3) * 250.0)
@pytest.mark.parametrize("name", ["tube", "whole"])
def test_tip_forces_have_the_wanted_resultant(request: pytest.FixtureRequest, name: str, wanted) -> None:
    mesh = request.getfixturevalue(name).mesh
    point = np.array([0.01, 0.07])
    forces = tip_forces(mesh, wanted, point)
    found = forces.resultant(np.array([*point, mesh.points[:, 2].max()]))
    assert found[[0, 1, 5]] == pytest.approx(wanted, abs=1e-9)
    # in the plane; what moment across it there is comes from the tilt of the walls
    assert found[2] == 0.0
    assert np.abs(found[3:5]).max() < 0.02 * 250.0


def test_flow_of_a_torque_is_bredts_and_that_of_a_force_is_the_sines(tube: TrialModel) -> None:
    # Bredt: q = T / 2A; a round tube under V: q = V sin φ / (π r) (Timoshenko & Young, from memory)
    middle = RADIUS - THICKNESS / 2
    torque = tip_forces(tube.mesh, np.array([0, 0, 100.0]), np.zeros(2))
    rings = find_rings(tube.mesh, *tube.row_ends)
    at_tip = rings.ring == len(rings.z) - 1
    assert np.array_equal(rings.node[at_tip], torque.node)
    flow = np.linalg.norm(torque.force, axis=1) / rings.weight[at_tip]
    assert flow == pytest.approx(np.full(len(flow), 100 / (2 * np.pi * middle**2)), rel=5e-3)
    force = tip_forces(tube.mesh, np.array([100.0, 0, 0]), np.zeros(2))
    is_middle = force.node >= tube.mesh.n_corners
    angle = np.arctan2(force.place[:, 1], force.place[:, 0])
    flow = np.linalg.norm(force.force, axis=1) / rings.weight[at_tip]
    exact = 100 * np.abs(np.sin(angle)) / (np.pi * middle)
    assert flow[is_middle] == pytest.approx(exact[is_middle], abs=0.01 * exact.max())


def test_shear_compliance_of_a_tube(tube: TrialModel) -> None:
    # Cowper, 1966: shear factor ½ of a thin tube without Poisson's effect, GA / 2 = π r h G (from memory)
    found = shear_compliance(mesh_walls(tube.mesh, np.array([0.5, 1.2])))
    expected = np.eye(2) / (np.pi * (RADIUS - THICKNESS / 2) * THICKNESS * blades.GLASS.G12)
    assert found == pytest.approx(np.broadcast_to(expected, found.shape), rel=0.01, abs=1e-3 * expected[0, 0])


# Steps, and what the solver prints


def test_steps_hold_the_loads_and_write_no_fields(tube: TrialModel) -> None:
    mesh = tube.mesh
    rings = find_rings(mesh, *tube.row_ends)
    loads = [tip_forces(mesh, wanted, np.zeros(2)) for wanted in 100.0 * np.eye(3)]
    text = steps_text(mesh, rings.node, root="ROOT", loads=loads, acceleration=(-9.81, 0, 0), n_modes=6)
    deck = read_keyword_deck(tube.head + text)
    assert sorted(deck.node_sets[RING_SET]) == sorted(mesh.node_number[np.unique(rings.node)])
    assert deck.keywords.count("STEP") == deck.keywords.count("END STEP") == 5
    assert not {"NODE FILE", "EL FILE", "NODE OUTPUT", "ELEMENT OUTPUT"} & set(deck.keywords)
    for block, wanted in zip(text.split("*CLOAD,OP=NEW\n")[1:], 100.0 * np.eye(3), strict=False):
        rows = np.array([line.split(",") for line in block.partition("*")[0].splitlines()], dtype=float)
        # forces on nodes, never moments
        assert set(rows[:, 1]) <= {1.0, 2.0, 3.0}
        for axis in range(2):
            assert rows[rows[:, 1] == axis + 1, 2].sum() == pytest.approx(wanted[axis], abs=1e-9)


def printed_text(n_tables: int = 4) -> str:
    table = "\n         1  1.0E+00 -2.0E-01-3.0E-01\n         2  4.0E+00  5.0E+00  6.0E+00\n"
    parts = [
        f"\n {title} and time  0.1000000E+01\n{table}"
        for _ in range(n_tables // 2)
        for title in ("forces (fx,fy,fz) for set ROOT", MARKER)
    ]
    parts.append("\n total mass for set ALL and time  0.2\n\n        8.5E+01\n")
    parts.append(
        "\n     E I G E N V A L U E   O U T P U T\n\n MODE NO    EIGENVALUE   FREQUENCY\n\n"
        "      1   0.8E+04   0.8960312E+02   0.1426078E+02   0.0\n"
        "      2   0.9E+04   0.9960312E+02   0.1526078E+02   0.0\n\n     P A R T I C I P A T I O N   F A C T O R S\n"
    )
    parts += [f"\n {MARKER} and time  0.3\n{table}" for _ in range(2)]
    return "".join(parts)


def test_what_the_solver_prints_is_read() -> None:
    found = read_printed(printed_text(), np.array([2, 1, 2]), np.array([1]), n_static=2, n_modes=2)
    assert found.displacement.shape == (2, 3, 3)
    assert found.displacement[1] == pytest.approx(np.array([[4, 5, 6], [1, -0.2, -0.3], [4, 5, 6]]))
    assert found.mode.shape == (2, 3, 3)
    assert found.reaction[0] == pytest.approx(np.array([[1, -0.2, -0.3]]))
    assert found.frequency == pytest.approx([14.26078, 15.26078])
    assert found.mass == 85.0


@pytest.mark.parametrize(
    ("text", "nodes", "words"),
    [
        (printed_text(2), [1], "tables of displacements"),
        (printed_text(), [3], "left out nodes"),
        (printed_text().replace("0.1526078E+02", "NaN"), [1], "no number"),
        (printed_text().replace("total mass", "mass"), [1], "no reactions or no mass"),
        ("", [1], "tables of displacements"),
    ],
)
def test_what_is_missing_from_the_print_is_told(text: str, nodes: list[int], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        read_printed(text, np.array(nodes), np.array([1]), n_static=2, n_modes=2)


# The solver as a program


def script(folder: Path, body: str) -> Path:
    path = folder / "ccx"
    path.write_text(f"#!/bin/sh\n{body}\n")
    path.chmod(path.stat().st_mode | stat.S_IEXEC)
    return path


def test_a_missing_solver_is_told_with_its_install_line(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setenv("PATH", str(tmp_path))
    with pytest.raises(NoSolverError, match=INSTALL_LINE):
        find_solver()
    own = script(tmp_path, "true")
    assert find_solver() == own
    assert find_solver(own) == own
    with pytest.raises(NoSolverError, match="is no program"):
        find_solver(tmp_path / "other")


@pytest.mark.parametrize(
    ("body", "words"),
    [
        ("echo ' *ERROR reading *NODE'; for k in 1 2 3; do echo line $k; done; exit 201", "status 201"),
        ("echo line 3", "before the end"),
        ("echo line 3; kill -9 $$", "out of memory"),
    ],
)
def test_a_solver_that_fails_is_told_with_its_last_lines(tmp_path: Path, body: str, words: str) -> None:
    (tmp_path / "trial.inp").write_text("*HEADING\n")
    with pytest.raises(SolverError, match=words) as caught:
        run_solver(tmp_path / "trial.inp", script(tmp_path, body))
    assert "line 3" in str(caught.value)
    assert "line 3" in caught.value.log
    assert ("*ERROR reading *NODE" in str(caught.value)) == ("ERROR" in body)


def test_the_deck_is_given_and_progress_is_told(tmp_path: Path) -> None:
    (tmp_path / "trial.inp").write_text("*HEADING\n")
    body = f'echo "{MARKER}" > "$2.dat"; sleep 1; echo "$1 $2"; echo Job finished'
    told: list[int] = []
    run = run_solver(tmp_path / "trial.inp", script(tmp_path, body), marker=MARKER, on_block=told.append)
    assert "-i trial" in run.log
    assert told
    assert told[-1] == 1
    assert run.printed.count(MARKER) == 1


# The beams


def test_without_the_blade_file_the_sections_are_the_meshs(tube: TrialModel) -> None:
    beams = make_beams(tube, find_blade_file(tube))
    assert beams.road == MESH
    assert "--blade" in beams.note
    # Bredt–Batho and thin-tube formulas, published values of the tube: EI = E π r³ t, GJ = G 2 π r³ t
    middle, E = RADIUS - THICKNESS / 2, blades.GLASS.E1
    assert beams.sections.bending[3] == pytest.approx(
        E * np.pi * middle**3 * THICKNESS * np.eye(2), rel=5e-3, abs=1e-3 * E * middle**3 * THICKNESS
    )
    assert beams.sections.torsion == pytest.approx(
        np.full(len(beams.sections.z), blades.GLASS.G12 * 2 * np.pi * middle**3 * THICKNESS), rel=5e-3
    )


def test_the_blade_file_is_found_by_its_bytes(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "ring.csv").write_text("z_m,chord_m,twist_deg,pitch_axis,profile\n0,0.6,0,0.5,ring\n2,0.6,0,0.5,ring\n")
    text = """title: tube
planform: ring.csv
profiles: {ring: {circle: true}}
materials: {steel: {E: 210e9, nu: 0.3, density: 7850}}
plies: [{ply: wall, material: steel, thickness: 0.004, covers: [skin]}]
mesh: {size: 0.3}
"""
    (tmp_path / "ring.yaml").write_text(text)

    model = read_model(written(tmp_path / "mesh", build_mesh(load_blade(tmp_path / "ring.yaml"))))
    found = find_blade_file(model)
    assert found == tmp_path / "ring.yaml"
    assert make_beams(model, found).road == EXACT
    (tmp_path / "ring.yaml").write_text(text + "# changed\n")
    monkeypatch.chdir(tmp_path)
    assert find_blade_file(model) is None
    assert "changed since" in make_beams(model, Path("ring.yaml")).note


def test_an_open_tip_cannot_take_a_torque() -> None:
    mesh = build_mesh(blades.tube(radius=RADIUS, length=LENGTH, mesh=blades.rule(0.3)))
    # half of the ring's elements taken away: a channel
    kept = np.flatnonzero(mesh.points[mesh.cells].mean(axis=1)[:, 1] > 0.0)
    arrays = ("cells", "region", "stack", "offset", "e1", "e2", "e3", "element_number")
    channel = replace(mesh, **{name: getattr(mesh, name)[kept] for name in arrays})
    with pytest.raises(ValueError, match="no closed cell"):
        tip_forces(channel, np.array([0.0, 0.0, 1.0]), np.zeros(2))
