"""Where the trailing edge is open and where it is closed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.surface.loft import Surface

Floats = NDArray[np.float64]

N_SAMPLES = 60  # between two stations
CLOSING_LENGTH = 2.0  # in element sizes: the gap closes over two element rows
LEAST_STRETCH = 0.5  # a closing shorter than this, in element sizes, begins at the next row instead


@dataclass(frozen=True)
class OpenSpan:
    """A part of the span with a blunt trailing edge.

    Attributes
    ----------
    root, tip : float, m
        Ends of the part at its full gap.
    root_apex, tip_apex : float or None, m
        Where the gap has closed to nothing beyond each end; None where the end is that of the blade.
    """

    root: float
    tip: float
    root_apex: float | None
    tip_apex: float | None


def trailing_gap(surface: Surface, z: Floats) -> Floats:
    """Distance of the two trailing edges at z, m, of the shape of z."""
    return np.asarray(np.abs(surface.section(z, np.ones_like(z)) - surface.section(z, -np.ones_like(z))))


def find_open_spans(
    surface: Surface, close_gap: float, *, size: float, fixed: Floats
) -> tuple[tuple[OpenSpan, ...], tuple[str, ...]]:
    """Find the parts of the span whose trailing gap stays open, and where each closes.

    Parameters
    ----------
    surface : Surface
    close_gap : float, m
        A gap thinner than this is closed.
    size : float, m
        Element size near the trailing edge.
    fixed : (k,) float array, m
        z of the rows that exist anyway: no closing may run across one.

    Returns
    -------
    tuple of OpenSpan
        Root first.
    tuple of str
        Warnings.
    """
    stations = surface.stations
    share = np.linspace(0.0, 1.0, N_SAMPLES, endpoint=False)
    z = np.append((stations[:-1, None] + share * np.diff(stations)[:, None]).ravel(), stations[-1])
    gap = trailing_gap(surface, z)
    spans: list[OpenSpan] = []
    warnings: list[str] = []
    for part in _open_parts(z, gap - close_gap):
        root, root_apex = _closing(part.root, -1.0, part.room_before, size, fixed)
        tip, tip_apex = _closing(part.tip, 1.0, part.room_after, size, fixed)
        if tip - root < LEAST_STRETCH * size:
            largest = gap[(z >= part.root) & (z <= part.tip)].max(initial=close_gap)
            warnings.append(
                f"trailing edge: between z = {part.root:.3f} and {part.tip:.3f} m the gap of up to {largest:.4f} m is"
                " open over less than an element row, and was closed"
            )
            continue
        if root_apex is None and part.room_before > 0.0:
            root = part.root - part.room_before
            warnings.append(_no_room(root, part.root))
        if tip_apex is None and part.room_after > 0.0:
            tip = part.tip + part.room_after
            warnings.append(_no_room(part.tip, tip))
        spans.append(OpenSpan(root, tip, root_apex, tip_apex))
    return tuple(spans), tuple(warnings)


@dataclass(frozen=True)
class _OpenPart:
    """A stretch with an open gap, and how much of the closed stretches beside it its closings may take."""

    root: float
    tip: float
    room_before: float
    room_after: float


def _open_parts(z: Floats, excess: Floats) -> list[_OpenPart]:
    is_open = excess >= 0.0
    change = np.flatnonzero(is_open[:-1] != is_open[1:])
    crossing = z[change] + (z[change + 1] - z[change]) * excess[change] / (excess[change] - excess[change + 1])
    bounds = [float(z[0]), *crossing.tolist(), float(z[-1])]
    first = 0 if is_open[0] else 1
    parts = []
    for i in range(first, len(bounds) - 1, 2):
        before = bounds[i] - bounds[i - 1] if i else 0.0
        after = bounds[i + 2] - bounds[i + 1] if i + 2 < len(bounds) else 0.0
        # a closed stretch between two open ones serves both
        before *= 0.5 if i - 1 > 0 else 1.0
        after *= 0.5 if i + 2 < len(bounds) - 1 else 1.0
        parts.append(_OpenPart(bounds[i], bounds[i + 1], before, after))
    return parts


def _no_room(root: float, tip: float) -> str:
    return (
        f"trailing edge: from z = {root:.3f} to {tip:.3f} m the gap is under close_gap, but the stretch is too short to"
        " close it; it stays open"
    )


def _closing(edge: float, sense: float, free: float, size: float, fixed: Floats) -> tuple[float, float | None]:
    """Where the closing beyond an edge begins and where its apex lies, between two fixed rows."""
    length = min(CLOSING_LENGTH * size, free)
    if length < LEAST_STRETCH * size:
        return edge, None
    ahead = np.sort((fixed - edge) * sense)
    ahead = ahead[(ahead > 1e-9) & (ahead <= free + 1e-9)]
    near = ahead[ahead < 1.5 * length]
    if len(near) == 0:
        return edge, edge + sense * length
    if near[0] >= LEAST_STRETCH * size:
        return edge, edge + sense * float(near[0])
    # too near: the gap stays open up to that row, and closes beyond it
    begin = edge + sense * float(near[0])
    return _closing(begin, sense, free - float(near[0]), size, fixed)
