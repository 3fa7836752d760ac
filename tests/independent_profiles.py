"""Profiles as dense polylines, for the independent integration; shares no code with skinmesh."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
from scipy.interpolate import CubicSpline
from scipy.optimize import brentq

PRESSURE, SUCTION = "pressure", "suction"
SIDES = (PRESSURE, SUCTION)
N_TAU = 1201  # samples a side; a polyline through them is short of the curve by less than 1e-6
TAU = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, N_TAU)))


def read_profile_points(path: Path) -> np.ndarray:
    """Loop of a coordinate file from the suction trailing edge round the nose, as x + i y."""
    rows: list[tuple[float, float]] = []
    for line in path.read_text(encoding="utf-8").splitlines():
        try:
            x, y = (float(word) for word in line.split())
        except ValueError:
            continue
        rows.append((x, y))
    if rows[0][0] > 1.5:  # a line of counts: two blocks, each from leading to trailing edge
        n = round(rows[0][0])
        first, second = rows[1 : n + 1], rows[n + 1 :]
        rows = first[::-1] + second[1:]
    loop = np.array([complex(*row) for row in rows])
    return loop if np.mean(loop.imag[: len(loop) // 2]) > np.mean(loop.imag[len(loop) // 2 :]) else loop[::-1]


def naca_points(code: str, gap: float | None) -> np.ndarray:
    """Loop of a NACA 4-digit section (Report 460), thickness laid off normal to the mean line."""
    m, p, t = int(code[0]) / 100, int(code[1]) / 10, int(code[2:]) / 100
    x = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, 401)))
    half = 5 * t * (0.2969 * np.sqrt(x) - 0.1260 * x - 0.3516 * x**2 + 0.2843 * x**3 - 0.1015 * x**4)
    if gap is not None:
        half += x * (gap / 2 - 5 * t * 0.0021)
    line, slope = np.zeros_like(x), np.zeros_like(x)
    if m and p:
        front = x < p
        line = np.where(front, m / p**2 * (2 * p * x - x**2), m / (1 - p) ** 2 * (1 - 2 * p + 2 * p * x - x**2))
        slope = np.where(front, 2 * m / p**2 * (p - x), 2 * m / (1 - p) ** 2 * (p - x))
    normal = 1j * np.exp(1j * np.arctan(slope))
    upper, lower = x + 1j * line + half * normal, x + 1j * line - half * normal
    return np.concatenate([upper[::-1], lower[1:]])


def unit_sides(loop: np.ndarray) -> dict[str, np.ndarray]:
    """(N_TAU,) points of each side at equal shares of arc length, the chord from 0 to 1."""
    u = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(loop)))])
    spline = CubicSpline(u, np.column_stack([loop.real, loop.imag]))

    def at(v: np.ndarray) -> np.ndarray:
        xy = spline(v)
        return xy[..., 0] + 1j * xy[..., 1]

    tail = 0.5 * (loop[0] + loop[-1])
    fine = np.linspace(0.0, u[-1], 200001)
    nose_u = fine[np.argmax(np.abs(at(fine) - tail))]
    nose = at(nose_u)
    keeps_axes = abs(nose) < 0.01 * tail.real and abs(tail.imag) < 0.01 * tail.real
    sides = {}
    for side, end in ((SUCTION, 0.0), (PRESSURE, u[-1])):
        # shares of u that grow as the square, so that the nose is fine
        points = at(nose_u + (end - nose_u) * np.linspace(0.0, 1.0, 20001) ** 1.5)
        points = points / tail.real if keeps_axes else (points - nose) / (tail - nose)
        sides[side] = _at_equal_shares(points)
    return sides


def _at_equal_shares(points: np.ndarray) -> np.ndarray:
    arc = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(points)))])
    share = arc / arc[-1]
    return np.interp(TAU, share, points.real) + 1j * np.interp(TAU, share, points.imag)


def largest_thickness(sides: Mapping[str, np.ndarray]) -> float:
    """Largest thickness across the chord line over the chord."""
    x = np.linspace(0.0, 1.0, 4001)
    y = {s: np.interp(x, np.maximum.accumulate(p.real), p.imag) for s, p in sides.items()}
    return float(np.max(y[SUCTION] - y[PRESSURE]))


def _squeezed(sides: Mapping[str, np.ndarray], factor: float) -> dict[str, np.ndarray]:
    return {s: p.real + 1j * factor * p.imag for s, p in sides.items()}


def station_shapes(z: np.ndarray, names: list[str], ratios: np.ndarray, profiles: Mapping[str, dict[str, np.ndarray]]):
    """z and sides of the stations that define a shape."""
    named = {}
    for i, name in enumerate(names):
        if name:
            sides = profiles[name]
            if np.isfinite(ratios[i]):
                sides = _squeezed(sides, ratios[i] / largest_thickness(sides))
                sides = {s: _at_equal_shares(p) for s, p in sides.items()}
            named[i] = sides
    shapes = dict(named)
    for i, name in enumerate(names):
        if name or not np.isfinite(ratios[i]):
            continue
        a = named[max(j for j in named if j < i)]
        b = named[min(j for j in named if j > i)]

        def blend(f: float, a: Mapping[str, np.ndarray] = a, b: Mapping[str, np.ndarray] = b) -> dict[str, np.ndarray]:
            return {s: (1 - f) * a[s] + f * b[s] for s in SIDES}

        ends = largest_thickness(a) - ratios[i], largest_thickness(b) - ratios[i]
        if ends[0] * ends[1] < 0:
            shapes[i] = blend(brentq(lambda f: largest_thickness(blend(f)) - ratios[i], 0.0, 1.0))  # noqa: B023
        else:
            near = a if abs(ends[0]) <= abs(ends[1]) else b
            shapes[i] = _squeezed(near, ratios[i] / largest_thickness(near))
    order = sorted(shapes)
    return z[order], {s: np.array([shapes[i][s] for i in order]) for s in SIDES}
