"""The developed skin of both sides and the webs laid flat, with regions, rows and seams."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import COUNTER_CLOCKWISE
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.develop import DevelopedMesh, develop
from skinmesh.show.page import MARGIN, WIDTH, Page, round_ticks
from skinmesh.show.paint import paint_regions
from skinmesh.show.palette import INK, QUIET
from skinmesh.show.render import Camera, Frame, render
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

# In pixels: the drawing between the scale of arc on its left and the names of seams on its right.
_LEFT, _RIGHT = 52, 196
_SIDE_HEIGHT, _LEAST_WEB, _BETWEEN = 300, 46, 74
_TOP, _NAME, _APART = 176, 13, 15
STRETCHES = (1, 2, 3, 4, 5, 6, 8, 10, 15, 20, 30, 50)
"""How many times longer arcs may be drawn than lengths along the span."""


@dataclass(frozen=True, eq=False)
class _Sheet:
    """One drawing: the suction side, the pressure side, or a web.

    Attributes
    ----------
    name : str
    element : (k,) int array
    arc : (k, s) float array, m
        Of every corner; upwards.
    low, high : float, m
        Least and largest arc.
    lines : tuple of (str, (n, 2) float array)
        Seams: name, and z and arc of their points.
    """

    name: str
    element: Ints
    arc: Floats
    low: float
    high: float
    lines: tuple[tuple[str, Floats], ...]


def draw_developed(mesh: ShellMesh, path: Path) -> None:
    """Draw the developed skin and write the picture as PNG, 1600 pixels wide.

    z runs to the right, the arc length from the leading edge up and down, so that both sides meet at the leading edge
    as on the skin itself, seen from outside. The face of a blunt trailing edge follows the suction side; on webs the
    height over the pressure foot takes the arc's place. Arcs are drawn a stated number of times longer than lengths
    along z.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    developed = develop(mesh)
    sheets = _sheets(mesh, developed)
    z = mesh.points[: mesh.n_corners, 2]
    across = (WIDTH - 2 * MARGIN - _LEFT - _RIGHT) / float(np.ptp(z))
    tallest = max((sheet.high - sheet.low for sheet in sheets), default=1.0)
    stretch = max((k for k in STRETCHES if k * across * tallest <= _SIDE_HEIGHT), default=1)
    heights = [max(int(np.ceil((s.high - s.low) * across * stretch)), _LEAST_WEB) for s in sheets]
    paint = paint_regions(mesh)
    # The legend needs as many lines as it needs: it is laid on another page first.
    below = int(Page(2000).swatches(MARGIN, 108, paint.names)) - 108
    page = Page(_TOP + below + sum(heights) + _BETWEEN * len(sheets) + 40)
    times = "to the same scale" if stretch == 1 else f"arcs drawn {stretch} times as long as lengths along z"
    page.text(MARGIN, 38, mesh.title, size=24, weight="bold", most=WIDTH - 2 * MARGIN)
    page.text(MARGIN, 72, f"Developed skin seen from outside, webs laid flat  ·  {times}", colour=QUIET)
    page.swatches(MARGIN, 108, paint.names)
    words = "Upright lines are rows, numbered ones stations; the other lines are seams."
    page.text(MARGIN, 140 + below, words, size=15, colour=QUIET)
    top: float = _TOP + below
    for sheet, height in zip(sheets, heights, strict=True):
        page.text(MARGIN, top + 8, sheet.name, weight="bold", most=WIDTH - 2 * MARGIN)
        _draw(page, mesh, sheet, paint.colours, top=top + 44, height=height, across=across, up=across * stretch)
        top += height + _BETWEEN
    page.text(MARGIN, page.height - 20, CAUTION[0], size=14, colour=QUIET)
    page.save(path)


