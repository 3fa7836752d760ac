"""The walls of thin-walled cross-sections, and what a wall does to its section.

A beam's section strains by ``u = (ε, κx, κy, θ')``: the axial strain at the section's origin, its rates along x and y,
and the rate of twist about z. A place r of the wall then has the axial strain ε + κx x + κy y.

Of the wall's laminate the hoop force vanishes, Nθ = 0, and the section keeps its shape, κθ = 0 (Librescu & Song,
Thin-Walled Composite Beams, 2006, ch. 2; Kollár & Springer, Mechanics of Composite Structures, 2003, ch. 6; from
memory). What is left couples axial strain, shear strain and two curvatures. A wall that is inclined to the pitch axis
by an angle with the cosine c carries the share c³ of its axial stiffness and c of its shear stiffness, and weighs 1/c:
the membrane theory of the conical shell (Flügge, Stresses in Shells, 1960, ch. 2; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.frozen import freeze_array

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LEAST_COSINE = 1e-3
"""A wall flatter than this on the section's plane is no wall of a beam; its inclination is held there."""

_KEPT = [0, 2, 3, 5]  # ε1, γ12, κ1, κ12 of (ε1, ε2, γ12, κ1, κ2, κ12)
_HOOP = 1


@dataclass(frozen=True, eq=False)
class WallLaminates:
    """Condensed stiffness and mass of the laminates of walls, about the middle of each.

    The shear strain is written by the shear flow n12: γ12 = n12 / shear − lean · e, with e = (ε1, κ1, κ12).

    Attributes
    ----------
    held : (w, 3, 3) float array; N/m, N, N m
        Stiffness against e at no shear flow.
    lean : (w, 3) float array; 1, m, m
    shear : (w,) float array, N/m
    mass : (w, 3) float array; kg/m², kg/m, kg
        Integrals of density × height⁰, ¹, ² over the middle, along +e3.
    """

    held: Floats
    lean: Floats
    shear: Floats
    mass: Floats

    def __post_init__(self) -> None:
        n = len(self.shear)
        freeze_array(self, "held", shape=(n, 3, 3))
        freeze_array(self, "lean", shape=(n, 3))
        freeze_array(self, "shear", shape=(n,))
        freeze_array(self, "mass", shape=(n, 3))

    def take(self, index: Ints) -> WallLaminates:
        """Laminates by index, one a wall."""
        return WallLaminates(self.held[index], self.lean[index], self.shear[index], self.mass[index])


@dataclass(frozen=True, eq=False)
class Walls:
    """Walls of many sections, each between two nodes of its section and of one laminate.

    Every wall is sampled at the same number p of places along the middle of its laminate. Where the middle does not
    reach a node, as at a step in thickness, a rigid bridge without stiffness leads there.

    Attributes
    ----------
    n_sections : int
    section : (w,) int array
    strip : (w,) int array
        Which of the walls of its section it is; the same number is the same part of the blade everywhere.
    nodes : (w, 2) int array
        Start and end node, numbered over all sections.
    node_section : (k,) int array
    node_place : (k, 2) float array, m
    ends : (w, 2, 2) float array, m
        Where the middle of the laminate starts and ends.
    place : (w, p, 2) float array, m
        Samples, from start to end.
    step : (w, p, 2) float array, m
        Share of the way along the middle that each sample stands for: an integral along the wall is a sum over them.
    normal : (w, p, 2) float array
        Unit vector along e3 in the section's plane.
    cosine : (w, p) float array
        Cosine of the wall's inclination to the pitch axis.
    laminates : WallLaminates
        One a wall.
    """

    n_sections: int
    section: Ints
    strip: Ints
    nodes: Ints
    node_section: Ints
    node_place: Floats
    ends: Floats
    place: Floats
    step: Floats
    normal: Floats
    cosine: Floats
    laminates: WallLaminates

    def __post_init__(self) -> None:
        w, p = len(self.section), np.shape(self.place)[1]
        for name in ("section", "strip"):
            freeze_array(self, name, shape=(w,), dtype=np.int64)
        freeze_array(self, "nodes", shape=(w, 2), dtype=np.int64)
        freeze_array(self, "node_section", shape=(None,), dtype=np.int64)
        freeze_array(self, "node_place", shape=(len(self.node_section), 2))
        freeze_array(self, "ends", shape=(w, 2, 2))
        for name in ("place", "step", "normal"):
            freeze_array(self, name, shape=(w, p, 2))
        object.__setattr__(self, "cosine", np.maximum(self.cosine, LEAST_COSINE))
        freeze_array(self, "cosine", shape=(w, p))


