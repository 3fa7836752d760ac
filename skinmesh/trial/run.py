"""The trial run: a built model in the solver, each answer beside beam theory."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline
from scipy.optimize import linear_sum_assignment

from skinmesh.errors import InputError, Problem
from skinmesh.mesh.measure import element_centres, element_masses, solid_mass
from skinmesh.trial.beamside import ALL, BeamSide, find_blade_file, make_beams
from skinmesh.trial.loads import NodalForces, tip_forces
from skinmesh.trial.model import TrialModel, read_model
from skinmesh.trial.rings import RigidMotion, Rings, best_rigid_motion, find_rings
from skinmesh.trial.solver import SolverError, SolverRun, find_solver, run_solver
from skinmesh.trial.steps import MARKER, Printed, read_printed, steps_text
from skinmesh.trial.theory import (
    KINDS,
    BeamBays,
    deflection,
    kinds_of_motion,
    modal_likeness,
    natural_modes,
    tip_load,
    weight_load,
)

Floats = NDArray[np.float64]

ACCELERATION = (-9.81, 0.0, 0.0)
"""Of the weight, m/s²: flap-wise."""
N_MODES = 6
N_THEORY_MODES = 24
LEAST_RINGS = 24
TIP_SHARE, TIP_TWIST = 0.01, np.radians(1.0)
"""Wanted tip deflection as a share of the span, and wanted twist, on which the sizes of the loads are chosen."""
ALIKE = 0.5  # modal likeness below which a mode is like none of the beam's
SAME_FREQUENCY = 0.02  # modes of a beam nearer than this may mix freely

Progress = Callable[[str, float], None]


@dataclass(frozen=True, eq=False)
class StaticCase:
    """One load, in the solver and in theory.

    Attributes
    ----------
    name : str
        'flap-wise tip load', 'edge-wise tip load', 'tip torque', 'weight'.
    component : int
        The motion that is compared: 0 along x, 1 along y, 5 about z.
    load, reaction : (6,) float array, N and N m
        Force, and moment about the place at the tip where the motion is compared: on the blade, and from the solver's
        root. The solver leaves the load on the nodes of the root out of its reactions, and so does ``load`` here.
    imbalance : float
        Largest part of load and reaction that does not cancel, as a share of the load; moments as a share of the load
        at the span's lever. Forces only of the weight, of which no moment is known to such accuracy.
    solver, theory : float, m or rad
        Motion at the tip, by the best rigid motion of its ring.
    line_solver, line_theory, line_refined : (r, 6) float array
        Motion of the point (0, 0, z) of each ring's section, and rotation: in the solver, by theory, and by the theory
        that has shear strains, couplings and the mesh's sections.
    variants : mapping of str to float
        Motion at the tip by further theories.
    ovalisation, warping : (r,) float array
        What no rigid motion of the ring explains, in the section's plane and across it, as a share of the largest
        displacement of any ring.
    """

    name: str
    component: int
    load: Floats
    reaction: Floats
    imbalance: float
    solver: float
    theory: float
    line_solver: Floats
    line_theory: Floats
    line_refined: Floats
    variants: Mapping[str, float]
    ovalisation: Floats
    warping: Floats

    @property
    def difference(self) -> float:
        """Solver against theory, as a share of theory."""
        return self.solver / self.theory - 1.0


@dataclass(frozen=True, eq=False)
class ModeCase:
    """One natural mode of the solver and the mode of the beam that is most like it.

    Attributes
    ----------
    kind : str
        'flap', 'edge', 'torsion', 'axial'; 'shell' where no mode of the beam is like it.
    solver : float, Hz
    theory : float, Hz
        NaN of a shell mode.
    theory_mode : int
        One-based place among the beam's modes, 0 of a shell mode.
    likeness : float
        Modal assurance criterion; modes of the beam of nearly the same frequency count together.
    rigid_share : float
        Share of the rings' squared motion that rigid motions explain.
    variants : mapping of str to float, Hz
    line : (r, 6) float array
        Motion of the rings, the largest displacement 1 m.
    """

    kind: str
    solver: float
    theory: float
    theory_mode: int
    likeness: float
    rigid_share: float
    variants: Mapping[str, float]
    line: Floats

    @property
    def difference(self) -> float:
        """Solver against theory, as a share of theory."""
        return self.solver / self.theory - 1.0


@dataclass(frozen=True, eq=False)
class Trial:
    """A finished trial run.

    Attributes
    ----------
    model : TrialModel
    beams : BeamSide
    rings : Rings
    statics : tuple of StaticCase
    modes : tuple of ModeCase
    mass_solver, mass_mesh : float, kg
        The first NaN where the solver prints none (layered triangles).
    run : SolverRun
    tip : (2,) float array, m
        Where the tip loads act, and deflections are compared: the tip's shear centre by the beam table.
    """

    model: TrialModel
    beams: BeamSide
    rings: Rings
    statics: tuple[StaticCase, ...]
    modes: tuple[ModeCase, ...]
    mass_solver: float
    mass_mesh: float
    run: SolverRun
    tip: Floats = field(default_factory=lambda: np.zeros(2))


@dataclass(frozen=True, eq=False)
class _Load:
    name: str
    component: int
    forces: NodalForces | None
    resultant: Floats


def run_trial(
    directory: Path,
    *,
    solver: Path | None = None,
    blade_file: Path | None = None,
    progress: Progress | None = None,
) -> Trial:
    """Run a built model in CalculiX and set it beside beam theory.

    Writes into a temporary folder only.

    Parameters
    ----------
    directory : Path
        Of a mesh that was built with the formats vtu and inp.
    solver : Path, optional
        By default ``ccx`` of the search path.
    blade_file : Path, optional
        For the exact sections; looked for where none is given.
    progress : callable, optional
        Called with the name of each stage and the share of the work done when it begins.

    Returns
    -------
    Trial

    Raises
    ------
    NoSolverError, SolverError
    InputError
        The files do not make a model that can be run.
    """
    tell = progress or _silent
    program = find_solver(solver)
    tell("reading", 0.0)
    model = read_model(directory)
    tell("beam theory", 0.03)
    file = f"{model.mesh.stem}.inp"
    try:
        beams = make_beams(model, blade_file or find_blade_file(model))
        loads = _choose_loads(model, beams)
    except ValueError as error:
        raise InputError([Problem(file, 0, "", f"no beam can be made of it: {error}")]) from error
    rings = _choose_rings(model)
    text = model.head + steps_text(
        model.mesh,
        rings.node,
        root=model.root,
        loads=[load.forces for load in loads if load.forces is not None],
        acceleration=ACCELERATION,
        n_modes=N_MODES,
    )
    names = [*(load.name for load in loads), "natural modes"]
    tell(f"solver: {names[0]}", 0.1)
    with TemporaryDirectory(prefix="skinmesh-trial-") as folder:
        deck = Path(folder) / "trial.inp"
        deck.write_text(text, encoding="ascii", errors="replace")
        run = run_solver(
            deck,
            program,
            marker=MARKER,
            on_block=lambda done: tell(f"solver: {names[min(done, len(loads))]}", _solver_share(done, len(names))),
        )
    tell("comparison", 0.97)
    numbers = model.mesh.node_number[rings.node]
    at_root = rings.ring == 0
    try:
        printed = read_printed(run.printed, numbers, numbers[at_root], n_static=len(loads), n_modes=N_MODES)
    except ValueError as error:
        raise SolverError(f"{program.name} ended, but its answer cannot be read: {error}", run.log) from error
    motion = best_rigid_motion(rings, np.concatenate([printed.displacement, printed.mode]))
    has_mass = model.mesh.n_sides == 4
    return Trial(
        model=model,
        beams=beams,
        rings=rings,
        statics=_static_cases(model, beams, rings, loads, printed, motion),
        modes=_mode_cases(beams, rings, printed, motion, len(loads)),
        mass_solver=printed.mass if has_mass else float("nan"),
        mass_mesh=solid_mass(model.mesh),
        run=run,
        tip=beams.tip_shear_centre,
    )


def _solver_share(done: int, n_steps: int) -> float:
    return 0.1 + 0.87 * min(done / n_steps, 0.99)


def _choose_loads(model: TrialModel, beams: BeamSide) -> tuple[_Load, ...]:
    """Tip loads of such sizes that theory has one hundredth of the span, or one degree."""
    tip = beams.tip_shear_centre
    wanted = []
    for name, component, axis in (
        ("flap-wise tip load", 0, 0),
        ("edge-wise tip load", 1, 1),
        ("tip torque", 5, 2),
    ):
        unit = np.zeros(3)
        unit[axis] = 1.0
        answer = _tip_motion(beams.plain, _loads_at_tip(beams.plain, _six(unit), tip), tip)[component]
        size = _round_down((TIP_TWIST if component == 5 else TIP_SHARE * model.span) / abs(answer))
        forces = tip_forces(model.mesh, size * unit, tip)
        # what the solver will see, to the last digit
        point = np.array([*tip, beams.plain.z[-1]])
        wanted.append(_Load(name, component, forces, forces.resultant(point)))
    return (*wanted, _Load("weight", 0, None, np.zeros(6)))


def _six(plane: Floats) -> Floats:
    """Force and moment from forces along x and y and a torque about z."""
    return np.array([plane[0], plane[1], 0.0, 0.0, 0.0, plane[2]])


def _round_down(value: float) -> float:
    """One significant digit."""
    power = 10.0 ** np.floor(np.log10(value))
    return float(np.floor(value / power) * power)


def _loads_at_tip(bays: BeamBays, resultant: Floats, tip: Floats) -> Floats:
    """Nodal loads of a force and a moment about a point (x, y) of the tip's section."""
    moment = resultant[3:] + np.cross([*tip, 0.0], resultant[:3])
    return tip_load(bays, resultant[:3], moment)


