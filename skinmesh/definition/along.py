"""Quantities along the span: from what the user wrote to functions of z."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from skinmesh.definition.problems import FieldPath, FieldReport, no_such, shown
from skinmesh.definition.schema import AlongValue
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.definition.table import ReadTable

LENGTH, RATIO = "length", "ratio"


@dataclass(frozen=True)
class Bounds:
    """What values a quantity may take.

    Attributes
    ----------
    rule : str
        In words: 'must be > 0'.
    holds : callable
    """

    rule: str
    holds: Callable[[float], bool]


ANY = Bounds("", lambda _value: True)
POSITIVE = Bounds("must be > 0", lambda value: value > 0)
NOT_NEGATIVE = Bounds("must be ≥ 0", lambda value: value >= 0)
FRACTION = Bounds("must lie between 0 and 1", lambda value: 0 <= value <= 1)


@dataclass
class AlongReader:
    """Makes functions of z of the blade file's values.

    Attributes
    ----------
    report : FieldReport
    table : ReadTable or None
        None where the table could not be read: columns then cannot be looked up, which was told already.
    used : set of str
        Columns that were asked for by name.
    """

    report: FieldReport
    table: ReadTable | None
    used: set[str] = field(default_factory=set)

    def read(
        self, value: AlongValue | None, path: FieldPath, *, kind: str = LENGTH, bounds: Bounds = ANY
    ) -> Spanwise | None:
        """Make a function of z.

        Parameters
        ----------
        value : number, list of pairs, column name, or None
        path : tuple
            The field, for messages.
        kind : str
            LENGTH: a column must be one of metres or millimetres. RATIO: a column must carry no unit.
        bounds : Bounds

        Returns
        -------
        Spanwise or None
            None where no value was given or the value was refused.
        """
        if value is None:
            return None
        if isinstance(value, str):
            return self._column(value, path, kind, bounds)
        if isinstance(value, list):
            for z, v in value:
                if not bounds.holds(v):
                    self.report.add(path, f"{bounds.rule}, got {shown(v)} at z = {z:g}")
                    return None
            return Spanwise(np.array([z for z, _ in value]), np.array([v for _, v in value]))
        if not bounds.holds(value):
            self.report.add(path, f"{bounds.rule}, got {shown(value)}")
            return None
        return constant(value)

    def _column(self, name: str, path: FieldPath, kind: str, bounds: Bounds) -> Spanwise | None:
        self.used.add(name)
        if self.table is None:
            return None
        if name not in self.table.columns:
            self.report.add(path, no_such("column", name, self.table.columns))
            return None
        if faults := self.table.column_faults.get(name):
            self.report.findings.problems.update(dict.fromkeys(faults))
            return None
        is_length = name.endswith(("_m", "_mm"))
        if kind == LENGTH and not is_length:
            text = f"is a length, but the column '{name}' carries no unit of length; its name must end in _m or _mm"
            self.report.add(path, text)
            return None
        if kind == RATIO and (is_length or name.endswith("_deg")):
            self.report.add(path, f"is a number without a unit, but the column '{name}' carries one")
            return None
        z, values = self.table.quantity("z"), self.table.columns[name]
        known = ~np.isnan(values)
        if z is None or not np.all(np.diff(z[known]) > 0):
            return None
        if not known.any():
            self.report.add(path, f"the column '{name}' is empty")
            return None
        for row in np.flatnonzero(known):
            if not bounds.holds(float(values[row])):
                text = f"{bounds.rule}, but the column '{name}' has {values[row]:g} in {self.table.place(int(row))}"
                self.report.add(path, text)
                return None
        return Spanwise(z[known], values[known])
