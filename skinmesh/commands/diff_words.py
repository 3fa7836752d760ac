"""A comparison in sentences, the most telling first."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from math import degrees

import numpy as np
from rich.text import Text

from skinmesh.check.finding import listed
from skinmesh.commands.closing import NARROW_SPACE, grouped, printable, significant
from skinmesh.compare.elements import BY_NUMBER as ONE_BY_ONE
from skinmesh.compare.run import MeshDifference
from skinmesh.compare.stations import ColumnChange, is_one
from skinmesh.compare.surface import BY_NUMBER, BY_PLACE, Move
from skinmesh.compare.values import CHANGED, GONE, NEW, Entry, Value
from skinmesh.definition.blade import SIDE_NAMES

NOTABLE = 5e-4
"""Share of a value from which on its change is worth a line."""
SAME = 1e-9
"""Length that is nothing, m."""
SLIDE = 0.05
"""Share of the nodes' largest move up to which the skin as a shape has stayed."""
WIDER = 5e-3
"""The same for widths along the span, which are means over parts of it."""


def readable(text: str) -> str:
    """Text without control characters, counts with their thousands apart."""
    return NARROW_SPACE.join(printable(part) for part in text.split(NARROW_SPACE))


def verdict(difference: MeshDifference) -> Text:
    """The first line: whether anything changed, and whether numbers stay valid."""
    if difference.is_equal:
        return Text("Equal in everything but dates and versions.", style="bold green")
    if difference.is_same_mesh and not difference.files:
        return Text(f"The meshes are the same to the last bit; {_beside(difference)}.", style="bold")
    if difference.is_same_mesh:
        files = ", ".join(f".{ending}" for ending in difference.files)
        return Text(f"The meshes are the same, but files made from them are not: {files}.", style="bold red")
    return Text(
        readable(difference.numbering.sentence), style="bold" if difference.numbering.is_kept else "bold yellow"
    )


def _beside(difference: MeshDifference) -> str:
    """What is another though the mesh is the same."""
    names = [entry.name for entry in difference.inputs]
    keys = [key for key in difference.summary_keys if key != "inputs"]
    parts = [f"input files of another text: {listed(names)}"] if names else []
    parts += [f"the summaries differ in {listed(keys)}"] if keys else []
    return readable("; ".join(parts))


def effect(difference: MeshDifference) -> Text:
    """The change in one line: mass, static moment, surface."""
    found = {value.name: value for value in difference.whole}
    words = []
    for name, label in (("mass", "mass"), ("static moment z", "static moment at the root")):
        value = found[name]
        if shows(value) and value.difference is not None:
            share = percent(value)
            words.append(f"{label} {value.difference:+.4g} {value.unit}{f' ({share})' if share else ''}")
    if not words:
        words.append("mass and static moment the same")
    shape = difference.surface.shape.largest
    words.append(f"skin moved {_mm(shape)} at most" if shape > 1e-6 else "skin not moved")
    n = int(np.count_nonzero(difference.elements.stack_changed))
    if n:
        words.append(f"other plies on {grouped(n)} elements")
    return Text(readable("; ".join(words) + "."))


def cause_lines(difference: MeshDifference, turn: float) -> list[tuple[str, list[str]]]:
    """What changed, some sentences for each kind.

    Parameters
    ----------
    difference : MeshDifference
    turn : float, rad
        Elements that turned by more are counted.

    Returns
    -------
    list of (str, list of str)
        Name of the kind and its sentences, none where nothing changed.
    """
    return [
        ("title", _titles(difference)),
        ("stations", _stations(difference)),
        ("mesh settings", [_setting(value) for value in difference.settings if value.name != "title"]),
        ("regions", _regions(difference)),
        ("plies", _plies(difference)),
        ("materials", _materials(difference.materials)),
        ("stacks", _stack_lines(difference)),
        ("surface", _surface(difference)),
        ("axes", [_turned(difference, turn)]),
        ("warnings", _warnings(difference)),
        ("inputs", _inputs(difference)),
    ]


def _turned(difference: MeshDifference, turn: float) -> str:
    """How many elements turned, in one sentence."""
    parts = []
    for name, angle in (("0° direction", difference.elements.turned), ("normal", difference.elements.tilted)):
        n = int(np.count_nonzero(angle > turn))
        if angle.max(initial=0.0) > 0.0:
            parts.append(
                f"{name} of {grouped(n) if n else 'no'} element{'s' if n != 1 else ''} by more than"
                f" {degrees(turn):.3g}°, {degrees(float(angle.max())):.2f}° at most"
            )
    if not parts:
        return "no element turned"
    way = "" if difference.elements.pairs.way == ONE_BY_ONE else ", against the closest point of the old surface"
    return "; ".join(parts) + way


def shows(value: Value) -> bool:
    """Whether a change can be seen in five digits."""
    if value.is_equal or isinstance(value.old, str) or isinstance(value.new, str):
        return False
    size = max(abs(float(value.old or 0.0)), abs(float(value.new or 0.0)))
    floor = 1e-4 if value.name.startswith("centre") else 1e-5 * size
    return abs(value.difference or 0.0) > floor


