"""Natural frequencies of slender steel tubes, from blade definition to CalculiX: one of even section, one a cone.

Sources: Euler–Bernoulli cantilever, βL = 1.8751, 4.6941, 7.8548 (Blevins, Formulas for Natural Frequency and Mode
Shape, 1979, table 8-1, from memory). A thin-walled cone of even wall has A ∝ r and I ∝ r³, as the wedge has that
Kirchhoff solved by Bessel functions (1879; from memory, with his 5.315, 15.207 and 30.02 for the whole wedge): derived
here from (x³ w'')'' = k⁴ x w, whose solutions are Z₁(2k√x) / √x. Torsion: (x³ θ')' = −k² x³ θ, solved by Z₁(kx) / x.
Shear and rotary inertia: Timoshenko's beam, by Ritz's method with polynomials, with the shear factor of a thin tube,
2 (1 + ν) / (4 + 3 ν) (Cowper, Journal of Applied Mechanics 33, 1966, from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from itertools import pairwise
from math import pi
from pathlib import Path

import numpy as np
import pytest
from blades import blade, rule, stations
from numpy.polynomial import legendre
from scipy.linalg import eigh
from scipy.optimize import brentq
from scipy.special import iv, jv, kv, yv
from solver_runs import STEEL, needs_ccx, run_solver

from skinmesh.definition.blade import CircleProfile, PlyRule
from skinmesh.definition.spanwise import constant
from skinmesh.mesh.build import build_mesh

RADIUS, WALL, LENGTH = 0.25, 0.02, 10.0
E, G, DENSITY = STEEL.E1, STEEL.G12, STEEL.density
SHEAR_FACTOR = 2 * 1.3 / (4 + 3 * 0.3)
BETA_L = (1.8751041, 4.6940911, 7.8547574)
TAPER = 0.4


def roots(function: Callable[[float], float], places: np.ndarray) -> np.ndarray:
    """Zeros between the places, each of which is bracketed by two of them."""
    values = [function(place) for place in places]
    return np.array(
        [
            brentq(function, a, b, xtol=1e-12)
            for (a, b), (u, v) in zip(pairwise(places), pairwise(values), strict=True)
            if u * v < 0
        ]
    )


def cone_determinant(taper: float, k: float) -> float:
    """Zero where (x³ w'')'' = k⁴ x w has a solution held at x = 1 and free at x = taper."""

    def derivative(order: int, x: float) -> np.ndarray:
        # d/dx of Zₙ(2k√x) / x^(n/2) is ∓ k Zₙ₊₁(2k√x) / x^((n+1)/2)
        values = np.array([each(1 + order, 2 * k * np.sqrt(x)) for each in (jv, yv, iv, kv)])
        return k**order * np.array([-1.0, -1.0, 1.0, -1.0]) ** order * values / x ** ((1 + order) / 2)

    moment = derivative(2, taper)
    shear = 3 * derivative(2, taper) + taper * derivative(3, taper)
    matrix = np.array([derivative(0, 1.0), derivative(1, 1.0), moment, shear])
    matrix /= np.linalg.norm(matrix, axis=1, keepdims=True)
    return float(np.linalg.det(matrix / np.linalg.norm(matrix, axis=0)))


def cone_bending(taper: float) -> np.ndarray:
    """Lowest three ω L² √(ρA/EI), with A and I of the root."""
    k = roots(partial(cone_determinant, taper), np.arange(0.3, 9.0 / (1 - taper), 0.05))
    return (k[:3] * (1 - taper)) ** 2


def cone_torsion(taper: float) -> float:
    """Lowest ω L √(ρ/G)."""

    def left(k: float) -> float:
        return float(jv(1, k) * yv(2, k * taper) - yv(1, k) * jv(2, k * taper))

    return float(roots(left, np.arange(0.5, 4.0, 0.05) / (1 - taper))[0] * (1 - taper))


def bending_frequencies(radius: Callable[[np.ndarray], np.ndarray], *, is_slender: bool = False) -> np.ndarray:
    """Lowest four frequencies of bending, Hz, of a tube that is held at z = 0, by Ritz's method.

    Deflection and rotation are z times Legendre polynomials. A slender one has I = πr³t, no rotary inertia and hardly
    any shear.
    """
    n = 16
    places, weights = legendre.leggauss(60)
    z, weight = LENGTH * (1 + places) / 2, LENGTH * weights / 2
    values = legendre.legvander(places, n - 1)
    rates = np.column_stack([legendre.legval(places, legendre.legder(c)) for c in np.eye(n)]) * 2 / LENGTH
    basis, slope = z[:, None] * values, values + z[:, None] * rates
    r = radius(z)
    area, second = 2 * pi * r * WALL, pi * r**3 * WALL
    if not is_slender:
        second *= 1 + (WALL / r) ** 2 / 4
    shear = G * area * (1e5 if is_slender else SHEAR_FACTOR)

    def summed(a: np.ndarray, factor: np.ndarray, b: np.ndarray) -> np.ndarray:
        return a.T @ ((weight * factor)[:, None] * b)

    cross = -summed(slope, shear, basis)
    turning = summed(basis, shear, basis) + summed(slope, E * second, slope)
    stiffness = np.block([[summed(slope, shear, slope), cross], [cross.T, turning]])
    rotary = summed(basis, DENSITY * second * (not is_slender), basis)
    mass = np.block([[summed(basis, DENSITY * area, basis), np.zeros((n, n))], [np.zeros((n, n)), rotary]])
    squares = 1 / eigh(mass, stiffness, eigvals_only=True)[::-1][:4]
    return np.sqrt(squares) / (2 * pi)


def thin_tube(parameters: Sequence[float] | np.ndarray) -> np.ndarray:
    """Frequencies in Hz from ω L² √(ρA/EI), with I/A = r²/2 at the root."""
    return np.asarray(parameters) * np.sqrt(E / DENSITY / 2) * RADIUS / LENGTH**2 / (2 * pi)


def even(z: np.ndarray) -> np.ndarray:
    return np.full_like(z, RADIUS)


def cone(z: np.ndarray) -> np.ndarray:
    return RADIUS * (1 - (1 - TAPER) * z / LENGTH)


def solved(taper: float, folder: Path, *, n_modes: int) -> np.ndarray:
    """Lowest frequencies that CalculiX finds, Hz."""
    definition = blade(
        stations([0, LENGTH], [2 * RADIUS + WALL, 2 * RADIUS * taper + WALL], ["ring"] * 2),
        {"ring": CircleProfile()},
        plies=[PlyRule("wall", STEEL, constant(WALL), constant(1), 0.0, ("skin",))],
        mesh=rule(0.6, surface="mid", chord_error=0.02),
    )
    step = f"*STEP\n*FREQUENCY\n{n_modes}\n*END STEP\n"
    return run_solver(build_mesh(definition), folder, step=step).frequencies


def test_the_closed_forms_agree_with_each_other():
    assert cone_bending(1e-4) == pytest.approx([5.315, 15.207, 30.02], rel=4e-4)
    for radius, exact in ((cone, cone_bending(TAPER)), (even, np.square(BETA_L))):
        assert bending_frequencies(radius, is_slender=True)[:3] == pytest.approx(thin_tube(exact), rel=1e-6)
    # a cone that hardly tapers is a bar: π/2
    assert cone_torsion(0.999) == pytest.approx(pi / 2, rel=1e-3)


@pytest.mark.solver
@needs_ccx
def test_frequencies_of_an_even_cantilever(tmp_path):
    found = solved(1.0, tmp_path, n_modes=7)
    torsion = np.sqrt(G / DENSITY) / (4 * LENGTH)
    bending = bending_frequencies(even)
    assert found == pytest.approx(np.sort([*np.repeat(bending[:3], 2), torsion]), rel=2.5e-3)
    # Euler–Bernoulli's, of the thick ring, lie above by what shear and rotary inertia take
    slender = thin_tube(np.square(BETA_L)) * np.sqrt(1 + (WALL / RADIUS) ** 2 / 4)
    assert found[[0, 2]] == pytest.approx(slender[:2], rel=0.03)
    assert np.all(found[[0, 2, 6]] < slender)


@pytest.mark.solver
@needs_ccx
def test_frequencies_of_a_tapered_cantilever(tmp_path):
    found = solved(TAPER, tmp_path, n_modes=9)
    torsion = cone_torsion(TAPER) * np.sqrt(G / DENSITY) / (2 * pi * LENGTH)
    assert found == pytest.approx([*np.repeat(bending_frequencies(cone), 2), torsion], rel=4e-3)
    slender = thin_tube(cone_bending(TAPER))
    assert found[[0, 2]] == pytest.approx(slender[:2], rel=0.015)
    assert np.all(found[[0, 2, 4]] < slender)
