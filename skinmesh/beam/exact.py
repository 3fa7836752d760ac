"""Walls of the exact sections: loft, seams and ply schedule at any z, without a mesh."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.cells import properties_by_cells
from skinmesh.beam.quadrature import gauss_points, rate_matrix, running_integral, value_matrix
from skinmesh.beam.schedule import LaidStrips, lay_strips, strip_spans, tipward
from skinmesh.beam.sections import SectionProperties
from skinmesh.beam.walls import Walls
from skinmesh.definition.blade import BladeDefinition
from skinmesh.definition.problems import FieldReport, Findings
from skinmesh.skin.ruler import measure_sections
from skinmesh.skin.seams import place_seams
from skinmesh.skin.skinmap import SkinMap

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

N_PIECES, N_GAUSS = 8, 5  # samples along every strip: pieces × Gauss points in each
SLOPE_STEP = 1e-5  # of the span, for the slope of lines along the blade
OUTER_FACE = 0.5  # the loft is the +e3 face of the skin's laminate; a web lies about its middle
CLOSED = 1e-9  # m; trailing edges nearer than this are one


@dataclass(frozen=True, eq=False)
class _Frames:
    """Seams at z as points of the blade, (m, n_seams, 3), and their slopes along z."""

    parameter: Floats
    place: Floats
    slope: Floats
    closing: Floats


def exact_sections(blade: BladeDefinition, skin: SkinMap, z: Floats) -> SectionProperties:
    """Thin-wall laminate theory on the exact sections.

    Walls lie at the middle of their laminate: the loft moved by half of the thickness. Plies end where the schedule
    ends them. A section at the very end of a ply or a web is that of its tip side.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap
        For what the build decides: the order of seams, web ends, where the trailing edge is closed.
    z : (m,) float array, m
        Within the blade.

    Returns
    -------
    SectionProperties

    Raises
    ------
    InputError
        The layout does not fit on the skin at one of the sections.
    """
    z = np.asarray(z, dtype=float)
    walls, labels = exact_walls(blade, skin, z)
    return properties_by_cells(
        z, walls, node_label=labels, within=running_integral(N_PIECES, N_GAUSS), is_mirrored=skin.surface.is_mirrored
    )


def exact_walls(blade: BladeDefinition, skin: SkinMap, z: Floats) -> tuple[Walls, Ints]:
    """Walls of the exact sections.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap
    z : (m,) float array, m

    Returns
    -------
    Walls
        Sorted by section, then by strip.
    (k,) int array
        Label of every node: its seam; closed trailing edges are seam 0.
    """
    laid = lay_strips(blade, skin, z)
    frames = _place_seams(blade, skin, z)
    n_gaps = skin.n_seams - 1
    line, rate, cosine = _skin_lines(skin, z, frames)
    pairs = [(n_gaps, 0), *((web.pressure_seam, web.suction_seam) for web in skin.webs)]
    lines = zip((line, rate, cosine), _straight_lines(frames, pairs), strict=True)
    line, rate, cosine = (np.concatenate(parts, axis=1) for parts in lines)
    is_web = np.array([strip.kind == "web" for strip in skin.strips])
    depth = np.where(is_web, 0.0, OUTER_FACE) * laid.thickness
    place, step, normal, ends = _middle_lines(line, rate, cosine, depth, is_mirrored=skin.surface.is_mirrored)
    there = _existing(skin, z, laid, frames)
    section, strip = np.nonzero(there)
    start = np.array([*range(n_gaps), *(a for a, _ in pairs)])
    end = np.array([*range(1, n_gaps + 1), *(b for _, b in pairs)])
    label = np.stack([start, end], axis=1)[strip]
    is_closed = np.linalg.norm(frames.place[:, -1] - frames.place[:, 0], axis=1) < CLOSED
    label[is_closed[section][:, None] & (label == n_gaps)] = 0
    keys, nodes = np.unique(section[:, None] * skin.n_seams + label, return_inverse=True)
    walls = Walls(
        n_sections=len(z),
        section=section,
        strip=strip,
        nodes=nodes.reshape(-1, 2),
        node_section=keys // skin.n_seams,
        node_place=frames.place[keys // skin.n_seams, keys % skin.n_seams, :2],
        ends=ends[there],
        place=place[there],
        step=step[there],
        normal=normal[there],
        cosine=cosine[there],
        laminates=laid.laminates.take(laid.index[there]),
    )
    return walls, keys % skin.n_seams


def _existing(skin: SkinMap, z: Floats, laid: LaidStrips, frames: _Frames) -> NDArray[np.bool_]:
    """(m, n_strips) whether a strip is a wall of the section."""
    there = laid.index >= 0
    whole = (float(skin.rows.z[0]), float(skin.rows.z[-1]))
    here = tipward(z, whole)
    spans = np.array(strip_spans(skin))
    there &= (here[:, None] >= spans[:, 0]) & (here[:, None] < spans[:, 1])
    gap = np.linalg.norm(frames.place[:, -1] - frames.place[:, 0], axis=1)
    there[:, skin.base_strip] &= gap >= CLOSED
    return np.asarray(there)


def _place_seams(blade: BladeDefinition, skin: SkinMap, z: Floats) -> _Frames:
    """Seams at z, and just before and after it for their slopes."""
    surface, rule = skin.surface, blade.mesh
    low, high = surface.z_ends
    step = SLOPE_STEP * (high - low)
    before, after = np.maximum(z - step, low), np.minimum(z + step, high)
    # a seam that runs on beyond its web takes its share of the arc from the web's ends
    wanted = np.unique(np.concatenate([before, z, after, *(web.span for web in blade.layout.webs)]))
    seams, _ = place_seams(
        blade.layout,
        measure_sections(surface, wanted),
        least_spacing=None if rule.least_spacing is None else rule.least_spacing(wanted),
        report=FieldReport(blade.stem, blade.lines or {}, Findings()),
        order=skin.seams.labels,
    )
    closing = np.interp(wanted, skin.levels.z, skin.closing)
    pull = np.column_stack([np.interp(wanted, skin.levels.z, column) for column in skin.pull.T])
    place = surface.points(wanted[:, None], seams.t)
    place[:, 0] -= pull
    place[:, -1] += pull
    at = [np.searchsorted(wanted, values) for values in (before, z, after)]
    slope = (place[at[2]] - place[at[0]]) / (after - before)[:, None, None]
    return _Frames(seams.t[at[1]], place[at[1]], slope, closing[at[1]])


def _skin_lines(skin: SkinMap, z: Floats, frames: _Frames) -> tuple[Floats, Floats, Floats]:
    """Samples of every strip of the skin on the loft.

    Returns
    -------
    (m, gaps, p, 2) float array, m
    (m, gaps, p, 2) float array, m
        Derivative within each piece, whose own coordinate runs from −1 to 1.
    (m, gaps, p) float array
        Cosine of the inclination.
    """
    surface, t = skin.surface, frames.parameter
    share, stretch = _shares(skin)
    width = np.diff(t, axis=1)[..., None]
    at = t[:, :-1, None] + share * width
    z_at = np.broadcast_to(z[:, None, None], at.shape)
    line = surface.points(z_at, at)[..., :2]
    across, along = surface.tangents(z_at, at)
    normal = np.cross(across, along)
    cosine = np.linalg.norm(normal[..., :2], axis=-1) / np.linalg.norm(normal, axis=-1)
    rate = across[..., :2] * (width * stretch)[..., None]
    # closed trailing edges are drawn to their middle, linearly over the strip beside each
    ends = [surface.points(z, np.full_like(z, side))[:, :2] for side in (1.0, -1.0)]
    apart = 0.5 * frames.closing[:, None, None] * (ends[0] - ends[1])[:, None]
    line[:, 0] += (1.0 - share[0])[:, None] * apart
    rate[:, 0] -= stretch[0][:, None] * apart
    line[:, -1] -= share[-1][:, None] * apart
    rate[:, -1] -= stretch[-1][:, None] * apart
    return line, rate, cosine


def _shares(skin: SkinMap) -> tuple[Floats, Floats]:
    """(gaps, p) share of the strip at which its samples lie, and its derivative within each piece.

    The samples are denser beside the leading and the trailing edge, where sections turn most.
    """
    x = gauss_points(N_GAUSS)[0]
    even = np.linspace(0.0, 1.0, N_PIECES + 1)
    n_gaps, nose = skin.n_seams - 1, skin.seams.labels.index("leading edge")
    breaks = np.tile(even, (n_gaps, 1))
    for edge, is_start in ((nose, True), (0, True), (nose - 1, False), (n_gaps - 1, False)):
        pulled = breaks[edge] ** 2 if is_start else 1.0 - (1.0 - breaks[edge]) ** 2
        breaks[edge] = 0.3 * breaks[edge] + 0.7 * pulled
    half = 0.5 * np.diff(breaks, axis=1)[..., None]
    share = breaks[:, :-1, None] + half * (1.0 + x)
    return share.reshape(n_gaps, -1), np.repeat(half[..., 0], N_GAUSS, axis=1)


def _straight_lines(frames: _Frames, pairs: list[tuple[int, int]]) -> tuple[Floats, Floats, Floats]:
    """Samples of straight walls between seams, as of the skin's strips."""
    x = gauss_points(N_GAUSS)[0]
    piece = (np.arange(N_PIECES)[:, None] + 0.5 * (1.0 + x)) / N_PIECES
    share = piece.ravel()[:, None]
    first, second = ([pair[k] for pair in pairs] for k in (0, 1))
    place, slope = (
        values[:, first, None] * (1.0 - share) + values[:, second, None] * share
        for values in (frames.place, frames.slope)
    )
    along = np.broadcast_to((frames.place[:, second] - frames.place[:, first])[:, :, None], place.shape)
    normal = np.cross(along, np.concatenate([slope[..., :2], np.ones((*slope.shape[:-1], 1))], axis=-1))
    size = np.linalg.norm(normal, axis=-1)
    # a wall without length is none, and has no inclination
    cosine = np.where(size > 0.0, np.linalg.norm(normal[..., :2], axis=-1) / np.where(size > 0.0, size, 1.0), 1.0)
    return place[..., :2], along[..., :2] / (2 * N_PIECES), cosine


