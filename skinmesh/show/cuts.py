"""Three cuts of a mesh, each to scale and beside it with thicker layers, and the numbers of their stations."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import CLOCKWISE
from skinmesh.mesh.planform import planform
from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.show.page import MARGIN, WIDTH, Page
from skinmesh.show.palette import BARE, INK, MATERIAL_TONES, QUIET, part_colours, part_name, rgb
from skinmesh.show.section import Layers, Section, layers_of, outer_faces, section_at
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

PLACES = (0.2, 0.5, 0.8)
"""Wanted places of the cuts, as shares of the span; the nearest inner station is taken."""

FACTORS = (10.0, 5.0, 3.0, 2.0)
"""How many times thicker layers may be drawn, the first one tried first."""

# Widths and heights in pixels: two drawings, then the numbers; each cut at least so tall.
_DRAWING, _NUMBERS, _GAP = 590, 275, 22
_LEAST_HEIGHT, _HEAD, _LINE = 360, 62, 19
_LABEL, _SIDE, _ABOVE = 13, 92, 30


@dataclass(frozen=True, eq=False)
class _Cut:
    """What is drawn of one cut: the section, and the layers as thick as they are and thicker."""

    section: Section
    name: str
    true: Layers
    thicker: Layers
    factor: float


def draw_cuts(mesh: ShellMesh, path: Path) -> None:
    """Draw three cuts and write the picture as PNG, 1600 pixels wide.

    Layers have the colour of their material and their true thickness, measured across the wall; beside each cut they
    are drawn thicker by a factor that is stated. A line in the region's colour runs along the +e3 face, rings stand
    where webs and skins are joined.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    cuts = [_cut(mesh, z, name) for z, name in _places(mesh)]
    heights = [
        max(_LEAST_HEIGHT, _HEAD + 5 * _LINE + _LINE * len(np.unique(mesh.region[cut.section.element]))) for cut in cuts
    ]
    # The legends need as many lines as they need: they are laid on a page that is as tall as it may get.
    trial = Page(4000)
    top = int(_head(trial, mesh, cuts)) + 30
    page = Page(top + sum(heights) + 46)
    _head(page, mesh, cuts)
    for cut, height in zip(cuts, heights, strict=True):
        _draw(page, mesh, cut, top, height)
        top += height
    page.text(MARGIN, page.height - 22, CAUTION[0], size=14, colour=QUIET)
    page.save(path)


def _places(mesh: ShellMesh) -> list[tuple[float, str]]:
    """z and name of the cuts, root first."""
    low, high = float(mesh.points[:, 2].min()), float(mesh.points[:, 2].max())
    wanted = [low + share * (high - low) for share in PLACES]
    stations = mesh.report.stations
    inner = np.flatnonzero((stations > low + 1e-9) & (stations < high - 1e-9))
    if len(inner) < len(wanted):
        return [(z, "") for z in wanted]
    places: list[tuple[float, str]] = []
    for z in wanted:
        k = inner[np.argmin(np.abs(stations[inner] - z))]
        inner = inner[inner != k]
        places.append((float(stations[k]), f"station {k:02d}"))
    return sorted(places)


def _cut(mesh: ShellMesh, z: float, name: str) -> _Cut:
    section = section_at(mesh, z)
    tall = float(np.ptp(section.ends[..., 1]))
    thickest = float(mesh.thickness[section.element].max(initial=0.0))
    factor = next((factor for factor in FACTORS if factor * thickest <= 0.3 * tall), FACTORS[-1])
    return _Cut(section, name, layers_of(mesh, section), layers_of(mesh, section, factor=factor), factor)


def _head(page: Page, mesh: ShellMesh, cuts: list[_Cut]) -> float:
    """Title and legends; y of the last line's middle."""
    page.text(MARGIN, 38, mesh.title, size=24, weight="bold", most=WIDTH - 2 * MARGIN)
    edge = "left" if mesh.hand == CLOCKWISE else "right"
    words = (
        f"Cuts at constant z, seen from the root: leading edge on the {edge}, suction side above  ·  nodes on the "
        f"{mesh.surface} surface  ·  rings are joints"
    )
    page.text(MARGIN, 72, words, colour=QUIET)
    layers = [layer for cut in cuts for k in np.unique(cut.true.stack) for layer in mesh.stacks[k].layers]
    used = {layer.material.name for layer in layers}
    tones = _tones(mesh)
    materials = {name: tones[k] for k, name in enumerate(mesh.materials) if name in used}
    y = page.swatches(MARGIN, 108, materials or {"no plies": BARE})
    seen = np.unique(np.concatenate([mesh.region[cut.section.element] for cut in cuts]))
    parts = {part_name(mesh.regions[k]) for k in seen}
    colours = {name: colour for name, colour in part_colours(mesh.regions).items() if name in parts}
    return page.lines(MARGIN, y + 32, colours)


