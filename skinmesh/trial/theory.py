"""Beam theory of a blade whose sections have the properties of the beam table: static deflection and natural modes.

A section moves as a rigid body: three displacements of the point (0, 0, z) and three rotations, d = (u, θ). The
resultants that the part outboard of a section exerts on it are R = (F, M), the moments about the same point. Sections
are constant within a bay. Euler–Bernoulli: axial force and bending act about the tension centre, torque about the shear
centre, and shear makes no strain. Twist, prebend, sweep and the offsets of both centres are in the places of the
sections, which lie on no common line.

Statics is exact for loads at the ends of bays, because a cantilever's resultants follow from equilibrium alone.
Frequencies come from the bays' exact stiffness and half of the mass of each at either end (Przemieniecki, Theory of
Matrix Structural Analysis, 1968, chapters 5, 6 and 12: flexibility of an element, transport of forces, lumped mass;
from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sparse
from numpy.typing import ArrayLike, NDArray
from scipy.sparse.linalg import eigsh

from skinmesh.beam.sections import SectionProperties
from skinmesh.frozen import freeze_array

Floats = NDArray[np.float64]

KINDS = ("flap", "edge", "torsion", "axial")
"""Kinds of motion: along x, along y, about z, along z."""

_GAUSS = (0.5 + np.array([-0.5, 0.0, 0.5]) * np.sqrt(0.6), np.array([5.0, 8.0, 5.0]) / 18.0)


@dataclass(frozen=True, eq=False)
class BeamBays:
    """A cantilever of bays, clamped at its first end.

    Attributes
    ----------
    z : (n + 1,) float array, m
        Ends of the bays, root first.
    compliance : (n, 6, 6) float array
        Strains (γx, γy, ε, κx, κy, θ') of each bay's section under R = (Fx, Fy, Fz, Mx, My, Mz) about (0, 0, z); the
        κ are rates of the rotations about x and y.
    mass : (n,) float array, kg/m
    mass_centre : (n, 2) float array, m
    inertia : (n, 2, 2) float array, kg m
        Integrals of density × x², x y, y² about the mass centre.
    """

    z: Floats
    compliance: Floats
    mass: Floats
    mass_centre: Floats
    inertia: Floats

    def __post_init__(self) -> None:
        n = len(self.z) - 1
        freeze_array(self, "z", shape=(n + 1,))
        freeze_array(self, "compliance", shape=(n, 6, 6))
        freeze_array(self, "mass", shape=(n,))
        freeze_array(self, "mass_centre", shape=(n, 2))
        freeze_array(self, "inertia", shape=(n, 2, 2))

    @property
    def length(self) -> Floats:
        """(n,) float array, m: of each bay."""
        return np.diff(self.z)


@dataclass(frozen=True, eq=False)
class BeamModes:
    """Natural modes of a cantilever.

    Attributes
    ----------
    frequency : (k,) float array, Hz
        Increasing.
    motion : (k, n + 1, 6) float array
        u and θ at the ends of the bays, of unit modal mass.
    """

    frequency: Floats
    motion: Floats


def beam_bays(
    edges: ArrayLike, sections: SectionProperties, *, shear: Floats | None = None, is_coupled: bool = False
) -> BeamBays:
    """Make a cantilever of bays from one section in each.

    Parameters
    ----------
    edges : (n + 1,) float array, m
        Ends of the bays, root first.
    sections : SectionProperties
        Of n sections.
    shear : (n, 2, 2) float array, 1/N, optional
        Transverse shear strains along x and y under unit forces in the shear centre; none makes the beam stiff in
        shear, as Euler and Bernoulli have it.
    is_coupled : bool
        Take the full matrix of each section, in which stretching, bending and twisting act on each other, in the place
        of its stiffnesses alone.

    Returns
    -------
    BeamBays

    Raises
    ------
    ValueError
        A section carries nothing.
    """
    if not np.all(sections.axial > 0.0) or not np.all(sections.torsion > 0.0):
        raise ValueError("a section of the beam carries nothing")
    n = len(sections.z)
    stiffness = sections.stiffness if is_coupled else _uncoupled(sections)
    # (N, ∫σx, ∫σy, torque about the shear centre) from the resultants about (0, 0, z)
    taken = np.zeros((n, 4, 6))
    taken[:, 0, 2] = 1.0
    taken[:, 1, 4] = -1.0
    taken[:, 2, 3] = 1.0
    taken[:, 3, 5] = 1.0
    taken[:, 3, 0] = sections.shear_centre[:, 1]
    taken[:, 3, 1] = -sections.shear_centre[:, 0]
    compliance = np.swapaxes(taken, 1, 2) @ _inverse(stiffness) @ taken
    if shear is not None:
        compliance[:, :2, :2] += shear
    return BeamBays(np.asarray(edges), compliance, sections.mass, sections.mass_centre, sections.inertia)


def tip_load(bays: BeamBays, force: ArrayLike, moment: ArrayLike) -> Floats:
    """Nodal loads of a force and a moment about (0, 0, z) at the tip.

    Parameters
    ----------
    bays : BeamBays
    force : (3,) float array, N
    moment : (3,) float array, N m

    Returns
    -------
    (n + 1, 6) float array
    """
    loads = np.zeros((len(bays.z), 6))
    loads[-1] = [*np.asarray(force), *np.asarray(moment)]
    return loads


def weight_load(bays: BeamBays, acceleration: ArrayLike) -> Floats:
    """Nodal loads of the beam's weight, half of each bay's at either end.

    Parameters
    ----------
    bays : BeamBays
    acceleration : (3,) float array, m/s²

    Returns
    -------
    (n + 1, 6) float array
    """
    force = 0.5 * (bays.mass * bays.length)[:, None] * np.asarray(acceleration, dtype=float)
    lever = np.column_stack([bays.mass_centre, np.zeros(len(bays.mass))])
    half = np.hstack([force, np.cross(lever, force)])
    loads = np.zeros((len(bays.z), 6))
    loads[:-1] += half
    loads[1:] += half
    return loads


def deflection(bays: BeamBays, loads: Floats) -> Floats:
    """Motion of every bay's end under loads at the ends of bays.

    Parameters
    ----------
    bays : BeamBays
    loads : (n + 1, 6) float array, N and N m
        Forces, and moments about (0, 0, z) of each end.

    Returns
    -------
    (n + 1, 6) float array, m and rad
        Displacement of the point (0, 0, z), and rotation; zero at the root.
    """
    force = np.cumsum(loads[::-1, :3], axis=0)[::-1]
    # about the origin first: moments then add up
    lever = np.column_stack([np.zeros((len(bays.z), 2)), bays.z])
    about_origin = np.cumsum((loads[:, 3:] + np.cross(lever, loads[:, :3]))[::-1], axis=0)[::-1]
    at_end = np.hstack([force[1:], about_origin[1:] - np.cross(lever[1:], force[1:])])
    grown = np.einsum("nij,nj->ni", _flexibility(bays), at_end)
    motion = np.zeros((len(bays.z), 6))
    motion[1:, 3:] = np.cumsum(grown[:, 3:], axis=0)
    steps = grown[:, :3] + np.cross(motion[:-1, 3:], np.diff(lever, axis=0))
    motion[1:, :3] = np.cumsum(steps, axis=0)
    return motion


def natural_modes(bays: BeamBays, n_modes: int) -> BeamModes:
    """Lowest natural modes of the cantilever.

    Parameters
    ----------
    bays : BeamBays
    n_modes : int

    Returns
    -------
    BeamModes
    """
    n = len(bays.mass)
    blocks = _stiffness_blocks(bays)
    mass = _mass_blocks(bays)
    dof = 6 * np.arange(n)[:, None, None]
    row = dof + np.arange(12)[None, :, None] + np.zeros((1, 1, 12), dtype=int)
    stiffness = sparse.csc_matrix(
        (blocks.ravel(), (row.ravel(), np.swapaxes(row, 1, 2).ravel())), shape=(6 * n + 6, 6 * n + 6)
    )[6:, 6:]
    inertia = sparse.block_diag(list(mass[1:]), format="csc")
    # lengths and angles differ by orders of magnitude: a mass of one on the diagonal keeps the solver's accuracy
    scale = sparse.diags(1.0 / np.sqrt(inertia.diagonal()))
    values, vectors = eigsh(
        scale @ stiffness @ scale,
        k=min(n_modes, 6 * n - 1),
        M=(scale @ inertia @ scale).tocsc(),
        sigma=0.0,
        v0=np.linspace(1.0, 2.0, 6 * n),
    )
    order = np.argsort(values)
    motion = np.zeros((len(order), n + 1, 6))
    motion[:, 1:] = (scale @ vectors[:, order]).T.reshape(len(order), n, 6)
    return BeamModes(np.sqrt(np.maximum(values[order], 0.0)) / (2.0 * np.pi), motion)


def kinds_of_motion(bays: BeamBays, motion: Floats) -> Floats:
    """Share of each kind of motion in the kinetic energy of modes.

    Parameters
    ----------
    bays : BeamBays
    motion : (k, n + 1, 6) float array
        At the ends of the bays.

    Returns
    -------
    (k, 4) float array
        In the order of KINDS; the rotations of bending count with the translation of the same direction.
    """
    nodal = _nodal_inertia(bays)
    centre = nodal.centre
    along = motion[..., :2] + motion[..., 5, None] * np.stack([-centre[:, 1], centre[:, 0]], axis=-1)
    axial = motion[..., 2] + motion[..., 3] * centre[:, 1] - motion[..., 4] * centre[:, 0]
    polar = nodal.second[:, 0, 0] + nodal.second[:, 1, 1]
    energy = np.stack(
        [
            np.sum(nodal.mass * along[..., 0] ** 2 + nodal.second[:, 0, 0] * motion[..., 4] ** 2, axis=-1),
            np.sum(nodal.mass * along[..., 1] ** 2 + nodal.second[:, 1, 1] * motion[..., 3] ** 2, axis=-1),
            np.sum(polar * motion[..., 5] ** 2, axis=-1),
            np.sum(nodal.mass * axial**2, axis=-1),
        ],
        axis=-1,
    )
    return np.asarray(energy / energy.sum(axis=-1, keepdims=True))


def modal_likeness(bays: BeamBays, first: Floats, second: Floats) -> Floats:
    """Modal assurance criterion of two sets of modes, weighed by the beam's mass.

    Parameters
    ----------
    bays : BeamBays
    first : (j, n + 1, 6) float array
    second : (k, n + 1, 6) float array

    Returns
    -------
    (j, k) float array
        1 for equal shapes, 0 for orthogonal ones. Allemang & Brown, A correlation coefficient for modal vector
        analysis, 1982, from memory.
    """
    mass = _mass_blocks(bays)
    weighed = np.einsum("nij,knj->kni", mass, second)
    cross = np.einsum("jni,kni->jk", first, weighed)
    own_first = np.einsum("jni,nik,jnk->j", first, mass, first)
    own_second = np.einsum("kni,kni->k", second, weighed)
    return np.asarray(cross**2 / np.maximum(own_first[:, None] * own_second, np.finfo(float).tiny))


@dataclass(frozen=True, eq=False)
class _NodalInertia:
    """Mass of the halves of bays that belong to each end."""

    mass: Floats
    centre: Floats
    second: Floats


def _nodal_inertia(bays: BeamBays) -> _NodalInertia:
    half = 0.5 * bays.mass * bays.length
    first = half[:, None] * bays.mass_centre
    second = 0.5 * bays.length[:, None, None] * bays.inertia
    second = second + half[:, None, None] * bays.mass_centre[:, :, None] * bays.mass_centre[:, None, :]
    mass, moment, square = _to_ends(half), _to_ends(first), _to_ends(second)
    centre = moment / np.maximum(mass, np.finfo(float).tiny)[:, None]
    return _NodalInertia(mass, centre, square - mass[:, None, None] * centre[:, :, None] * centre[:, None, :])


def _to_ends(half: Floats) -> Floats:
    ends = np.zeros((len(half) + 1, *half.shape[1:]))
    ends[:-1] += half
    ends[1:] += half
    return ends


def _mass_blocks(bays: BeamBays) -> Floats:
    """(n + 1, 6, 6) mass of each end about (0, 0, z)."""
    nodal = _nodal_inertia(bays)
    lever = _cross_matrix(np.column_stack([nodal.centre, np.zeros(len(nodal.mass))]))
    blocks = np.zeros((len(nodal.mass), 6, 6))
    blocks[:, [0, 1, 2], [0, 1, 2]] = nodal.mass[:, None]
    blocks[:, 3:, :3] = nodal.mass[:, None, None] * lever
    blocks[:, :3, 3:] = np.swapaxes(blocks[:, 3:, :3], 1, 2)
    second = nodal.second
    blocks[:, 3, 3], blocks[:, 4, 4] = second[:, 1, 1], second[:, 0, 0]
    blocks[:, 3, 4] = blocks[:, 4, 3] = -second[:, 0, 1]
    blocks[:, 5, 5] = second[:, 0, 0] + second[:, 1, 1]
    blocks[:, 3:, 3:] -= nodal.mass[:, None, None] * lever @ lever
    return blocks


def _stiffness_blocks(bays: BeamBays) -> Floats:
    """(n, 12, 12) stiffness of each bay against the motions of its two ends."""
    end = _inverse(_flexibility(bays))
    to_end = _transport(bays.length)
    both = np.concatenate([-to_end, np.broadcast_to(np.eye(6), to_end.shape)], axis=2)
    return np.asarray(np.swapaxes(both, 1, 2) @ end @ both)


def _flexibility(bays: BeamBays) -> Floats:
    """(n, 6, 6) motion of each bay's far end under resultants there, its near end held."""
    places, weights = _GAUSS
    total = np.zeros_like(bays.compliance)
    for place, weight in zip(places, weights, strict=True):
        moved = _transport((1.0 - place) * bays.length)
        total += weight * bays.length[:, None, None] * (moved @ bays.compliance @ np.swapaxes(moved, 1, 2))
    return total


def _transport(distance: Floats) -> Floats:
    """(n, 6, 6) motion at (0, 0, z + distance) of a rigid body, from that at (0, 0, z)."""
    move = np.tile(np.eye(6), (len(distance), 1, 1))
    move[:, 0, 4] = distance
    move[:, 1, 3] = -distance
    return move


def _uncoupled(sections: SectionProperties) -> Floats:
    """(n, 4, 4) stiffness about the pitch axis from the beam table's stiffnesses and its tension centre."""
    n = len(sections.z)
    lever = sections.tension_centre
    stiffness = np.zeros((n, 4, 4))
    stiffness[:, 0, 0] = sections.axial
    stiffness[:, 0, 1:3] = stiffness[:, 1:3, 0] = sections.axial[:, None] * lever
    about_centre = sections.axial[:, None, None] * lever[:, :, None] * lever[:, None, :]
    stiffness[:, 1:3, 1:3] = sections.bending + about_centre
    stiffness[:, 3, 3] = sections.torsion
    return stiffness


def _inverse(matrices: Floats) -> Floats:
    """Inverses of positive definite matrices whose rows have different units."""
    scale = 1.0 / np.sqrt(np.einsum("nii->ni", matrices))
    both = scale[:, :, None] * scale[:, None, :]
    return np.asarray(both * np.linalg.inv(matrices * both))


def _cross_matrix(vectors: Floats) -> Floats:
    """(n, 3, 3) matrices a× of vectors a."""
    matrices = np.zeros((len(vectors), 3, 3))
    x, y, z = vectors.T
    matrices[:, 0, 1], matrices[:, 0, 2] = -z, y
    matrices[:, 1, 0], matrices[:, 1, 2] = z, -x
    matrices[:, 2, 0], matrices[:, 2, 1] = -y, x
    return matrices
