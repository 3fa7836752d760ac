"""The station table: one row a station, root first, as text with a separator between the cells."""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import StationTable
from skinmesh.definition.filetext import InputText
from skinmesh.definition.problems import Findings, is_number, nearest, number_hint, shown
from skinmesh.errors import Problem

Floats = NDArray[np.float64]

LENGTHS = ("z", "chord", "prebend", "sweep")
REQUIRED = ("z", "chord", "twist", "pitch_axis", "profile")
MOST_STATIONS = 2000
MOST_CELLS = 10  # of one column that are told one by one
_UNITS: Mapping[str, float] = {"_m": 1.0, "_mm": 1e-3, "_deg": float(np.pi / 180.0)}
_HEADERS: Mapping[str, tuple[str, ...]] = {
    "z": ("z_m", "z_mm"),
    "chord": ("chord_m", "chord_mm"),
    "twist": ("twist_deg",),
    "pitch_axis": ("pitch_axis",),
    "profile": ("profile",),
    "thickness_ratio": ("thickness_ratio",),
    "prebend": ("prebend_m", "prebend_mm"),
    "sweep": ("sweep_m", "sweep_mm"),
}
_QUANTITY_OF = {header: quantity for quantity, headers in _HEADERS.items() for header in headers}
# cells that spreadsheets leave where a formula failed
_NO_VALUE = re.compile(r"#?(n/?a|null|none|nan|ref!|value!|div/0!|name\?)!?|[-+]?inf(inity)?|-+", re.IGNORECASE)


@dataclass(frozen=True, eq=False)
class ReadTable:
    """A station table as it was read, with whatever could be understood.

    Attributes
    ----------
    file : str
    header_line : int
    lines : tuple of int
        Line of each station.
    columns : mapping of str to (k,) float array
        Every number column by its header, in SI units; NaN where a cell is blank or wrong.
    profile : tuple of str or None
    column_faults : mapping of str to tuple of Problem
        What is wrong in columns that are looked at only where the blade file names them.
    is_sound : bool
        Whether nothing was wrong with it.
    """

    file: str
    header_line: int
    lines: tuple[int, ...]
    columns: Mapping[str, Floats]
    profile: tuple[str | None, ...]
    column_faults: Mapping[str, tuple[Problem, ...]]
    is_sound: bool

    def quantity(self, name: str) -> Floats | None:
        """A quantity of the table by its name without unit, None where there is no such column."""
        return next((self.columns[header] for header in _HEADERS[name] if header in self.columns), None)

    @property
    def extra_columns(self) -> list[str]:
        """Columns that have a meaning only where the blade file names them."""
        return [header for header in self.columns if header not in _QUANTITY_OF]

    def place(self, row: int) -> str:
        """Name a station for a message: row 7 (z_m = 16.0)."""
        z = self.quantity("z")
        return _row_place(row, None if z is None else float(z[row]))

    def stations(self) -> StationTable:
        """The checked stations; only of a sound table."""
        n = len(self.lines)
        zero, none = np.zeros(n), np.full(n, np.nan)
        found = {name: self.quantity(name) for name in _HEADERS if name != "profile"}
        blank = {"prebend": zero, "sweep": zero, "thickness_ratio": none}
        values = {name: blank[name] if column is None else column for name, column in found.items()}
        return StationTable(profile=self.profile, **values)


def read_table(source: InputText, findings: Findings) -> ReadTable | None:
    """Read a station table.

    ``#`` begins a comment. The separator is a semicolon where the header has one, else a tab, else a comma. Blank
    rows and blank columns, as spreadsheets leave them, are passed over.

    Parameters
    ----------
    source : InputText
    findings : Findings

    Returns
    -------
    ReadTable or None
        None where there is no header to go by.
    """
    before = set(findings.problems)
    rows, separator = split_rows(source.lines)
    if not rows:
        findings.add(source.file, "holds nothing but comments; a station table was expected")
        return None
    header_line = rows[0][0]
    header = _read_header(source.file, header_line, rows[0][1], findings)
    if header is None:
        return None
    body = _Body(source.file, header, rows[1:], findings, separator)
    columns = body.columns()
    table = ReadTable(
        source.file,
        header_line,
        tuple(number for number, _ in body.rows),
        columns,
        body.profiles(),
        {header: tuple(faults.problems) for header, faults in body.column_faults.items()},
        is_sound=False,
    )
    if not body.n_dropped:
        _check_length(table, findings)
    _check_stations(table, findings)
    return replace(table, is_sound=before == set(findings.problems))


