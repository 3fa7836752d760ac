"""The developed skin as polygons: regions, and the flat pattern of every ply."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
import shapely
from numpy.typing import NDArray

from skinmesh.definition.blade import BladeDefinition, PlyRule
from skinmesh.skin.plyspans import layer_spans
from skinmesh.skin.skinmap import SkinMap

Floats = NDArray[np.float64]


def region_polygons(skin: SkinMap) -> Mapping[str, shapely.Geometry]:
    """Outline of every skin region on the developed skin.

    Parameters
    ----------
    skin : SkinMap

    Returns
    -------
    mapping of str to shapely geometry
        Full region name → polygons in (arc length from the leading edge, z), m; the pressure side has negative arc
        lengths, and the trailing base lies beyond the suction trailing edge.
    """
    parts: dict[str, list[shapely.Geometry]] = {}
    z = skin.levels.corner_z
    arc = skin.seams.arc[::2]
    for k, strip in enumerate(skin.strips[: skin.base_strip]):
        parts.setdefault(strip.name, []).append(_band(arc[:, k], arc[:, k + 1], z))
    for polygon in _base_bands(skin):
        parts.setdefault("trailing base", []).append(polygon)
    return {name: shapely.union_all(polygons) for name, polygons in parts.items()}


def skin_outline(skin: SkinMap) -> shapely.Geometry:
    """Outline of both sides of the developed skin and of the trailing base, from their outer seams alone."""
    z = skin.levels.corner_z
    arc = skin.seams.arc[::2]
    return shapely.union_all([_band(arc[:, 0], arc[:, -1], z), *_base_bands(skin)])


def ply_areas(
    blade: BladeDefinition, skin: SkinMap, covered: Callable[[PlyRule], frozenset[str]]
) -> Mapping[str, float]:
    """Flat-pattern area of each ply of the skin and the webs, all layers together, at their exact ends.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap
    covered : callable
        Full names of the regions that a ply covers.

    Returns
    -------
    mapping of str to float, m²
        Plies of the same name are summed.
    """
    whole = (float(skin.rows.z[0]), float(skin.rows.z[-1]))
    polygons = dict(region_polygons(skin))
    spans = dict.fromkeys(polygons, whole)
    for web in skin.webs:
        spans[web.name] = (float(skin.rows.z[web.first_row]), float(skin.rows.z[web.last_row]))
        polygons[web.name] = _web_band(skin, web.sheet)
    areas: dict[str, float] = {}
    for ply in blade.plies:
        total = 0.0
        for name in covered(ply) & polygons.keys():
            stretches = layer_spans(ply, spans[name])
            low, _, high, _ = shapely.bounds(polygons[name])
            boxes = shapely.box(low - 1.0, [s.root for s in stretches], high + 1.0, [s.tip for s in stretches])
            total += float(np.sum(shapely.area(shapely.intersection(polygons[name], boxes))))
        areas[ply.name] = areas.get(ply.name, 0.0) + total
    return areas


def _band(low: Floats, high: Floats, z: Floats) -> shapely.Geometry:
    outline = np.concatenate([np.column_stack([low, z]), np.column_stack([high, z])[::-1]])
    return shapely.polygons(outline)


def _base_bands(skin: SkinMap) -> list[shapely.Geometry]:
    starts = skin.levels.row_starts
    edge = skin.seams.arc[::2, -1]
    z = skin.levels.corner_z
    ends = [skin.surface.section(z, np.full_like(z, t)) for t in (1.0, -1.0)]
    gap = np.abs(ends[0] - ends[1]) * (1.0 - skin.closing[::2])
    bands = []
    for base in skin.bases:
        first, last = base.first_row - int(base.root_apex), base.last_row + int(base.tip_apex)
        part = slice(int(starts[first]), int(starts[last]) + 1)
        bands.append(_band(edge[part], edge[part] + gap[part], z[part]))
    return bands


def _web_band(skin: SkinMap, sheet: int) -> shapely.Geometry:
    web = skin.webs[sheet - 1]
    starts = skin.levels.row_starts
    part = slice(int(starts[web.first_row]), int(starts[web.last_row]) + 1)
    z = skin.levels.corner_z[part]
    feet = [skin.surface.section(z, skin.seams.t[::2][part, k]) for k in (web.pressure_seam, web.suction_seam)]
    return _band(np.zeros_like(z), np.abs(feet[0] - feet[1]), z)
