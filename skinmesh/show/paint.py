"""What a picture shows of each element: a colour, and the legend that tells what it stands for."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.show.palette import BARE, part_colours, part_name, rgb, scale_colours

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

N_STEPS = 8


@dataclass(frozen=True, eq=False)
class Paint:
    """Colours of all elements and their legend.

    Attributes
    ----------
    title : str
        What is shown, with its unit.
    colours : (m, 3) float array, 0 to 1
    border : (m,) int array
        A line runs where it changes.
    names : mapping of str to (3,) float array
        Legend of a picture of names.
    levels : (k + 1,) float array
        Bounds of the steps of a picture of values; empty for names.
    steps : (k, 3) float array
        Colours of the steps.
    """

    title: str
    colours: Floats
    border: Ints
    names: Mapping[str, Floats]
    levels: Floats
    steps: Floats


def round_levels(low: float, high: float, *, whole: bool = False) -> Floats:
    """At most ``N_STEPS`` steps with round bounds that hold low and high.

    >>> round_levels(1.3, 61.0).tolist()
    [0.0, 10.0, 20.0, 30.0, 40.0, 50.0, 60.0, 70.0]
    >>> round_levels(3, 5, whole=True).tolist()
    [3.0, 4.0, 5.0, 6.0]
    """
    # A whole number stands for itself and all up to the next one.
    high = high + 1.0 if whole else high
    span = max(high - low, 1e-6 * abs(high), 1e-9)
    power = 10.0 ** np.floor(np.log10(span / N_STEPS))
    sizes = power * np.array([1.0, 2.0, 2.5, 5.0, 10.0, 20.0])
    for size in sizes[sizes == np.rint(sizes)] if whole else sizes:
        first = np.floor(low / size + 1e-9)
        last = max(np.ceil(high / size - 1e-9), first + 1.0)
        if last - first <= N_STEPS:
            break
    return np.asarray(np.round(np.arange(first, last + 1.0) * size, 12))


def paint_regions(mesh: ShellMesh) -> Paint:
    """Each part in its own colour, both sides alike."""
    colours = part_colours(mesh.regions)
    of_region = rgb([colours[part_name(region)] for region in mesh.regions])
    names = dict(zip(colours, rgb(list(colours.values())), strict=True))
    return Paint("Regions", of_region[mesh.region], mesh.region, names, np.zeros(0), np.zeros((0, 3)))


def paint_stacks(mesh: ShellMesh) -> Paint:
    """Number of layers, with a line wherever the stack changes."""
    title = f"Stacks: number of layers; a line runs where one of the {len(mesh.stacks)} stacks ends"
    return _paint_values(mesh, mesh.n_plies.astype(float), title, whole=True)


def paint_thickness(mesh: ShellMesh) -> Paint:
    """Thickness of the laminate in millimetres."""
    return _paint_values(mesh, mesh.thickness * 1e3, "Thickness of the laminate, mm")


def paint_e1(mesh: ShellMesh) -> Paint:
    """Angle between e1 and the pitch axis in degrees."""
    angle = np.degrees(np.arccos(np.clip(mesh.e1[:, 2], -1.0, 1.0)))
    levels = round_levels(0.0, float(np.ceil(angle.max())))
    return _paint_levels(angle, "Angle of e1 to the pitch axis, degrees", levels, mesh.region)


PAINTS: Mapping[str, Callable[[ShellMesh], Paint]] = {
    "region": paint_regions,
    "stack": paint_stacks,
    "thickness": paint_thickness,
    "e1": paint_e1,
}


def _paint_values(mesh: ShellMesh, values: Floats, title: str, *, whole: bool = False) -> Paint:
    values = np.round(values, 9)
    covered = mesh.stack != NO_STACK
    if not covered.any():
        bare = np.broadcast_to(rgb([BARE]), (len(values), 3))
        return Paint(title, bare, mesh.region, {"no plies": rgb([BARE])[0]}, np.zeros(0), np.zeros((0, 3)))
    levels = round_levels(float(values[covered].min()), float(values[covered].max()), whole=whole)
    paint = _paint_levels(values, title, levels, mesh.stack)
    if covered.all():
        return paint
    colours = np.where(covered[:, None], paint.colours, rgb([BARE]))
    return Paint(title, colours, paint.border, {"no plies": rgb([BARE])[0]}, paint.levels, paint.steps)


def _paint_levels(values: Floats, title: str, levels: Floats, border: Ints) -> Paint:
    steps = scale_colours(len(levels) - 1)
    colours = steps[np.clip(np.searchsorted(levels, values, side="right") - 1, 0, len(steps) - 1)]
    return Paint(title, colours, border, {}, levels, steps)
