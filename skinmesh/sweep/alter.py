"""One change made to one value: a plain number, values along the span, or a column of the station table."""

from __future__ import annotations

import csv
from copy import deepcopy
from io import StringIO
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.problems import is_number, no_such, shown
from skinmesh.definition.table import split_rows
from skinmesh.sweep.paths import RefusedError
from skinmesh.sweep.plan import ADD, FACTOR, SET, Change

Floats = NDArray[np.float64]

STEP = 1e-3
"""m over which a value along the span steps where no ramp is asked for: pairs may not share a z."""
RAMP_PARTS = 8
"""Straight parts of a ramp: the product of two sloping lines is none."""
_Z = {"z_m": 1.0, "z_mm": 1e-3}


def share(z: Floats, span: tuple[float, float] | None, ramp: float) -> Floats:
    """How much of a change is made at z: all of it in the span, less on the ramps, else nothing.

    Parameters
    ----------
    z : (n,) float array, m
    span : (float, float), optional, m
    ramp : float, m

    Returns
    -------
    (n,) float array
        0 to 1.

    Examples
    --------
    >>> share(np.array([0.0, 3.0, 4.0, 7.0]), (4.0, 6.0), 2.0).tolist()
    [0.0, 0.5, 1.0, 0.5]
    """
    if span is None:
        return np.ones_like(z)
    outside = np.maximum(np.maximum(span[0] - z, z - span[1]), 0.0)
    return np.asarray(np.clip(1.0 - outside / ramp, 0.0, 1.0) if ramp > 0.0 else (outside <= 0.0).astype(float))


def changed(before: Floats, how_much: Floats, kind: str, amount: float) -> Floats:
    """Values after a change.

    Parameters
    ----------
    before, how_much : (n,) float array
    kind : str
        SET, FACTOR or ADD.
    amount : float

    Returns
    -------
    (n,) float array
    """
    if kind == FACTOR:
        return before * (1.0 + how_much * (amount - 1.0))
    return before + how_much * (amount if kind == ADD else amount - before)


def altered_value(before: Any, change: Change, amount: Any, *, blade_span: tuple[float, float]) -> Any:
    """A field's value after a change.

    Parameters
    ----------
    before : value
        As the blade file has it; None where it does not.
    change : Change
    amount : value
    blade_span : (float, float), m

    Returns
    -------
    value
        Pairs [z, value] where a number is changed over a span.

    Raises
    ------
    RefusedError
        The change does not suit the value.
    """
    if change.kind == SET and change.span is None:
        return deepcopy(amount)
    if not _is_number(amount):
        raise RefusedError(f"over a span only a number can be set, got {shown(amount)}")
    if _is_number(before):
        if change.span is None:
            return _like(before, float(changed(np.array([before]), np.ones(1), change.kind, amount)[0]))
        return _along([[blade_span[0], before]], change, amount, blade_span)
    if isinstance(before, list) and before and all(isinstance(item, list) for item in before):
        if change.span is None:
            values = changed(np.array([v for _, v in before], float), np.ones(len(before)), change.kind, amount)
            return [[z, float(v)] for (z, _), v in zip(before, values, strict=True)]
        return _along(before, change, amount, blade_span)
    if isinstance(before, list) and before and all(map(_is_number, before)) and change.span is None:
        values = changed(np.array(before, float), np.ones(len(before)), change.kind, amount)
        return [float(value) for value in values]
    if before is None:
        raise RefusedError("the blade file does not have this field, so there is nothing to multiply or to add to")
    if isinstance(before, str):
        raise RefusedError(
            f"its value is the text {shown(before)}; if that is a column of the station table, change the column"
        )
    place = " over a span" if change.span else ""
    raise RefusedError(f"its value, {shown(before)}, cannot be multiplied or added to{place}; set it")


def _along(pairs: list[list[float]], change: Change, amount: float, blade_span: tuple[float, float]) -> list[Any]:
    """Pairs [z, value] with a change over a span."""
    span, ramp = change.span or blade_span, change.ramp or STEP
    known_z, known = np.array(pairs, dtype=float).T
    parts = np.linspace(0.0, ramp, 2 if change.ramp == 0.0 else RAMP_PARTS + 1)
    z = np.concatenate([known_z, blade_span, span[0] - parts, span[1] + parts])
    low, high = min(known_z[0], blade_span[0]), max(known_z[-1], blade_span[1])
    z = np.unique(np.round(z[(z >= low) & (z <= high)], 9))
    values = changed(np.interp(z, known_z, known), share(z, span, ramp), change.kind, amount)
    return [[float(a), float(f"{b:.12g}")] for a, b in zip(z, values, strict=True)]


def altered_table(text: str, change: Change, amount: Any) -> str:
    """The station table after a change of one of its columns; comments go, and no line moves.

    Parameters
    ----------
    text : str
    change : Change
    amount : float or str
        In the column's own unit. A text only for the column of profiles.

    Returns
    -------
    str

    Raises
    ------
    RefusedError
        There is no such column, a cell is no number, or no station lies where the change is made.
    """
    rows, separator = split_rows(text.split("\n"))
    header = rows[0][1]
    column = header.index(_known_column(header, str(change.column)))
    body = [(number, cells + [""] * (len(header) - len(cells))) for number, cells in rows[1:]]
    z_column = next(i for i, name in enumerate(header) if name in _Z)
    z = np.array([float(cells[z_column]) * _Z[header[z_column]] for _, cells in body])
    how_much = share(z, change.span, change.ramp)
    if not how_much.any():
        raise RefusedError("no station lies in the span or on its ramps; the table would stay as it is")
    if header[column] == "profile":
        _set_texts(body, column, how_much, change, amount)
    else:
        if not _is_number(amount):
            raise RefusedError(f"the column holds numbers, got {shown(amount)}")
        _set_numbers(body, column, how_much, change, amount)
    lines = [""] * max(number for number, _ in rows)
    for number, cells in (rows[0], *body):
        line = StringIO()
        csv.writer(line, delimiter=separator, lineterminator="").writerow(cells)
        lines[number - 1] = line.getvalue()
    return "\n".join(lines) + "\n"


def _known_column(header: list[str], name: str) -> str:
    if name not in header:
        raise RefusedError(no_such("column", name, header))
    return name


def _set_texts(body: list[tuple[int, list[str]]], column: int, how_much: Floats, change: Change, amount: Any) -> None:
    if change.kind != SET or not isinstance(amount, str):
        raise RefusedError("the column of profiles can only be set, to the name of a profile")
    for (_, cells), part in zip(body, how_much, strict=True):
        if part == 1.0:
            cells[column] = amount


def _set_numbers(
    body: list[tuple[int, list[str]]], column: int, how_much: Floats, change: Change, amount: float
) -> None:
    for (_, cells), part in zip(body, how_much, strict=True):
        # a blank cell has no value to start from
        if part == 0.0 or (not cells[column] and not (change.kind == SET and part == 1.0)):
            continue
        before = cells[column] or "0"
        if not is_number(before):
            raise RefusedError(f"{shown(before)} in the table is not a number")
        value = changed(np.array([float(before)]), np.array([part]), change.kind, amount)[0]
        cells[column] = f"{value:.12g}"


def _like(before: float, value: float) -> float:
    """A whole number where it was one and is one."""
    return int(value) if isinstance(before, int) and value == int(value) else value


def _is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)