def percent(value: Value) -> str:
    if value.is_equal or value.share is None or value.name.startswith(("centre", "twist")):
        return ""
    return f"{100 * value.share:+.2f} %"


def is_notable(entry: Entry, name: str) -> bool:
    """Whether a value changed by more than rounding in one of its five digits."""
    found = {value.name: value for value in entry.values}.get(name)
    if found is None or found.is_equal:
        return False
    return found.share is None or abs(found.share) > NOTABLE


def _titles(difference: MeshDifference) -> list[str]:
    titles = [built.mesh.title for built in (difference.old, difference.new)]
    return [] if titles[0] == titles[1] else [f"{titles[0]}, now {titles[1]}"]


def _stations(difference: MeshDifference) -> list[str]:
    stations = difference.stations
    if not stations.is_known:
        return ["not in the files, which an earlier version wrote: look at the planform along the span"]
    lines = []
    for state in (GONE, NEW):
        names = [entry.name for entry in stations.entries if entry.state == state]
        if names:
            lines.append(f"{len(names)} {state}: {listed(names, most=6)}")
    return lines + [_column_words(column) for column in stations.columns]


def _column_words(column: ColumnChange) -> str:
    words = ""
    if column.words:
        words = column.words
    elif column.share is not None and column.unit == "m":
        words = _ranged([f"{100 * share:+.3g}" for share in column.share], is_one(column.share), " %")
        if column.difference is not None:
            words += f" ({_ranged([f'{d:+.4g}' for d in column.difference], is_one(column.difference), ' m')})"
    elif column.difference is not None:
        unit = column.unit if column.unit in ("", "°") else f" {column.unit}"
        words = _ranged([f"{d:+.4g}" for d in column.difference], is_one(column.difference), unit)
    else:
        words = "given or left out"
    where = f"z = {column.z[0]:g} m" if column.z[0] == column.z[1] else f"z = {column.z[0]:g} to {column.z[1]:g} m"
    return f"{column.name} {words} at {column.stations} of {column.of} stations, {where}"


def _ranged(values: Sequence[str], is_single: bool, unit: str) -> str:
    return f"{values[0]}{unit}" if is_single or values[0] == values[1] else f"{values[0]} to {values[1]}{unit}"


def _setting(value: Value) -> str:
    return f"{value.name}: {_shown(value.old)}, now {_shown(value.new)}"


def _shown(value: float | int | str | None) -> str:
    return "none" if value is None else f"{value:.6g}" if isinstance(value, float) else str(value)


def _regions(difference: MeshDifference) -> list[str]:
    lines = []
    for state in (GONE, NEW):
        own = [entry for entry in difference.regions if entry.state == state]
        for entry in own:
            side = "old" if state == GONE else "new"
            area, low, high = (getattr(entry.value(name), side) for name in ("area", "from z", "to z"))
            span = "" if low is None else f", z = {low:.3f} to {high:.3f} m"
            lines.append(f"{state}: {entry.name}, {significant(float(area))} m²{span}")
    moved = []
    for entry in difference.regions:
        low, high = entry.value("from z"), entry.value("to z")
        if (
            entry.state == CHANGED
            and not (low.is_equal and high.is_equal)
            and low.old is not None
            and low.new is not None
        ):
            moved.append(f"{entry.name}: z = {low.old:.3f} to {high.old:.3f} m, now {low.new:.3f} to {high.new:.3f} m")
    length = [float(built.mesh.points[:, 2].max()) for built in (difference.old, difference.new)]
    if abs(length[1] - length[0]) > 5e-4:
        lines.append(f"blade length {length[0]:.3f} m, now {length[1]:.3f} m")
    if len(moved) <= 4:
        lines += moved
    wider = _widths(difference)
    return lines + ([listed(wider, most=4)] if wider else [])


def _widths(difference: MeshDifference) -> list[str]:
    """Caps, strips and webs, not the panels between them, whose width changed."""
    kinds = {region.name: region.kind for region in difference.new.mesh.regions}
    found = []
    for name, change in difference.largest.items():
        region = name.removeprefix("width of ")
        if kinds.get(region) not in ("cap", "strip", "web") or not min(abs(change.old), abs(change.new)) > 0.0:
            continue
        if abs(change.difference) > WIDER * max(change.old, change.new):
            word = "height" if kinds[region] == "web" else "width"
            found.append(
                f"{word} of {region} {1e3 * change.old:.0f} to {1e3 * change.new:.0f} mm at z = {change.z:.2f} m"
            )
    return found


def _plies(difference: MeshDifference) -> list[str]:
    """What of each ply is another, its area and mass apart, which follow from the regions."""
    lines = []
    for entry in difference.plies:
        if entry.state != CHANGED:
            mass = entry.value("mass")
            lines.append(f"{entry.state}: {entry.name}, {significant(float(mass.new or mass.old or 0.0))} kg")
            continue
        own = [
            value
            for value in entry.values
            if value.name not in ("layers' area", "mass")
            and is_notable(entry, value.name)
            and not _is_row(difference, value)
        ]
        words = [f"{value.name} {_shown(value.old)}, now {_shown(value.new)} {value.unit}".rstrip() for value in own]
        if words:
            heavier = entry.value("mass").difference or 0.0
            lines.append(f"{entry.name}: {'; '.join(words)}; {heavier:+.4g} kg")
    return lines[:8] + ([f"and {len(lines) - 8} more"] if len(lines) > 8 else [])


