"""The sweep file's fields. As in the blade file's model, every field may be None, so that all mistakes are found."""

from __future__ import annotations

import re
from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator

from skinmesh.definition.problems import number_hint, shown
from skinmesh.definition.schema import Part

FROM_CASES = "cases"
"""In the place of values: they come from the table of cases."""
MOST_STEPS = 10_000


def _read_numbers(value: object) -> list[Any] | str:
    values = _read_values(value)
    if isinstance(values, str):
        return values
    for item in values:
        if isinstance(item, bool) or not isinstance(item, int | float) or not abs(item) < float("inf"):
            hint = number_hint(item) if isinstance(item, str) else ""
            raise ValueError(f"{shown(item)} is not a number{hint}")
    return values


def _read_values(value: object) -> list[Any] | str:
    if value == FROM_CASES:
        return FROM_CASES
    if isinstance(value, dict):
        return _read_steps(value)
    values = value if isinstance(value, list) else [value]
    if not values:
        raise ValueError("the list of values is empty")
    if any(item is None for item in values):
        raise ValueError("one of the values is nothing")
    return values


def _read_steps(value: dict[str, Any]) -> list[Any]:
    known = ("from", "to", "steps")
    if set(value) != set(known):
        raise ValueError(f"must be a value, a list, or {{from: …, to: …, steps: …}}, got the fields {', '.join(value)}")
    for name in known:
        if isinstance(value[name], bool) or not isinstance(value[name], int | float):
            raise ValueError(f"{name} must be a number, got {shown(value[name])}")
    if not isinstance(value["steps"], int) or not 2 <= value["steps"] <= MOST_STEPS:
        raise ValueError(f"steps must be a whole number from 2 to {MOST_STEPS}, got {shown(value['steps'])}")
    step = (value["to"] - value["from"]) / (value["steps"] - 1)
    # twelve digits are free of the noise of the division
    return [float(f"{value['from'] + k * step:.12g}") for k in range(value["steps"])]


def _read_name(value: object) -> str:
    if not isinstance(value, str) or not re.fullmatch(r"\S(.*\S)?", value):
        raise ValueError(f"must be a text, got {shown(value)}")
    return value


Numbers = Annotated[list[Any] | str, PlainValidator(_read_numbers)]
Values = Annotated[list[Any] | str, PlainValidator(_read_values)]
Name = Annotated[str, PlainValidator(_read_name)]
Span = Annotated[list[float], Field(min_length=2, max_length=2)]


class ChangeFields(Part):
    """One named change: a field of the blade file or a column of the station table, set, multiplied or added to."""

    field: Name | None = Field(None, description="Path of a field of the blade file: 'layout.caps.main cap.width'.")
    column: Name | None = Field(None, description="A column of the station table: chord_m.")
    set: Values | None = Field(None, description="New value, or a list of them.")
    factor: Numbers | None = Field(None, description="Factor, or a list of them.")
    add: Numbers | None = Field(None, description="Amount to add, or a list of them.")
    span: Span | None = Field(None, description="Change it between these two z only, m.")
    ramp: float | None = Field(
        None, ge=0, description="On this length outside the span the change grows from nothing to all of itself, m."
    )


class SweepFields(Part):
    """A sweep file of skinmesh."""

    title: Name | None = Field(None, description="What the sweep is, in a few words.")
    blade: Name | None = Field(description="The base blade, looked up beside the sweep file.")
    changes: dict[str, ChangeFields] | None = Field(description="Changes by names of your own.")
    combine: Literal["grid", "together", "one by one"] | None = Field(
        None,
        description="grid (default): each value with each; together: the first values of all changes, then the second"
        " ones; one by one: the base, then each value alone.",
    )
    cases: Name | None = Field(
        None, description="Table (CSV) with a row a variant and a column a change, looked up beside the sweep file."
    )
    sections: Annotated[list[float], Field(min_length=1, max_length=40)] | None = Field(
        None, description="Where stiffnesses are listed, z in m; a quarter, half and three quarters where not given."
    )
    keep: bool | None = Field(
        None, description="Keep the base mesh's numbers where the layout allows; true if not given."
    )
    checks: bool | None = Field(None, description="Make the checks of each mesh; true where not given.")
    trial: bool | None = Field(None, description="Run each variant in CalculiX, which is slow; false where not given.")
    write: list[Name] | None = Field(None, description="Formats in which each variant's mesh is kept: [vtu, inp].")