def _sheets(mesh: ShellMesh, developed: DevelopedMesh) -> list[_Sheet]:
    """Both sides as on the skin seen from outside, root on the left, then the webs seen from the leading edge."""
    kinds = np.array([region.kind for region in mesh.regions])
    is_web = (kinds == "web")[mesh.region]
    is_base = (kinds == "base")[mesh.region]
    is_mirrored = mesh.hand == COUNTER_CLOCKWISE
    up = 1.0 if is_mirrored else -1.0
    upper = 1 if is_mirrored else -1
    sheets = []
    for side in (upper, -upper):
        element = np.flatnonzero((mesh.side == side) & ~is_web | (is_base if side > 0 else False))
        if not len(element):
            continue
        name = f"{'Suction' if side > 0 else 'Pressure'} side, trailing edge {'up' if side == upper else 'down'}"
        if side > 0 and is_base.any():
            name = f"{name}, with the trailing base beyond it"
        lines = [
            (label, line * [1.0, up])
            for label, line in zip(mesh.report.seams, developed.seams, strict=True)
            if len(line) and (side * line[:, 1]).sum() >= -1e-9
        ]
        sheets.append(_sheet(name, element, up * developed.arc[element], lines))
    for region in np.flatnonzero(kinds == "web"):
        element = np.flatnonzero(mesh.region == region)
        if len(element):
            name = (
                f"{mesh.regions[region].name}, seen from the leading edge, {'suction' if is_mirrored else 'pressure'}"
            )
            sheets.append(_sheet(f"{name} foot up", element, up * developed.arc[element], []))
    return sheets


def _sheet(name: str, element: Ints, arc: Floats, lines: Sequence[tuple[str, Floats]]) -> _Sheet:
    return _Sheet(name, element, arc, float(arc.min()), float(arc.max()), tuple(lines))


def _draw(
    page: Page, mesh: ShellMesh, sheet: _Sheet, colours: Floats, *, top: float, height: int, across: float, up: float
) -> None:
    """One sheet with its rows above, its scale of arc on the left and its seams' names on the right."""
    z = mesh.points[: mesh.n_corners, 2]
    low, length = float(z.min()), float(np.ptp(z))
    left, width = MARGIN + _LEFT, WIDTH - 2 * MARGIN - _LEFT - _RIGHT
    middle = 0.5 * (sheet.low + sheet.high)
    extent = (low, low + length, middle - 0.5 * height / up, middle + 0.5 * height / up)
    axes = page.axes(left, top, width, height, extent=extent)
    image = _filled(mesh, sheet, colours, extent=extent, pixels=(width, height), stretch=up / across)
    axes.imshow(image, extent=extent, aspect="auto", interpolation="nearest")
    _outline(axes, mesh, sheet)
    for _, line in sheet.lines:
        axes.plot(*line.T, color=INK, linewidth=0.8, clip_on=False)
    _rows(page, axes, mesh, sheet, left=left, top=top, across=across, low=low)
    _scales(page, extent, left=left, top=top, across=across, up=up)
    _names(page, sheet, left=left + width, top=top, bottom=top + height, across=across, up=up)


def _filled(
    mesh: ShellMesh,
    sheet: _Sheet,
    colours: Floats,
    *,
    extent: tuple[float, ...],
    pixels: tuple[int, int],
    stretch: float,
) -> Any:
    """The elements in their colours, every corner a point of its own."""
    corners = mesh.cells[sheet.element, : mesh.n_sides]
    points = np.zeros((corners.size, 3))
    # As the camera from the suction side sees it: z to the right, -y up.
    points[:, 1] = -stretch * sheet.arc.ravel()
    points[:, 2] = mesh.points[corners.ravel(), 2]
    frame = Frame(extent[0], stretch * extent[2], extent[1] - extent[0], stretch * (extent[3] - extent[2]))
    return render(
        points,
        np.arange(corners.size).reshape(corners.shape),
        colours=np.rint(255.0 * colours[sheet.element]).astype(np.uint8),
        camera=Camera((1.0, 0.0, 0.0)),
        frame=frame,
        pixels=pixels,
    )


