"""Which plies lie on which strip at which element row, and the stacks that this makes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition, PlyRule
from skinmesh.definition.spanwise import Spanwise
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.skin.plyspans import LayerSpan, layer_spans
from skinmesh.skin.skinmap import SkinMap

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

NO_STACK = -1
BAND = 0.08  # a thickness given along the span is held constant over bands within which it changes by at most this
THICKNESS_STEP = 1e-9  # m; thicknesses are rounded to this, so that equal bands are equal


@dataclass(frozen=True, eq=False)
class StackTable:
    """The stacks of the blade and where they lie.

    Attributes
    ----------
    stacks : tuple of Stack
        Root to tip, leading to trailing.
    index : (n_strips, n_cells) int array
        Stack of each strip at each element row, NO_STACK where no ply lies.
    largest_move : float, m
        Largest distance between a wanted ply end and the element row it was moved to.
    move_place : str
    warnings : tuple of str
    """

    stacks: tuple[Stack, ...]
    index: Ints
    largest_move: float
    move_place: str
    warnings: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class _Laid:
    """Thickness of every layer of a ply at every element row, over one span."""

    thickness: Floats  # (n_layers, n_cells)
    move: float
    place: str
    lost: tuple[str, ...]


def cover_strips(blade: BladeDefinition, skin: SkinMap, covered: Callable[[PlyRule], frozenset[str]]) -> StackTable:
    """Lay the ply schedule on the strips.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap
    covered : callable
        Full names of the regions that a ply covers.

    Returns
    -------
    StackTable
    """
    z = skin.levels.corner_z
    n_cells = len(z) - 1
    index = np.full((len(skin.strips), n_cells), NO_STACK)
    if not blade.plies:
        return StackTable((), index, 0.0, "", ())
    covers = [covered(ply) for ply in blade.plies]
    spans = _strip_spans(skin)
    laid = {
        (i, span): _lay(ply, span, z)
        for span in dict.fromkeys(spans)
        for i, ply in enumerate(blade.plies)
        if any(strip.name in covers[i] and own == span for strip, own in zip(skin.strips, spans, strict=True))
    }
    signs = -1.0 if blade.hand == COUNTER_CLOCKWISE else 1.0
    found: dict[Stack, int] = {}
    known: dict[tuple[tuple[int, ...], tuple[float, float]], Ints] = {}
    for s, (strip, span) in enumerate(zip(skin.strips, spans, strict=True)):
        plies = tuple(i for i in range(len(blade.plies)) if strip.name in covers[i])
        if not plies:
            continue
        if (plies, span) not in known:
            known[plies, span] = _stack_column(blade, plies, [laid[i, span].thickness for i in plies], signs, found)
        index[s] = known[plies, span]
    stacks, index = _renumber(tuple(found), index, _leading_first(skin))
    worst = max(laid.values(), key=lambda entry: entry.move, default=None)
    warnings = tuple(dict.fromkeys(text for entry in laid.values() for text in entry.lost))
    return StackTable(stacks, index, worst.move if worst else 0.0, worst.place if worst else "", warnings)


def _strip_spans(skin: SkinMap) -> list[tuple[float, float]]:
    z = skin.rows.z
    spans = [(float(z[0]), float(z[-1]))] * len(skin.strips)
    for web in skin.webs:
        spans[skin.web_strip(web)] = (float(z[web.first_row]), float(z[web.last_row]))
    return spans


def _lay(ply: PlyRule, span: tuple[float, float], z: Floats) -> _Laid:
    stretches = layer_spans(ply, span)
    n_layers = max((stretch.layer for stretch in stretches), default=0)
    out = np.zeros((n_layers, len(z) - 1))
    if not stretches:
        text = f"ply '{ply.name}': lies nowhere between z = {span[0]:.3f} and {span[1]:.3f} m"
        return _Laid(out, 0.0, "", (text,))
    ends = np.array([[stretch.root, stretch.tip] for stretch in stretches])
    inside = np.flatnonzero((z >= span[0] - 1e-9) & (z <= span[1] + 1e-9))
    rows = inside[np.argmin(np.abs(ends[:, :, None] - z[inside]), axis=2)]
    move = np.abs(z[rows] - ends)
    at = np.unravel_index(int(np.argmax(move)), move.shape)
    place = f"ply '{ply.name}', layer {stretches[at[0]].layer}, {('root', 'tip')[at[1]]} end at z = {ends[at]:.3f} m"
    bands = _bands(ply.thickness, z)
    lost = _never_laid(ply, span, {stretch.layer for stretch in stretches})
    for stretch, (start, stop) in zip(stretches, rows, strict=True):
        if start == stop:
            lost.append(_lost_text(ply, stretch))
        out[stretch.layer - 1, start:stop] = bands[start:stop]
    return _Laid(out, float(move[at]), place, tuple(lost))


def _never_laid(ply: PlyRule, span: tuple[float, float], laid: set[int]) -> list[str]:
    """Name the layers that steps leave no room for."""
    low, high = span if ply.span is None else (max(span[0], ply.span[0]), min(span[1], ply.span[1]))
    z = np.union1d(np.clip(ply.count.z, low, high), [low, high])
    wanted = set(range(1, int(np.floor(np.max(ply.count(z)) + 0.5)) + 1))
    missing = sorted(wanted - laid)
    if not missing:
        return []
    which = f"layers {missing[0]} to {missing[-1]}" if len(missing) > 1 else f"layer {missing[0]}"
    return [f"ply '{ply.name}': {which} would end before they begin, with these steps and this span, and are left out"]


def _lost_text(ply: PlyRule, stretch: LayerSpan) -> str:
    return (
        f"ply '{ply.name}', layer {stretch.layer}: from z = {stretch.root:.3f} to {stretch.tip:.3f} m it is shorter"
        " than an element row and is left out"
    )


def _bands(thickness: Spanwise, z: Floats) -> Floats:
    """(n_cells,) thickness of each element row, constant over bands and equal in the mean to the wanted one."""
    if thickness.is_constant:
        return np.full(len(z) - 1, round(float(thickness.value[0]) / THICKNESS_STEP) * THICKNESS_STEP)
    grid = np.union1d(z, thickness.z)
    values = thickness(grid)
    area = np.concatenate([[0.0], np.cumsum(0.5 * (values[1:] + values[:-1]) * np.diff(grid))])
    change = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(np.log(values))))])
    # the span is cut where the summed change passes whole bands, and where the slope breaks
    passed = np.interp(0.5 * (z[1:] + z[:-1]), grid, change) / BAND
    piece = np.searchsorted(thickness.z, 0.5 * (z[1:] + z[:-1]))
    key = np.floor(passed) * (len(thickness.z) + 1) + piece
    starts = np.concatenate([[0], np.flatnonzero(np.diff(key)) + 1, [len(z) - 1]])
    integral = np.interp(z[starts], grid, area)
    # np.interp of an integral is exact only at grid points, and z is among them
    mean = np.diff(integral) / np.diff(z[starts])
    rounded = np.round(mean / THICKNESS_STEP) * THICKNESS_STEP
    return np.repeat(rounded, np.diff(starts))


def _stack_column(
    blade: BladeDefinition, plies: tuple[int, ...], thickness: list[Floats], sign: float, found: dict[Stack, int]
) -> Ints:
    """(n_cells,) number of the stack at every element row; new stacks are entered into ``found``."""
    owner = np.concatenate([np.full(len(t), i) for i, t in zip(plies, thickness, strict=True)])
    columns, inverse = np.unique(np.vstack(thickness), axis=1, return_inverse=True)
    numbers = np.full(columns.shape[1], NO_STACK)
    for c, column in enumerate(columns.T):
        layers = tuple(
            Layer(
                blade.plies[owner[k]].name,
                blade.plies[owner[k]].material,
                float(column[k]),
                # + 0.0 makes −0.0 and 0.0 one angle
                sign * blade.plies[owner[k]].angle + 0.0,
            )
            for k in np.flatnonzero(column)
        )
        if layers:
            numbers[c] = found.setdefault(Stack(layers), len(found))
    return np.asarray(numbers[inverse.ravel()])


def _leading_first(skin: SkinMap) -> Ints:
    """Strips in the order leading to trailing edge, suction before pressure side, then base and webs."""
    nose = skin.seams.labels.index("leading edge")
    n_gaps = skin.n_seams - 1
    distance = np.concatenate([np.arange(nose, 0, -1) - 0.5, np.arange(n_gaps - nose)])
    return np.concatenate([np.argsort(distance, kind="stable"), np.arange(n_gaps, len(skin.strips))])


def _renumber(stacks: tuple[Stack, ...], index: Ints, order: Ints) -> tuple[tuple[Stack, ...], Ints]:
    """Number the stacks root to tip, leading to trailing."""
    seen, first = np.unique(index[order].T.ravel(), return_index=True)
    ranked = seen[np.argsort(first)]
    ranked = ranked[ranked != NO_STACK]
    new = np.full(len(stacks) + 1, NO_STACK)
    new[ranked] = np.arange(len(ranked))
    return tuple(stacks[i] for i in ranked), new[index]
