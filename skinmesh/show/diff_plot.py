"""Two built meshes along the span, the old one beside the new one."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.compare.run import MeshDifference
from skinmesh.compare.surface import BY_NUMBER, Move
from skinmesh.show.page import MARGIN, Page
from skinmesh.show.palette import AXIS_COLOURS, INK, QUIET
from skinmesh.show.panel import HEIGHT, panel
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]

_OLD, _NEW = QUIET, AXIS_COLOURS[1]
_BINS = 60
_LEAST_MOVE = 1e-3
"""Move that the scale shows at least, m, so that what the coarser mesh cannot resolve is not drawn large."""


def diff_plot(difference: MeshDifference, path: Path) -> None:
    """Draw both meshes along the span and write the picture as PNG, 1600 pixels wide.

    Parameters
    ----------
    difference : MeshDifference
    path : Path

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    page = Page(HEIGHT)
    page.text(MARGIN, 40, difference.new.mesh.title, size=26)
    names = [built.directory.resolve().name for built in (difference.old, difference.new)]
    words = f"What changed along the span. Dashed grey: {names[0]}. Blue: {names[1]}."
    page.text(MARGIN, 78, words, colour=QUIET)
    old, new = difference.along
    forms = old.planform, new.planform
    z = float(min(old.ends[0], new.ends[0])), float(max(old.ends[-1], new.ends[-1]))
    for place, (title, curves) in enumerate(
        (
            ("chord, m", [(form.z, form.chord) for form in forms]),
            ("twist, °", [(form.z, np.degrees(form.twist)) for form in forms]),
            ("thickness of the sections, m", [(form.z, form.thickness) for form in forms]),
            ("mass, kg/m", [(along.middles, along.mass) for along in (old, new)]),
        )
    ):
        _pair(panel(page, place, title, z), *curves)
    _mass_change(panel(page, 4, "mass, new less old, kg/m", z), difference)
    _moves(panel(page, 5, "move, largest at each z, mm", z), difference)
    page.text(MARGIN, HEIGHT - 25, CAUTION[0], size=14, colour=QUIET)
    page.save(path)


def _pair(axes: Any, old: tuple[Floats, Floats], new: tuple[Floats, Floats]) -> None:
    axes.plot(*new, color=_NEW, linewidth=1.6, label="new")
    axes.plot(*old, color=_OLD, linewidth=1.4, linestyle=(0, (4, 3)), label="old")
    axes.legend(frameon=False, fontsize=10)


def _mass_change(axes: Any, difference: MeshDifference) -> None:
    """The change as steps over equal parts of the span: the area under it is the change of mass."""
    old, new = difference.along
    ends = np.linspace(min(old.ends[0], new.ends[0]), max(old.ends[-1], new.ends[-1]), _BINS + 1)
    change = new.means(new.mass, ends) - old.means(old.mass, ends)
    axes.stairs(change, ends, color=_NEW, linewidth=1.4, baseline=None)
    axes.axhline(0.0, color=INK, linewidth=0.6)
    size = max(float(np.abs(change).max(initial=0.0)), 1e-3 * float(old.mass.max(initial=0.0)), 1e-9)
    axes.set_ylim(-1.15 * size, 1.15 * size)


def _moves(axes: Any, difference: MeshDifference) -> None:
    nodes, shape = difference.surface.nodes, difference.surface.shape
    largest = shape.largest
    if nodes is not None:
        label = "nodes" if nodes.way == BY_NUMBER else "equal row and seam"
        axes.plot(*_envelope(nodes), color=_NEW, linewidth=1.4, label=label)
        largest = max(largest, nodes.largest)
    axes.plot(*_envelope(shape), color=AXIS_COLOURS[0], linewidth=1.4, label="skin as a shape")
    axes.set_ylim(0.0, 1.15e3 * max(largest, _LEAST_MOVE))
    axes.legend(frameon=False, fontsize=10)


def _envelope(move: Move) -> tuple[Floats, Floats]:
    """Largest move in each of some equal parts of the span, mm."""
    ends = np.linspace(float(move.z.min()), float(move.z.max()) + 1e-9, _BINS + 1)
    part = np.clip(np.searchsorted(ends, move.z, side="right") - 1, 0, _BINS - 1)
    most = np.full(_BINS, -1.0)
    np.maximum.at(most, part, 1e3 * move.distance)
    has = most >= 0.0
    return (0.5 * (ends[1:] + ends[:-1]))[has], most[has]
