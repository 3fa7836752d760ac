"""Seams that want to lie too near to each other, put apart."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def spread_seams(wanted: Floats, is_edge: NDArray[np.bool_], spacing: Floats) -> Floats:
    """Put the seams of a side at least a spacing apart.

    Edges of regions come first: they give way to each other alone, and to the room that the feet between them need.
    Feet of webs then take their places between the edges. So the line of a web's foot never moves a cap, least of all
    beyond the web's own span.

    Parameters
    ----------
    wanted : (m, k) float array, m
        Arc lengths, both ends of the side included.
    is_edge : (k,) bool array
        Both ends included.
    spacing : (m,) float array, m
        No more than the side has room for.

    Returns
    -------
    (m, k) float array, m

    Examples
    --------
    >>> wanted = np.array([[0.0, 0.4, 0.5, 0.52, 1.0]])
    >>> edges = np.array([True, True, False, True, True])
    >>> spread_seams(wanted, edges, np.array([0.1]))
    array([[0.  , 0.36, 0.46, 0.56, 1.  ]])
    """
    steps = spacing[:, None] * np.arange(wanted.shape[1])
    kept = wanted.copy()
    kept[:, is_edge] = _apart(wanted[:, is_edge], steps[:, is_edge])
    free = np.flatnonzero(~is_edge)
    if len(free) == 0:
        return kept
    anchored = np.where(is_edge, kept - steps, -np.inf), np.where(is_edge, kept - steps, np.inf)
    lowest = np.maximum.accumulate(anchored[0], axis=1) + steps
    highest = np.minimum.accumulate(anchored[1][:, ::-1], axis=1)[:, ::-1] + steps
    kept[:, free] = np.clip(wanted, lowest, highest)[:, free]
    return _apart(kept, steps)


def _apart(arc: Floats, steps: Floats) -> Floats:
    """Both orders of pushing keep the steps; so does their mean, and it favours neither end."""
    rising = _push_down(_push_up(arc, steps), steps)
    falling = _push_up(_push_down(arc, steps), steps)
    return np.asarray(0.5 * (rising + falling))


def _push_up(arc: Floats, steps: Floats) -> Floats:
    out = np.maximum.accumulate(arc - steps, axis=1) + steps
    return np.asarray(np.minimum(out, arc[:, -1:] - (steps[:, -1:] - steps)))


def _push_down(arc: Floats, steps: Floats) -> Floats:
    out = np.minimum.accumulate((arc - steps)[:, ::-1], axis=1)[:, ::-1] + steps
    return np.asarray(np.maximum(out, arc[:, :1] + (steps - steps[:, :1])))
