"""Pictures of a built mesh: both sides of the whole blade, a cut-open part, sections; cuts; the developed skin."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import CLOCKWISE
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.cuts import draw_cuts
from skinmesh.show.developed import draw_developed
from skinmesh.show.outline import border_edges, cut_at
from skinmesh.show.page import MARGIN, WIDTH, Page, round_ticks
from skinmesh.show.paint import PAINTS, Paint
from skinmesh.show.palette import AXIS_COLOURS, INK, QUIET
from skinmesh.show.render import Camera, Frame, frame_of, quiet_plotter, render, shaded

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

SUBJECTS: Mapping[str, str] = {
    "region": "regions",
    "stack": "stacks",
    "thickness": "thickness",
    "e1": "e1",
    "cut": "cuts",
    "developed": "developed",
}
"""What a picture can show, and the word for it in a file's name: ``stem.regions.png``."""

_WHOLE_PAGES: Mapping[str, Callable[[ShellMesh, Path], None]] = {"cut": draw_cuts, "developed": draw_developed}

SUCTION_VIEW = Camera((1.0, 0.0, 0.0))
PRESSURE_VIEW = Camera((-1.0, 0.0, 0.0))
CUT_VIEW = Camera((0.7, 0.35, 0.62))
SECTIONS = (0.05, 0.25, 0.5, 0.8)
"""Places of the sections, as shares of the span."""

CUT_PART = 0.3
"""Share of the span that the cut-open part shows."""

CLOSE_UP_ELEMENTS = 12
"""Elements along the span that the close-up shows."""

MOST_VIEW_HEIGHT = 420
"""Of a view of one whole side, in pixels."""

# The page from top to bottom, in pixels: title and legend; heading, view; heading, view; scale; lower half.
_BEFORE_VIEWS = 170
_BETWEEN_VIEWS = 34
_AXIS = 84
_LOWER = 430
_LOWER_SPLIT = 900


