"""The trial run: a built model in the solver, each answer beside beam theory."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import InputError, Problem
from skinmesh.mesh.measure import solid_mass
from skinmesh.trial.beamside import BeamSide, find_blade_file, make_beams
from skinmesh.trial.compare import (
    ACCELERATION,
    ModeCase,
    StaticCase,
    TrialLoad,
    compare_modes,
    compare_statics,
    loads_at_tip,
    tip_motion,
)
from skinmesh.trial.loads import tip_forces
from skinmesh.trial.model import TrialModel, read_model
from skinmesh.trial.rings import Rings, best_rigid_motion, find_rings
from skinmesh.trial.solver import SolverError, SolverRun, find_solver, run_solver
from skinmesh.trial.steps import MARKER, read_printed, steps_text

Floats = NDArray[np.float64]

N_MODES = 6
LEAST_RINGS = 24
TIP_SHARE, TIP_TWIST = 0.01, np.radians(1.0)
"""Wanted tip deflection as a share of the span, and wanted twist, on which the sizes of the loads are chosen."""

Progress = Callable[[str, float], None]


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
        statics=compare_statics(model, beams, rings, loads, printed, motion),
        modes=compare_modes(beams, rings, printed, motion, len(loads)),
        mass_solver=printed.mass if has_mass else float("nan"),
        mass_mesh=solid_mass(model.mesh),
        run=run,
        tip=beams.tip_shear_centre,
    )


def _solver_share(done: int, n_steps: int) -> float:
    return 0.1 + 0.87 * min(done / n_steps, 0.99)


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