def _tip_motion(bays: BeamBays, loads: Floats, tip: Floats) -> Floats:
    return _at_point(deflection(bays, loads)[-1], tip)


def _at_point(motion: Floats, point: Floats) -> Floats:
    """Motion of another point (x, y) of the same section."""
    moved = motion.copy()
    moved[:3] += np.cross(motion[3:], [*point, 0.0])
    return moved


def _choose_rings(model: TrialModel) -> Rings:
    """Every station, and as many element rows between them as make a fine line."""
    levels, z = model.row_ends
    stations = np.searchsorted(z, model.mesh.report.stations - 1e-9 * model.span)
    step = max(1, len(levels) // LEAST_RINGS)
    chosen = np.unique([0, *range(0, len(levels), step), *np.clip(stations, 0, len(levels) - 1), len(levels) - 1])
    return find_rings(model.mesh, levels[chosen], z[chosen])


def _static_cases(
    model: TrialModel,
    beams: BeamSide,
    rings: Rings,
    loads: tuple[_Load, ...],
    printed: Printed,
    motion: RigidMotion,
) -> tuple[StaticCase, ...]:
    tip = beams.tip_shear_centre
    place = np.array([*tip, beams.plain.z[-1]])
    root = rings.place[rings.ring == 0]
    refined = beams.variants[ALL]
    cases = []
    for k, load in enumerate(loads):
        nodal = {name: _nodal_loads(bays, load, tip) for name, bays in beams.variants.items()}
        own = _nodal_loads(beams.plain, load, tip)
        line = _at_rings(beams.plain, deflection(beams.plain, own), rings)
        largest = motion.displacement[k].max()
        is_weight = load.forces is None
        resultant = _weight_but_root(model, place) if is_weight else load.resultant
        reaction = NodalForces(np.arange(len(root)), printed.reaction[k], root).resultant(place)
        cases.append(
            StaticCase(
                name=load.name,
                component=load.component,
                load=resultant,
                reaction=reaction,
                imbalance=_imbalance(resultant, reaction, model.span, has_moment=not is_weight),
                solver=float(_at_point(motion.motion[k, -1], tip)[load.component]),
                theory=float(_at_point(line[-1], tip)[load.component]),
                line_solver=motion.motion[k],
                line_theory=line,
                line_refined=_at_rings(refined, deflection(refined, nodal[ALL]), rings),
                variants={
                    name: float(_tip_motion(bays, nodal[name], tip)[load.component])
                    for name, bays in beams.variants.items()
                },
                ovalisation=motion.ovalisation[k] / largest,
                warping=motion.warping[k] / largest,
            )
        )
    return tuple(cases)


def _nodal_loads(bays: BeamBays, load: _Load, tip: Floats) -> Floats:
    return weight_load(bays, ACCELERATION) if load.forces is None else _loads_at_tip(bays, load.resultant, tip)


def _weight_but_root(model: TrialModel, place: Floats) -> Floats:
    """Weight of the mesh without what its second-order elements put on the nodes of the root.

    A quadrilateral puts −1/12 of its weight on a corner and 1/3 on a mid node, a triangle 0 and 1/3 (Zienkiewicz &
    Taylor, The Finite Element Method, vol. 1, from memory).
    """
    mesh = model.mesh
    n_sides = mesh.n_sides
    is_root = mesh.row[mesh.cells] == 0.0
    corner = -1.0 / 12.0 if n_sides == 4 else 0.0
    share = corner * is_root[:, :n_sides].sum(axis=1) + is_root[:, n_sides:].sum(axis=1) / 3.0
    masses = element_masses(mesh)
    masses *= solid_mass(mesh) / masses.sum()
    force = ((1.0 - share) * masses)[:, None] * np.array(ACCELERATION)
    moment = np.cross(element_centres(mesh) - place, force).sum(axis=0)
    return np.concatenate([force.sum(axis=0), moment])


def _imbalance(load: Floats, reaction: Floats, span: float, *, has_moment: bool) -> float:
    left = np.abs(load + reaction)
    force = max(float(np.linalg.norm(load[:3])), float(np.linalg.norm(load[3:])) / span if has_moment else 0.0)
    parts = [left[:3].max() / force]
    if has_moment:
        parts.append(left[3:].max() / max(force * span, float(np.linalg.norm(load[3:]))))
    return float(max(parts))


def _at_rings(bays: BeamBays, motion: Floats, rings: Rings) -> Floats:
    """Motion at the rings, which lie at ends of bays."""
    return np.stack([np.interp(rings.z, bays.z, column) for column in motion.T], axis=1)


def _mode_cases(
    beams: BeamSide, rings: Rings, printed: Printed, motion: RigidMotion, n_static: int
) -> tuple[ModeCase, ...]:
    bays = beams.plain
    found = motion.motion[n_static:]
    # the solver's lines on the beam's nodes, its root held
    on_beam = CubicSpline(rings.z, found, axis=1)(bays.z)
    on_beam[:, 0] = 0.0
    beam_modes = natural_modes(bays, N_THEORY_MODES)
    kinds = kinds_of_motion(bays, beam_modes.motion).argmax(axis=1)
    likeness = _joined_likeness(modal_likeness(bays, on_beam, beam_modes.motion), beam_modes.frequency)
    mode, partner = linear_sum_assignment(-likeness)
    partner_of = dict(zip(mode.tolist(), partner.tolist(), strict=True))
    variants = {name: _paired_frequency(bays, beam_modes.motion, other) for name, other in beams.variants.items()}
    squares = motion.displacement[n_static:] ** 2
    left = motion.ovalisation[n_static:] ** 2 + motion.warping[n_static:] ** 2
    cases = []
    for k, frequency in enumerate(printed.frequency):
        j = partner_of[k]
        is_beam = bool(likeness[k, j] >= ALIKE)
        cases.append(
            ModeCase(
                kind=KINDS[kinds[j]] if is_beam else "shell",
                solver=float(frequency),
                theory=float(beam_modes.frequency[j]) if is_beam else float("nan"),
                theory_mode=j + 1 if is_beam else 0,
                likeness=float(likeness[k, j]),
                rigid_share=float(1.0 - left[k].sum() / squares[k].sum()),
                variants={name: float(values[j]) for name, values in variants.items()} if is_beam else {},
                line=found[k] / np.abs(found[k, :, :3]).max(),
            )
        )
    return tuple(cases)


def _joined_likeness(likeness: Floats, frequency: Floats) -> Floats:
    """Likeness to all modes of the beam whose frequency is nearly that of each."""
    near = np.abs(frequency[:, None] / frequency - 1.0) < SAME_FREQUENCY
    return np.asarray(likeness @ near.astype(float))


def _paired_frequency(bays: BeamBays, motion: Floats, other: BeamBays) -> Floats:
    """Frequencies of another beam, in the order of the modes that they are most like."""
    modes = natural_modes(other, N_THEORY_MODES)
    likeness = _joined_likeness(modal_likeness(bays, motion, modes.motion), modes.frequency)
    # a small bias by order settles pairs of one frequency
    order = 1e-3 * np.abs(np.arange(len(motion))[:, None] - np.arange(len(modes.frequency)))
    return np.asarray(modes.frequency[linear_sum_assignment(order - likeness)[1]])


def _silent(stage: str, done: float) -> None:
    """Progress that nobody wants to hear of."""
