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
    excess = trailing_gap(surface, z) - close_gap
    is_open = excess >= 0.0
    change = np.flatnonzero(np.diff(is_open.astype(int)))
    crossing = z[change] + (z[change + 1] - z[change]) * excess[change] / (excess[change] - excess[change + 1])
    bounds = np.concatenate([[z[0]], crossing, [z[-1]]])
    warnings: list[str] = []
    spans: list[OpenSpan] = []
    for i in range(int(not is_open[0]), len(bounds) - 1, 2):
        root_edge, tip_edge = float(bounds[i]), float(bounds[i + 1])
        # the neighbouring closed parts are shared with the next open part: half of them is free
        before = float(bounds[i - 1]) if i == 1 else 0.5 * float(bounds[i - 1] + bounds[i]) if i else root_edge
        last = i + 2 == len(bounds) - 1
        after = tip_edge if i + 1 == len(bounds) - 1 else float(bounds[-1]) if last else 0.5 * float(sum(bounds[i + 1 : i + 3]))
        root, root_apex = _closing(root_edge, -1.0, abs(root_edge - before), size, fixed)
        tip, tip_apex = _closing(tip_edge, 1.0, abs(after - tip_edge), size, fixed)
        if tip - root < LEAST_STRETCH * size:
            warnings.append(
                f"trailing edge: the gap is open over only {tip_edge - root_edge:.3f} m at z = {root_edge:.3f} m and"
                f" was closed there; it is up to {np.max(excess[(z >= root_edge) & (z <= tip_edge)], initial=0.0) + close_gap:.4f} m"
            )
            continue
        for edge, apex, free in ((root_edge, root_apex, abs(root_edge - before)), (tip_edge, tip_apex, abs(after - tip_edge))):
            if apex is None and free > 0.0:
                warnings.append(
                    f"trailing edge: from z = {edge:.3f} m the gap is under close_gap, but there is no room to close it"
                    f" over two element rows; it stays open for {free:.3f} m"
                )
        spans.append(OpenSpan(
            root if root_apex is not None or i == 0 else before,
            tip if tip_apex is not None or i + 1 == len(bounds) - 1 else after,
            root_apex, tip_apex,
        ))
    return tuple(spans), tuple(warnings)


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
