"""A comparison in tables, old beside new."""

from __future__ import annotations

from collections.abc import Sequence
from math import degrees

import numpy as np
from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from skinmesh.commands.closing import grouped
from skinmesh.commands.diff_words import NOTABLE, WIDER, cause_lines, is_notable, percent, readable, shows
from skinmesh.compare.run import MeshDifference
from skinmesh.compare.values import CHANGED, NEW, Entry, Value

MOST_LINES = 12
_HEADS = (
    "mass",
    "mass as solids",
    "centre x",
    "centre y",
    "centre z",
    "static moment z",
    "inertia xx about the origin",
    "inertia zz about the origin",
    "area",
    "nodes",
    "elements",
    "stacks",
)
_ALWAYS = ("mass", "static moment z", "elements")


def causes(difference: MeshDifference, turn: float) -> Table:
    """What changed, a line or two for each kind."""
    table = Table.grid(padding=(0, 2, 0, 0))
    table.add_column(no_wrap=True)
    table.add_column(overflow="fold")
    for name, lines in cause_lines(difference, turn):
        for k, line in enumerate(lines):
            table.add_row(Text(name if k == 0 else ""), Text(readable(line)))
    return table


def numbers(difference: MeshDifference) -> Table:
    """Mass, centre, moments and counts of the whole blade, old beside new."""
    table = _table("whole blade")
    for head in ("old", "new", "change", ""):
        table.add_column(head, justify="right", no_wrap=True)
    found = {value.name: value for value in difference.whole}
    for name in _HEADS:
        value = found.get(name)
        if value is None or value.old is None or value.new is None:
            continue
        if name in _ALWAYS or shows(value):
            label = "static moment at the root" if name == "static moment z" else name
            label = label.replace("inertia xx about the origin", "inertia xx at the root")
            label = label.replace("inertia zz about the origin", "inertia zz at the root")
            table.add_row(Text(f"{label} {value.unit}".rstrip()), *_columns(value))
    return table


def along(difference: MeshDifference) -> Table | None:
    """Where the quantities along the span changed most; None where none did."""
    table = _table("along the span, largest change")
    for head in ("at z m", "old", "new", "change", ""):
        table.add_column(head, justify="right", no_wrap=True)
    webs = {region.name for region in difference.new.mesh.regions if region.kind == "web"}
    scales = {"twist": (degrees(1.0), "°"), "mass per length": (1.0, "kg/m")}
    for name, found in difference.largest.items():
        factor, unit = scales.get(name, (1.0, "m"))
        value = Value(name, unit, factor * found.old, factor * found.new)
        size = max(abs(found.old), abs(found.new))
        least = WIDER if name.startswith("width") else NOTABLE
        if abs(found.difference) > least * size and (name != "twist" or abs(value.difference or 0.0) > 0.01):
            region = name.removeprefix("width of ")
            label = f"height of {region}" if region in webs else name
            table.add_row(Text(readable(f"{label} {unit}")), f"{found.z:.3f}", *_columns(value))
    return table if table.row_count else None


def entries_table(head: str, entries: Sequence[Entry], names: Sequence[str]) -> Table | None:
    """Things that came, went or changed, with some of their values; None where nothing notable did."""
    shown = [entry for entry in entries if entry.state != CHANGED or any(is_notable(entry, name) for name in names)]
    if not shown:
        return None
    table = _table(head)
    table.add_column("")
    units = {value.name: value.unit for entry in entries for value in entry.values}
    for name in names:
        table.add_column(f"{name} {units.get(name, '')}".rstrip(), justify="right", no_wrap=True)
    for entry in shown[:MOST_LINES]:
        table.add_row(
            Text(readable(entry.name)),
            "" if entry.state == CHANGED else entry.state,
            *(_cell(entry, name) for name in names),
        )
    if len(shown) > MOST_LINES:
        table.add_row(f"and {len(shown) - MOST_LINES} more", "")
    return table


def detail_tables(difference: MeshDifference) -> list[RenderableType]:
    """The tables after the first screen."""
    tables = [
        entries_table(
            "station", difference.stations.entries, ("chord", "twist", "pitch axis", "thickness ratio", "profile")
        ),
        entries_table("region", difference.regions, ("area", "mass", "from z", "to z")),
        entries_table("ply", difference.plies, ("most layers", "from z", "to z", "mass")),
    ]
    return [table for table in tables if table is not None]


def _table(head: str) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold")
    table.add_column(Text(readable(head)))
    return table


def _columns(value: Value) -> tuple[str, str, str, str]:
    """Old, new, change and share, as text."""
    old, new = float(value.old or 0.0), float(value.new or 0.0)
    if not shows(value):
        value = Value(value.name, value.unit, value.old, value.old)
        new = old
    if isinstance(value.old, int) and isinstance(value.new, int):
        change = value.new - value.old
        return grouped(value.old), grouped(value.new), f"{change:+d}" if change else "", percent(value)
    digits = _digits(max(abs(old), abs(new)))
    change_digits = min(digits + 2, 6)
    shown = f"{new - old:+.{change_digits}f}" if old != new else ""
    return f"{old:.{digits}f}", f"{new:.{digits}f}", shown, percent(value)


def _digits(size: float) -> int:
    """Decimal places that show about five digits."""
    return int(np.clip(4 - np.floor(np.log10(size)), 0, 4)) if size > 0.0 else 1


def _cell(entry: Entry, name: str) -> str:
    """A value, or both where it changed."""
    found = {value.name: value for value in entry.values}.get(name)
    if found is None:
        return ""
    if found.is_equal or (entry.state == CHANGED and not is_notable(entry, name)):
        return _short(found.new)
    if entry.state != CHANGED:
        return _short(found.new if entry.state == NEW else found.old)
    return f"{_short(found.old)} → {_short(found.new)}"


def _short(value: float | int | str | None) -> str:
    if value is None:
        return "–"
    return readable(value) if isinstance(value, str) else f"{value:.5g}"
