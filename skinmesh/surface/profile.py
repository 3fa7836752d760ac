"""From a profile to a unit shape: two smooth sides, leading edge to trailing edge."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline, make_interp_spline

from skinmesh.definition.blade import CircleProfile, NacaProfile, Profile
from skinmesh.frozen import freeze_array

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]

N_ANALYTIC = 200  # samples a side of a profile given by a formula; the spline through them errs by less than 1e-8
OWN_AXES = 0.01  # a file whose leading edge lies this near its origin keeps its own axes
CORNER = np.pi / 4  # a sharper turn than this near the trailing edge is the corner of a blunt base
KNOT_GRID = 1e-7  # knots are rounded to this, so that the knots of two profiles never nearly coincide
_GAUSS_X, _GAUSS_W = np.polynomial.legendre.leggauss(5)


@dataclass(frozen=True, eq=False)
class Side:
    """One side of a unit shape as a cubic spline with its knots at its points.

    Attributes
    ----------
    t : (n,) float array
        Share of the side's arc length from the leading edge: 0 … 1, strictly increasing.
    points : (n,) complex array
        Chordwise + i · suction-wise position, leading edge at 0, trailing-edge middle at 1.
    end_slopes : (2,) complex array
        d(position)/dt at both ends.
    """

    t: Floats
    points: Complex
    end_slopes: Complex

    def __post_init__(self) -> None:
        freeze_array(self, "t", shape=(None,))
        freeze_array(self, "points", shape=(len(self.t),), dtype=complex)
        freeze_array(self, "end_slopes", shape=(2,), dtype=complex)

    @cached_property
    def pieces(self) -> Complex:
        """(n − 1, 4) complex array: power coefficients of each interval about its left end, constant first."""
        columns = np.column_stack([self.points.real, self.points.imag])
        slopes = [[(1, np.array([slope.real, slope.imag]))] for slope in self.end_slopes]
        spline = make_interp_spline(self.t, columns, k=3, bc_type=(slopes[0], slopes[1]))
        left = self.t[:-1]
        powers = [spline(left, nu)[:, 0] + 1j * spline(left, nu)[:, 1] for nu in range(3)]
        third = spline(0.5 * (self.t[:-1] + self.t[1:]), 3)
        return np.column_stack([powers[0], powers[1], powers[2] / 2.0, (third[:, 0] + 1j * third[:, 1]) / 6.0])

    def __call__(self, t: Floats) -> Complex:
        """Positions at shares t of the side's arc length."""
        i = np.clip(np.searchsorted(self.t, t, side="right") - 1, 0, len(self.t) - 2)
        h, c = t - self.t[i], self.pieces[i]
        return np.asarray(c[..., 0] + h * (c[..., 1] + h * (c[..., 2] + h * c[..., 3])), dtype=complex)


@dataclass(frozen=True, eq=False)
class UnitShape:
    """A profile in its own chord frame, with the way back into the axes of its file.

    The leading edge is the point farthest from the trailing-edge middle: there the tangent stands square on the line
    between the two, for every profile, so that the nose of a blend of shapes is as smooth as theirs.

    Attributes
    ----------
    suction, pressure : Side
    origin, scale : complex
        A point w of the chord frame lies at ``origin + scale · w`` in the axes of the file, as a fraction of the
        chord.
    """

    suction: Side
    pressure: Side
    origin: complex
    scale: complex


def read_unit_shape(profile: Profile) -> UnitShape:
    """Make the unit shape of a profile.

    Parameters
    ----------
    profile : CircleProfile, NacaProfile or FileProfile

    Returns
    -------
    UnitShape

    Examples
    --------
    >>> shape = read_unit_shape(NacaProfile("0012"))
    >>> round(float(shape.suction(np.array([1.0]))[0].imag), 5)
    0.00126
    """
    if isinstance(profile, CircleProfile):
        return _split_loop(_circle_loop())
    if isinstance(profile, NacaProfile):
        return _split_loop(naca_loop(profile.code, profile.trailing_gap))
    return _split_loop(_without_base(profile.points[:, 0] + 1j * profile.points[:, 1]))


def naca_loop(code: str, trailing_gap: float | None) -> Complex:
    """Sample a NACA 4-digit profile.

    Parameters
    ----------
    code : str
        Four digits.
    trailing_gap : float or None
        Gap as a fraction of the chord, opened linearly from the leading edge; None keeps the formula's own.

    Returns
    -------
    (n,) complex array
        Loop from the suction-side trailing edge over the leading edge to the pressure-side trailing edge.

    Notes
    -----
    Jacobs, Ward, Pinkerton: The characteristics of 78 related airfoil sections, NACA Report 460 (1933): thickness
    normal to the mean line.
    """
    camber, place, thickness = int(code[0]) / 100.0, int(code[1]) / 10.0, int(code[2:]) / 100.0
    beta = np.linspace(-np.pi, np.pi, 2 * N_ANALYTIC + 1)[::-1]
    x = 0.5 * (1.0 - np.cos(beta))
    root = np.sin(0.5 * beta)  # ± √x: the thickness is then one smooth function round the nose
    polynomial = x * (-0.1260 + x * (-0.3516 + x * (0.2843 - 0.1015 * x)))
    half = 5.0 * thickness * (0.2969 * root + np.sign(beta) * polynomial)
    if trailing_gap is not None:
        half = half + np.sign(beta) * x * (0.5 * trailing_gap - 5.0 * thickness * 0.0021)
    if camber == 0.0 or place == 0.0:
        return np.asarray(x + 1j * half)
    fore = x < place
    squared = np.where(fore, place, 1.0 - place) ** 2
    line = camber / squared * np.where(fore, 2.0 * place * x - x**2, 1.0 - 2.0 * place + 2.0 * place * x - x**2)
    slope = 2.0 * camber / squared * (place - x)
    return np.asarray(x + 1j * line + 1j * half * np.exp(1j * np.arctan(slope)))


