"""NACA ordinates against the published tables.

Source: Abbott, von Doenhoff: Theory of Wing Sections, Dover 1959, Appendix III, and Jacobs, Ward, Pinkerton: NACA
Report 460, 1933. Values in per cent of the chord, quoted from memory.
"""

from __future__ import annotations

import numpy as np
import pytest

from skinmesh.definition.blade import NacaProfile
from skinmesh.surface.profile import read_unit_shape

NACA_0012 = {
    1.25: 1.894, 2.5: 2.615, 5: 3.555, 7.5: 4.200, 10: 4.683, 15: 5.345, 20: 5.737, 25: 5.941, 30: 6.002, 40: 5.803,
    50: 5.294, 60: 4.563, 70: 3.664, 80: 2.623, 90: 1.448, 95: 0.807, 100: 0.126,
}  # fmt: skip
NACA_2412 = {
    5: (4.13, -3.01), 10: (5.63, -3.75), 20: (7.26, -4.23), 30: (7.88, -4.12), 40: (7.80, -3.80), 60: (6.36, -2.76),
    80: (3.75, -1.50),
}  # fmt: skip
T = np.linspace(0.0, 1.0, 20001)


def ordinates(code: str, x: float) -> tuple[float, float]:
    shape = read_unit_shape(NacaProfile(code))
    sides = [shape.origin + shape.scale * side(T) for side in (shape.suction, shape.pressure)]
    return tuple(100.0 * float(np.interp(x / 100.0, side.real, side.imag)) for side in sides)


@pytest.mark.parametrize("x", NACA_0012)
def test_naca_0012(x):
    upper, lower = ordinates("0012", x)
    assert upper == pytest.approx(NACA_0012[x], abs=0.001)
    assert lower == pytest.approx(-NACA_0012[x], abs=0.001)


@pytest.mark.parametrize("x", NACA_2412)
def test_naca_2412(x):
    assert ordinates("2412", x) == pytest.approx(NACA_2412[x], abs=0.02)


def test_formula_of_the_mean_line_and_the_thickness():
    """Report 460, equations for the mean line and for the ordinates normal to it."""
    x = np.linspace(0.001, 1.0, 400)
    half = 0.6 * (0.2969 * np.sqrt(x) - 0.1260 * x - 0.3516 * x**2 + 0.2843 * x**3 - 0.1015 * x**4)
    line = np.where(x < 0.4, 0.02 / 0.16 * (0.8 * x - x**2), 0.02 / 0.36 * (0.2 + 0.8 * x - x**2))
    slope = np.arctan(np.where(x < 0.4, 0.25 * (0.4 - x), 0.04 / 0.36 * (0.4 - x)))
    shape = read_unit_shape(NacaProfile("2412"))
    for sign, side in ((1, shape.suction), (-1, shape.pressure)):
        points = shape.origin + shape.scale * side(T)
        wanted = x - sign * half * np.sin(slope) + 1j * (line + sign * half * np.cos(slope))
        keep = wanted.real > 0.002
        np.testing.assert_allclose(np.interp(wanted.real[keep], points.real, points.imag), wanted.imag[keep], atol=2e-6)


def test_leading_edge_radius_of_naca_0012():
    """1.58 % of the chord in the same table."""
    side = read_unit_shape(NacaProfile("0012")).suction
    point = side(np.array([1e-3]))[0]
    # circle through the nose and two points that lie symmetric to the chord
    assert 100.0 * abs(point) ** 2 / (2.0 * point.real) == pytest.approx(1.58, abs=0.01)


def test_trailing_gap_opens_linearly():
    plain, wide = (read_unit_shape(NacaProfile("0012", gap)) for gap in (0.0, 0.01))
    x = np.linspace(0.05, 1.0, 50)
    added = [np.interp(x, s.suction(T).real, s.suction(T).imag) for s in (wide, plain)]
    np.testing.assert_allclose(added[0] - added[1], 0.005 * x, atol=2e-6)
    assert abs(plain.suction(np.ones(1))[0] - plain.pressure(np.ones(1))[0]) < 1e-12