def _middle_lines(
    line: Floats, rate: Floats, cosine: Floats, depth: Floats, *, is_mirrored: bool
) -> tuple[Floats, Floats, Floats, Floats]:
    """Places, steps, normals and ends of the lines at a depth beneath the given ones.

    A wall cut at a slant is thicker by 1 / cosine.
    """
    shape = (*line.shape[:2], N_PIECES, N_GAUSS, 2)
    x, weight = gauss_points(N_GAUSS)
    size = np.linalg.norm(rate, axis=-1, keepdims=True)
    tangent = rate / np.where(size > 0.0, size, 1.0)
    normal = np.stack([tangent[..., 1], -tangent[..., 0]], axis=-1) * (-1.0 if is_mirrored else 1.0)
    inward = (depth[:, :, None] / cosine)[..., None] * normal
    place = line - inward
    pieces = place.reshape(shape)
    speed = np.sum((rate - (rate_matrix(x) @ inward.reshape(shape)).reshape(line.shape)) * tangent, axis=-1)
    # where the laminate is thicker than the radius of the surface its middle would run backwards
    step = np.maximum(speed, 0.0) * np.tile(weight, N_PIECES)
    to_ends = value_matrix(x, np.array([-1.0, 1.0]))
    ends = np.stack(
        [np.einsum("g,msgd->msd", to_ends[0], pieces[:, :, 0]), np.einsum("g,msgd->msd", to_ends[1], pieces[:, :, -1])],
        axis=2,
    )
    return place, step[..., None] * tangent, normal, ends