def _circle_loop() -> Complex:
    angle = np.linspace(0.0, 2.0 * np.pi, 2 * N_ANALYTIC + 1)
    loop = 0.5 + 0.5 * np.exp(1j * angle)
    loop[-1] = loop[0]
    return np.asarray(loop)


def _without_base(loop: Complex) -> Complex:
    """Cut the face of a blunt trailing edge off a loop that runs round it."""
    extent = np.ptp(loop.real)
    steps = np.diff(loop)
    turning = np.abs(np.angle(steps[1:] / steps[:-1]))
    aft = loop.real[1:-1] > loop.real.max() - 0.03 * extent
    corners = 1 + np.flatnonzero((turning > CORNER) & aft)
    first, second = corners[corners < len(loop) // 2], corners[corners >= len(loop) // 2]
    start = int(first.max()) if len(first) else 0
    stop = int(second.min()) if len(second) else len(loop) - 1
    return loop[start : stop + 1]


def _split_loop(loop: Complex) -> UnitShape:
    u = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(loop)))])
    curve = CubicSpline(u, np.column_stack([loop.real, loop.imag]))
    trailing = 0.5 * (loop[0] + loop[-1])
    nose_u = _farthest(curve, u, trailing)
    nose = _at(curve, np.array([nose_u]))[0]
    chord = trailing - nose
    own_axes = (
        trailing.real > 0.0 and abs(nose) < OWN_AXES * trailing.real and abs(trailing.imag) < OWN_AXES * trailing.real
    )
    origin, scale = (nose / trailing.real, chord / trailing.real) if own_axes else (0j, 1 + 0j)
    tiny = 4.0 * KNOT_GRID * u[-1]
    suction_u = np.concatenate([[nose_u], u[u < nose_u - tiny][::-1]])
    pressure_u = np.concatenate([[nose_u], u[u > nose_u + tiny]])
    return UnitShape(
        _side(curve, suction_u, nose, chord), _side(curve, pressure_u, nose, chord), complex(origin), complex(scale)
    )


def _at(curve: CubicSpline, u: Floats, nu: int = 0) -> Complex:
    values = curve(u, nu)
    return np.asarray(values[..., 0] + 1j * values[..., 1])


def _farthest(curve: CubicSpline, u: Floats, point: complex) -> float:
    """Parameter of the loop's point that is farthest from a given one."""
    fine = np.linspace(u[0], u[-1], 20 * len(u))
    i = int(np.argmax(np.abs(_at(curve, fine) - point)))
    low, high = fine[max(i - 1, 0)], fine[min(i + 1, len(fine) - 1)]
    for _ in range(4):  # each round narrows the bracket 50-fold
        fine = np.linspace(low, high, 101)
        # d/du |X − P|² / 2: its sign change is far sharper than the maximum itself
        rate = np.real((_at(curve, fine) - point) * np.conj(_at(curve, fine, 1)))
        j = int(np.clip(np.searchsorted(-rate, 0.0), 1, 100))
        low, high = fine[j - 1], fine[j]
    return float(0.5 * (low + high))


def _side(curve: CubicSpline, u: Floats, nose: complex, chord: complex) -> Side:
    middle, half = 0.5 * (u[1:] + u[:-1]), 0.5 * (u[1:] - u[:-1])
    speed = np.abs(_at(curve, middle[:, None] + half[:, None] * _GAUSS_X, 1))
    arc = np.concatenate([[0.0], np.cumsum(np.abs(half) * (speed @ _GAUSS_W))])
    length = arc[-1]
    t = np.round(arc / length / KNOT_GRID) * KNOT_GRID
    t[-1] = 1.0
    keep = np.concatenate([[True], np.diff(t) > KNOT_GRID])
    t, u = t[keep], u[keep]
    tangent = _at(curve, u[[0, -1]], 1)
    slopes = np.sign(u[-1] - u[0]) * tangent / np.abs(tangent) * length / chord
    slopes[0] = 1j * np.sign(slopes[0].imag) * abs(slopes[0])  # square on the chord, by the choice of the nose
    return Side(t, (_at(curve, u) - nose) / chord, slopes)