def _outline(axes: Any, mesh: ShellMesh, sheet: _Sheet) -> None:
    """Sides of elements that no other element of the sheet shares."""
    from matplotlib.collections import LineCollection

    nodes = mesh.cells[sheet.element, : mesh.n_sides]
    pairs = np.stack([nodes, np.roll(nodes, -1, axis=1)], axis=-1).reshape(-1, 2)
    key = pairs.min(axis=1) * len(mesh.points) + pairs.max(axis=1)
    _, first, count = np.unique(key, return_index=True, return_counts=True)
    places = np.stack([mesh.points[nodes, 2], sheet.arc], axis=-1)
    sides = np.stack([places, np.roll(places, -1, axis=1)], axis=2).reshape(-1, 2, 2)
    axes.add_collection(LineCollection(list(sides[first[count == 1]]), colors=INK, linewidths=0.9, clip_on=False))


def _rows(
    page: Page, axes: Any, mesh: ShellMesh, sheet: _Sheet, *, left: float, top: float, across: float, low: float
) -> None:
    """Rows as far as the sheet reaches at their z; numbers of stations above, kept apart."""
    corners = mesh.cells[sheet.element, : mesh.n_sides]
    z, arc = mesh.points[corners, 2].ravel(), sheet.arc.ravel()
    order = np.argsort(z, kind="stable")
    z, arc = z[order], arc[order]
    free = -np.inf
    for label, at in mesh.report.rows:
        first, last = np.searchsorted(z, [at - 1e-6, at + 1e-6])
        if first == last:
            continue
        ends = [arc[first:last].min(), arc[first:last].max()]
        is_station = label.startswith("station ")
        axes.plot([at, at], ends, color=INK, linewidth=0.8 if is_station else 0.5, linestyle="-" if is_station else ":")
        x = left + (at - low) * across
        if is_station and x - free > 17:
            page.text(x, top - 12, label.split()[1], size=_NAME, ha="center")
            free = x


def _scales(page: Page, extent: tuple[float, ...], *, left: float, top: float, across: float, up: float) -> None:
    """Ticks of arc on the left, and of z below."""
    bottom = top + (extent[3] - extent[2]) * up
    for tick in round_ticks(extent[2], extent[3], most=max(int((bottom - top) / 32), 1)):
        y = top + (extent[3] - tick) * up
        page.text(left - 12, y, f"{abs(tick):g}", size=_NAME, colour=QUIET, ha="right")
        page.stroke([(left - 9, y), (left - 4, y)], colour=QUIET)
    page.text(left - 12, top - 12, "m", size=_NAME, colour=QUIET, ha="right")
    for k, tick in enumerate(round_ticks(extent[0], extent[1])):
        x = left + (tick - extent[0]) * across
        page.stroke([(x, bottom + 2), (x, bottom + 6)], colour=QUIET)
        page.text(x, bottom + 15, f"z = {tick:g} m" if k == 0 else f"{tick:g}", size=_NAME, colour=QUIET, ha="center")


def _names(page: Page, sheet: _Sheet, *, left: float, top: float, bottom: float, across: float, up: float) -> None:
    """Names of the seams at the tip, kept apart beside the sheet, each joined to its seam."""
    middle, end = 0.5 * (sheet.low + sheet.high), max((line[-1, 0] for _, line in sheet.lines), default=0.0)
    wanted = np.array([0.5 * (top + bottom) - (line[-1, 1] - middle) * up for _, line in sheet.lines])
    order = np.argsort(wanted, kind="stable")
    places = wanted[order]
    for k in range(1, len(places)):
        places[k] = max(places[k], places[k - 1] + _APART)
    for k in range(len(places) - 1, -1, -1):
        places[k] = min(places[k], places[k + 1] - _APART if k + 1 < len(places) else bottom + 4.0)
    for k, y in zip(order, places, strict=True):
        label, line = sheet.lines[k]
        reach = left - (end - line[-1, 0]) * across
        page.stroke([(reach + 2, float(wanted[k])), (left + 8, float(wanted[k])), (left + 22, float(y))], colour=QUIET)
        words = label.removeprefix("suction ").removeprefix("pressure ")
        page.text(left + 26, float(y), words, size=_NAME, most=_RIGHT + MARGIN - 40)
