"""The solver's answers beside those of beam theory."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline
from scipy.optimize import linear_sum_assignment

from skinmesh.mesh.measure import element_centres, element_masses, solid_mass
from skinmesh.trial.beamside import ALL, BeamSide
from skinmesh.trial.loads import NodalForces
from skinmesh.trial.model import TrialModel
from skinmesh.trial.rings import RigidMotion, Rings
from skinmesh.trial.steps import Printed
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
N_THEORY_MODES = 24
ALIKE = 0.5  # modal likeness below which a mode is like none of the beam's
SAME_FREQUENCY = 0.02  # modes of a beam nearer than this may mix freely


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
class TrialLoad:
    """A load of the trial run.

    Attributes
    ----------
    name : str
    component : int
        The motion that is compared: 0 along x, 1 along y, 5 about z.
    forces : NodalForces or None
        None of the weight.
    resultant : (6,) float array, N and N m
        Force and moment that the solver will see, about the place at the tip where the motion is compared; zero of the
        weight.
    """

    name: str
    component: int
    forces: NodalForces | None
    resultant: Floats


def loads_at_tip(bays: BeamBays, resultant: Floats, tip: Floats) -> Floats:
    """Nodal loads of a force and a moment about a point of the tip's section.

    Parameters
    ----------
    bays : BeamBays
    resultant : (6,) float array, N and N m
    tip : (2,) float array, m
        x and y of the point.

    Returns
    -------
    (n + 1, 6) float array
    """
    moment = resultant[3:] + np.cross([*tip, 0.0], resultant[:3])
    return tip_load(bays, resultant[:3], moment)


def tip_motion(bays: BeamBays, loads: Floats, tip: Floats) -> Floats:
    """Motion of a point of the tip's section under nodal loads.

    Parameters
    ----------
    bays : BeamBays
    loads : (n + 1, 6) float array, N and N m
    tip : (2,) float array, m
        x and y of the point.

    Returns
    -------
    (6,) float array, m and rad
    """
    return _at_point(deflection(bays, loads)[-1], tip)


def _at_point(motion: Floats, point: Floats) -> Floats:
    """Motion of another point (x, y) of the same section."""
    moved = motion.copy()
    moved[:3] += np.cross(motion[3:], [*point, 0.0])
    return moved


def compare_statics(
    model: TrialModel,
    beams: BeamSide,
    rings: Rings,
    loads: tuple[TrialLoad, ...],
    printed: Printed,
    motion: RigidMotion,
    *,
    tip: Floats,
) -> tuple[StaticCase, ...]:
    """Set the static answers beside theory.

    Parameters
    ----------
    model : TrialModel
    beams : BeamSide
    rings : Rings
    loads : tuple of TrialLoad
        In the order of the solver's steps.
    printed : Printed
    motion : RigidMotion
        Of the rings in every static step, then in every mode.
    tip : (2,) float array, m
        Where the tip loads act, and deflections are compared.

    Returns
    -------
    tuple of StaticCase
    """
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
                    name: float(tip_motion(bays, nodal[name], tip)[load.component])
                    for name, bays in beams.variants.items()
                },
                ovalisation=motion.ovalisation[k] / largest,
                warping=motion.warping[k] / largest,
            )
        )
    return tuple(cases)


def _nodal_loads(bays: BeamBays, load: TrialLoad, tip: Floats) -> Floats:
    return weight_load(bays, ACCELERATION) if load.forces is None else loads_at_tip(bays, load.resultant, tip)


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


def compare_modes(
    beams: BeamSide, rings: Rings, printed: Printed, motion: RigidMotion, n_static: int
) -> tuple[ModeCase, ...]:
    """Pair the solver's natural modes with the beam's.

    Parameters
    ----------
    beams : BeamSide
    rings : Rings
    printed : Printed
    motion : RigidMotion
        Of the rings in every static step, then in every mode.
    n_static : int
        Number of static steps.

    Returns
    -------
    tuple of ModeCase
    """
    bays = beams.plain
    found = motion.motion[n_static:]
    on_beam = _on_beam(bays, rings, found)
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


def pair_modes(
    bays: BeamBays, rings: Rings, modes: Sequence[ModeCase], others: Sequence[ModeCase]
) -> tuple[int | None, ...]:
    """For each mode of one run the mode of another run that is most like it.

    Parameters
    ----------
    bays : BeamBays
        Whose mass tells what is alike.
    rings : Rings
    modes, others : sequence of ModeCase
        No fewer of the others.

    Returns
    -------
    tuple of int or None
        Places among the others; None where none of them is like it.
    """
    own, other = (_on_beam(bays, rings, np.stack([mode.line for mode in run])) for run in (modes, others))
    likeness = modal_likeness(bays, own, other)
    partner = linear_sum_assignment(-likeness)[1].tolist()
    return tuple(j if likeness[k, j] >= ALIKE else None for k, j in enumerate(partner))


def _on_beam(bays: BeamBays, rings: Rings, lines: Floats) -> Floats:
    """Lines of the rings on the beam's nodes, the root held."""
    on_beam = CubicSpline(rings.z, lines, axis=1)(bays.z)
    on_beam[:, 0] = 0.0
    return np.asarray(on_beam)


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
