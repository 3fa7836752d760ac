"""Classical lamination theory of many stacks at once.

Heights run from the middle of the laminate towards +e3. Stacks are listed from the +e3 face inwards, so the first layer
lies highest. Strains and stresses are in the order 11, 22, 12 with the engineering shear strain.

Formulas after Jones, Mechanics of Composite Materials, 2nd ed. 1999, chapters 2 and 4, and Tsai & Pagano, Invariant
properties of composite materials, 1968; equation numbers are quoted from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import chain

import numpy as np
from numpy.typing import ArrayLike, NDArray

from skinmesh.frozen import freeze_array
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Stack

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class LayerTable:
    """Every layer of several stacks as one row of arrays, stack after stack, from the +e3 face inwards.

    Attributes
    ----------
    n_stacks : int
    materials : tuple of Material
        Each material once, in order of appearance.
    stack : (k,) int array
        Index of the stack that the layer belongs to.
    material : (k,) int array
        Index into ``materials``.
    thickness : (k,) float array, m
    angle : (k,) float array, rad
    density : (k,) float array, kg/m³
    height : (k,) float array, m
        Middle of the layer over the middle of its laminate.
    """

    n_stacks: int
    materials: tuple[Material, ...]
    stack: NDArray[np.int64]
    material: NDArray[np.int64]
    thickness: Array
    angle: Array
    density: Array
    height: Array

    def __post_init__(self) -> None:
        n = len(self.stack)
        for name in ("stack", "material"):
            freeze_array(self, name, shape=(n,), dtype=np.int64)
        for name in ("thickness", "angle", "density", "height"):
            freeze_array(self, name, shape=(n,))


@dataclass(frozen=True, eq=False)
class LaminateStiffness:
    """Stiffness of several stacks about the middle of each.

    Attributes
    ----------
    A : (s, 3, 3) float array, N/m
    B : (s, 3, 3) float array, N
    D : (s, 3, 3) float array, N m
    thickness : (s,) float array, m
    """

    A: Array
    B: Array
    D: Array
    thickness: Array

    def __post_init__(self) -> None:
        n = len(self.thickness)
        for name in ("A", "B", "D"):
            freeze_array(self, name, shape=(n, 3, 3))
        freeze_array(self, "thickness", shape=(n,))


@dataclass(frozen=True, eq=False)
class EngineeringConstants:
    """Membrane constants of several stacks, the laminate kept from bending.

    Attributes
    ----------
    E1, E2, G12 : (s,) float array, Pa
    nu12 : (s,) float array
    """

    E1: Array
    E2: Array
    G12: Array
    nu12: Array

    def __post_init__(self) -> None:
        for name in ("E1", "E2", "G12", "nu12"):
            freeze_array(self, name, shape=(len(self.nu12),))


def reduced_stiffness(materials: Sequence[Material]) -> Array:
    """Plane-stress stiffness Q of each material in its own axes (Jones, eq. 2.70).

    Parameters
    ----------
    materials : sequence of Material

    Returns
    -------
    (k, 3, 3) float array, Pa

    Examples
    --------
    >>> steel = Material("steel", 200e9, 200e9, 200e9, 0.25, 0.25, 0.25, 80e9, 80e9, 80e9, 7850.0, is_isotropic=True)
    >>> print(reduced_stiffness([steel])[0].round(-7) / 1e9)
    [[213.33  53.33   0.  ]
     [ 53.33 213.33   0.  ]
     [  0.     0.    80.  ]]
    """
    E1, E2, G12, nu12 = (
        np.array([getattr(material, name) for material in materials], dtype=float)
        for name in ("E1", "E2", "G12", "nu12")
    )
    divisor = 1.0 - nu12**2 * E2 / E1
    Q = np.zeros((len(materials), 3, 3))
    Q[:, 0, 0] = E1 / divisor
    Q[:, 1, 1] = E2 / divisor
    Q[:, 0, 1] = Q[:, 1, 0] = nu12 * E2 / divisor
    Q[:, 2, 2] = G12
    return Q


def stiffness_invariants(Q: ArrayLike) -> Array:
    """The invariants U1 … U5 of Tsai and Pagano (Jones, eq. 2.93).

    Parameters
    ----------
    Q : (..., 3, 3) float array, Pa
        Stiffness in the material's own axes.

    Returns
    -------
    (..., 5) float array, Pa
    """
    q = np.asarray(Q, dtype=float)
    q11, q22, q12, q66 = q[..., 0, 0], q[..., 1, 1], q[..., 0, 1], q[..., 2, 2]
    return np.stack(
        [
            (3.0 * q11 + 3.0 * q22 + 2.0 * q12 + 4.0 * q66) / 8.0,
            (q11 - q22) / 2.0,
            (q11 + q22 - 2.0 * q12 - 4.0 * q66) / 8.0,
            (q11 + q22 + 6.0 * q12 - 4.0 * q66) / 8.0,
            (q11 + q22 - 2.0 * q12 + 4.0 * q66) / 8.0,
        ],
        axis=-1,
    )


def turned_stiffness(Q: ArrayLike, angle: ArrayLike) -> Array:
    """Stiffness of a ply in the axes of the element, by the invariants (Jones, eq. 2.92).

    Parameters
    ----------
    Q : (..., 3, 3) float array, Pa
        Stiffness in the material's own axes.
    angle : (...) float array, rad
        From e1 of the element to the fibre, positive towards e2.

    Returns
    -------
    (..., 3, 3) float array, Pa
    """
    u1, u2, u3, u4, u5 = np.moveaxis(stiffness_invariants(Q), -1, 0)
    angle = np.asarray(angle, dtype=float)
    cos2, cos4, sin2, sin4 = np.cos(2 * angle), np.cos(4 * angle), np.sin(2 * angle), np.sin(4 * angle)
    q12, q66 = u4 - u3 * cos4, u5 - u3 * cos4
    q16, q26 = u2 / 2 * sin2 + u3 * sin4, u2 / 2 * sin2 - u3 * sin4
    rows = (
        (u1 + u2 * cos2 + u3 * cos4, q12, q16),
        (q12, u1 - u2 * cos2 + u3 * cos4, q26),
        (q16, q26, q66),
    )
    return np.stack([np.stack(np.broadcast_arrays(*row), axis=-1) for row in rows], axis=-2)


def tabulate_layers(stacks: Sequence[Stack]) -> LayerTable:
    """Lay the layers of all stacks out as arrays.

    Parameters
    ----------
    stacks : sequence of Stack

    Returns
    -------
    LayerTable
    """
    layers = list(chain.from_iterable(stack.layers for stack in stacks))
    number = {material: k for k, material in enumerate(dict.fromkeys(layer.material for layer in layers))}
    n_layers = np.array([len(stack.layers) for stack in stacks], dtype=np.int64)
    stack = np.repeat(np.arange(len(stacks)), n_layers)
    thickness = np.array([layer.thickness for layer in layers], dtype=float)
    # Depth of each layer's lower face below the +e3 face of the first stack of all, then of its own.
    lower = np.cumsum(thickness)
    total = np.bincount(stack, weights=thickness, minlength=len(stacks))
    before = np.concatenate([[0.0], np.cumsum(total)])[:-1]
    depth = lower - before[stack] - thickness / 2
    return LayerTable(
        n_stacks=len(stacks),
        materials=tuple(number),
        stack=stack,
        material=np.array([number[layer.material] for layer in layers], dtype=np.int64),
        thickness=thickness,
        angle=np.array([layer.angle for layer in layers], dtype=float),
        density=np.array([layer.material.density for layer in layers], dtype=float),
        height=total[stack] / 2 - depth,
    )


def laminate_stiffness(stacks: Sequence[Stack]) -> LaminateStiffness:
    """A, B and D of each stack about its own middle (Jones, eq. 4.22 to 4.24).

    Parameters
    ----------
    stacks : sequence of Stack

    Returns
    -------
    LaminateStiffness

    Examples
    --------
    >>> from skinmesh.laminate.stack import Layer
    >>> steel = Material("steel", 200e9, 200e9, 200e9, 0.25, 0.25, 0.25, 80e9, 80e9, 80e9, 7850.0, is_isotropic=True)
    >>> plate = laminate_stiffness([Stack((Layer("plate", steel, 0.01, 0.0),))])
    >>> print(f"{plate.A[0, 2, 2]:.4g} N/m, {plate.D[0, 2, 2]:.4g} N m, {abs(plate.B).max()} N")
    8e+08 N/m, 6667 N m, 0.0 N
    """
    table = tabulate_layers(stacks)
    Q = turned_stiffness(reduced_stiffness(table.materials)[table.material], table.angle)
    weights = (
        table.thickness,
        table.thickness * table.height,
        table.thickness * table.height**2 + table.thickness**3 / 12.0,
    )
    A, B, D = (_sum_by_stack(table, weight[:, None, None] * Q) for weight in weights)
    return LaminateStiffness(A=A, B=B, D=D, thickness=_sum_by_stack(table, table.thickness))


def engineering_constants(stiffness: LaminateStiffness) -> EngineeringConstants:
    """Moduli that a test would find on each laminate if it were kept from bending (Jones, eq. 4.47, with B left out).

    For a symmetric laminate these are the constants of the free plate.

    Parameters
    ----------
    stiffness : LaminateStiffness

    Returns
    -------
    EngineeringConstants
    """
    a = np.linalg.inv(stiffness.A)
    h = stiffness.thickness
    return EngineeringConstants(
        E1=1.0 / (h * a[:, 0, 0]),
        E2=1.0 / (h * a[:, 1, 1]),
        G12=1.0 / (h * a[:, 2, 2]),
        nu12=-a[:, 0, 1] / a[:, 0, 0],
    )


def mass_moments(stacks: Sequence[Stack]) -> Array:
    """Integrals of density, density × height and density × height² through each laminate, about its middle.

    Parameters
    ----------
    stacks : sequence of Stack

    Returns
    -------
    (s, 3) float array; kg/m², kg/m, kg
    """
    table = tabulate_layers(stacks)
    mass = table.density * table.thickness
    moments = np.stack([mass, mass * table.height, mass * (table.height**2 + table.thickness**2 / 12.0)], axis=-1)
    return _sum_by_stack(table, moments)


def _sum_by_stack(table: LayerTable, values: Array) -> Array:
    """Sum of (k, ...) values over the layers of each stack."""
    total = np.zeros((table.n_stacks, *values.shape[1:]))
    np.add.at(total, table.stack, values)
    return total
