"""The trial run: a built model in the solver, each answer beside beam theory."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import InputError, Problem
from skinmesh.mesh.measure import solid_mass
from skinmesh.trial.beamside import BeamSide, find_blade_file, held_beams, make_beams
from skinmesh.trial.compare import (
    ACCELERATION,
    ModeCase,
    StaticCase,
    TrialLoad,
    compare_modes,
    compare_statics,
    loads_at_tip,
    pair_modes,
    tip_motion,
)
from skinmesh.trial.hold import hold_text
from skinmesh.trial.loads import tip_forces
from skinmesh.trial.model import TrialModel, read_model
from skinmesh.trial.rings import Rings, best_rigid_motion, find_rings
from skinmesh.trial.solver import SolverError, SolverRun, find_solver, run_solver
from skinmesh.trial.steps import MARKER, Printed, read_printed, steps_text

Floats = NDArray[np.float64]

N_MODES = 6
N_HELD_MODES = 10
"""Of the second run, in which the order of the modes may be another."""
LEAST_RINGS = 24
TIP_SHARE, TIP_TWIST = 0.01, np.radians(1.0)
"""Wanted tip deflection as a share of the span, and wanted twist, on which the sizes of the loads are chosen."""

Progress = Callable[[str, float], None]


@dataclass(frozen=True, eq=False)
class HeldTrial:
    """The same loads on the same model, its sections kept in form.

    Attributes
    ----------
    beams : BeamSide
        Of sections whose walls are held alike.
    statics : tuple of StaticCase
        In the order of the first run's.
    modes : tuple of ModeCase
    partner : tuple of int or None
        For each mode of the first run the one here that is most like it.
    run : SolverRun
    """

    beams: BeamSide
    statics: tuple[StaticCase, ...]
    modes: tuple[ModeCase, ...]
    partner: tuple[int | None, ...]
    run: SolverRun


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
    held : HeldTrial or None
        The second run, where it was asked for.
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
    held: HeldTrial | None = None


@dataclass(frozen=True, eq=False)
class _Answer:
    printed: Printed
    statics: tuple[StaticCase, ...]
    modes: tuple[ModeCase, ...]
    run: SolverRun


def run_trial(
    directory: Path,
    *,
    solver: Path | None = None,
    blade_file: Path | None = None,
    hold_shape: bool = False,
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
    hold_shape : bool
        Run it a second time with sections that keep their form, to tell how much of a difference their change of form
        makes.
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
    tip = beams.tip_shear_centre
    half = 0.53 if hold_shape else 0.97
    answer = _solve(model, beams, loads, rings, tip=tip, program=program, tell=_part(tell, 0.1, half))
    held = None
    if hold_shape:
        second = replace(model, head=model.head + hold_text(model.mesh, model.row_ends[0]))
        stiff = held_beams(model)
        told = _part(tell, half, 0.97, ", form held")
        other = _solve(second, stiff, loads, rings, tip=tip, program=program, tell=told, n_modes=N_HELD_MODES)
        partner = pair_modes(beams.plain, rings, answer.modes, other.modes)
        held = HeldTrial(stiff, other.statics, other.modes, partner, other.run)
    has_mass = model.mesh.n_sides == 4
    return Trial(
        model=model,
        beams=beams,
        rings=rings,
        statics=answer.statics,
        modes=answer.modes,
        mass_solver=answer.printed.mass if has_mass else float("nan"),
        mass_mesh=solid_mass(model.mesh),
        run=answer.run,
        tip=tip,
        held=held,
    )


def _solve(
    model: TrialModel,
    beams: BeamSide,
    loads: tuple[TrialLoad, ...],
    rings: Rings,
    *,
    tip: Floats,
    program: Path,
    tell: Progress,
    n_modes: int = N_MODES,
) -> _Answer:
    """Run all loads and the modes, and set them beside theory."""
    text = model.head + steps_text(
        model.mesh,
        rings.node,
        root=model.root,
        loads=[load.forces for load in loads if load.forces is not None],
        acceleration=ACCELERATION,
        n_modes=n_modes,
    )
    names = [*(load.name for load in loads), "natural modes"]
    tell(names[0], 0.0)
    with TemporaryDirectory(prefix="skinmesh-trial-") as folder:
        deck = Path(folder) / "trial.inp"
        deck.write_text(text, encoding="ascii", errors="replace")
        run = run_solver(
            deck,
            program,
            marker=MARKER,
            on_block=lambda done: tell(names[min(done, len(loads))], min(done / len(names), 0.99)),
        )
    numbers = model.mesh.node_number[rings.node]
    at_root = rings.ring == 0
    try:
        printed = read_printed(run.printed, numbers, numbers[at_root], n_static=len(loads), n_modes=n_modes)
    except ValueError as error:
        raise SolverError(f"{program.name} ended, but its answer cannot be read: {error}", run.log) from error
    motion = best_rigid_motion(rings, np.concatenate([printed.displacement, printed.mode]))
    return _Answer(
        printed,
        compare_statics(model, beams, rings, loads, printed, motion, tip=tip),
        compare_modes(beams, rings, printed, motion, len(loads)),
        run,
    )


def _part(tell: Progress, low: float, high: float, words: str = "") -> Progress:
    """Progress of the solver as a part of the whole."""
    return lambda stage, done: tell(f"solver: {stage}{words}", low + (high - low) * done)


def _choose_loads(model: TrialModel, beams: BeamSide) -> tuple[TrialLoad, ...]:
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
        answer = tip_motion(beams.plain, loads_at_tip(beams.plain, _six(unit), tip), tip)[component]
        size = _round_down((TIP_TWIST if component == 5 else TIP_SHARE * model.span) / abs(answer))
        forces = tip_forces(model.mesh, size * unit, tip)
        # what the solver will see, to the last digit
        point = np.array([*tip, beams.plain.z[-1]])
        wanted.append(TrialLoad(name, component, forces, forces.resultant(point)))
    return (*wanted, TrialLoad("weight", 0, None, np.zeros(6)))


def _six(plane: Floats) -> Floats:
    """Force and moment from forces along x and y and a torque about z."""
    return np.array([plane[0], plane[1], 0.0, 0.0, 0.0, plane[2]])


def _round_down(value: float) -> float:
    """One significant digit."""
    power = 10.0 ** np.floor(np.log10(value))
    return float(np.floor(value / power) * power)


def _choose_rings(model: TrialModel) -> Rings:
    """Every station, and as many element rows between them as make a fine line."""
    levels, z = model.row_ends
    stations = np.searchsorted(z, model.mesh.report.stations - 1e-9 * model.span)
    step = max(1, len(levels) // LEAST_RINGS)
    chosen = np.unique([0, *range(0, len(levels), step), *np.clip(stations, 0, len(levels) - 1), len(levels) - 1])
    return find_rings(model.mesh, levels[chosen], z[chosen])


def _silent(stage: str, done: float) -> None:
    """Progress that nobody wants to hear of."""
