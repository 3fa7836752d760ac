"""Six panels of curves over the span on one page."""

from __future__ import annotations

from typing import Any

from skinmesh.show.page import MARGIN, WIDTH, Page
from skinmesh.show.palette import INK

HEIGHT, TOP, GAP_ACROSS, GAP_DOWN = 1180, 130, 110, 95
COLUMNS, ROWS = 3, 2


def panel(page: Page, place: int, title: str, span: tuple[float, float], *, is_log: bool = False) -> Any:
    """A drawing area with a title, a grid, and z along its foot.

    Parameters
    ----------
    page : Page
        HEIGHT pixels high.
    place : int
        0 to 5, from the top left.
    title : str
    span : (float, float), m
    is_log : bool
        Whether the upward scale is logarithmic.

    Returns
    -------
    matplotlib Axes
    """
    width = (WIDTH - 2 * MARGIN - (COLUMNS - 1) * GAP_ACROSS - 50) / COLUMNS
    height = (HEIGHT - TOP - 90 - (ROWS - 1) * GAP_DOWN) / ROWS
    row, column = divmod(place, COLUMNS)
    left, top = MARGIN + 50 + column * (width + GAP_ACROSS), TOP + row * (height + GAP_DOWN)
    axes = page.axes(left, top, width, height, extent=(*span, 0.0, 1.0))
    axes.set_axis_on()
    axes.set_ylim(auto=True)
    axes.set_yscale("log" if is_log else "linear")
    axes.set_title(title, loc="left", fontsize=12, color=INK)
    axes.set_xlabel("z, m", fontsize=10, color=INK)
    axes.grid(color="#e4e4e4", linewidth=0.6)
    axes.spines[["top", "right"]].set_visible(False)
    return axes
