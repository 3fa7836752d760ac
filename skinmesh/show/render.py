"""Off-screen rendering of a mesh to an array of pixels. The only user of pyvista."""

from __future__ import annotations

import ctypes
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import MissingExtra

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Pixels = NDArray[np.uint8]

OVERSAMPLING = 2
"""Pixels are rendered this many times finer and then averaged."""

EGL = "libEGL.so.1"


@dataclass(frozen=True)
class Camera:
    """A view without perspective in which the pitch axis runs to the right.

    Attributes
    ----------
    towards : (float, float, float)
        From the blade to the eye, in blade axes; not along z.

    Examples
    --------
    >>> Camera((1.0, 0.0, 0.0)).axes.tolist()
    [[0.0, 0.0, 1.0], [0.0, -1.0, 0.0], [1.0, 0.0, 0.0]]
    """

    towards: tuple[float, float, float]

    @property
    def axes(self) -> Floats:
        """(3, 3) float array: the picture's right, up and out of the page, as rows."""
        out = np.array(self.towards) / np.linalg.norm(self.towards)
        up = np.cross(out, [0.0, 0.0, 1.0])
        up = up / np.linalg.norm(up)
        return np.stack([np.cross(up, out), up, out]) + 0.0


@dataclass(frozen=True, eq=False)
class Frame:
    """The part of the picture plane that is drawn.

    Attributes
    ----------
    left, bottom, width, height : float, m
        Along the picture's right and up axes.
    """

    left: float
    bottom: float
    width: float
    height: float

    @property
    def extent(self) -> tuple[float, float, float, float]:
        """Left, right, bottom, top."""
        return self.left, self.left + self.width, self.bottom, self.bottom + self.height

    def holds(self, flat: Floats) -> NDArray[np.bool_]:
        """(n,) bool array: which of (n, 2) points of the picture plane lie inside."""
        inside = (flat > [self.left, self.bottom]) & (flat < [self.left + self.width, self.bottom + self.height])
        return np.asarray(inside.all(axis=1))


def frame_of(points: Floats, camera: Camera, *, margin: float = 0.0) -> Frame:
    """Smallest frame that holds points.

    Parameters
    ----------
    points : (n, 3) float array, m
    camera : Camera
    margin : float, m
        Added on every side.
    """
    flat = points @ camera.axes[:2].T
    low, high = flat.min(axis=0) - margin, flat.max(axis=0) + margin
    return Frame(float(low[0]), float(low[1]), float(high[0] - low[0]), float(high[1] - low[1]))


@contextmanager
def quiet_plotter(width: int, height: int) -> Iterator[Any]:
    """A pyvista plotter off the screen, closed at the end.

    Parameters
    ----------
    width, height : int
        In pixels.

    Raises
    ------
    MissingExtra
        pyvista, or the library that draws without a display, is not installed.
    """
    try:
        import pyvista
        from vtkmodules.vtkCommonCore import vtkLogger
    except ImportError as error:
        raise MissingExtra(f"Pictures need pyvista and matplotlib: pip install pyvista matplotlib ({error})") from error
    _require_window_system()
    # Without a display VTK first knocks at an X server, and would print that nobody answers.
    told = vtkLogger.GetCurrentVerbosityCutoff()
    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
    try:
        plotter: Any = pyvista.Plotter(off_screen=True, window_size=[width, height])
        try:
            yield plotter
        finally:
            plotter.close()
    finally:
        vtkLogger.SetStderrVerbosity(told)


def _require_window_system() -> None:
    """Say what VTK, which ends the whole process where it finds nothing to draw with, does not say."""
    if sys.platform != "linux" or os.environ.get("DISPLAY"):
        return
    try:
        ctypes.CDLL(EGL)
    except OSError as error:
        raise MissingExtra(f"Pictures need {EGL} where there is no display: apt-get install libegl1") from error


