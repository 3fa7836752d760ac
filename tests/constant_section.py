"""A straight blade of constant section with two webs, and its beam properties by a hand calculation.

The calculation shares no code with skinmesh: it sums the layers of the walls of a NACA 0024 section with a blunt
trailing edge, each layer at its own depth under the mould face, and has the torsional stiffness of three cells by Bredt
and Batho (Megson, Aircraft Structures, on closed thin-walled sections, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import blades
import numpy as np
from independent_profiles import naca_points
from numpy.typing import NDArray

from skinmesh.definition.blade import (
    PRESSURE,
    SUCTION,
    BladeDefinition,
    CapRule,
    FromAxis,
    Layout,
    NacaProfile,
    PlyRule,
    WebRule,
)
from skinmesh.definition.spanwise import constant
from skinmesh.laminate.material import Material

LENGTH, CHORD, AXIS, GAP = 9.0, 0.6, 0.33, 0.03
SKIN, CAP, CAP_WIDTH = 0.003, 0.006, 0.2
FEET = (-0.07, 0.07)
"""Places of the fore and the aft web, m aft of the pitch axis."""
BIAX = Material("biax", 12e9, 12e9, 12e9, 0.5, 0.3, 0.3, 10e9, 4e9, 4e9, 1900.0, source="invented")
# a core that keeps the faces apart and does nothing else
SPACER = Material("spacer", 1e6, 1e6, 1e6, 0.0, 0.0, 0.0, 1e6, 5e9, 5e9, 1.0, source="invented")
ALIKE = dict.fromkeys(("main cap", "fore web", "aft web"), 2)


def constant_section(
    *, core: float = 0.0, length: float = LENGTH, twist_degrees: float = 0.0, hand: str = "clockwise", **mesh
) -> BladeDefinition:
    """The blade.

    Parameters
    ----------
    core : float, m
        Thickness of a spacer in the middle of skin and webs, whose walls it makes stiff in bending alone.
    length : float, m
    twist_degrees : float
        The same at root and tip.
    hand : str
    **mesh
        Of :class:`MeshRule`; ``size`` as a number.
    """
    layout = Layout(
        caps=(CapRule("main cap", FromAxis(constant(0.0)), constant(CAP_WIDTH), (SUCTION, PRESSURE)),),
        webs=tuple(
            WebRule(f"{name} web", blades.foot(FromAxis(constant(place))), (0.0, length))
            for name, place in zip(("fore", "aft"), FEET, strict=True)
        ),
    )

    def ply(name: str, material: Material, thickness: float, *covers: str) -> PlyRule:
        return PlyRule(name, material, constant(thickness), constant(1), 0.0, covers)

    walls = [ply("skin", BIAX, SKIN, "skin", "trailing base", "webs")]
    if core:
        half = ply("skin", BIAX, SKIN / 2, "skin", "trailing base", "webs")
        walls = [half, ply("core", SPACER, core, "skin", "trailing base", "webs"), replace(half, name="inner skin")]
    size = mesh.pop("size", 1.0)
    definition = blades.blade(
        blades.stations([0.0, length], [CHORD] * 2, ["section"] * 2, pitch_axis=AXIS, twist_degrees=twist_degrees),
        {"section": NacaProfile("0024", GAP)},
        layout=layout,
        plies=[*walls, ply("cap", blades.GLASS, CAP, "main cap")],
        mesh=blades.rule(size, **mesh),
        hand=hand,
    )
    materials = {material.name: material for material in (BIAX, blades.GLASS, SPACER)}
    return replace(definition, materials=materials)


@dataclass(frozen=True)
class ByHand:
    """Beam properties of the blade without a core.

    Attributes
    ----------
    flap, edge : float, N m²
        EI of bending along x and along y.
    torsion : float, N m²
    mass : float, kg/m
    """

    flap: float
    edge: float
    torsion: float
    mass: float


def by_hand(*, is_at_middle: bool = False) -> ByHand:
    """Sum the walls of the suction half and of the webs; the other half is its mirror image.

    Parameters
    ----------
    is_at_middle : bool
        Put every layer into the middle of its laminate. That forgets the coupling of stretching and bending in the
        caps, whose stiff layer lies inside.
    """
    side = CHORD * naca_points("0024", GAP)[:401][::-1]
    # x towards the suction side, y aft of the pitch axis, from the nose aft
    outline = np.column_stack([side.imag, side.real - AXIS * CHORD])
    arc = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(outline, axis=0), axis=1))])
    inward = np.gradient(outline, arc, axis=0) @ [[0.0, 1.0], [-1.0, 0.0]]
    inward[0] = [0.0, 1.0]
    inward /= np.linalg.norm(inward, axis=1)[:, None]

    from_axis = 0.5 * (arc[1:] + arc[:-1]) - np.interp(0.0, outline[:, 1], arc)
    in_cap = np.abs(from_axis) < CAP_WIDTH / 2
    layers = [(SKIN, SKIN / 2, BIAX, np.ones(400, dtype=bool)), (CAP, SKIN + CAP / 2, blades.GLASS, in_cap)]
    A12, A22, Gt, Gtd = np.zeros((4, 400))
    for t, depth, material, mask in layers:
        _, q12, q22 = plane_stress(material)
        A12, A22 = A12 + mask * t * q12, A22 + mask * t * q22
        Gt, Gtd = Gt + mask * t * material.G12, Gtd + mask * t * depth * material.G12

    def walls(depth: NDArray) -> NDArray:
        """(400, 2, 2) ends of the walls at a depth, up to the middle of the trailing base."""
        found = np.stack([outline[:-1], outline[1:]], axis=1)
        found = found + depth[:, None, None] * np.stack([inward[:-1], inward[1:]], axis=1)
        found[..., 1] = np.minimum(found[..., 1], outline[-1, 1] - SKIN / 2)
        return found

    sums = np.zeros(4)  # EA, EA y, EI flap, EI edge
    mass = 0.0
    for t, depth, material, mask in layers:
        q11, q12, _ = plane_stress(material)
        # the layers of a wall share their contraction, and no force remains across it
        stiff = mask * t * (q11 - q12 * A12 / A22)
        at = np.where(in_cap, (SKIN + CAP) / 2, SKIN / 2) if is_at_middle else np.full(400, depth)
        sums += _sums(walls(at), stiff)
        mass += mask * t * material.density @ _lengths(walls(np.full(400, depth)))
    middle = walls(np.where(in_cap, (SKIN + CAP) / 2, SKIN / 2))
    half_base = middle[-1, 1]
    base = np.array([[half_base, [0.0, half_base[1]]]])
    sums += _sums(base, np.array([SKIN * BIAX.E1]))
    heights = np.array([np.interp(place, *middle.mean(axis=1).T[::-1]) for place in FEET])
    for place, height in zip(FEET, heights, strict=True):
        sums += _sums(np.array([[[0.0, place], [height, place]]]), np.array([SKIN * BIAX.E1]))
    mass += SKIN * BIAX.density * (heights.sum() + half_base[0])
    EA, EAy, flap, edge = 2 * sums
    torsion = _bredt_batho(walls(Gtd / Gt), Gt, base=half_base[0], webs=2 * heights)
    return ByHand(flap, edge - EAy**2 / EA, torsion, 2 * mass)


def plane_stress(material: Material) -> tuple[float, float, float]:
    """Q11, Q12, Q22."""
    share = 1.0 - material.nu12**2 * material.E2 / material.E1
    return material.E1 / share, material.nu12 * material.E2 / share, material.E2 / share


def _lengths(walls: NDArray) -> NDArray:
    return np.linalg.norm(walls[:, 1] - walls[:, 0], axis=1)


def _sums(walls: NDArray, stiff: NDArray) -> NDArray:
    """Stiffness, its moment along y, and its second moments along x and y; of straight walls."""
    weight = stiff * _lengths(walls)
    middle, step = walls.mean(axis=1), walls[:, 1] - walls[:, 0]
    second = weight @ (middle**2 + step**2 / 12)
    return np.array([weight.sum(), weight @ middle[:, 1], *second])


def _bredt_batho(half: NDArray, sheared: NDArray, *, base: float, webs: NDArray) -> float:
    """Torsional stiffness of nose, middle and tail cell: flows q with ∮ q ds / Gt = 2 A θ' in each of them."""
    cell = np.searchsorted(FEET, half.mean(axis=1)[:, 1])
    slack = 2 * np.bincount(cell, weights=_lengths(half) / sheared)
    slack[2] += 2 * base / (SKIN * BIAX.G12)
    flexibility = np.diag(slack)
    for k, height in enumerate(webs):
        flexibility[k : k + 2, k : k + 2] += height / (SKIN * BIAX.G12) * np.array([[1.0, -1.0], [-1.0, 1.0]])
    x, y = half[..., 0], half[..., 1]
    area = 2 * np.bincount(cell, weights=x.mean(axis=1) * (y[:, 1] - y[:, 0]))
    return float(4.0 * area @ np.linalg.solve(flexibility, area))
