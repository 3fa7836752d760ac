"""Holds a blade file against its schema and says in plain words what does not fit."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from copy import deepcopy
from typing import Any, TypeVar, get_args

from pydantic import BaseModel, ValidationError

from skinmesh.definition.problems import FieldPath, FieldReport, known_names, nearest, number_hint, shown
from skinmesh.definition.schema import NOT_YET, BladeFields
from skinmesh.definition.yamltree import Document

Model = TypeVar("Model", bound=BaseModel)

_MISSING_EXAMPLES = {
    "planform": "the file name of the station table, such as 'planform: stations.csv'",
    "profiles": "the profiles that the table names, such as 'profiles: {root ring: {circle: true}}'",
    "covers": "the regions that the ply covers, such as [skin]",
    "density": "kg/m³",
    "centre": "where the cap lies, such as {from_axis: 0.0}",
    "foot": "where the web meets the skin, such as {cap: main cap, across: 0.5}",
    "width": "m",
    "thickness": "of one layer, m",
    "material": "the name of a material",
    "ply": "a name for the ply",
}


def check_fields(document: Document, report: FieldReport) -> BladeFields:
    """Check every field of a blade file on its own.

    Parameters
    ----------
    document : Document
    report : FieldReport
        Takes the mistakes.

    Returns
    -------
    BladeFields
        With None in the place of every refused value.
    """
    data = deepcopy(document.data)
    _refuse_what_comes_later(data, report)
    _take_naca_as_written(data, document)
    return check_against(BladeFields, data, report, examples=_MISSING_EXAMPLES)


def check_against(
    model: type[Model], data: dict[str, Any], report: FieldReport, *, examples: Mapping[str, str]
) -> Model:
    """Check the fields of a file against a model whose fields may all be None.

    Parameters
    ----------
    model : pydantic model
    data : dict
        Refused values are taken out of it.
    report : FieldReport
        Takes the mistakes.
    examples : mapping of str to str
        What to give in place of a missing field, by its name.

    Returns
    -------
    Model
        With None in the place of every refused value.
    """
    try:
        return model.model_validate(data)
    except ValidationError as error:
        faults = error.errors(include_url=False)
    meant = {_meant_field(model, tuple(fault["loc"])) for fault in faults if fault["type"] == "extra_forbidden"}
    for fault in faults:
        # a misspelt field is told once, not also as missing
        if fault["type"] != "missing" or tuple(fault["loc"]) not in meant:
            _tell(model, fault, report, examples)
    # extra fields first: taking them out moves nothing that another fault points at
    for fault in sorted(faults, key=lambda fault: fault["type"] != "extra_forbidden"):
        _take_out(model, fault["type"], tuple(fault["loc"]), data)
    return model.model_validate(data)


def _refuse_what_comes_later(data: dict[str, Any], report: FieldReport) -> None:
    plies = data.get("plies")
    for i, ply in enumerate(plies if isinstance(plies, list) else []):
        if isinstance(ply, dict) and "outline" in ply:
            report.add(("plies", i, "outline"), f"a ply with an outline {NOT_YET}; give the ends of the ply with span")
            del ply["outline"]


def _take_naca_as_written(data: dict[str, Any], document: Document) -> None:
    """Let the digits of a NACA profile stand without quotes: 0012 is then read as the number 12."""
    profiles = data.get("profiles")
    for name, profile in profiles.items() if isinstance(profiles, dict) else ():
        if isinstance(profile, dict) and isinstance(profile.get("naca"), int) and profile["naca"] is not True:
            profile["naca"] = document.written[f"profiles.{name}.naca"]


def _tell(model: type[BaseModel], fault: Mapping[str, Any], report: FieldReport, examples: Mapping[str, str]) -> None:
    path: FieldPath = tuple(fault["loc"])
    if fault["type"] == "missing":
        what = examples.get(str(path[-1]))
        report.add(path, f"is missing or has no value{f'; give {what}' if what else ''}")
    elif fault["type"] == "extra_forbidden":
        report.add(path, _unknown_field(path, _model_at(model, path[:-1])))
    else:
        report.add(path, _fault_text(fault))


def _meant_field(model: type[BaseModel], path: FieldPath) -> FieldPath | None:
    """Path of the field that an unknown one is most like."""
    near = nearest(str(path[-1]), _field_names(_model_at(model, path[:-1])))
    return (*path[:-1], near) if near else None


def _field_names(model: type[BaseModel] | None) -> list[str]:
    return [field.alias or key for key, field in model.model_fields.items()] if model else []


def _unknown_field(path: FieldPath, model: type[BaseModel] | None) -> str:
    name = str(path[-1])
    if name == "<<":
        return "merge keys belong to YAML 1.1; write the fields out, or use an alias for the whole group"
    known = _field_names(model)
    near = nearest(name, known)
    hint = f" — did you mean '{near}'?" if near else ""
    return f"there is no such field; {known_names(known)}{hint}"


def _model_at(top: type[BaseModel], path: FieldPath) -> type[BaseModel] | None:
    """The model that a path of a file leads to."""
    model: Any = top
    for part in path:
        if isinstance(model, type) and issubclass(model, BaseModel):
            fields: dict[str | int, Any] = {field.alias or name: field for name, field in model.model_fields.items()}
            if part not in fields:
                return None
            model = fields[part].annotation
            model = next((each for each in get_args(model) if each is not type(None)), model)
        else:  # a list's item, or a group's entry by its name
            model = get_args(model)[-1]
    return model if isinstance(model, type) and issubclass(model, BaseModel) else None


def _with_hint(rule: str) -> Callable[[Any, Mapping[str, Any]], str]:
    def text(value: Any, _context: Mapping[str, Any]) -> str:
        hint = number_hint(value) if isinstance(value, str) else ""
        return f"must be {rule}, got {shown(value)}{hint}"

    return text


def _quoted(value: Any, _context: Mapping[str, Any]) -> str:
    is_plain = isinstance(value, int | float | bool)
    hint = f'; put it in quotes: "{shown(value)}"' if is_plain else ""
    return f"must be a text, got {shown(value)}{hint}"


def _group(value: Any, _context: Mapping[str, Any]) -> str:
    return f"must be a group of fields {{name: value, …}}, got {shown(value)}"


def _list(value: Any, _context: Mapping[str, Any]) -> str:
    hint = f"; write [{value}]" if isinstance(value, str | int | float) and not isinstance(value, bool) else ""
    return f"must be a list, got {shown(value)}{hint}"


def _bound(sign: str, key: str) -> Callable[[Any, Mapping[str, Any]], str]:
    return lambda value, context: f"must be {sign} {shown(context[key])}, got {shown(value)}"


def _length(value: Any, _context: Mapping[str, Any]) -> str:
    if not value:
        return "the list is empty"
    return f"must be two numbers [z, z], got {shown(value)}"


def _one_of(value: Any, context: Mapping[str, Any]) -> str:
    choice = str(context["expected"]).replace("'", "")
    near = nearest(value, choice.replace(" or ", ", ").split(", ")) if isinstance(value, str) else None
    hint = f" — did you mean '{near}'?" if near else ""
    return f"must be {choice.replace('True', 'true')}, got {shown(value)}{hint}"


_TEXTS: Mapping[str, Callable[[Any, Mapping[str, Any]], str]] = {
    "float_type": _with_hint("a number"),
    "int_type": _with_hint("a whole number"),
    "finite_number": _with_hint("a finite number"),
    "bool_type": _with_hint("true or false"),
    "string_type": _quoted,
    "model_type": _group,
    "dict_type": _group,
    "list_type": _list,
    "greater_than": _bound(">", "gt"),
    "greater_than_equal": _bound("≥", "ge"),
    "less_than": _bound("<", "lt"),
    "less_than_equal": _bound("≤", "le"),
    "too_short": _length,
    "too_long": _length,
    "literal_error": _one_of,
    "value_error": lambda _value, context: str(context["error"]),
}


def _fault_text(fault: Mapping[str, Any]) -> str:
    text = _TEXTS.get(fault["type"])
    return text(fault["input"], fault.get("ctx", {})) if text else f"{fault['msg']}, got {shown(fault['input'])}"


def _take_out(model: type[BaseModel], fault_type: str, path: FieldPath, data: dict[str, Any]) -> None:
    """Put None, or an empty part, where a value was refused, so that the rest can be looked at."""
    *way, last = path
    parent: Any = data
    for part in way:
        parent = parent.get(part) if isinstance(parent, dict) else parent[part]
        if parent is None:
            return  # taken out before, with what held it
    part_model = _model_at(model, path)
    if fault_type == "extra_forbidden":
        parent.pop(last, None)
    elif _model_at(model, tuple(way)) is not None:
        parent[last] = None
    elif part_model is not None:
        parent[last] = {
            field.alias or name: None for name, field in part_model.model_fields.items() if field.is_required()
        }
    elif isinstance(parent, dict):
        parent.pop(last, None)
    else:
        _take_out(model, fault_type, tuple(way), data)
