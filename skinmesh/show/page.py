"""A page of a fixed width to lay pictures, words and legends on, measured in pixels from its top left corner."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import MissingExtra
from skinmesh.show.palette import INK, QUIET

Floats = NDArray[np.float64]

WIDTH = 1600
MARGIN = 50
DPI = 100
POINT = 72.0 / DPI
"""Points a pixel."""


def round_ticks(low: float, high: float, *, most: int = 14) -> Floats:
    """Round numbers from low to high, evenly spaced and at most so many.

    >>> round_ticks(0.0, 24.0).tolist()
    [0.0, 2.0, 4.0, 6.0, 8.0, 10.0, 12.0, 14.0, 16.0, 18.0, 20.0, 22.0, 24.0]
    >>> round_ticks(-0.3, 0.9, most=4).tolist()
    [0.0, 0.5]
    """
    size = 10.0 ** np.floor(np.log10((high - low) / most))
    step = next(factor * size for factor in (1.0, 2.0, 5.0, 10.0) if (high - low) / (factor * size) <= most)
    first, last = np.ceil(low / step - 1e-9), np.floor(high / step + 1e-9)
    return np.asarray(np.round(np.arange(first, last + 1) * step, 12) + 0.0)


class Page:
    """A white page.

    Parameters
    ----------
    height : int
        In pixels.

    Raises
    ------
    MissingExtra
        matplotlib is not installed.
    """

    def __init__(self, height: int) -> None:
        try:
            from matplotlib.backends.backend_agg import FigureCanvasAgg
            from matplotlib.figure import Figure
        except ImportError as error:
            raise MissingExtra("Pictures need pyvista and matplotlib: pip install pyvista matplotlib") from error
        self.height = height
        self.figure: Any = Figure(figsize=(WIDTH / DPI, height / DPI), dpi=DPI, facecolor="white")
        FigureCanvasAgg(self.figure)

    def text(
        self,
        x: float,
        y: float,
        words: str,
        *,
        size: float = 17,
        colour: str = INK,
        most: float | None = None,
        **style: Any,
    ) -> Any:
        """Write words; y is the middle of the line, size is in pixels. Returns the text object.

        Words longer than ``most`` pixels lose their middle.
        """
        style = {"ha": "left", "va": "center", **style}
        label = self.figure.text(
            x / WIDTH,
            1.0 - y / self.height,
            words,
            fontsize=size * POINT,
            color=colour,
            parse_math=False,
            family="DejaVu Sans",
            **style,
        )
        kept = len(words)
        while most is not None and kept > 2 and (width := self.width_of(label)) > most:
            kept = max(min(kept - 1, int(kept * most / width)), 2)
            label.set_text(f"{words[: kept - kept // 2]}…{words[len(words) - kept // 2 :]}")
        return label

    def width_of(self, text: Any) -> float:
        """Width of a text object in pixels."""
        return float(text.get_window_extent(self.figure.canvas.get_renderer()).width)

    def axes(self, left: float, top: float, width: float, height: float, *, extent: tuple[float, ...]) -> Any:
        """A drawing area without frame whose scales run over an extent (left, right, bottom, top)."""
        place = (left / WIDTH, 1.0 - (top + height) / self.height, width / WIDTH, height / self.height)
        axes = self.figure.add_axes(place)
        axes.set_xlim(extent[:2])
        axes.set_ylim(extent[2:])
        axes.set_axis_off()
        return axes

    def box(self, left: float, top: float, width: float, height: float, *, colour: Any) -> None:
        """A filled box."""
        from matplotlib.patches import Rectangle

        corner = (left / WIDTH, 1.0 - (top + height) / self.height)
        self.figure.add_artist(
            Rectangle(corner, width / WIDTH, height / self.height, facecolor=colour, edgecolor=QUIET, linewidth=0.4)
        )

    def stroke(self, points: Sequence[tuple[float, float]], *, colour: str) -> None:
        """A thin line through places."""
        from matplotlib.lines import Line2D

        x, y = np.array(points).T
        self.figure.add_artist(Line2D(x / WIDTH, 1.0 - y / self.height, color=colour, linewidth=0.6))

    def swatches(self, left: float, top: float, names: Mapping[str, Any]) -> float:
        """Boxes of colour, each with its name to the right, in as many lines as they need.

        Returns
        -------
        float
            y of the last line's middle.
        """
        return self._legend(left, top, names, height=18)

    def lines(self, left: float, top: float, names: Mapping[str, Any]) -> float:
        """As ``swatches``, with lines of colour instead of boxes."""
        return self._legend(left, top, names, height=5)

    def _legend(self, left: float, top: float, names: Mapping[str, Any], *, height: float) -> float:
        x = left
        y = top
        for name, colour in names.items():
            label = self.text(x + 32, y, name)
            width = 32 + self.width_of(label) + 30
            if x + width > WIDTH - MARGIN + 30 and x > left:
                x, y = left, y + 30
                label.set_position(((x + 32) / WIDTH, 1.0 - y / self.height))
            self.box(x, y - height / 2, 24, height, colour=colour)
            x += width
        return y

    def steps(self, left: float, top: float, width: float, *, levels: Floats, colours: Floats) -> None:
        """A row of boxes of colour with the bounds of the steps under it."""
        step = width / len(colours)
        for k, colour in enumerate(colours):
            self.box(left + k * step, top - 9, step, 18, colour=colour)
        for k, level in enumerate(levels):
            self.text(left + k * step, top + 21, f"{level:g}", size=15, ha="center")

    def save(self, path: Path) -> None:
        """Write the page as PNG."""
        self.figure.savefig(path, dpi=DPI, format="png", metadata={"Software": None})