def _is_row(difference: MeshDifference, value: Value) -> bool:
    """Whether an end of a ply moved with its row of elements, and not to another row."""
    if value.difference is None or value.unit != "m":
        return False
    length = float(np.diff(difference.along[1].ends).max(initial=0.0))
    return abs(value.difference) < 0.5 * length


def _materials(entries: Iterable[Entry]) -> list[str]:
    lines = []
    for entry in entries:
        if entry.state != CHANGED:
            lines.append(f"{entry.state}: {entry.name}")
            continue
        own = [value for value in entry.values if not value.is_equal and value.name != "mass"]
        if own:
            words = (
                f"{value.name} {_shown(value.old)}, now {_shown(value.new)} {value.unit}".rstrip() for value in own
            )
            lines.append(f"{entry.name}: {'; '.join(words)}")
    return lines


def _stack_lines(difference: MeshDifference) -> list[str]:
    elements = difference.elements
    n = int(np.count_nonzero(elements.stack_changed))
    total = len(elements.pairs.new)
    if not n:
        return ["the same plies on every element"] if total else []
    way = "" if elements.pairs.way == ONE_BY_ONE else f" ({elements.pairs.way})"
    lines = [f"other plies on {grouped(n)} of {grouped(total)} elements{way}"]
    for change in elements.stacks[:4]:
        thick = f", {1e3 * change.largest_thickness:+.3g} mm" if change.largest_thickness else ""
        lines.append(
            f"{change.what}: {grouped(change.elements)} element{'s' if change.elements != 1 else ''},"
            f" {significant(change.area)} m², {change.mass:+.4g} kg{thick}, "
            f"z = {change.z[0]:.2f} to {change.z[1]:.2f} m, {listed(_parts(change.regions), most=3)}"
        )
    rest = elements.stacks[4:]
    if rest:
        area = sum(change.area for change in rest)
        lines.append(f"and {len(rest)} other changes on {significant(area)} m²")
    return lines


def _parts(regions: Sequence[str]) -> list[str]:
    """Names of regions, those of both sides once."""
    sides = tuple(f"{side} " for side in SIDE_NAMES.values())
    parts = [next((name.removeprefix(side) for side in sides if name.startswith(side)), name) for name in regions]
    return list(
        dict.fromkeys(part if parts.count(part) > 1 else name for name, part in zip(regions, parts, strict=True))
    )


def _surface(difference: MeshDifference) -> list[str]:
    nodes, shape = difference.surface.nodes, difference.surface.shape
    lines = []
    if nodes is not None and nodes.largest == 0.0:
        return ["no node moved"]
    if nodes is not None and nodes.way == BY_NUMBER:
        word = "slid along the skin" if shape.largest < SLIDE * nodes.largest else "moved"
        lines.append(f"nodes {word}: {_moved(nodes)}")
    elif nodes is not None and nodes.way == BY_PLACE:
        lines.append(f"places of equal row and seam moved: {_moved(nodes)}")
    if shape.largest < SAME:
        return [*lines, "the skin has the same shape"]
    height = difference.surface.height
    out, into = float(height.max(initial=0.0)), float(-height.min(initial=0.0))
    words = (
        f"skin as a shape moved: {_moved(shape)}; along its normal {_mm(max(out, 0.0))} out, {_mm(max(into, 0.0))} in"
    )
    if nodes is None or nodes.way != BY_NUMBER:
        words += " (with what the coarser mesh cannot resolve)"
    return [*lines, words]


def _moved(move: Move) -> str:
    at = f" ({move.where})" if move.where else ""
    return f"{_mm(move.largest)} at most{at}, {_mm(move.rms)} rms"


def _mm(length: float) -> str:
    return f"{length:.3g} m" if length >= 1.0 else f"{1e3 * length:.3g} mm"


def _warnings(difference: MeshDifference) -> list[str]:
    known = {text.partition(":")[0] for text in difference.warnings_gone}
    now = {text.partition(":")[0] for text in difference.warnings_new}
    lines = [
        f"{'other elements' if text.partition(':')[0] in known else 'new'}: {text}" for text in difference.warnings_new
    ]
    lines += [f"gone: {text}" for text in difference.warnings_gone if text.partition(":")[0] not in now]
    return [_cut(line) for line in lines[:4]] + ([f"and {len(lines) - 4} more"] if len(lines) > 4 else [])


def _cut(text: str) -> str:
    return text if len(text) <= 120 else f"{text[:119]}…"


def _inputs(difference: MeshDifference) -> list[str]:
    names = [f"{entry.name}{'' if entry.state == CHANGED else f' ({entry.state})'}" for entry in difference.inputs]
    return [f"of another text: {listed(names)}"] if names else []