def split_rows(lines: Sequence[str]) -> tuple[list[tuple[int, list[str]]], str]:
    """Split the lines of a table into cells, without comments and blank rows.

    Parameters
    ----------
    lines : sequence of str

    Returns
    -------
    list of (int, list of str)
        One-based line and cells of every row, the header first.
    str
        The separator.

    Examples
    --------
    >>> split_rows(["# a table", "z_m; chord_m", "", "0.0; 1.2  # root"])
    ([(2, ['z_m', 'chord_m']), (4, ['0.0', '1.2'])], ';')
    """
    bare = [(number, _without_comment(line)) for number, line in enumerate(lines, start=1)]
    bare = [(number, line) for number, line in bare if line.strip(' \t,;"')]
    separator = next((mark for mark in ";\t" if bare and mark in bare[0][1]), ",")
    return [(number, _cells(line, separator)) for number, line in bare], separator


def _without_comment(line: str) -> str:
    """Cut a line at the first # outside quotes; spreadsheets' error marks (#N/A) are no comments."""
    is_quoted = False
    for i, mark in enumerate(line):
        if mark == '"':
            is_quoted = not is_quoted
        elif mark == "#" and not is_quoted and not re.match(r"#(N/A|REF!|VALUE!|DIV/0!|NAME\?|NULL!|NUM!)", line[i:]):
            return line[:i]
    return line


def _cells(line: str, separator: str) -> list[str]:
    if '"' not in line:
        return [cell.strip() for cell in line.split(separator)]
    # one line is one row: an open quote ends with its line
    return [cell.strip() for cell in next(csv.reader([line], delimiter=separator, skipinitialspace=True), [])]


def _read_header(file: str, line: int, cells: list[str], findings: Findings) -> list[str] | None:
    while cells and not cells[-1]:
        cells = cells[:-1]
    if any(is_number(cell) for cell in cells):
        findings.add(
            file, "the first row must name the columns: z_m, chord_m, twist_deg, pitch_axis, profile", line=line
        )
        return None
    for k, cell in enumerate(cells):
        if not cell:
            findings.add(file, f"column {k + 1} has no name", line=line)
        elif cell in cells[:k]:
            findings.add(file, "this column is there twice; keep one", place=cell, line=line)
        elif cell not in _QUANTITY_OF and (told := _almost(cell)):
            findings.add(file, told, place=cell, line=line)
    quantities = [_QUANTITY_OF.get(cell) for cell in cells]
    for name, headers in _HEADERS.items():
        given = [cell for cell, quantity in zip(cells, quantities, strict=True) if quantity == name]
        if len(set(given)) > 1:
            findings.add(file, f"{' and '.join(given)} give the same; keep one", line=line)
        told_already = any(_meant(cell) == name for cell in cells if cell not in _QUANTITY_OF)
        if name in REQUIRED and not given and not told_already:
            findings.add(file, f"the column {' or '.join(headers)} is missing", line=line)
    return cells


def _meant(cell: str) -> str | None:
    """The quantity that a header without or with a wrong unit means."""
    bare = re.sub(r"[\s_]*[\[(]?(mm|cm|m|deg|degrees|rad|°|in|ft)[\])]?$", "", cell.strip().lower()).replace(" ", "_")
    return bare if bare in _HEADERS else None


def _almost(cell: str) -> str | None:
    """What to say of a header that is nearly one of the known ones."""
    meant = _meant(cell)
    if meant is None:
        return None
    wanted = " or ".join(_HEADERS[meant])
    if meant in LENGTHS or meant == "twist":
        return f"the column's name must carry a unit that is known here: {wanted}"
    return f"the column's name must be {wanted}"