def shaded(colours: Floats, normals: Floats, camera: Camera) -> Pixels:
    """Colours of elements in soft light from behind the eye's left shoulder.

    Parameters
    ----------
    colours : (m, 3) float array, 0 to 1
    normals : (m, 3) float array
    camera : Camera

    Returns
    -------
    (m, 3) uint8 array
    """
    right, up, out = camera.axes
    light = out - 0.25 * right + 0.45 * up
    light = light / np.linalg.norm(light)
    # Inner faces, seen through an open end, are lit from their own side and a little darker.
    facing = np.sign(normals @ out)
    bright = np.clip(facing * (normals @ light), 0.0, 1.0)
    share = np.where(facing < 0, 0.62, 0.74) + 0.26 * bright
    return np.asarray(np.rint(255.0 * np.clip(colours * share[:, None], 0.0, 1.0)), dtype=np.uint8)


def render(
    points: Floats,
    corners: Ints,
    *,
    colours: Pixels,
    camera: Camera,
    frame: Frame,
    pixels: tuple[int, int],
    lines: Ints | None = None,
    line_colour: str = "#222222",
    line_width: float = 1.0,
    element_edges: bool = False,
) -> Pixels:
    """Draw elements, hidden ones hidden, on white.

    Parameters
    ----------
    points : (n, 3) float array, m
    corners : (m, 3) or (m, 4) int array
    colours : (m, 3) uint8 array
    camera : Camera
    frame : Frame
    pixels : (int, int)
        Width and height of the picture; the frame's shape follows them about its middle.
    lines : (k, 2) int array
        Node indices of lines on the surface.
    line_colour : str
    line_width : float
        In pixels.
    element_edges : bool
        Whether to draw the elements' sides.

    Returns
    -------
    (height, width, 3) uint8 array

    Raises
    ------
    MissingExtra
        pyvista is not installed.
    """
    width, height = pixels
    right, up, out = camera.axes
    depth = float(np.ptp(points, axis=0).max())
    middle = (frame.left + 0.5 * frame.width) * right + (frame.bottom + 0.5 * frame.height) * up
    strokes = [(_sides(corners), "#5a5a5a", 0.5, 1.0)] if element_edges else []
    if lines is not None and len(lines):
        strokes.append((lines, line_colour, line_width, 2.0))
    with quiet_plotter(OVERSAMPLING * width, OVERSAMPLING * height) as plotter:
        plotter.set_background("white")
        body = _poly_data(points, corners)
        body.cell_data["colour"] = colours
        plotter.add_mesh(body, scalars="colour", rgb=True, lighting=False, show_scalar_bar=False)
        for ends, colour, thick, lift in strokes:
            wires = _poly_data(points, ends)
            actor = plotter.add_mesh(wires, color=colour, line_width=OVERSAMPLING * thick, lighting=False)
            # Drawn nearer than it is, or the surface that it lies on would eat half of it.
            actor.mapper.SetResolveCoincidentTopologyToPolygonOffset()
            actor.mapper.SetRelativeCoincidentTopologyLineOffsetParameters(-1.0, -8.0 * lift)
        plotter.camera.parallel_projection = True
        plotter.camera.focal_point = tuple(middle)
        plotter.camera.position = tuple(middle + 10.0 * depth * out)
        plotter.camera.up = tuple(up)
        plotter.camera.parallel_scale = 0.5 * frame.height
        plotter.camera.clipping_range = (depth, 20.0 * depth)
        fine = plotter.screenshot(return_img=True)
    fine = np.asarray(fine)[:, :, :3].reshape(height, OVERSAMPLING, width, OVERSAMPLING, 3)
    return np.asarray(np.rint(fine.mean(axis=(1, 3))), dtype=np.uint8)


def _sides(corners: Ints) -> Ints:
    ends = np.sort(np.stack([corners, np.roll(corners, -1, axis=1)], axis=-1).reshape(-1, 2), axis=1)
    return np.unique(ends, axis=0)


def _poly_data(points: Floats, cells: Ints) -> Any:
    import pyvista

    counted = np.column_stack([np.full(len(cells), cells.shape[1]), cells]).ravel()
    if cells.shape[1] == 2:
        return pyvista.PolyData(points, lines=counted)
    return pyvista.PolyData(points, faces=counted)