@dataclass(frozen=True, eq=False)
class WallTerms:
    """What the walls of many sections do, before their shear flows are known. Places count from each section's origin.

    Along the wall's own tangent the strains, summed over it, make Δw = q · slack − drift · u, with w the axial
    displacement of the nodes and q the wall's shear flow.

    Attributes
    ----------
    origin : (m, 2) float array, m
        Of each section.
    held : (m, 4, 4) float array
        Stiffness against u at no shear flow.
    mass : (m, 6) float array; kg/m, kg, kg m
        Integrals of density × (1, x, y, x², y², x y), per length along z.
    slack : (w,) float array, m/N × m
        Integral of 1 / shear stiffness along the wall.
    drift : (w, 4) float array
        The last entry holds twice the area that the wall sweeps about the origin, bridges included.
    axial : (w, p, 4) float array, N/m × m
        Axial force of each sample for unit u at no shear flow.
    axial_by_flow : (w, p) float array, m
        Axial force of each sample for a unit shear flow.
    slack_steps, sweep_steps : (w, p) float array
        Shares of the samples in ``slack`` and in the last entry of ``drift``.
    bridges : (w, 2) float array, m²
        Twice the area swept by the bridges at start and end.
    """

    origin: Floats
    held: Floats
    mass: Floats
    slack: Floats
    drift: Floats
    axial: Floats
    axial_by_flow: Floats
    slack_steps: Floats
    sweep_steps: Floats
    bridges: Floats


def condense_laminates(A: Floats, B: Floats, D: Floats, mass: Floats) -> WallLaminates:
    """Take the hoop strain out of laminate stiffnesses, and put the shear strain in terms of the shear flow.

    Parameters
    ----------
    A, B, D : (w, 3, 3) float array; N/m, N, N m
        About the middle of the laminate.
    mass : (w, 3) float array

    Returns
    -------
    WallLaminates

    Examples
    --------
    >>> A = 1e9 * np.array([[[1.1, 0.3, 0.0], [0.3, 1.0, 0.0], [0.0, 0.0, 0.4]]])
    >>> round(float(condense_laminates(A, 0 * A, 0 * A, np.zeros((1, 3))).held[0, 0, 0]) / 1e9, 6)
    1.01
    """
    full = np.concatenate([np.concatenate([A, B], axis=2), np.concatenate([B, D], axis=2)], axis=1)
    free = full - full[:, :, [_HOOP]] * full[:, [_HOOP], :] / full[:, _HOOP, _HOOP, None, None]
    kept = free[:, _KEPT][:, :, _KEPT]
    shear = kept[:, 1, 1]
    row = kept[:, 1][:, [0, 2, 3]]
    lean = row / shear[:, None]
    held = kept[:, [0, 2, 3]][:, :, [0, 2, 3]] - lean[:, :, None] * row[:, None, :]
    return WallLaminates(held=held, lean=lean, shear=shear, mass=mass)


