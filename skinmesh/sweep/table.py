"""The table of results: the same columns as CSV and as Parquet."""

from __future__ import annotations

import csv
import json
from collections.abc import Sequence
from dataclasses import dataclass
from io import StringIO
from pathlib import Path
from typing import Any

from skinmesh.sweep.metrics import INTEGER, NUMBER, TEXT, Column, metric_columns
from skinmesh.sweep.plan import SweepPlan, Variant
from skinmesh.sweep.variant import Outcome

_FORMULA_STARTS = ("=", "+", "-", "@", "\t")


@dataclass(frozen=True, eq=False)
class ResultTable:
    """Rows of plain values, one a variant, in the order of the sweep file.

    Attributes
    ----------
    title : str
    columns : tuple of Column
        Of every cell; a cell of none is None.
    changes : tuple of str
        Names of the columns that say what was changed.
    rows : tuple of dict
    """

    title: str
    columns: tuple[Column, ...]
    changes: tuple[str, ...]
    rows: tuple[dict[str, Any], ...]


def result_table(plan: SweepPlan, results: Sequence[tuple[Variant, str, Outcome]]) -> ResultTable:
    """Put the outcomes of variants into a table.

    Parameters
    ----------
    plan : SweepPlan
    results : sequence of (Variant, str, Outcome)
        With the key of each.

    Returns
    -------
    ResultTable
    """
    metrics = metric_columns(plan.order)
    given = {change.name: [v.values.get(change.name) for v, _, _ in results] for change in plan.changes}
    taken = {"variant", "name", "status", "reason", "key", "seconds", *(column.name for column in metrics)}
    names = {name: f"change {name}" if name in taken else name for name in given}
    columns = (
        Column("variant", INTEGER),
        Column("name", TEXT),
        *(Column(names[name], _kind(values)) for name, values in given.items()),
        Column("status", TEXT),
        Column("reason", TEXT),
        *metrics,
        Column("key", TEXT),
        Column("seconds", NUMBER),
    )
    rows = []
    for variant, key, outcome in results:
        row: dict[str, Any] = {column.name: outcome.metrics.get(column.name) for column in metrics}
        row |= {"variant": variant.number, "name": variant.name, "key": key, "seconds": outcome.seconds}
        row |= {"status": outcome.status, "reason": outcome.reason}
        row |= {names[name]: _cell(variant.values.get(name), _kind(values)) for name, values in given.items()}
        rows.append({column.name: row[column.name] for column in columns})
    return ResultTable(plan.title, columns, tuple(names.values()), tuple(rows))


def _kind(values: Sequence[Any]) -> str:
    known = [value for value in values if value is not None]
    if known and all(isinstance(value, int | float) and not isinstance(value, bool) for value in known):
        return INTEGER if all(isinstance(value, int) for value in known) else NUMBER
    return TEXT


def _cell(value: Any, kind: str) -> Any:
    if value is None:
        return None
    if kind == TEXT:
        return value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)
    return value if kind == INTEGER else float(value)


def csv_text(table: ResultTable) -> str:
    """The table as comma-separated values; a cell without a value is empty.

    A text that a spreadsheet would take for a formula begins with an apostrophe.

    Parameters
    ----------
    table : ResultTable

    Returns
    -------
    str
    """
    text = StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(_safe(column.name) for column in table.columns)
    writer.writerows([_safe(row[column.name]) for column in table.columns] for row in table.rows)
    return text.getvalue()


def _safe(value: Any) -> Any:
    return f"'{value}" if isinstance(value, str) and value.startswith(_FORMULA_STARTS) else value


def write_parquet(table: ResultTable, path: Path) -> None:
    """Write the table as Parquet: whole numbers, numbers and texts as such.

    Parameters
    ----------
    table : ResultTable
    path : Path
    """
    import pyarrow
    from pyarrow import parquet

    types = {INTEGER: pyarrow.int64(), NUMBER: pyarrow.float64(), TEXT: pyarrow.string()}
    arrays = {
        column.name: pyarrow.array([row[column.name] for row in table.rows], types[column.kind])
        for column in table.columns
    }
    parquet.write_table(pyarrow.table(arrays), path)