def _tones(mesh: ShellMesh) -> Floats:
    """(n, 3) float array: colour of every material."""
    return rgb([MATERIAL_TONES[k % len(MATERIAL_TONES)] for k in range(len(mesh.materials))])


def _draw(page: Page, mesh: ShellMesh, cut: _Cut, top: float, height: float) -> None:
    """One cut: heading, two drawings at one scale, numbers."""
    place = f"z = {cut.section.z:.3f} m"
    page.text(MARGIN, top + 12, f"{cut.name}, {place}" if cut.name else place, weight="bold")
    outer = outer_faces(mesh, cut.section)
    corners = [outer.reshape(-1, 2), cut.section.ends.reshape(-1, 2), cut.thicker.corners.reshape(-1, 2)]
    points = np.concatenate(corners)
    low, high = points.min(axis=0), points.max(axis=0)
    room = np.array([_DRAWING - 2 * _SIDE, height - _HEAD - 2 * _ABOVE])
    scale = float(np.min(room / np.maximum(high - low, 1e-9)))
    half = np.array([_DRAWING, height - _HEAD]) / (2.0 * scale)
    middle = 0.5 * (low + high)
    extent = (middle[0] - half[0], middle[0] + half[0], middle[1] - half[1], middle[1] + half[1])
    drawings = ((cut.true, 1.0, "layers as thick as they are"), (cut.thicker, cut.factor, ""))
    for k, (layers, factor, words) in enumerate(drawings):
        left = MARGIN + k * (_DRAWING + _GAP)
        axes = page.axes(left, top + _HEAD, _DRAWING, height - _HEAD, extent=extent)
        words = words or f"layers drawn {factor:g} times as thick, at the same scale"
        page.text(left, top + 40, words, size=15, colour=QUIET)
        _walls(axes, mesh, cut.section, layers, factor, scale)
    _labels(page, mesh, cut, extent=extent, left=MARGIN, top=top + _HEAD, scale=scale)
    _bar(page, scale, _DRAWING * 0.3, left=MARGIN, y=top + height - 16)
    _numbers(page, mesh, cut, left=WIDTH - MARGIN - _NUMBERS, top=top + 40)


def _walls(axes: Any, mesh: ShellMesh, section: Section, layers: Layers, factor: float, scale: float) -> None:
    from matplotlib.collections import LineCollection, PolyCollection

    names = list(mesh.materials)
    of_layer = [[names.index(layer.material.name) for layer in stack.layers] for stack in mesh.stacks]
    material = np.array([of_layer[s][k] for s, k in _pairs(layers)], dtype=np.int64)
    thick = np.array([mesh.stacks[s].layers[k].thickness for s, k in _pairs(layers)])
    place = _place_in(layers)
    fills = _tones(mesh)[material[place]]
    axes.add_collection(PolyCollection(list(layers.corners), facecolors=fills, edgecolors=fills, linewidths=0.1))
    # Lines between layers where they do not fill the layers themselves.
    is_wide = thick[place] * factor * scale > 2.5
    axes.add_collection(LineCollection(list(layers.corners[is_wide][:, 2:]), colors=INK, linewidths=0.3, alpha=0.6))
    colours = part_colours(mesh.regions)
    of_region = rgb([colours[part_name(region)] for region in mesh.regions])
    # Beside the face, so that it hides no layer.
    faces = outer_faces(mesh, section, factor=factor) + 2.2 / scale * section.across
    axes.add_collection(LineCollection(list(faces), colors=QUIET, linewidths=2.6, capstyle="round"))
    axes.add_collection(LineCollection(list(faces), colors=of_region[mesh.region[section.element]], linewidths=1.9))
    bare = section.ends[mesh.stack[section.element] == NO_STACK]
    axes.add_collection(LineCollection(list(bare), colors=INK, linewidths=0.5))
    axes.plot(*section.joints.T, "o", markersize=5.5, markerfacecolor="none", markeredgecolor=INK, markeredgewidth=0.9)


def _pairs(layers: Layers) -> list[tuple[int, int]]:
    """Every stack and layer that occurs, once."""
    return [(int(s), int(k)) for s, k in np.unique(np.column_stack([layers.stack, layers.order]), axis=0)]


