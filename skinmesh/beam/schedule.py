"""The laminates of all strips at given z, from the ply schedule itself: exact ends, exact thickness."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.walls import WallLaminates, condense_laminates
from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition
from skinmesh.definition.names import resolve_cover
from skinmesh.frozen import freeze_array
from skinmesh.laminate.theory import reduced_stiffness, turned_stiffness
from skinmesh.skin.plyspans import layer_spans
from skinmesh.skin.skinmap import SkinMap

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

TOWARDS_TIP = 1e-9
"""A section at the very z at which something ends is that of its tip side: by this share of the span."""


@dataclass(frozen=True, eq=False)
class LaidStrips:
    """Laminates of strips at z.

    Attributes
    ----------
    laminates : WallLaminates
        One for every entry of ``index``.
    index : (m, n_strips) int array
        Into ``laminates``; −1 where no ply lies.
    thickness : (m, n_strips) float array, m
    """

    laminates: WallLaminates
    index: Ints
    thickness: Floats

    def __post_init__(self) -> None:
        freeze_array(self, "index", shape=(None, None), dtype=np.int64)
        freeze_array(self, "thickness", shape=self.index.shape)


def strip_spans(skin: SkinMap) -> tuple[tuple[float, float], ...]:
    """Ends of every strip along z, m."""
    z = skin.rows.z
    spans = [(float(z[0]), float(z[-1]))] * len(skin.strips)
    for web in skin.webs:
        spans[skin.web_strip(web)] = (float(z[web.first_row]), float(z[web.last_row]))
    return tuple(spans)


def tipward(z: Floats, span: tuple[float, float]) -> Floats:
    """A place just beyond each z, and just before the tip, where every end is decided."""
    step = TOWARDS_TIP * (span[1] - span[0])
    return np.asarray(np.minimum(z + step, span[1] - step))


def lay_strips(blade: BladeDefinition, skin: SkinMap, z: Floats) -> LaidStrips:
    """Lay the ply schedule on the strips at z.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap
    z : (m,) float array, m

    Returns
    -------
    LaidStrips
    """
    spans = strip_spans(skin)
    here = tipward(z, (float(skin.rows.z[0]), float(skin.rows.z[-1])))
    covers = [frozenset().union(*(resolve_cover(name, blade.layout) for name in ply.covers)) for ply in blade.plies]
    keys = [
        (tuple(i for i, cover in enumerate(covers) if strip.name in cover), span)
        for strip, span in zip(skin.strips, spans, strict=True)
    ]
    distinct = {key: k for k, key in enumerate(dict.fromkeys(keys))}
    columns = [_column(blade, *key, here) for key in distinct]
    kind = np.array([distinct[key] for key in keys])
    thickness = np.stack([column[-1] for column in columns])[kind].T
    # all laminates of one kind, root to tip, then those of the next
    flat = [np.concatenate(parts) for parts in zip(*columns, strict=True)]
    is_laid = flat[-1] > 0.0
    number = np.where(is_laid, np.cumsum(is_laid) - 1, -1).reshape(len(columns), len(z))
    laminates = condense_laminates(*(values[is_laid] for values in flat[:-1]))
    return LaidStrips(laminates, number[kind].T, thickness)


def _column(
    blade: BladeDefinition, plies: tuple[int, ...], span: tuple[float, float], z: Floats
) -> tuple[Floats, Floats, Floats, Floats, Floats]:
    """A, B, D, mass moments and thickness of one strip at every z."""
    stretches = [(i, stretch) for i in plies for stretch in layer_spans(blade.plies[i], span)]
    if not stretches:
        zeros = np.zeros((len(z), 3, 3))
        return zeros, zeros, zeros, zeros[:, 0], zeros[:, 0, 0]
    owner = np.array([i for i, _ in stretches])
    ends = np.array([[stretch.root, stretch.tip] for _, stretch in stretches])
    used = dict.fromkeys(owner.tolist())
    thickness_of = {i: blade.plies[i].thickness(z) for i in used}
    lies = (z >= ends[:, :1]) & (z < ends[:, 1:])
    thickness = np.where(lies, np.stack([thickness_of[i] for i in owner.tolist()]), 0.0)
    total = thickness.sum(axis=0)
    height = 0.5 * total - (np.cumsum(thickness, axis=0) - 0.5 * thickness)
    sign = -1.0 if blade.hand == COUNTER_CLOCKWISE else 1.0
    of_ply = turned_stiffness(
        reduced_stiffness([ply.material for ply in blade.plies]), sign * np.array([ply.angle for ply in blade.plies])
    )
    density = np.array([ply.material.density for ply in blade.plies])[owner]
    weights = (thickness, thickness * height, thickness * height**2 + thickness**3 / 12.0)
    A, B, D = (np.einsum("lz,lij->zij", weight, of_ply[owner]) for weight in weights)
    mass = np.stack([density @ weight for weight in weights], axis=1)
    return A, B, D, mass, total