def require_pictures() -> None:
    """Make sure that pictures can be drawn.

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    Page(16)
    with quiet_plotter(16, 16):
        pass


def picture(mesh: ShellMesh, path: Path, *, by: str = "region") -> None:
    """Draw a mesh and write the picture as PNG, 1600 pixels wide.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path
    by : str
        'region', 'stack', 'thickness', 'e1', 'cut' or 'developed'.

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    ValueError
        There is no such subject.
    """
    if by not in SUBJECTS:
        raise ValueError(f"by: no subject '{by}'; known: {', '.join(SUBJECTS)}")
    if by in _WHOLE_PAGES:
        _WHOLE_PAGES[by](mesh, path)
        return
    paint = PAINTS[by](mesh)
    scene = _scene(mesh, paint)
    whole = [frame_of(scene.points, camera) for camera in (SUCTION_VIEW, PRESSURE_VIEW)]
    scale = min((WIDTH - 2 * MARGIN) / whole[0].width, MOST_VIEW_HEIGHT / max(frame.height for frame in whole))
    heights = [int(np.ceil(frame.height * scale)) for frame in whole]

    page = Page(_BEFORE_VIEWS + sum(heights) + 2 * _BETWEEN_VIEWS + _AXIS + _LOWER + MARGIN // 2)
    page.text(MARGIN, 38, mesh.title, size=24, weight="bold", most=WIDTH - 2 * MARGIN)
    page.text(MARGIN, 72, f"{paint.title}  ·  {_size_of(mesh)}", colour=QUIET)
    _legend(page, paint)
    top = _BEFORE_VIEWS
    for name, camera, frame, height in zip(
        _view_names(mesh), (SUCTION_VIEW, PRESSURE_VIEW), whole, heights, strict=True
    ):
        page.text(MARGIN, top + 12, name, weight="bold")
        top += _BETWEEN_VIEWS
        axes = _view(page, scene, camera, frame, place=(MARGIN, top), scale=scale)
        if by == "e1":
            _arrows(axes, scene, camera, frame, scale=scale)
        top += height
    _span_scale(page, whole[0], top=top, scale=scale)
    top += _AXIS
    if by == "e1":
        _close_up(page, scene, top)
    else:
        _cut_open(page, scene, top)
    _sections(page, scene, top)
    page.save(path)


@dataclass(frozen=True, eq=False)
class _Scene:
    """What every view of one picture draws.

    Attributes
    ----------
    mesh : ShellMesh
    paint : Paint
    corners : (m, k) int array
    middle : (m, 3) float array, m
        Middle of each element's corners.
    borders : (n, 2) int array
        Ends of the lines between unlike elements.
    """

    mesh: ShellMesh
    paint: Paint
    corners: Ints
    middle: Floats
    borders: Ints

    @property
    def points(self) -> Floats:
        """(n, 3) float array, m: the corner nodes."""
        return self.mesh.points[: self.mesh.n_corners]

    @property
    def on_skin(self) -> NDArray[np.bool_]:
        """(m,) bool array: elements that are no web, and so are not hidden by others."""
        return np.array([region.kind != "web" for region in self.mesh.regions])[self.mesh.region]


def _scene(mesh: ShellMesh, paint: Paint) -> _Scene:
    corners = mesh.cells[:, : mesh.n_sides]
    return _Scene(mesh, paint, corners, mesh.points[corners].mean(axis=1), border_edges(mesh, paint.border))


def _view_names(mesh: ShellMesh) -> tuple[str, str]:
    up, down = ("leading", "trailing") if mesh.hand == CLOCKWISE else ("trailing", "leading")
    return f"Suction side, {up} edge up", f"Pressure side, {down} edge up"


def _size_of(mesh: ShellMesh) -> str:
    shape = "quadrilaterals" if mesh.n_sides == 4 else "triangles"
    return f"{len(mesh.cells):,} {mesh.connectivity.shape[1]}-node {shape}".replace(",", "\N{NO-BREAK SPACE}")


def _legend(page: Page, paint: Paint) -> None:
    left: float = MARGIN
    if len(paint.levels):
        page.steps(left, 108, 640, levels=paint.levels, colours=paint.steps)
        left += 700
    page.swatches(left, 108, paint.names)


def _view(
    page: Page,
    scene: _Scene,
    camera: Camera,
    frame: Frame,
    *,
    place: tuple[float, float],
    scale: float,
    part: NDArray[np.bool_] | None = None,
    element_edges: bool = False,
) -> Any:
    """Draw elements at a scale in pixels a metre, and return the drawing area."""
    width, height = int(np.ceil(frame.width * scale)), int(np.ceil(frame.height * scale))
    corners, colours, normals = scene.corners, scene.paint.colours, scene.mesh.e3
    borders = scene.borders
    if part is not None:
        corners, colours, normals = corners[part], colours[part], normals[part]
        inside = np.zeros(len(scene.points), dtype=bool)
        inside[corners] = True
        borders = borders[inside[borders].all(axis=1)]
    # The drawing area is a whole number of pixels; the frame grows with it on its right and lower side.
    frame = Frame(frame.left, frame.bottom + frame.height - height / scale, width / scale, height / scale)
    image = render(
        scene.points,
        corners,
        colours=shaded(colours, normals, camera),
        camera=camera,
        frame=frame,
        pixels=(width, height),
        lines=borders,
        line_width=1.0,
        element_edges=element_edges,
    )
    axes = page.axes(*place, width, height, extent=frame.extent)
    axes.imshow(image, extent=frame.extent, aspect="auto", interpolation="nearest")
    return axes


def _span_scale(page: Page, frame: Frame, *, top: float, scale: float) -> None:
    """A scale of z under the views."""
    axes = page.axes(MARGIN, top + 14, frame.width * scale, 8, extent=(frame.left, frame.left + frame.width, 0.0, 1.0))
    levels = round_ticks(frame.left, frame.left + frame.width)
    axes.hlines(1.0, frame.left, frame.left + frame.width, color=QUIET, linewidth=0.8, clip_on=False)
    axes.vlines(levels, 0.0, 1.0, color=QUIET, linewidth=0.8, clip_on=False)
    for k, level in enumerate(levels):
        words = f"z = {level:g} m" if k == 0 else f"{level:g}"
        page.text(
            MARGIN + (level - frame.left) * scale, top + 36, words, size=15, colour=QUIET, ha="center" if k else "left"
        )


def _cut_open(page: Page, scene: _Scene, top: float) -> None:
    """The inboard part with its element sides, seen from outboard into the open end."""
    z = scene.points[:, 2]
    end = z.min() + CUT_PART * np.ptp(z)
    part = z[scene.corners].max(axis=1) <= end
    frame = frame_of(scene.points[np.unique(scene.corners[part])], CUT_VIEW)
    width, height = _LOWER_SPLIT - 2 * MARGIN, _LOWER - 50
    scale = min(width / frame.width, height / frame.height)
    page.text(MARGIN, top + 12, f"Inboard part, cut open at z = {z[scene.corners[part]].max():.2f} m", weight="bold")
    shift = 0.5 * (height - frame.height * scale)
    _view(page, scene, CUT_VIEW, frame, place=(MARGIN, top + 40 + shift), scale=scale, part=part, element_edges=True)


def _sections(page: Page, scene: _Scene, top: float) -> None:
    """Sections at one scale, seen from the root."""
    from matplotlib.collections import LineCollection

    left, width, height = _LOWER_SPLIT, WIDTH - MARGIN - _LOWER_SPLIT, _LOWER - 50
    page.text(left, top + 12, "Sections, seen from the root", weight="bold")
    z = scene.points[:, 2]
    places = [float(z.min() + share * np.ptp(z)) for share in SECTIONS]
    cuts = [cut_at(scene.mesh, place) for place in places]
    boxes = [np.array([lines[..., ::-1].min(axis=(0, 1)), lines[..., ::-1].max(axis=(0, 1))]) for lines, _ in cuts]
    widest, tallest = np.max([np.ptp(box, axis=0) for box in boxes], axis=0)
    cell = (width / 2, height / 2)
    scale = min((cell[0] - 40) / widest, (cell[1] - 60) / tallest)
    for k, ((lines, element), box, place) in enumerate(zip(cuts, boxes, places, strict=True)):
        x, y = left + (k % 2) * cell[0], top + 40 + (k // 2) * cell[1]
        middle, half = box.mean(axis=0), np.array(cell) / (2 * scale)
        extent = (middle[0] - half[0], middle[0] + half[0], middle[1] - half[1], middle[1] + half[1])
        axes = page.axes(x, y, *cell, extent=extent)
        # A grey edge lets pale colours stand out of white paper.
        ends = list(lines[..., ::-1])
        axes.add_collection(LineCollection(ends, colors=QUIET, linewidths=3.8, capstyle="round"))
        axes.add_collection(LineCollection(ends, colors=list(scene.paint.colours[element]), linewidths=2.6))
        page.text(x + cell[0] / 2, y + cell[1] - 14, f"z = {place:.2f} m", size=15, colour=QUIET, ha="center")
    power = 10.0 ** np.floor(np.log10(widest))
    bar = max(factor * power for factor in (0.5, 1.0, 2.0, 5.0) if factor * power <= 0.7 * widest)
    page.box(WIDTH - MARGIN - bar * scale, top + 10, bar * scale, 3, colour=INK)
    page.text(WIDTH - MARGIN - bar * scale - 10, top + 11, f"{bar:g} m", size=15, ha="right")


def _arrows(axes: Any, scene: _Scene, camera: Camera, frame: Frame, *, scale: float) -> None:
    """One arrow of e1 in every so many pixels of a view."""
    onto_page = camera.axes[:2].T
    seen = np.flatnonzero((scene.mesh.e3 @ camera.axes[2] > 0.25) & scene.on_skin)
    square = np.floor((scene.middle[seen] @ onto_page - [frame.left, frame.bottom]) * scale / [56.0, 26.0])
    seen = seen[np.unique(square, axis=0, return_index=True)[1]]
    _quiver(axes, scene.middle[seen] @ onto_page, scene.mesh.e1[seen] @ onto_page * 40.0 / scale, colour=INK)


def _quiver(axes: Any, start: Floats, arrow: Floats, *, colour: str, width: float = 1.6) -> None:
    """Arrows in the units of the drawing area, their line so many pixels wide."""
    axes.quiver(
        start[:, 0],
        start[:, 1],
        arrow[:, 0],
        arrow[:, 1],
        angles="xy",
        scale_units="xy",
        scale=1.0,
        units="dots",
        width=width,
        headwidth=4.5,
        headlength=5.5,
        headaxislength=5.0,
        color=colour,
        clip_on=True,
    )


def _close_up(page: Page, scene: _Scene, top: float) -> None:
    """The nose at the widest part with e1, e2 and e3 of its elements."""
    mesh = scene.mesh
    forward = -1.0 if mesh.hand == CLOCKWISE else 1.0
    camera = Camera((0.3, 0.9 * forward, 0.3))
    nose = int(np.argmax(forward * scene.middle[:, 1]))
    size = float(np.median(np.linalg.norm(np.diff(mesh.points[scene.corners[nose]], axis=0), axis=1)))
    width, height = _LOWER_SPLIT - 2 * MARGIN, _LOWER - 70
    scale = width / (CLOSE_UP_ELEMENTS * size)
    middle = scene.middle[nose] @ camera.axes[:2].T
    frame = Frame(middle[0] - 0.5 * width / scale, middle[1] - 0.5 * height / scale, width / scale, height / scale)

    heading = page.text(MARGIN, top + 12, f"Element axes at the nose, z = {scene.middle[nose, 2]:.2f} m", weight="bold")
    x = MARGIN + page.width_of(heading) + 30
    for name, colour in zip(("e1", "e2", "e3"), AXIS_COLOURS, strict=True):
        x += 20 + page.width_of(page.text(x, top + 12, name, colour=colour, weight="bold"))
    axes = _view(page, scene, camera, frame, place=(MARGIN, top + 40), scale=scale, element_edges=True)
    flat = scene.middle @ camera.axes[:2].T
    seen = np.flatnonzero(frame.holds(flat) & (mesh.e3 @ camera.axes[2] > 0.2) & scene.on_skin)
    for axis, colour in zip((mesh.e1, mesh.e2, mesh.e3), AXIS_COLOURS, strict=True):
        _quiver(axes, flat[seen], 0.5 * size * axis[seen] @ camera.axes[:2].T, colour=colour, width=2.2)
