"""The results of a sweep as a picture: curves over one swept value, maps over two, else dots a variant."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.show.page import MARGIN, Page
from skinmesh.show.palette import AXIS_COLOURS, INK, QUIET
from skinmesh.show.panel import HEIGHT, panel
from skinmesh.sweep.metrics import TEXT
from skinmesh.sweep.table import ResultTable
from skinmesh.sweep.variant import OK
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]
Row = Mapping[str, Any]

PANELS: tuple[tuple[str, str], ...] = (
    ("mass, kg", "solid_mass_kg"),
    ("tip deflection, flap-wise, mm/kN", "tip_flap_m_per_N"),
    ("tip deflection, edge-wise, mm/kN", "tip_edge_m_per_N"),
    ("first natural frequency, Hz", "frequency_1_Hz"),
    ("second natural frequency, Hz", "frequency_2_Hz"),
    ("least scaled Jacobian", "least_scaled_jacobian"),
)
_FACTOR = {"tip_flap_m_per_N": 1e6, "tip_edge_m_per_N": 1e6}
DARK, FAILED_COLOUR = AXIS_COLOURS[1], AXIS_COLOURS[0]
MOST_NUMBERS = 100
"""Cells of a map up to which each carries its number."""


def sweep_plot(table: ResultTable, path: Path) -> None:
    """Draw the results of a sweep and write the picture as PNG, 1600 pixels wide.

    One number that is swept: a curve over it for each metric. Two in a grid: a map for each. Else a dot for each
    variant. Variants that failed are crosses.

    Parameters
    ----------
    table : ResultTable
    path : Path

    Raises
    ------
    MissingExtra
        A library of the extra ``pictures`` is not installed.
    """
    page = Page(HEIGHT)
    page.text(MARGIN, 40, table.title, size=26)
    swept = _swept_numbers(table)
    if swept is not None and len(swept) == 2 and _is_grid(table, swept):
        said, draw = f"{swept[0]} to the right, {swept[1]} upwards.", _map
    elif swept is not None and len(swept) == 1:
        said, draw = f"Over {swept[0]}.", _curve
    else:
        swept, said, draw = ("variant",), "A dot for each variant, in the order of the table.", _dots
    n_failed = sum(row["status"] != OK for row in table.rows)
    failed = f" Crosses: {n_failed} of {len(table.rows)} variants failed; the table says why." if n_failed else ""
    page.text(MARGIN, 78, f"{said}{failed} Deflections and frequencies by beam theory.", colour=QUIET)
    for place, (title, column) in enumerate(PANELS):
        values = np.array([_value(row, column) for row in table.rows])
        draw(page, place, title, table.rows, swept, values)
    page.text(MARGIN, HEIGHT - 25, CAUTION[0], size=14, colour=QUIET)
    page.save(path)


def _value(row: Row, column: str) -> float:
    value = row.get(column)
    return np.nan if value is None else float(value) * _FACTOR.get(column, 1.0)


def _swept_numbers(table: ResultTable) -> tuple[str, ...] | None:
    """Changes with several values, where all of them are numbers that every variant has."""
    kinds = {column.name: column.kind for column in table.columns}
    several = [name for name in table.changes if len({row[name] for row in table.rows}) > 1]
    is_plain = all(kinds[name] != TEXT and all(row[name] is not None for row in table.rows) for name in several)
    return tuple(several) if is_plain and several else None


def _is_grid(table: ResultTable, swept: tuple[str, ...]) -> bool:
    """Whether the variants fill a grid of two values, each place once."""
    places = {(row[swept[0]], row[swept[1]]) for row in table.rows}
    sizes = [len({row[name] for row in table.rows}) for name in swept]
    return len(places) == len(table.rows) == sizes[0] * sizes[1]


def _frame(page: Page, place: int, title: str, x: Floats, name: str) -> Any:
    low, high = float(x.min()), float(x.max())
    margin = 0.04 * (high - low) or 0.5
    axes = panel(page, place, title, (low - margin, high + margin))
    axes.set_xlabel(name, fontsize=10, color=INK, parse_math=False)
    return axes


def _curve(page: Page, place: int, title: str, rows: tuple[Row, ...], swept: tuple[str, ...], values: Floats) -> None:
    x = np.array([float(row[swept[0]]) for row in rows])
    order = np.argsort(x, kind="stable")
    _draw_line(_frame(page, place, title, x, swept[0]), x[order], values[order], line="-")


def _dots(page: Page, place: int, title: str, rows: tuple[Row, ...], swept: tuple[str, ...], values: Floats) -> None:
    x = np.array([float(row[swept[0]]) for row in rows])
    _draw_line(_frame(page, place, title, x, swept[0]), x, values, line="none")


def _draw_line(axes: Any, x: Floats, values: Floats, *, line: str) -> None:
    known = np.isfinite(values)
    axes.plot(x[known], values[known], marker="o", markersize=5, linewidth=1.4, linestyle=line, color=DARK)
    axes.ticklabel_format(axis="y", useOffset=False)
    lost = x[~known]
    axes.plot(
        lost, np.full(len(lost), 0.03), "x", color=FAILED_COLOUR, markersize=9, transform=axes.get_xaxis_transform()
    )


def _map(page: Page, place: int, title: str, rows: tuple[Row, ...], swept: tuple[str, ...], values: Floats) -> None:
    x, column = np.unique([float(row[swept[0]]) for row in rows], return_inverse=True)
    y, line = np.unique([float(row[swept[1]]) for row in rows], return_inverse=True)
    cells = np.full((len(y), len(x)), np.nan)
    cells[line, column] = values
    axes = panel(page, place, title, (-0.5, len(x) - 0.5))
    # light to dark of one hue: readable in print and to colour-blind eyes
    shown = axes.imshow(cells, origin="lower", aspect="auto", cmap="Blues", interpolation="nearest")
    axes.grid(visible=False)
    axes.set_xlabel(swept[0], fontsize=10, color=INK, parse_math=False)
    axes.set_ylabel(swept[1], fontsize=10, color=INK, parse_math=False)
    for ticks, labels, known in (
        (axes.set_xticks, axes.set_xticklabels, x),
        (axes.set_yticks, axes.set_yticklabels, y),
    ):
        places = np.unique(np.linspace(0, len(known) - 1, min(len(known), 8)).round().astype(int))
        ticks(places)
        labels([f"{known[k]:.4g}" for k in places], fontsize=9)
    low, high = shown.get_clim() if np.isfinite(cells).any() else (0.0, 1.0)
    digits = _digits(low, high)
    for (i, k), value in np.ndenumerate(cells):
        if np.isnan(value):
            axes.text(k, i, "×", ha="center", va="center", color=FAILED_COLOUR, fontsize=12)
        elif cells.size <= MOST_NUMBERS:
            is_dark = value > low + 0.6 * (high - low)
            words = f"{value:.{digits}f}"
            axes.text(k, i, words, ha="center", va="center", color="white" if is_dark else INK, fontsize=7)
    if cells.size > MOST_NUMBERS:
        page.figure.colorbar(shown, ax=axes)


def _digits(low: float, high: float) -> int:
    """Decimals that tell the values of a range apart; three significant digits where they are all one.

    >>> _digits(1724.0, 1808.0), _digits(1.757, 1.848), _digits(0.049781, 0.049781)
    (0, 3, 4)
    """
    size = max(abs(low), abs(high), 1e-300)
    step = max((high - low) / 20.0, size * 1e-4) if high > low else size * 5e-3
    return int(np.clip(np.ceil(-np.log10(step)), 0, 6))
