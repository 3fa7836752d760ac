"""Where the trailing edge is open and where it is closed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.surface.loft import Surface

Floats = NDArray[np.float64]

N_SAMPLES = 60  # between two stations
CLOSING_LENGTH = 2.0  # in element sizes: the gap closes over two element rows
INSIDE_SHARE = 0.4  # of an open part that a closing at one of its ends may take
MUCH_WIDER = 1.5  # a closing that begins at a gap this many times close_gap is worth a warning
TINY = 1e-6
NO_GAP = 1e-4  # of the chord: a gap thinner than this is closed, whatever was asked
LEAST_STRETCH = 0.5  # in element sizes: no closing is shorter, and none leaves a shorter stretch before a fixed row


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
    for part in _open_parts(z, gap - np.maximum(close_gap, NO_GAP * surface.chord(z))):
        root, root_apex = _closing(part, -1.0, size, fixed)
        tip, tip_apex = _closing(part, 1.0, size, fixed)
        if tip - root < LEAST_STRETCH * size:
            largest = gap[(z >= part.root) & (z <= part.tip)].max(initial=close_gap)
            warnings.append(
                f"trailing edge: between z = {part.root:.3f} and {part.tip:.3f} m the gap of up to {largest:.4f} m is"
                " open over less than an element row, and was closed"
            )
            continue
        spans.append(OpenSpan(root, tip, root_apex, tip_apex))
        for start, apex in ((root, root_apex), (tip, tip_apex)):
            wide = float(trailing_gap(surface, np.array([start]))[0])
            if apex is not None and wide > MUCH_WIDER * max(close_gap, NO_GAP * float(surface.chord(start))):
                warnings.append(
                    f"trailing edge: between z = {min(start, apex):.3f} and {max(start, apex):.3f} m it closes from a"
                    f" gap of {wide:.4f} m, for want of room where the gap is under close_gap"
                )
    return tuple(spans), tuple(warnings)


def closing_pull(surface: Surface, z: Floats, closing: Floats) -> Floats:
    """How far the suction trailing edge is moved to close the gap; the pressure one is moved against it.

    Where a gap closes, it shrinks in proportion from its full width at the open end to nothing at the apex, whatever
    the surface's own gap does there, so that no element of the trailing base is left without width.

    Parameters
    ----------
    surface : Surface
    z : (m,) float array, m
        Increasing.
    closing : (m,) float array
        0 open, 1 closed, between them where the gap closes.

    Returns
    -------
    (m, 3) float array, m
    """
    across = surface.points(z, np.ones_like(z)) - surface.points(z, -np.ones_like(z))
    wanted = across * (closing == 0.0)[:, None]
    is_open = np.flatnonzero(closing == 0.0)
    between = np.flatnonzero((closing > 0.0) & (closing < 1.0))
    if len(between):
        # the nearest open level is the end at which the closing begins
        begin = is_open[np.argmin(np.abs(is_open[:, None] - between), axis=0)]
        wanted[between] = across[begin] * (1.0 - closing[between])[:, None]
    return np.asarray(0.5 * (wanted - across))


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


def _closing(part: _OpenPart, sense: float, size: float, fixed: Floats) -> tuple[float, float | None]:
    """Where the closing at one end of an open part begins and where its apex lies, with no fixed row between.

    Distances are counted from the end outwards: the gap is open at negative ones. The closing takes its length beyond
    the end where there is room, and otherwise from the open part.
    """
    end, room = (part.tip, part.room_after) if sense > 0.0 else (part.root, part.room_before)
    if room <= TINY * size:  # open up to the end of the blade
        return end + sense * room, None
    length, least, inside = CLOSING_LENGTH * size, LEAST_STRETCH * size, INSIDE_SHARE * (part.tip - part.root)
    rows = (fixed - end) * sense
    inner = float(np.max(rows[rows <= TINY * size], initial=-np.inf))  # nearest fixed row on the open side
    start = inner if inner > -min(least, inside) else 0.0
    outer = min(room, float(np.min(rows[rows > start + TINY * size], initial=np.inf)))
    if outer - start >= least:
        apex = outer if outer < start + length + least else start + length
    else:
        apex = outer
        start = max(apex - length, -inside, inner)
        if start - inner < least:
            start = inner
    return end + sense * start, end + sense * apex
