"""Section properties from a section's stiffness and mass moments."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.walls import WallTerms
from skinmesh.frozen import freeze_array

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

ROUND = 1e-3
"""Principal stiffnesses that differ by less than this share have no direction."""


@dataclass(frozen=True, eq=False)
class SectionProperties:
    """Beam properties of sections of constant z, in blade axes.

    Attributes
    ----------
    z : (m,) float array, m
    mass : (m,) float array, kg/m
    mass_centre : (m, 2) float array, m
        x and y; NaN where the section has no laminate, as all centres are there.
    inertia : (m, 2, 2) float array, kg m
        Integrals of density × x², x y, y² about the mass centre, per length: [0, 0] is the rotary inertia of bending
        in the direction x, the trace that of torsion.
    axial : (m,) float array, N
        EA, the section kept from bending and twisting.
    tension_centre : (m, 2) float array, m
        Where an axial force makes no curvature.
    bending : (m, 2, 2) float array, N m²
        Stiffness against the rates κx, κy of the axial strain along x and y, about the tension centre: [0, 0] is the
        stiffness of bending in the direction x. The section kept from twisting.
    principal : (m, 2) float array, N m²
        Both principal bending stiffnesses, the smaller one (flap-wise, as a rule) first.
    structural_twist : (m,) float array, rad
        From the chord line of an untwisted section to the direction in which the larger one resists bending, positive
        as the twist of the station table; NaN where both are equal.
    torsion : (m,) float array, N m²
        GJ, the section kept from stretching and bending.
    shear_centre : (m, 2) float array, m
        Where a transverse force makes no twist.
    n_cells : (m,) int array
        Closed cells; 0 for an open section.
    n_parts : (m,) int array
        Parts of the section that hang together by no wall; more than one deserve a look.
    stiffness : (m, 4, 4) float array
        Full matrix against u = (ε, κx, κy, θ') about the pitch axis, couplings included; its conjugates are the axial
        force, the integrals of axial stress × x and × y, and the torque about +z.
    """

    z: Floats
    mass: Floats
    mass_centre: Floats
    inertia: Floats
    axial: Floats
    tension_centre: Floats
    bending: Floats
    principal: Floats
    structural_twist: Floats
    torsion: Floats
    shear_centre: Floats
    n_cells: Ints
    n_parts: Ints
    stiffness: Floats

    def __post_init__(self) -> None:
        n = len(self.z)
        for name in ("z", "mass", "axial", "structural_twist", "torsion"):
            freeze_array(self, name, shape=(n,))
        for name in ("mass_centre", "tension_centre", "principal", "shear_centre"):
            freeze_array(self, name, shape=(n, 2))
        for name in ("inertia", "bending"):
            freeze_array(self, name, shape=(n, 2, 2))
        for name in ("n_cells", "n_parts"):
            freeze_array(self, name, shape=(n,), dtype=np.int64)
        freeze_array(self, "stiffness", shape=(n, 4, 4))

    def take(self, index: Ints) -> SectionProperties:
        """Some of the sections, by index."""
        return SectionProperties(**{field.name: getattr(self, field.name)[index] for field in fields(self)})


def section_properties(
    z: Floats,
    terms: WallTerms,
    stiffness: Floats,
    *,
    shear_centre: Floats,
    n_cells: Ints,
    n_parts: Ints,
    is_mirrored: bool,
) -> SectionProperties:
    """Work properties out of a stiffness about each section's own origin.

    Parameters
    ----------
    z : (m,) float array, m
    terms : WallTerms
    stiffness : (m, 4, 4) float array
        About the origin of ``terms``.
    shear_centre : (m, 2) float array, m
        From that origin.
    n_cells, n_parts : (m,) int array
    is_mirrored : bool
        Counter-clockwise blade: its chord runs towards −y.

    Returns
    -------
    SectionProperties
    """
    axial = stiffness[:, 0, 0]
    has_walls = axial > 0.0
    divisor = np.where(has_walls, axial, np.nan)
    lever = stiffness[:, 0, 1:3] / divisor[:, None]
    bending = np.nan_to_num(stiffness[:, 1:3, 1:3] - axial[:, None, None] * lever[:, :, None] * lever[:, None, :])
    principal, directions = np.linalg.eigh(bending)
    mass = terms.mass[:, 0]
    first = terms.mass[:, 1:3]
    second = np.stack([terms.mass[:, [3, 5]], terms.mass[:, [5, 4]]], axis=1)
    mass_centre = first / np.where(mass > 0.0, mass, np.nan)[:, None]
    inertia = second - mass[:, None, None] * np.nan_to_num(mass_centre[:, :, None] * mass_centre[:, None, :])
    return SectionProperties(
        z=z,
        mass=mass,
        mass_centre=mass_centre,
        inertia=inertia,
        axial=axial,
        tension_centre=terms.origin + lever,
        bending=bending,
        principal=principal,
        structural_twist=_structural_twist(principal, directions[:, :, 1], is_mirrored=is_mirrored),
        torsion=stiffness[:, 3, 3],
        shear_centre=np.where(has_walls[:, None], terms.origin + shear_centre, np.nan),
        n_cells=n_cells,
        n_parts=n_parts,
        stiffness=_about_pitch_axis(stiffness, terms.origin),
    )


def unit_shear_rates(stiffness: Floats) -> Floats:
    """Rates du/dz under unit shear forces along x and y: the moments grow by the force, the axial force stays.

    Parameters
    ----------
    stiffness : (m, 4, 4) float array

    Returns
    -------
    (m, 4, 2) float array
        No rate of the twist: that is what the shear centre means.
    """
    rates = np.zeros((len(stiffness), 4, 2))
    wanted = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    solvable = np.flatnonzero(stiffness[:, 0, 0] > 0.0)
    held = stiffness[solvable, :3, :3]
    # lengths of a section are no metres: scaled rows keep a thin section's matrix from looking singular
    scale = 1.0 / np.sqrt(np.maximum(np.einsum("mii->mi", held), np.finfo(float).tiny))
    scaled = held * scale[:, :, None] * scale[:, None, :]
    rates[solvable, :3] = scale[:, :, None] * (np.linalg.pinv(scaled) @ (scale[:, :, None] * wanted))
    return rates


def _structural_twist(principal: Floats, stiff: Floats, *, is_mirrored: bool) -> Floats:
    along = -stiff[:, 1] if is_mirrored else stiff[:, 1]
    # a direction has no sense: the one that points aft
    turn = np.where(along < 0.0, -1.0, 1.0)
    twist = np.arctan2(turn * stiff[:, 0], turn * along)
    return np.asarray(np.where(principal[:, 1] * (1.0 - ROUND) > principal[:, 0], twist, np.nan))


def _about_pitch_axis(stiffness: Floats, origin: Floats) -> Floats:
    move = np.tile(np.eye(4), (len(origin), 1, 1))
    move[:, 0, 1:3] = origin
    return np.asarray(np.swapaxes(move, 1, 2) @ stiffness @ move)
