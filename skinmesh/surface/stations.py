"""The unit shapes of all stations on one common knot vector."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import BSpline
from scipy.optimize import brentq

from skinmesh.definition.blade import Profile, StationTable
from skinmesh.surface.profile import Side, UnitShape, read_unit_shape

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]

DEGREE = 3
N_THICKNESS = 800  # chordwise samples for the largest thickness


@dataclass(frozen=True, eq=False)
class StationShapes:
    """Unit shapes at the stations that define one.

    Attributes
    ----------
    z : (j,) float array, m
    knots : tuple of (n,) float array
        Distinct knots in |t| of the pressure and the suction side.
    control : tuple of (j, n + 2) complex array
        B-spline control points of both sides in the chord frame.
    frame : (j, 2) complex array
        Origin and scale of the chord frame in the axes of the profile.
    """

    z: Floats
    knots: tuple[Floats, Floats]
    control: tuple[Complex, Complex]
    frame: Complex

    def power_form(self, side: int, control: Complex) -> Complex:
        """Turn control points into power coefficients of every knot interval.

        Parameters
        ----------
        side : int
            0 pressure, 1 suction.
        control : (a, b, n + 2) complex array

        Returns
        -------
        (a, n − 1, b, 4) complex array
            About the left end of each interval, constant first.
        """
        knots = self.knots[side]
        a, b, n_control = control.shape
        columns = control.reshape(a * b, n_control).T
        spline = BSpline(_padded(knots), np.hstack([columns.real, columns.imag]), DEGREE)
        # the third derivative jumps at knots: it is read between them
        places = [knots[:-1], knots[:-1], knots[:-1], 0.5 * (knots[:-1] + knots[1:])]
        values = np.stack([spline(p, nu) / f for nu, (p, f) in enumerate(zip(places, (1, 1, 2, 6), strict=True))], -1)
        joined = values[:, : a * b] + 1j * values[:, a * b :]
        return np.ascontiguousarray(np.moveaxis(joined.reshape(len(knots) - 1, a, b, 4), 0, 1))


def shape_stations(table: StationTable, profiles: Mapping[str, Profile]) -> StationShapes:
    """Work out the shape of every station that has a profile or a thickness ratio.

    A named profile with a thickness ratio has its ordinates scaled. A blank one with a ratio is the blend of its named
    neighbours that has this ratio; where no blend has it, the nearer neighbour is scaled. A blank one without a ratio
    defines no shape: the loft passes through.

    Parameters
    ----------
    table : StationTable
        First and last station have a profile.
    profiles : mapping of str to Profile

    Returns
    -------
    StationShapes
    """
    named = [i for i, name in enumerate(table.profile) if name is not None]
    plain = {name: read_unit_shape(profiles[name]) for name in dict.fromkeys(table.profile) if name is not None}
    shapes = [_scaled(plain[str(table.profile[i])], table.thickness_ratio[i]) for i in named]
    knots = tuple(
        np.unique(np.concatenate([(shape.suction if side else shape.pressure).t for shape in shapes]))
        for side in (0, 1)
    )
    control = tuple(
        np.stack([_control_points(shape.suction if side else shape.pressure, knots[side]) for shape in shapes])
        for side in (0, 1)
    )
    frame = np.array([[shape.origin, shape.scale] for shape in shapes])
    known = StationShapes(table.z[named], (knots[0], knots[1]), (control[0], control[1]), frame)
    blank = [i for i, name in enumerate(table.profile) if name is None and not np.isnan(table.thickness_ratio[i])]
    return _with_blends(known, table, blank) if blank else known


def without_gaps(shapes: StationShapes) -> tuple[StationShapes, Complex]:
    """Close the trailing edges of all shapes, and say how wide each was.

    What is taken away grows linearly along the chord from the leading edge, so that the nose stays as it is. The gaps
    can then be interpolated on their own, and no blend of shapes can turn its trailing edges round.

    Parameters
    ----------
    shapes : StationShapes

    Returns
    -------
    StationShapes
        Every side ends at 1 in the chord frame.
    (j,) complex array
        From the pressure to the suction trailing edge, in the chord frame.
    """
    pressure, suction = shapes.control
    gap = suction[:, -1] - pressure[:, -1]
    closed = tuple(
        side - sign * 0.5 * gap[:, None] * side.real / side.real[:, -1:]
        for sign, side in ((-1, pressure), (1, suction))
    )
    return replace(shapes, control=(closed[0], closed[1])), gap


def largest_thickness(suction: Complex, pressure: Complex) -> float:
    """Largest distance of two sides across the chord line.

    Parameters
    ----------
    suction, pressure : (n,) complex array
        Points of each side from the leading edge, chordwise + i · suction-wise.

    Returns
    -------
    float
        As a fraction of the chord.
    """
    x = np.linspace(0.0, 1.0, N_THICKNESS)
    upper = np.interp(x, np.maximum.accumulate(suction.real), suction.imag)
    lower = np.interp(x, np.maximum.accumulate(pressure.real), pressure.imag)
    return float(np.max(upper - lower))


def _sampled_thickness(suction: Side, pressure: Side) -> float:
    t = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, N_THICKNESS)))
    return largest_thickness(suction(t), pressure(t))


def _scaled(shape: UnitShape, ratio: float) -> UnitShape:
    """Scale ordinates so that the largest thickness is the wanted one."""
    if np.isnan(ratio):
        return shape
    factor = ratio / _sampled_thickness(shape.suction, shape.pressure)
    sides = [
        replace(side, points=_squeeze(side.points, factor), end_slopes=_squeeze(side.end_slopes, factor))
        for side in (shape.suction, shape.pressure)
    ]
    return UnitShape(_by_arc(sides[0]), _by_arc(sides[1]), shape.origin, shape.scale)


def _squeeze(values: Complex, factor: float) -> Complex:
    return np.asarray(values.real + 1j * factor * values.imag)


def _by_arc(side: Side) -> Side:
    """Renew the parameter of a side after its shape was changed, through the same points."""
    x, weight = np.polynomial.legendre.leggauss(5)
    half = 0.5 * np.diff(side.t)[:, None]
    h = half * (1.0 + x)
    c = side.pieces[:, :, None]
    speed = np.abs(c[:, 1] + h * (2.0 * c[:, 2] + h * 3.0 * c[:, 3]))
    arc = np.concatenate([[0.0], np.cumsum((half * speed) @ weight)])
    t = np.round(arc / arc[-1], 7)
    t[-1] = 1.0
    slopes = side.end_slopes / np.abs(side.end_slopes) * arc[-1]
    return Side(t, side.points, slopes)


def _padded(knots: Floats) -> Floats:
    return np.concatenate([np.full(DEGREE, knots[0]), knots, np.full(DEGREE, knots[-1])])


def _control_points(side: Side, knots: Floats) -> Complex:
    """Control points of a side on a finer knot vector that holds its own knots: exact.

    A control point is the blossom of the cubic at three consecutive knots, taken on any interval of its support
    (Ramshaw: Blossoms are polar forms, Computer Aided Geometric Design 6, 1989); the widest one is the best
    conditioned.
    """
    padded = _padded(knots)
    n = len(knots) + DEGREE - 1
    support = padded[np.arange(n)[:, None] + np.arange(DEGREE + 2)]
    widths = np.diff(support, axis=1)
    j = np.argmax(widths, axis=1)
    middle = 0.5 * (support[np.arange(n), j] + support[np.arange(n), j + 1])
    piece = np.clip(np.searchsorted(side.t, middle, side="right") - 1, 0, len(side.t) - 2)
    u, v, w = (support[:, 1:4] - side.t[piece][:, None]).T
    c = side.pieces[piece]
    blossom = c[:, 0] + c[:, 1] * (u + v + w) / 3.0 + c[:, 2] * (u * v + v * w + w * u) / 3.0 + c[:, 3] * u * v * w
    return np.asarray(blossom)


def _with_blends(known: StationShapes, table: StationTable, blank: list[int]) -> StationShapes:
    samples = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, N_THICKNESS)))
    sampled = [
        np.array([BSpline(_padded(known.knots[side]), row, DEGREE)(samples) for row in _columns(known.control[side])])
        for side in (0, 1)
    ]
    # (j, N) complex points of the named shapes on each side
    pressure, suction = (values[:, :, 0] + 1j * values[:, :, 1] for values in sampled)
    rows = [(z, known.control[0][i], known.control[1][i], known.frame[i]) for i, z in enumerate(known.z)]
    for i in blank:
        z, ratio = table.z[i], table.thickness_ratio[i]
        after = int(np.searchsorted(known.z, z))
        before = after - 1

        def excess(weight: float, a: int = before, b: int = after, wanted: float = ratio) -> float:
            upper = (1.0 - weight) * suction[a] + weight * suction[b]
            lower = (1.0 - weight) * pressure[a] + weight * pressure[b]
            return largest_thickness(upper, lower) - wanted

        ends = excess(0.0), excess(1.0)
        if ends[0] * ends[1] < 0.0:
            weight, factor = float(brentq(excess, 0.0, 1.0, xtol=1e-10)), 1.0
        else:
            weight = 0.0 if abs(ends[0]) <= abs(ends[1]) else 1.0
            factor = ratio / (ends[int(weight)] + ratio)
        sides = [
            _squeeze((1.0 - weight) * known.control[s][before] + weight * known.control[s][after], factor)
            for s in (0, 1)
        ]
        frame = (1.0 - weight) * known.frame[before] + weight * known.frame[after]
        rows.append((z, sides[0], sides[1], frame))
    rows.sort(key=lambda row: float(row[0]))
    return StationShapes(
        np.array([row[0] for row in rows]),
        known.knots,
        (np.stack([row[1] for row in rows]), np.stack([row[2] for row in rows])),
        np.stack([row[3] for row in rows]),
    )


def _columns(control: Complex) -> Floats:
    return np.stack([control.real, control.imag], axis=-1)
