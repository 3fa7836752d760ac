"""From the path of a field as a user writes it to its place in the blade file's values."""

from __future__ import annotations

import re
from typing import Any

from skinmesh.definition.problems import FieldPath, field_name, nearest, no_such


class RefusedError(Exception):
    """A change cannot be made; the text says why."""


def find_field(data: dict[str, Any], text: str, *, may_be_new: bool = False) -> FieldPath:
    """Find a field of a blade file.

    Parameters
    ----------
    data : dict
        The blade file's values.
    text : str
        Names with points between; an entry of a list by its number from 0 in brackets, a ply also by its name.
    may_be_new : bool
        Whether the last name may be one that the file does not have yet.

    Returns
    -------
    tuple of str or int

    Raises
    ------
    RefusedError
        There is no such field, or several.

    Examples
    --------
    >>> blade = {"layout": {"caps": {"main cap": {"width": 0.4}}}, "plies": [{"ply": "skin"}, {"ply": "cap"}]}
    >>> find_field(blade, "layout.caps.main cap.width")
    ('layout', 'caps', 'main cap', 'width')
    >>> find_field(blade, "plies.cap.ply"), find_field(blade, "plies[1].ply")
    (('plies', 1, 'ply'), ('plies', 1, 'ply'))
    """
    node: Any = data
    path: FieldPath = ()
    rest = text.strip()
    while rest:
        part: str | int
        if isinstance(node, dict):
            part, rest = _key(node, rest, path, may_be_new=may_be_new)
        elif isinstance(node, list):
            part, rest = _entry(node, rest, path)
        else:
            raise RefusedError(f"'{field_name(path)}' is a single value, which has no '{rest.lstrip('.')}'")
        path = (*path, part)
        if rest:
            node = node[part]
    if not path:
        raise RefusedError("is empty; give a path such as 'layout.caps.main cap.width'")
    return path


def value_at(data: Any, path: FieldPath) -> Any:
    """The value of a field, None where the file does not have it."""
    for part in path:
        if isinstance(data, dict) and part not in data:
            return None
        data = data[part]
    return data


def _key(node: dict[str, Any], rest: str, path: FieldPath, *, may_be_new: bool) -> tuple[str, str]:
    """The key of a group that a path goes on with, the longest that fits: a name may hold a point."""
    for key in sorted(node, key=len, reverse=True):
        if rest == key or rest.startswith((f"{key}.", f"{key}[")):
            return key, rest[len(key) :].removeprefix(".")
    part = re.split(r"[.\[]", rest, maxsplit=1)[0]
    if may_be_new and part == rest and not nearest(part, node):
        return part, ""
    raise RefusedError(_no_field(part, node, path))


def _entry(node: list[Any], rest: str, path: FieldPath) -> tuple[int, str]:
    """The entry of a list that a path goes on with."""
    number = re.match(r"\[(\d+)\]", rest)
    if number:
        if int(number[1]) >= len(node):
            raise RefusedError(f"'{field_name(path)}' has the entries [0] to [{len(node) - 1}], not [{number[1]}]")
        return int(number[1]), rest[number.end() :].removeprefix(".")
    names = [item.get("ply") if isinstance(item, dict) else None for item in node]
    for name in sorted({name for name in names if name}, key=len, reverse=True):
        if rest == name or rest.startswith((f"{name}.", f"{name}[")):
            found = [i for i, each in enumerate(names) if each == name]
            if len(found) > 1:
                places = ", ".join(field_name((*path, i)) for i in found)
                raise RefusedError(f"several plies have the name '{name}': {places}; name one of them by its number")
            return found[0], rest[len(name) :].removeprefix(".")
    if any(names):
        raise RefusedError(no_such("ply", rest.split(".", maxsplit=1)[0], [name for name in names if name]))
    raise RefusedError(f"'{field_name(path)}' is a list; name an entry by its number, such as {field_name(path)}[0]")


def _no_field(part: str, node: dict[str, Any], path: FieldPath) -> str:
    told = no_such("field", part, node)
    return told.replace(";", f" in '{field_name(path)}';", 1) if path else told
