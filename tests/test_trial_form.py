"""Sections that keep their form: what the constraints say, the theory beside them, and a run against a closed form."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import blades
import numpy as np
import pytest
import scipy.sparse as sparse
from numpy.typing import NDArray
from scipy.integrate import solve_bvp
from solver_runs import STEEL, needs_ccx

from skinmesh.definition.blade import CircleProfile, PlyRule
from skinmesh.definition.spanwise import constant
from skinmesh.mesh.build import build_mesh
from skinmesh.trial.beamside import held_beams
from skinmesh.trial.form import form_parts, place_of_parting
from skinmesh.trial.hold import held_sections, hold_text
from skinmesh.trial.model import TrialModel, read_model
from skinmesh.trial.report import failures, remarks, trial_json
from skinmesh.trial.rings import solver_places
from skinmesh.trial.run import Trial, run_trial
from skinmesh.write.files import write

RADIUS, THICKNESS, LENGTH = 0.3, 0.004, 2.0
BENT_RADIUS, BENT_WALL, ARC, ARC_SHARE = 0.5, 0.5 / 200, 100.0, 0.25
"""Of a bent tube: r and R with t R / r² = 1, and its length as a share of R."""


def model_of(folder: Path, blade) -> TrialModel:
    write(build_mesh(blade), folder, formats=("vtu", "inp"))
    return read_model(folder)


@pytest.fixture(scope="module")
def tube(tmp_path_factory: pytest.TempPathFactory) -> TrialModel:
    blade = blades.tube(radius=RADIUS, length=LENGTH, mesh=blades.rule(0.3))
    return model_of(tmp_path_factory.mktemp("tube"), blade)


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> TrialModel:
    blade = blades.demonstration(mesh=blades.rule(0.8, turning=0.7, chord_error=0.02, close_gap=0.012))
    return model_of(tmp_path_factory.mktemp("whole"), blade)


def equations(model: TrialModel) -> tuple[sparse.csr_matrix, NDArray]:
    """The constraints as a matrix over three displacements a node, and the displacement that each determines."""
    mesh = model.mesh
    lines = hold_text(mesh, model.row_ends[0]).split("*EQUATION\n")[1].splitlines()
    index = {number: place for place, number in enumerate(mesh.node_number.tolist())}
    rows, columns, values, first = [], [], [], []
    stack = lines[::-1]
    while stack:
        n_terms, terms = int(stack.pop()), []
        while len(terms) < 3 * n_terms:
            line = stack.pop()
            assert len(line) <= 132
            assert line.count(",") <= 11
            terms += line.split(",")
        table = np.array(terms, dtype=float).reshape(n_terms, 3)
        place = [3 * index[int(node)] + int(axis) - 1 for node, axis in table[:, :2]]
        rows += [len(first)] * n_terms
        columns += place
        values += table[:, 2].tolist()
        first.append(place[0])
    shape = (len(first), 3 * len(mesh.points))
    return sparse.csr_matrix((values, (rows, columns)), shape=shape), np.array(first)


@pytest.mark.parametrize("name", ["tube", "whole"])
def test_a_section_has_three_motions_in_its_plane_and_all_motions_across_it(
    request: pytest.FixtureRequest, name: str
) -> None:
    model = request.getfixturevalue(name)
    matrix, first = equations(model)
    sections = held_sections(model.mesh, model.row_ends[0])
    assert len(first) == sum(2 * len(nodes) - 3 for nodes in sections)
    # each determines another displacement, in a plane, by itself: they are independent
    assert len(np.unique(first)) == len(first)
    assert not np.any(first % 3 == 2)
    assert abs(matrix[:, first] - sparse.eye(len(first))).max() < 1e-12


@pytest.mark.parametrize("name", ["tube", "whole"])
def test_rigid_bodies_and_warping_move_freely_and_other_forms_do_not(request: pytest.FixtureRequest, name: str) -> None:
    model = request.getfixturevalue(name)
    mesh = model.mesh
    matrix, _ = equations(model)
    places = solver_places(mesh)
    rng = np.random.default_rng(3)
    for shift, turn in rng.normal(size=(4, 2, 3)):
        assert np.abs(matrix @ (shift + np.cross(turn, places)).ravel()).max() < 1e-9
    sections = held_sections(mesh, model.row_ends[0])
    # each section by itself
    moved = np.zeros((len(places), 3))
    for nodes in sections:
        shift, turn = rng.normal(size=2), rng.normal()
        moved[nodes, :2] = shift + turn * np.column_stack([-places[nodes, 1], places[nodes, 0]])
    assert np.abs(matrix @ moved.ravel()).max() < 1e-9
    wider = np.zeros((len(places), 3))
    wider[:, 0] = 1e-3 * places[:, 0]
    assert np.abs(matrix @ wider.ravel()).max() > 1e-5


def test_every_node_but_the_roots_is_held(tube: TrialModel, whole: TrialModel) -> None:
    for model in (tube, whole):
        held = np.concatenate(held_sections(model.mesh, model.row_ends[0]))
        assert len(np.unique(held)) == len(held)
        missing = np.setdiff1d(np.flatnonzero(model.mesh.row > 0.0), held)
        # nodes of a closing trailing edge between the ends of the element rows
        assert len(missing) <= (0 if model is tube else 0.003 * len(held))


def test_theory_of_held_walls_has_no_poisson_contraction(tube: TrialModel) -> None:
    # a lamina kept from straining across: Q11 = E1 / (1 − ν12 ν21) (Jones, Mechanics of Composite Materials, eq. 2.61)
    glass, middle = blades.GLASS, RADIUS - THICKNESS / 2
    stiff = glass.E1 / (1.0 - glass.nu12**2 * glass.E2 / glass.E1)
    beams = held_beams(tube)
    n = len(beams.sections.z)
    area = 2 * np.pi * middle * THICKNESS
    assert beams.sections.axial == pytest.approx(np.full(n, stiff * area), rel=5e-3)
    assert beams.sections.bending[:, 0, 0] == pytest.approx(np.full(n, 0.5 * stiff * area * middle**2), rel=5e-3)
    assert beams.sections.torsion == pytest.approx(np.full(n, glass.G12 * area * middle**2), rel=5e-3)


def test_lines_part_where_one_of_them_bends() -> None:
    # a hinge at z = 3: all of the parting arises there
    z = np.arange(11.0)
    parting = np.zeros((11, 6))
    parting[:, 0] = 0.1 * np.maximum(z - 3.0, 0.0)
    parting[3:, 4] = 0.1
    assert place_of_parting(parting, 0, z) == (2.0, 3.0)


# A run of it


@pytest.fixture(scope="module")
def bent(tmp_path_factory: pytest.TempPathFactory) -> Trial:
    """A thin tube along an arc, run free and with its sections kept in form."""
    z = np.linspace(0.0, ARC_SHARE * ARC, 13)
    table = blades.stations(list(z), [2 * BENT_RADIUS + BENT_WALL] * 13, ["ring"] * 13, prebend=list(z**2 / (2 * ARC)))
    wall = PlyRule("wall", STEEL, constant(BENT_WALL), constant(1), 0.0, ("skin",))
    mesh = blades.rule(1.0, turning=0.55, chord_error=0.5)
    blade = blades.blade(table, {"ring": CircleProfile()}, plies=(wall,), mesh=mesh)
    folder = tmp_path_factory.mktemp("bent")
    write(build_mesh(replace(blade, materials={"steel": STEEL})), folder, formats=("vtu", "inp"))
    return run_trial(folder, hold_shape=True)


def softness_of_an_arc() -> float:
    """Tip deflection of a clamped arc of thin tube under a tip force, over that of a tube that keeps its form.

    The tube ovalises by w cos 2φ, of which the root has none: von Kármán, Zeitschrift des Vereines deutscher
    Ingenieure 55 (1911), for the energy in the plane; Vlasov's semi-membrane shell for what keeps w from changing along
    the tube: (r²/16) w'''' + (1 + 12 λ²) / (16 R²) w = −3 m / 4R, and the curvature is (m − 3 w / 4R) / r with m the
    bending strain; derived anew. Without ends that is von Kármán's factor (10 + 12 λ²) / (1 + 12 λ²).
    """
    length = ARC_SHARE * ARC
    spring = (1.0 + 12.0 * (BENT_WALL * ARC / BENT_RADIUS**2) ** 2 / (1.0 - STEEL.nu12**2)) / (ARC * BENT_RADIUS) ** 2

    def rate(s: NDArray, w: NDArray) -> NDArray:
        return np.vstack([w[1], w[2], w[3], -spring * w[0] - 12.0 / (ARC * BENT_RADIUS**2) * (1.0 - s / length)])

    s = np.linspace(0.0, length, 200)
    found = solve_bvp(
        rate, lambda root, tip: np.array([root[0], root[1], tip[2], tip[3]]), s, np.zeros((4, 200)), tol=1e-6
    )
    lever = 1.0 - found.x / length
    return float(np.trapezoid((lever - 0.75 * found.y[0] / ARC) * lever, found.x) / np.trapezoid(lever**2, found.x))


@needs_ccx
@pytest.mark.solver
def test_a_bent_tube_is_soft_as_von_karman_has_it_and_a_beam_where_its_form_is_kept(bent: Trial) -> None:
    assert bent.held is not None
    assert failures(bent) == ()
    soft = softness_of_an_arc() - 1.0
    assert soft > 0.3
    flap, edge, torque, _, *modes = form_parts(bent)
    for part in (flap, edge, torque, *modes[:4]):
        assert part is not None
        # what is left of the difference once the form is kept
        assert abs(part.left) < 0.01
    for case, other in zip(bent.statics, bent.held.statics, strict=True):
        assert case.imbalance < 2e-3
        assert other.imbalance < 1e-4
        assert other.ovalisation.max() < 0.01 * max(case.ovalisation.max(), 0.01)
    assert flap is not None
    assert flap.form == pytest.approx(soft, rel=0.05)


@needs_ccx
@pytest.mark.solver
def test_the_second_run_is_told(bent: Trial) -> None:
    told = " ".join(remarks(bent))
    assert "their change of form makes +" in told
    assert "--hold-shape" not in told
    assert "--hold-shape" in " ".join(remarks(replace(bent, held=None)))
    document = json.loads(trial_json(bent))
    entry = document["static"][0]["form_held"]
    assert entry["difference"] == pytest.approx(entry["solver"] / entry["theory"] - 1.0, abs=1e-6)
    assert 1.0 + document["static"][0]["difference"] == pytest.approx(
        (1.0 + entry["form"]) * (1.0 + entry["difference"]), rel=1e-5
    )
    # where walls move by themselves no mode of the second run is alike
    assert [mode["form_held"] for mode in document["modes"]].count(None) == [m.kind for m in bent.modes].count("shell")
