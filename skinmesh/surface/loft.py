"""The blade's surface: unit shapes lofted along the span, evaluated at any number of scattered points."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import PchipInterpolator

from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition
from skinmesh.frozen import freeze_array
from skinmesh.surface.stations import StationShapes, shape_stations, without_gaps

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]

CHUNK = 65536  # points evaluated at once, so that the gathered coefficients stay in the cache


@dataclass(frozen=True, eq=False)
class Surface:
    """The mould surface r(z, t): t ∈ [−1, 0] pressure side, [0, 1] suction side, the leading edge at 0.

    Attributes
    ----------
    z_ends : (2,) float array, m
        Root and tip.
    stations : (k,) float array, m
        z of the table's stations.
    shape_z : (j,) float array, m
        z of the stations that define a shape.
    knots : (2,) tuple of (n,) float array
        Knots in |t| of the pressure and of the suction side.
    pieces : (2,) tuple of (j − 1, n − 1, 4, 4) complex array
        Power coefficients of the unit shape with its trailing edge closed: interval along z, interval along |t|, power
        of z, power of |t|.
    planform : PchipInterpolator
        Chord, twist, pitch axis, prebend, sweep, and, complex in two columns each, origin and scale of the chord frame
        and the trailing gap in it, along z.
    is_mirrored : bool
        Counter-clockwise blade.

    Notes
    -----
    Fritsch, Carlson: Monotone piecewise cubic interpolation, SIAM J. Numer. Anal. 17 (1980): the interpolation of the
    planform along the span; equal neighbours stay equal and nothing overshoots. Shapes: see ``_shape_slopes``.
    """

    z_ends: Floats
    stations: Floats
    shape_z: Floats
    knots: tuple[Floats, Floats]
    pieces: tuple[Complex, Complex]
    planform: PchipInterpolator
    is_mirrored: bool

    def __post_init__(self) -> None:
        freeze_array(self, "z_ends", shape=(2,))
        freeze_array(self, "stations", shape=(None,))
        freeze_array(self, "shape_z", shape=(None,))

    def chord(self, z: ArrayLike) -> Floats:
        """Chord at z, m, of the shape of z."""
        return np.asarray(self.planform(z)[..., 0])

    def twist(self, z: ArrayLike) -> Floats:
        """Twist at z, rad, of the shape of z."""
        return np.asarray(self.planform(z)[..., 1])

    def pitch_axis(self, z: ArrayLike) -> Floats:
        """Fraction of the chord at which the pitch axis pierces the chord line, of the shape of z."""
        return np.asarray(self.planform(z)[..., 2])

    def section(self, z: ArrayLike, t: ArrayLike) -> Complex:
        """Position in the untwisted section: metres towards the trailing edge + i · metres towards the suction side.

        Parameters
        ----------
        z, t : float arrays that broadcast against each other
            m; share of the side's arc length.

        Returns
        -------
        complex array, m
            Measured from the pitch axis.
        """
        return self._evaluate(z, t, derivatives=False)[0]

    def section_rates(self, z: ArrayLike, t: ArrayLike) -> tuple[Complex, Complex, Complex]:
        """Position in the untwisted section with its derivatives by t and by z.

        Parameters
        ----------
        z, t : float arrays that broadcast against each other

        Returns
        -------
        three complex arrays
            m, m, and without unit.
        """
        place, by_t, by_z = self._evaluate(z, t, derivatives=True)
        return place, by_t, by_z

    def points(self, z: ArrayLike, t: ArrayLike) -> Floats:
        """Points of the surface.

        Parameters
        ----------
        z, t : float arrays that broadcast against each other

        Returns
        -------
        (..., 3) float array, m
        """
        place = self.section(z, t)
        z = np.broadcast_to(np.asarray(z, dtype=float), place.shape)
        _, twist, _, prebend, sweep = np.moveaxis(self.planform(z)[..., :5], -1, 0)
        return self._in_space(sweep + 1j * prebend + place * np.exp(1j * twist), z)

    def tangents(self, z: ArrayLike, t: ArrayLike) -> tuple[Floats, Floats]:
        """Derivatives of the points by t and by z.

        Parameters
        ----------
        z, t : float arrays that broadcast against each other

        Returns
        -------
        (..., 3) float array, m
            dr/dt.
        (..., 3) float array
            dr/dz.
        """
        place, by_t, by_z = self.section_rates(z, t)
        z = np.broadcast_to(np.asarray(z, dtype=float), place.shape)
        twist = self.planform(z)[..., 1]
        rate = np.moveaxis(self.planform(z, 1)[..., :5], -1, 0)
        turn = np.exp(1j * twist)
        along = rate[4] + 1j * rate[3] + (by_z + 1j * rate[1] * place) * turn
        return self._in_space(by_t * turn, np.zeros_like(z)), self._in_space(along, np.ones_like(z))

    def _in_space(self, plane: Complex, z: Floats) -> Floats:
        y = -plane.real if self.is_mirrored else plane.real
        return np.stack([plane.imag, y, z], axis=-1)

    def _evaluate(self, z: ArrayLike, t: ArrayLike, *, derivatives: bool) -> tuple[Complex, ...]:
        z_all, t_all = np.broadcast_arrays(np.asarray(z, dtype=float), np.asarray(t, dtype=float))
        shape = z_all.shape
        z_flat, t_flat = z_all.ravel(), t_all.ravel()
        results = [np.empty(z_flat.size, dtype=complex) for _ in range(3 if derivatives else 1)]
        for start in range(0, z_flat.size, CHUNK):
            part = slice(start, start + CHUNK)
            for whole, piece in zip(
                results, self._evaluate_chunk(z_flat[part], t_flat[part], derivatives), strict=True
            ):
                whole[part] = piece
        return tuple(result.reshape(shape) for result in results)

    def _evaluate_chunk(self, z: Floats, t: Floats, derivatives: bool) -> tuple[Complex, ...]:
        along = np.clip(np.searchsorted(self.shape_z, z, side="right") - 1, 0, len(self.shape_z) - 2)
        dz = z - self.shape_z[along]
        shape, by_t, by_z = (np.empty(len(z), dtype=complex) for _ in range(3))
        for side, sign in enumerate((-1.0, 1.0)):
            own = np.flatnonzero(t < 0.0 if side == 0 else t >= 0.0)
            knots = self.knots[side]
            tau = np.abs(t[own])
            i = np.clip(np.searchsorted(knots, tau, side="right") - 1, 0, len(knots) - 2)
            h, w, k = (tau - knots[i])[:, None], dz[own], self.pieces[side][along[own], i]
            in_z = k[..., 0] + h * (k[..., 1] + h * (k[..., 2] + h * k[..., 3]))
            shape[own] = in_z[:, 0] + w * (in_z[:, 1] + w * (in_z[:, 2] + w * in_z[:, 3]))
            if derivatives:
                by_z[own] = in_z[:, 1] + w * (2.0 * in_z[:, 2] + w * 3.0 * in_z[:, 3])
                rate = k[..., 1] + h * (2.0 * k[..., 2] + h * 3.0 * k[..., 3])
                by_t[own] = sign * (rate[:, 0] + w * (rate[:, 1] + w * (rate[:, 2] + w * rate[:, 3])))
        values = self.planform(z)
        chord, pitch = values[:, 0], values[:, 2]
        origin, scale, gap = (values[:, i] + 1j * values[:, i + 1] for i in (5, 7, 9))
        half_gap = np.where(t < 0.0, -0.5, 0.5) * gap
        closed = shape.real.copy()
        shape += half_gap * closed
        unit = origin + scale * shape - pitch
        if not derivatives:
            return (chord * unit,)
        rates = self.planform(z, 1)
        origin_rate, scale_rate, gap_rate = (rates[:, i] + 1j * rates[:, i + 1] for i in (5, 7, 9))
        by_t += half_gap * by_t.real
        by_z += half_gap * by_z.real + np.where(t < 0.0, -0.5, 0.5) * gap_rate * closed
        unit_rate = origin_rate + scale_rate * shape + scale * by_z - rates[:, 2]
        return chord * unit, chord * scale * by_t, rates[:, 0] * unit + chord * unit_rate


def loft_surface(blade: BladeDefinition) -> Surface:
    """Loft the blade's sections along the span.

    Control points of the unit shapes, chord, twist, pitch axis, prebend and sweep are interpolated along z on their
    own and put together afterwards: to interpolate points in space would shrink twisted sections.

    Parameters
    ----------
    blade : BladeDefinition

    Returns
    -------
    Surface
    """
    table = blade.stations
    shapes = shape_stations(table, blade.profiles)
    shapes, gap = without_gaps(shapes)
    pairs = [part for column in (*shapes.frame.T, gap) for part in (column.real, column.imag)]
    frame = PchipInterpolator(shapes.z, np.column_stack(pairs))
    columns = [table.chord, table.twist, table.pitch_axis, table.prebend, table.sweep]
    planform = PchipInterpolator(table.z, np.column_stack([*columns, frame(table.z)]))
    slopes = _shape_slopes(shapes)
    return Surface(
        z_ends=table.z[[0, -1]],
        stations=table.z,
        shape_z=shapes.z,
        knots=(shapes.knots[0], shapes.knots[1]),
        pieces=(_pieces(shapes, 0, slopes[0]), _pieces(shapes, 1, slopes[1])),
        planform=planform,
        is_mirrored=blade.hand == COUNTER_CLOCKWISE,
    )


def _pieces(shapes: StationShapes, side: int, slopes: Complex) -> Complex:
    """(j − 1, n − 1, 4, 4) power coefficients along z and |t| from control points and their slopes at the stations."""
    control = shapes.control[side]
    h = np.diff(shapes.z)[:, None]
    step, low, high = np.diff(control, axis=0) / h, slopes[:-1], slopes[1:]
    powers = [control[:-1], low, (3.0 * step - 2.0 * low - high) / h, (low + high - 2.0 * step) / h**2]
    return shapes.power_form(side, np.stack(powers, axis=1))


def _shape_slopes(shapes: StationShapes) -> tuple[Complex, Complex]:
    """Span-wise slopes of the control points at the stations, shape by shape.

    The rule is Fritsch and Butland's weighted harmonic mean, with the size of the whole change of shape in place of the
    change of one value. To limit every control point by itself would crease the section where one is limited and its
    neighbour is not; so all of them get the same weights, and the nose and the smoothness along the chord are kept.
    Equal neighbours still have no slope, and a shape that turns back has none along the change.

    Source: Fritsch, Butland: A method for constructing local monotone piecewise cubic interpolants, SIAM J. Sci. Stat.
    Comput. 5 (1984), equation for the three-point difference formula.
    """
    n_pressure = shapes.control[0].shape[1]
    values = np.concatenate(shapes.control, axis=1)
    h = np.diff(shapes.z)
    step = np.diff(values, axis=0) / h[:, None]
    if len(step) == 1:
        slopes = np.repeat(step, 2, axis=0)
    else:
        size = np.sqrt(np.mean(np.abs(step) ** 2, axis=1))
        before, after = 2.0 * h[1:] + h[:-1], h[1:] + 2.0 * h[:-1]
        weighted = before * size[1:] + after * size[:-1]
        share = 0.5 * (before + after) / np.where(weighted > 0.0, weighted, np.inf)
        inner = (share * size[1:])[:, None] * step[:-1] + (share * size[:-1])[:, None] * step[1:]
        ends = [_end_slope(step[0], step[1], h[0], h[1]), _end_slope(step[-1], step[-2], h[-1], h[-2])]
        slopes = np.concatenate([ends[0][None], inner, ends[1][None]])
    return slopes[:, :n_pressure], slopes[:, n_pressure:]


def _end_slope(first: Complex, second: Complex, h_first: float, h_second: float) -> Complex:
    """One-sided three-point slope at an end, held back where it would turn round or run too far ahead."""
    slope = ((2.0 * h_first + h_second) * first - h_first * second) / (h_first + h_second)
    if np.vdot(first, slope).real <= 0.0:
        return np.zeros_like(first)
    if np.vdot(first, second).real < 0.0 and np.linalg.norm(slope) > 3.0 * np.linalg.norm(first):
        return np.asarray(3.0 * first)
    return np.asarray(slope)
