"""Where each layer of each ply begins and ends along the span."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import BladeDefinition, PlyRule
from skinmesh.definition.spanwise import Spanwise

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class LayerSpan:
    """One stretch of one layer of a ply.

    Attributes
    ----------
    layer : int
        From one, the first one nearest to the +e3 face.
    root, tip : float, m
    """

    layer: int
    root: float
    tip: float


def layer_spans(ply: PlyRule, span: tuple[float, float]) -> tuple[LayerSpan, ...]:
    """Work out the stretches of every layer of a ply.

    Layer j lies where the count is at least j − ½, and, with steps, from ``(j − 1) step_root`` after the span's start
    to ``(j − 1) step_tip`` before its end.

    Parameters
    ----------
    ply : PlyRule
    span : (float, float), m
        Span of the ply, or of what it covers.

    Returns
    -------
    tuple of LayerSpan
        Layer by layer, each root to tip.
    """
    low, high = span if ply.span is None else (max(span[0], ply.span[0]), min(span[1], ply.span[1]))
    spans = []
    for layer in range(1, int(np.floor(np.max(ply.count.value) + 0.5)) + 1):
        start, stop = low + (layer - 1) * ply.step_root, high - (layer - 1) * ply.step_tip
        for root, tip in _stretches_above(ply.count, layer - 0.5, low, high):
            if min(tip, stop) > max(root, start):
                spans.append(LayerSpan(layer, max(root, start), min(tip, stop)))
    return tuple(spans)


def ply_ends(blade: BladeDefinition) -> tuple[tuple[float, str], ...]:
    """All places at which a layer ends within the blade: z and the ply's name, each place once.

    Parameters
    ----------
    blade : BladeDefinition

    Returns
    -------
    tuple of (float, str)
    """
    whole = (float(blade.stations.z[0]), float(blade.stations.z[-1]))
    ends: dict[float, str] = {}
    for ply in blade.plies:
        for span in layer_spans(ply, whole):
            for z in (span.root, span.tip):
                if whole[0] < z < whole[1]:
                    ends.setdefault(round(z, 9), ply.name)
    return tuple(sorted(ends.items()))


def _stretches_above(count: Spanwise, threshold: float, low: float, high: float) -> list[tuple[float, float]]:
    """Stretches of [low, high] on which a piecewise linear function is at least the threshold."""
    z = np.union1d(np.clip(count.z, low, high), [low, high])
    excess = count(z) - threshold
    change = np.flatnonzero(excess[:-1] * excess[1:] < 0.0)
    crossing = z[change] + np.diff(z)[change] * excess[change] / (excess[change] - excess[change + 1])
    z = np.union1d(z, crossing)
    keep = count(0.5 * (z[1:] + z[:-1])) >= threshold
    stretches: list[tuple[float, float]] = []
    for root, tip in zip(z[:-1][keep], z[1:][keep], strict=True):
        if stretches and stretches[-1][1] == root:
            stretches[-1] = (stretches[-1][0], float(tip))
        else:
            stretches.append((float(root), float(tip)))
    return stretches