def _place_in(layers: Layers) -> Ints:
    """(n,) int array: where each layer stands in ``_pairs``."""
    pairs = np.column_stack([layers.stack, layers.order])
    return np.asarray(np.unique(pairs, axis=0, return_inverse=True)[1].reshape(-1))


def _labels(
    page: Page, mesh: ShellMesh, cut: _Cut, *, extent: tuple[float, ...], left: float, top: float, scale: float
) -> None:
    """The name of each region that is long enough, outside its middle wall, where there is room for it."""
    section = cut.section
    region = mesh.region[section.element]
    faces = outer_faces(mesh, section)
    length = np.linalg.norm(np.diff(faces, axis=1)[:, 0], axis=1)
    taken: list[tuple[float, float, float, float]] = []
    for k in np.unique(region):
        walls = np.flatnonzero(region == k)
        if length[walls].sum() * scale < 22:
            continue
        middle = faces[walls].mean(axis=(0, 1))
        wall = walls[np.argmin(np.linalg.norm(faces[walls].mean(axis=1) - middle, axis=1))]
        is_web = mesh.regions[k].kind == "web"
        away = np.array([np.sign(section.normal[wall, 0]), 0.0]) if is_web else section.normal[wall]
        spot = faces[wall].mean(axis=0) + away * (6 if is_web else 11) / scale
        x, y = left + (spot[0] - extent[0]) * scale, top + (extent[3] - spot[1]) * scale
        align = "center" if abs(away[0]) < 0.3 else "left" if away[0] > 0 else "right"
        label = page.text(x, y - 8 * away[1], part_name(mesh.regions[k]), size=_LABEL, ha=align)
        wide = page.width_of(label)
        start = x - wide * {"left": 0.0, "center": 0.5, "right": 1.0}[align]
        box = (start - 3, y - 8 * away[1] - 9, start + wide + 3, y - 8 * away[1] + 9)
        if any(box[0] < one[2] and one[0] < box[2] and box[1] < one[3] and one[1] < box[3] for one in taken):
            label.remove()
        else:
            taken.append(box)


def _bar(page: Page, scale: float, most: float, *, left: float, y: float) -> None:
    """A bar of a round length."""
    power = 10.0 ** np.floor(np.log10(most / scale))
    length = max(factor * power for factor in (1.0, 2.0, 5.0) if factor * power * scale <= most)
    page.box(left, y - 1, length * scale, 2, colour=INK)
    words = f"{length:g} m" if length >= 1 else f"{1e3 * length:g} mm"
    page.text(left + length * scale + 8, y, words, size=14)


def _numbers(page: Page, mesh: ShellMesh, cut: _Cut, *, left: float, top: float) -> None:
    """Chord, twist, thickness, and the laminate of every region."""
    shape = planform(mesh)
    right = left + _NUMBERS
    y = top
    rows: list[tuple[str, str]] = []
    if len(shape.z):
        at = int(np.argmin(np.abs(shape.z - cut.section.z)))
        chord, thickness = float(shape.chord[at]), float(shape.thickness[at])
        rows = [
            ("chord", f"{chord:.3f} m"),
            ("twist", f"{np.degrees(shape.twist[at]):.2f}°".replace("-", "−")),
            ("thickness", f"{thickness:.3f} m, {100.0 * thickness / chord:.1f} %"),
        ]
    for name, value in rows:
        page.text(left, y, name, size=14, colour=QUIET)
        page.text(right, y, value, size=14, ha="right")
        y += _LINE
    y += 8
    for x, name in ((left, "region"), (right - 50, "mm"), (right, "layers")):
        page.text(x, y, name, size=13, colour=QUIET, ha="left" if x == left else "right")
    region, element = mesh.region[cut.section.element], cut.section.element
    colours = part_colours(mesh.regions)
    for k in np.unique(region):
        y += _LINE
        here = element[region == k]
        page.box(left, y - 6, 12, 12, colour=colours[part_name(mesh.regions[k])])
        page.text(left + 18, y, mesh.regions[k].name, size=13, most=_NUMBERS - 115)
        page.text(right - 50, y, _range(mesh.thickness[here] * 1e3), size=13, ha="right")
        page.text(right, y, _range(mesh.n_plies[here].astype(float)), size=13, ha="right")


def _range(values: Floats) -> str:
    """Least and largest value, or the one value.

    >>> _range(np.array([2.0, 4.5])), _range(np.array([3.0, 3.0]))
    ('2–4.5', '3')
    """
    low, high = (f"{value:.4g}" for value in (values.min(), values.max()))
    return low if low == high else f"{low}–{high}"