def check_extra_columns(table: ReadTable, used: set[str], findings: Findings) -> None:
    """Refuse columns that neither this program nor the blade file has a use for.

    Parameters
    ----------
    table : ReadTable
    used : set of str
        Columns that the blade file names.
    findings : Findings
    """
    for header in table.extra_columns:
        if header in used or _almost(header):
            continue
        near = nearest(header, _QUANTITY_OF)
        hint = f" — did you mean '{near}'?" if near else ""
        text = f"no such column is known, and the blade file does not use it by name; known: {', '.join(_QUANTITY_OF)}"
        findings.add(table.file, text + hint, place=header, line=table.header_line)


@dataclass
class _Body:
    """The rows below the header."""

    file: str
    header: list[str]
    rows: list[tuple[int, list[str]]]
    findings: Findings
    separator: str
    column_faults: dict[str, Findings] = field(default_factory=dict)
    n_dropped: int = 0

    def __post_init__(self) -> None:
        n = len(self.header)
        kept = []
        for number, cells in self.rows[:MOST_STATIONS]:
            if any(cells[n:]):  # which cell is too many cannot be known: none of them is looked at
                self.n_dropped += 1
                text = f"this row has {len(cells)} cells, the header {n}"
                hint = "; is a comma used both for decimals and between cells?" if self.separator == "," else ""
                if self.n_dropped <= MOST_CELLS:
                    self.findings.add(self.file, text + hint, line=number)
                continue
            kept.append((number, (cells + [""] * n)[:n]))
        if self.n_dropped > MOST_CELLS:
            text = f"{self.n_dropped - MOST_CELLS} further rows have more cells than the header"
            self.findings.add(self.file, text, line=self.rows[-1][0])
        if len(self.rows) > MOST_STATIONS:
            self.findings.add(self.file, f"more than {MOST_STATIONS} stations; thin the table out")
        self.rows = kept

    def cell_texts(self, header: str) -> list[str]:
        """The cells of a column."""
        k = self.header.index(header)
        return [cells[k] for _, cells in self.rows]

    def columns(self) -> dict[str, Floats]:
        """Every number column in SI units."""
        headers = [header for header in dict.fromkeys(self.header) if header and header != "profile"]
        if self.separator != "," and self._has_decimal_commas(headers):
            headers_read: dict[str, Floats] = {header: np.full(len(self.rows), np.nan) for header in headers}
            return headers_read
        z_header = next((header for header in _HEADERS["z"] if header in headers), None)
        z = None if z_header is None else self._numbers(z_header, None)
        return {header: z if z is not None and header == z_header else self._numbers(header, z) for header in headers}

    def profiles(self) -> tuple[str | None, ...]:
        """Profile names, None for blank cells."""
        if "profile" not in self.header:
            return (None,) * len(self.rows)
        return tuple(text or None for text in self.cell_texts("profile"))

    def _has_decimal_commas(self, headers: list[str]) -> bool:
        found = [
            (number, header, text)
            for header in headers
            for (number, _), text in zip(self.rows, self.cell_texts(header), strict=True)
            if re.fullmatch(r"[-+]?\d*,\d+([eE][-+]?\d+)?", text)
        ]
        if found:
            number, header, text = min(found, key=lambda entry: entry[0])
            more = f" (and {len(found) - 1} more cells)" if len(found) > 1 else ""
            self.findings.add(
                self.file,
                f"{shown(text)} has a decimal comma{more}; write decimals with a point ({text.replace(',', '.')}):"
                " in the spreadsheet set the language of the cells to English before you export the table",
                place=header,
                line=number,
            )
        return bool(found)

    def _numbers(self, header: str, z: Floats | None) -> Floats:
        quantity = _QUANTITY_OF.get(header)
        unit = next((unit for unit in _UNITS if header.endswith(unit)), "")
        is_needed = quantity in REQUIRED
        findings = self.findings if quantity else self.column_faults.setdefault(header, Findings())
        values = np.full(len(self.rows), np.nan)
        n_faults = 0
        for row, ((number, _), text) in enumerate(zip(self.rows, self.cell_texts(header), strict=True)):
            if not text and not is_needed:
                values[row] = 0.0 if quantity in ("prebend", "sweep") else np.nan
                continue
            told = _cell_fault(text)
            n_faults += bool(told)
            if told and n_faults <= MOST_CELLS:
                place = f"{_row_place(row, None if z is None else float(z[row]))}, {header}"
                findings.add(self.file, told, place=place, line=number)
            elif not told:
                values[row] = float(text) * _UNITS.get(unit, 1.0)
        if n_faults > MOST_CELLS:
            text = f"{n_faults - MOST_CELLS} further cells of this column are wrong"
            findings.add(self.file, text, place=header, line=self.rows[-1][0])
        return values


