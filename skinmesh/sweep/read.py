"""From the path of a sweep file to the checked plan of the sweep."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from itertools import product
from os import PathLike, fspath
from pathlib import Path
from typing import Any

from skinmesh.definition.fieldcheck import check_against, check_fields
from skinmesh.definition.filetext import read_text
from skinmesh.definition.problems import (
    FieldPath,
    FieldReport,
    Findings,
    field_name,
    is_number,
    no_such,
    number_hint,
    shown,
)
from skinmesh.definition.table import split_rows
from skinmesh.definition.yamltree import Document, read_document
from skinmesh.errors import InputError
from skinmesh.sweep.fields import FROM_CASES, ChangeFields, SweepFields
from skinmesh.sweep.paths import RefusedError, find_field, value_at
from skinmesh.sweep.plan import (
    ADD,
    CASES,
    FACTOR,
    GRID,
    ONE_BY_ONE,
    SET,
    TOGETHER,
    BaseBlade,
    Change,
    Order,
    SweepPlan,
    Variant,
)
from skinmesh.sweep.texts import make_change, read_base
from skinmesh.write.registry import FORMATS

MOST_VARIANTS = 100_000
_KINDS = (SET, FACTOR, ADD)
_EXAMPLES = {
    "blade": "the base blade's file name",
    "changes": "such as {outer chord: {column: chord_m, factor: [1.0, 1.07]}}",
}
Values = Mapping[str, list[Any]]


def load_sweep(path: str | PathLike[str]) -> SweepPlan:
    """Read and check a sweep file with its base blade and its table of cases.

    Parameters
    ----------
    path : str or path

    Returns
    -------
    SweepPlan

    Raises
    ------
    InputError
        With every mistake of every file.
    """
    file = fspath(path)
    findings = Findings()
    text = read_text(Path(file), file, findings=findings, kind="sweep file")
    document = read_document(text, findings, kind="sweep file") if text else None
    if document is None:
        raise InputError(findings.problems)
    report = FieldReport(file, document.lines, findings)
    fields = check_against(SweepFields, dict(document.data), report, examples=_EXAMPLES)
    return _Reader(Path(file), report).plan(fields)


class _Reader:
    """Makes a plan of the fields of one sweep file."""

    def __init__(self, path: Path, report: FieldReport) -> None:
        self._path, self._report, self._findings = path, report, report.findings

    def plan(self, fields: SweepFields) -> SweepPlan:
        base = self._base(fields.blade)
        changes: list[Change] = []
        values: dict[str, list[Any]] = {}
        from_cases: list[str] = []
        if fields.changes == {}:
            self._report.add(("changes",), f"is empty; give at least one, {_EXAMPLES['changes']}")
        for name, change in (fields.changes or {}).items():
            kind = self._kind(name, change)
            made = None if kind is None else self._change(name, kind, change, base)
            if made is not None:
                changes.append(made)
            if kind is not None and getattr(change, kind) == FROM_CASES:
                from_cases.append(name)
            elif kind is not None and getattr(change, kind) is not None:
                values[name] = getattr(change, kind)
        combine = CASES if fields.cases is not None else fields.combine or GRID
        cases = self._cases(fields, from_cases, list(values)) if fields.cases or from_cases else None
        self._check_lengths(combine, values)
        if base is not None:
            self._try_values(base, changes, values, cases or [])
        order = self._order(fields, base)
        if base is None or self._findings.problems:
            raise InputError(sorted(self._findings.problems, key=lambda problem: problem.file != self._report.file))
        variants = _variants(combine, values, cases or [])
        title = fields.title or f"{self._path.stem}: {base.title}"
        return SweepPlan(title, self._path.stem, base, tuple(changes), combine, variants, order)

    def _base(self, name: str | None) -> BaseBlade | None:
        if name is None:
            return None
        try:
            return read_base(self._path.parent / name, file=name)
        except InputError as error:
            self._findings.problems.update(dict.fromkeys(error.problems))
            return None

    def _kind(self, name: str, fields: ChangeFields) -> str | None:
        """Set, factor or add; None where not exactly one of them is given, or more is wrong."""
        path: FieldPath = ("changes", name)
        kinds = [kind for kind in _KINDS if getattr(fields, kind) is not None or self._report.has((*path, kind))]
        targets = [kind for kind in ("field", "column") if getattr(fields, kind) is not None]
        for given, known in ((kinds, _KINDS), (targets, ("field", "column"))):
            if len(given) != 1 and not self._report.has(path):
                self._report.add(path, f"must have one of {', '.join(known)}, got {' and '.join(given) or 'none'}")
        if fields.span is not None and not fields.span[0] <= fields.span[1]:
            self._report.add((*path, "span"), f"must go from the lower to the higher z, got {shown(fields.span)}")
        if fields.ramp is not None and fields.span is None:
            self._report.add((*path, "ramp"), "belongs to a span: outside it the change grows on this length")
        return kinds[0] if len(kinds) == 1 else None

    def _change(self, name: str, kind: str, fields: ChangeFields, base: BaseBlade | None) -> Change | None:
        path: FieldPath = ("changes", name)
        if base is None or self._report.has(path):
            return None
        span = None if fields.span is None else (fields.span[0], fields.span[1])
        change = Change(name, kind, None, fields.column, span, fields.ramp or 0.0)
        if fields.field is None:
            return change
        try:
            found = find_field(base.data, fields.field, may_be_new=kind == SET)
            if found[0] in ("planform", "title"):
                raise RefusedError("cannot be swept; change columns of the table, or the blade's values")
        except RefusedError as refused:
            self._report.add((*path, "field"), str(refused))
            return None
        return replace(change, field=found)

    def _check_lengths(self, combine: str, values: Values) -> None:
        if combine == TOGETHER and len({len(each) for each in values.values()}) > 1:
            lengths = ", ".join(f"{name} has {len(each)}" for name, each in values.items())
            self._report.add(("combine",), f"changes that go together need as many values each, but {lengths}")
        n = 1
        for each in values.values():
            n *= len(each) if combine == GRID else 1
        if n > MOST_VARIANTS:
            self._report.add(("changes",), f"the grid has {n} variants, more than {MOST_VARIANTS}")

    def _try_values(
        self, base: BaseBlade, changes: list[Change], values: Values, cases: list[tuple[str, int, dict[str, Any]]]
    ) -> None:
        """Make every change once by itself, so that what cannot be made is told before the work begins."""
        for change in changes:
            of_cases = [row[change.name] for _, _, row in cases if change.name in row]
            for k, amount in enumerate(values.get(change.name, of_cases)):
                try:
                    made = make_change(base, change, amount)
                except RefusedError as refused:
                    self._report.add(("changes", change.name), str(refused))
                    break
                # one value is enough to see whether there is such a field; a value of its own may be wrong
                if k == 0 and change.field is not None and value_at(base.data, change.field) is None:
                    self._check_new_field(change, made)

    def _check_new_field(self, change: Change, made: BaseBlade) -> None:
        findings = Findings()
        written = {f"profiles.{name}.naca": str(each.get("naca")) for name, each in made.data["profiles"].items()}
        check_fields(Document(made.data, {}, written), FieldReport(made.file, {}, findings))
        for problem in findings.problems:
            if problem.field == field_name(change.field or ()) and problem.text.startswith("there is no such field"):
                self._report.add(("changes", change.name, "field"), f"'{problem.field}': {problem.text}")

    def _cases(
        self, fields: SweepFields, wanted: list[str], others: list[str]
    ) -> list[tuple[str, int, dict[str, Any]]] | None:
        """Name, line and values of every row of the table of cases."""
        if fields.cases is None:
            for name in wanted:
                self._report.add(
                    ("changes", name),
                    f"takes its values from '{FROM_CASES}', but no table is named: add 'cases: table.csv'",
                )
            return None
        if fields.combine is not None:
            self._report.add(("combine",), "goes with lists of values; a table of cases has its own rows")
        for name in others:
            self._report.add(
                ("changes", name), f"has values of its own beside the table of cases; write {FROM_CASES} in their place"
            )
        text = read_text(self._path.parent / fields.cases, fields.cases, findings=self._findings, kind="table of cases")
        if text is None:
            return None
        rows, _ = split_rows(text.lines)
        if len(rows) < 2:
            self._findings.add(text.file, "has no case; it needs a row of names and a row for each variant")
            return None
        (line, header), *body = rows
        for k, column in enumerate(header):
            if column not in (*wanted, "name"):
                told = (
                    "this column is there twice"
                    if column in header[:k]
                    else no_such("change", column, [*wanted, "name"])
                )
                self._findings.add(text.file, told, place=column, line=line)
        for name in wanted:
            if name not in header:
                self._findings.add(text.file, f"the column '{name}' is missing", line=line)
        cases = []
        for number, cells in body:
            row = dict(zip(header, cells, strict=False))
            if len(cells) > len(header):
                self._findings.add(text.file, f"has {len(cells)} cells under {len(header)} names", line=number)
            kinds = {name: SET if (fields.changes or {})[name].set is not None else FACTOR for name in wanted}
            values = {
                name: self._cell(text.file, number, name, row[name], kinds[name]) for name in wanted if row.get(name)
            }
            cases.append((row.get("name", ""), number, values))
        return cases

    def _cell(self, file: str, line: int, name: str, text: str, kind: str) -> Any:
        if is_number(text):
            value = float(text)
            return int(value) if text.lstrip("+-").isdigit() else value
        if kind != SET:
            self._findings.add(file, f"{shown(text)} is not a number{number_hint(text)}", place=name, line=line)
            return 1.0
        return text

    def _order(self, fields: SweepFields, base: BaseBlade | None) -> Order:
        low, high = base.span if base else (0.0, 1.0)
        usual = [float(f"{low + part * (high - low):.6g}") for part in (0.25, 0.5, 0.75)]
        sections = fields.sections or usual
        for z in sections if base else ():
            if not low <= z <= high:
                self._report.add(
                    ("sections",), f"z = {z:g} lies outside the blade, which goes from {low:g} to {high:g} m"
                )
        for name in fields.write or ():
            if name not in FORMATS:
                self._report.add(("write",), no_such("format", name, FORMATS))
        return Order(
            sections=tuple(dict.fromkeys(sections)),
            keep=fields.keep is not False,
            checks=fields.checks is not False,
            trial=bool(fields.trial),
            formats=tuple(dict.fromkeys(fields.write or ())),
        )


def _variants(combine: str, values: Values, cases: list[tuple[str, int, dict[str, Any]]]) -> tuple[Variant, ...]:
    if combine == CASES:
        return tuple(Variant(k, name, row) for k, (name, _, row) in enumerate(cases, start=1))
    rows: list[dict[str, Any]]
    if combine == TOGETHER:
        rows = [dict(zip(values, row, strict=True)) for row in zip(*values.values(), strict=True)]
    elif combine == ONE_BY_ONE:
        rows = [{}, *({name: value} for name, each in values.items() for value in each)]
    else:
        rows = [dict(zip(values, row, strict=True)) for row in product(*values.values())]
    return tuple(Variant(k, "", row) for k, row in enumerate(rows, start=1))
