"""Arc lengths and chordwise places on many sections at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import cumulative_simpson

from skinmesh.definition.blade import SUCTION
from skinmesh.surface.loft import Surface

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]

N_INTERVALS = 160
N_NEWTON = 4
TURNING_STRETCH = 0.01  # of a side's arc length


@dataclass(frozen=True, eq=False)
class Ruler:
    """Sections at given z, sampled from the leading to the trailing edge.

    Attributes
    ----------
    z : (m,) float array, m
    tau : (n,) float array
        Shares of the side's arc length at the samples, dense near the nose.
    place : (2, m, n) complex array, m
        Samples in the untwisted section, pressure side first.
    place_rate : (2, m, n) complex array, m
        Their derivative by tau.
    arc : (2, m, n) float array, m
        Arc length from the leading edge.
    twist : (m,) float array, rad
    chord : (m,) float array, m
    """

    z: Floats
    tau: Floats
    place: Complex
    place_rate: Complex
    arc: Floats
    twist: Floats
    chord: Floats
    pitch_axis: Floats

    def length(self, side: int) -> Floats:
        """(m,) arc length of a side, m."""
        return np.asarray(self.arc[_index(side), :, -1])

    def arc_at(self, side: int, tau: Floats) -> Floats:
        """(m,) arc length at one tau a section, m."""
        x = np.clip(tau, 0.0, 1.0)
        return _hermite(self.tau, self.arc[_index(side)], np.abs(self.place_rate[_index(side)]), x)

    def tau_at_arc(self, side: int, arc: Floats) -> Floats:
        """(m,) tau at one arc length a section; held at the ends of the side."""
        values = self.arc[_index(side)]
        j = np.sum(values < arc[:, None], axis=1) - 1
        return _inverse(self.tau, values, np.abs(self.place_rate[_index(side)]), wanted=arc, interval=j)

    def tau_at_distance(self, side: int, distance: Floats, *, turn: Floats) -> Floats:
        """(m,) tau of the points that lie at a distance from the pitch axis towards the trailing edge.

        Parameters
        ----------
        side : int
        distance : (m,) float array, m
            One a section.
        turn : (m,) float array, rad
            Angle between the chord line and the direction along which the distance is measured.

        Returns
        -------
        (m,) float array
            The crossing nearest to the trailing edge; held at the ends of the side.
        """
        direction = np.exp(1j * turn)[:, None]
        values = np.real(self.place[_index(side)] * direction)
        rates = np.real(self.place_rate[_index(side)] * direction)
        below = values < distance[:, None]
        j = np.where(below.any(axis=1), values.shape[1] - 1 - np.argmax(below[:, ::-1], axis=1), -1)
        return _inverse(self.tau, values, rates, wanted=distance, interval=j)

    def turning_density(self, side: int) -> Floats:
        """(m, n) net turning of the section per arc length about each sample, 1/m.

        It is taken over a stretch of TURNING_STRETCH of the side, so that points of a profile that were rounded, and
        wander by a hair, do not count as curvature.
        """
        rate = self.place_rate[_index(side)]
        steps = np.angle(rate[:, 1:] / rate[:, :-1])
        direction = np.concatenate([np.zeros((len(rate), 1)), np.cumsum(steps, axis=1)], axis=1)
        low, high = (np.clip(self.tau + half * TURNING_STRETCH, 0.0, 1.0) for half in (-0.5, 0.5))
        arc = self.arc[_index(side)]
        turned, passed = (
            _at_grid(self.tau, values, high) - _at_grid(self.tau, values, low) for values in (direction, arc)
        )
        return np.asarray(np.abs(turned) / np.maximum(passed, 1e-12))


def measure_sections(surface: Surface, z: Floats) -> Ruler:
    """Sample the sections at z.

    Parameters
    ----------
    surface : Surface
    z : (m,) float array, m

    Returns
    -------
    Ruler
    """
    x = np.linspace(0.0, 1.0, N_INTERVALS + 1)
    tau = 0.5 * (1.0 - np.cos(np.pi * x))
    tau_by_x = 0.5 * np.pi * np.sin(np.pi * x)
    place, rate = np.empty((2, 2, len(z), len(tau)), dtype=complex)
    arc = np.empty((2, len(z), len(tau)))
    for side, sign in enumerate((-1.0, 1.0)):
        # −0.0 and +0.0 are both the nose of the suction side: a hair keeps the pressure side's own slope there
        t = sign * np.maximum(tau, 1e-15)
        own_place, own_rate, _ = surface.section_rates(z[:, None], t[None, :])
        place[side], rate[side] = own_place, sign * own_rate
        arc[side] = cumulative_simpson(np.abs(own_rate) * tau_by_x, x=x, axis=1, initial=0.0)
    return Ruler(z, tau, place, rate, arc, surface.twist(z), surface.chord(z), surface.pitch_axis(z))


def _index(side: int) -> int:
    return 1 if side == SUCTION else 0


def _at_grid(grid: Floats, values: Floats, x: Floats) -> Floats:
    """Interpolate every row of values at the same places."""
    j = np.clip(np.searchsorted(grid, x, side="right") - 1, 0, len(grid) - 2)
    u = (x - grid[j]) / (grid[j + 1] - grid[j])
    return np.asarray(values[:, j] * (1.0 - u) + values[:, j + 1] * u)


def _hermite(grid: Floats, values: Floats, rates: Floats, x: Floats) -> Floats:
    j = np.clip(np.searchsorted(grid, x, side="right") - 1, 0, len(grid) - 2)
    h, u = grid[j + 1] - grid[j], (x - grid[j]) / (grid[j + 1] - grid[j])
    rows = np.arange(len(x))
    return _cubic(u, h, values[rows, j], values[rows, j + 1], rates[rows, j], rates[rows, j + 1])


def _cubic(u: Floats, h: Floats, v0: Floats, v1: Floats, d0: Floats, d1: Floats) -> Floats:
    return np.asarray(
        v0 * (1 + 2 * u) * (1 - u) ** 2 + v1 * u**2 * (3 - 2 * u) + h * u * (1 - u) * (d0 * (1 - u) - d1 * u)
    )


def _inverse(grid: Floats, values: Floats, rates: Floats, *, wanted: Floats, interval: NDArray[np.int64]) -> Floats:
    """Grid place at which the Hermite interpolant of an interval takes the wanted value, by secant-bracketed Newton."""
    rows = np.arange(len(wanted))
    j = np.clip(interval, 0, len(grid) - 2)
    h = grid[j + 1] - grid[j]
    v0, v1, d0, d1 = values[rows, j], values[rows, j + 1], rates[rows, j], rates[rows, j + 1]
    u = np.clip((wanted - v0) / np.where(v1 == v0, 1.0, v1 - v0), 0.0, 1.0)
    for _ in range(N_NEWTON):
        slope = 6 * (v1 - v0) * u * (1 - u) + h * (d0 * (1 - u) * (1 - 3 * u) + d1 * u * (3 * u - 2))
        u = np.clip(u - (_cubic(u, h, v0, v1, d0, d1) - wanted) / np.where(slope == 0.0, 1.0, slope), 0.0, 1.0)
    tau = grid[j] + u * h
    return np.asarray(np.where(interval < 0, 0.0, np.where(interval > len(grid) - 2, 1.0, tau)))