def _cell_fault(text: str) -> str:
    """What is wrong with the text of a number, empty where nothing is."""
    if not text:
        return "the cell is empty; a number is needed here"
    if _NO_VALUE.fullmatch(text):
        return f"must be a finite number, got {shown(text)}"
    if not is_number(text):
        return f"{shown(text)} is not a number{number_hint(text)}"
    if not np.isfinite(float(text)):
        return f"must be a finite number, got {shown(text)}"
    return ""


def _row_place(row: int, z: float | None) -> str:
    return f"row {row + 1}" if z is None or np.isnan(z) else f"row {row + 1} (z_m = {z:g})"


def _check_length(table: ReadTable, findings: Findings) -> None:
    n = len(table.lines)
    if n < 2:
        rows = "has no station" if n == 0 else "has one station"
        findings.add(table.file, f"{rows} below its header; a blade needs at least two", line=table.header_line)


def _check_stations(table: ReadTable, findings: Findings) -> None:
    """Rules on the values of each station and on their order."""
    n = len(table.lines)

    def tell(row: int, header: str, text: str) -> None:
        findings.add(table.file, text, place=f"{table.place(row)}, {header}", line=table.lines[row])

    for header, values in table.columns.items():
        for row, value in enumerate(values):
            if not np.isnan(value) and (told := _value_fault(_QUANTITY_OF.get(header), float(value))):
                tell(row, header, told)
    z = table.quantity("z")
    z_header = next((header for header in _HEADERS["z"] if header in table.columns), "z_m")
    if z is not None and n:
        known = np.flatnonzero(~np.isnan(z)).tolist()
        for before, row in pairwise(known):
            if z[row] <= z[before]:
                tell(row, z_header, f"z must increase from row to row, root first; got {z[row]:g} after {z[before]:g}")
        if len(known) and z[known[0]] < 0:
            tell(known[0], z_header, f"z must start at 0 or above, got {z[known[0]]:g}")
    if "profile" in _named_columns(table) and n:
        for row in sorted({0, n - 1}):
            if table.profile[row] is None:
                which = "first" if row == 0 else "last"
                tell(row, "profile", f"the {which} station must name a profile; only stations between may be blank")


def _named_columns(table: ReadTable) -> tuple[str, ...]:
    return (*table.columns, "profile") if any(name is not None for name in table.profile) else tuple(table.columns)


def _value_fault(quantity: str | None, value: float) -> str:
    if quantity == "chord" and value <= 0:
        return f"the chord must be > 0, got {value:g} m"
    if quantity == "thickness_ratio" and not 0 < value <= 1:
        hint = "; a percentage must be divided by 100" if 1 < value <= 100 else ""
        return f"must be > 0 and at most 1 (a share of the chord), got {value:g}{hint}"
    if quantity == "pitch_axis" and not -1 <= value <= 2:
        hint = "; a percentage must be divided by 100" if 2 < value <= 100 else ""
        return f"must be a fraction of the chord from the leading edge, between -1 and 2, got {value:g}{hint}"
    if quantity == "twist" and abs(value) > np.pi:
        return f"must lie between -180 and 180 degrees, got {np.degrees(value):g}"
    return ""