def sum_walls(walls: Walls) -> WallTerms:
    """Integrate along every wall what does not depend on the shear flows.

    Parameters
    ----------
    walls : Walls

    Returns
    -------
    WallTerms
    """
    laminates, m = walls.laminates, walls.n_sections
    length = np.linalg.norm(walls.step, axis=2)
    weight = length / walls.cosine
    origin = _centres(walls, weight)
    place = walls.place - origin[walls.section][:, None]
    # e2 = e3 × e1 lies in the section's plane: against or along the way from start to end
    e2 = np.stack([walls.normal[..., 1], -walls.normal[..., 0]], axis=-1)
    sense = np.sign(np.sum(e2 * walls.step, axis=2))
    strains = _strains(place, walls.normal, walls.cosine)
    force = np.einsum("wij,wpjk->wpik", laminates.held, strains)
    held = np.einsum("wpik,wpil,wp->wkl", strains, force, weight)
    lean = np.einsum("wi,wpik,wp->wk", laminates.lean, strains, sense * weight)
    lean_of_twist = laminates.lean[:, 2, None] * strains[..., 2, 3] * sense * weight
    swept = _cross(place, walls.step)
    node_place = (walls.node_place - origin[walls.node_section])[walls.nodes]
    ends = walls.ends - origin[walls.section][:, None]
    bridges = np.stack([_cross(node_place[:, 0], ends[:, 0]), _cross(ends[:, 1], node_place[:, 1])], axis=1)
    lean[:, 3] += swept.sum(axis=1) + bridges.sum(axis=1)
    slack_steps = weight / laminates.shear[:, None]
    along = walls.cosine**2 * weight
    return WallTerms(
        origin=origin,
        held=_by_section(walls, held, m),
        mass=_by_section(walls, _mass_moments(walls, weight), m),
        slack=slack_steps.sum(axis=1),
        drift=lean,
        axial=force[:, :, 0] * along[..., None],
        axial_by_flow=laminates.lean[:, 0, None] * sense * along,
        slack_steps=slack_steps,
        sweep_steps=swept + lean_of_twist,
        bridges=bridges,
    )


def _strains(place: Floats, normal: Floats, cosine: Floats) -> Floats:
    """(w, p, 3, 4) strains ε1, κ1, κ12 of the wall for unit u.

    In a flat wall γ12 = ∂w/∂s2 − θ' (r · n + 2 ζ) at the height ζ over its middle, hence κ12 = −2 θ'.
    """
    strains = np.zeros((*cosine.shape, 3, 4))
    strains[..., 0, 0] = cosine**2
    strains[..., 0, 1:3] = cosine[..., None] ** 2 * place
    strains[..., 1, 1:3] = cosine[..., None] * normal
    strains[..., 2, 3] = -2.0 * cosine
    return strains


def _centres(walls: Walls, weight: Floats) -> Floats:
    """(m, 2) middle of each section's walls, weighed by their axial stiffness."""
    stiff = weight * walls.cosine**4 * walls.laminates.held[:, 0, 0, None]
    sums = _by_section(walls, np.sum(stiff[..., None] * walls.place, axis=1), walls.n_sections)
    total = _by_section(walls, stiff.sum(axis=1), walls.n_sections)
    return np.asarray(sums / np.where(total > 0.0, total, 1.0)[:, None])


def _mass_moments(walls: Walls, weight: Floats) -> Floats:
    """(w, 6) integrals of density × (1, x, y, x², y², x y) along each wall."""
    m0, m1, m2 = (walls.laminates.mass[:, k, None, None] for k in range(3))
    r, n = walls.place, walls.normal / walls.cosine[..., None]
    first = m0 * r + m1 * n
    second = m0 * r**2 + 2.0 * m1 * r * n + m2 * n**2
    mixed = (m0 * r[..., :1] * r[..., 1:] + m1 * (r[..., :1] * n[..., 1:] + r[..., 1:] * n[..., :1])) + (
        m2 * n[..., :1] * n[..., 1:]
    )
    mass = np.broadcast_to(m0, mixed.shape)
    return np.asarray(np.einsum("wpk,wp->wk", np.concatenate([mass, first, second, mixed], axis=2), weight))


def _by_section(walls: Walls, values: Floats, n_sections: int) -> Floats:
    """Sum of (w, ...) values over the walls of each section."""
    flat = values.reshape(len(values), -1)
    sums = np.stack([np.bincount(walls.section, weights=column, minlength=n_sections) for column in flat.T], axis=-1)
    return np.asarray(sums.reshape(n_sections, *values.shape[1:]), dtype=float)


def _cross(a: Floats, b: Floats) -> Floats:
    return np.asarray(a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0])
