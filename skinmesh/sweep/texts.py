"""A blade as texts that need no folder: the base as plain values, and the files of every variant."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Mapping
from copy import deepcopy
from pathlib import Path
from typing import Any

from skinmesh.definition.filetext import InputText, read_text
from skinmesh.definition.packagefiles import geometry_folder
from skinmesh.definition.problems import Findings
from skinmesh.definition.read import load_blade
from skinmesh.definition.yamltree import read_document
from skinmesh.errors import InputError
from skinmesh.sweep.alter import altered_table, altered_value
from skinmesh.sweep.paths import RefusedError, value_at
from skinmesh.sweep.plan import BaseBlade, BladeTexts, Change

_PLAIN_KEY = re.compile(r"[A-Za-z][A-Za-z0-9_ -]*[A-Za-z0-9_]|[A-Za-z]")
_HEAD = "# A variant of {file}, written by a sweep of skinmesh: the same values with its changes.\n"


def read_base(path: Path, *, file: str) -> BaseBlade:
    """Read and check the base blade.

    Parameters
    ----------
    path : Path
    file : str
        Its name as the sweep file has it.

    Returns
    -------
    BaseBlade

    Raises
    ------
    InputError
        With every mistake of every file.
    """
    blade = load_blade(path)
    findings = Findings()
    text = read_text(path, file, findings=findings, kind="blade file")
    document = None if text is None else read_document(text, findings)
    if document is None:
        raise InputError(findings.problems)
    data = deepcopy(document.data)
    names: dict[str, str] = {}
    table = _named_text(path.parent, str(data["planform"]), findings, kind="station table")
    data["planform"] = _plain_name(str(data["planform"]), names, f"{path.stem}.csv")
    profiles = {}
    for name, profile in data["profiles"].items():
        if "naca" in profile:
            # 0012 without quotes reads as the number 12
            profile["naca"] = document.written[f"profiles.{name}.naca"]
        if "file" in profile:
            read = _named_text(path.parent, profile["file"], findings, kind="profile file")
            profile["file"] = _plain_name(profile["file"], names, "profile.dat")
            profiles[profile["file"]] = "" if read is None else read.text
    if table is None or findings.problems:
        raise InputError(findings.problems)
    return BaseBlade(
        title=blade.title,
        stem=blade.stem,
        file=file,
        data=data,
        table=table.text,
        profiles=profiles,
        lines=document.lines,
        span=(float(blade.stations.z[0]), float(blade.stations.z[-1])),
    )


def make_change(base: BaseBlade, change: Change, amount: Any) -> BaseBlade:
    """The blade with one change more.

    Parameters
    ----------
    base : BaseBlade
    change : Change
    amount : value

    Returns
    -------
    BaseBlade

    Raises
    ------
    RefusedError
        The change cannot be made.
    """
    values = vars(base)
    if change.column is not None:
        return BaseBlade(**{**values, "table": altered_table(base.table, change, amount)})
    path = change.field or ()
    data = deepcopy(base.data)
    parent = value_at(data, path[:-1])
    holder: Any = parent if isinstance(parent, dict | list) else None
    if holder is None:
        raise RefusedError("an earlier change took away what holds this field")
    holder[path[-1]] = altered_value(value_at(data, path), change, amount, blade_span=base.span)
    return BaseBlade(**{**values, "data": data})


def variant_blade(base: BaseBlade, changes: Iterable[Change], values: Mapping[str, Any]) -> BaseBlade:
    """The base with the changes of a variant, in the order of the sweep file.

    Parameters
    ----------
    base : BaseBlade
    changes : iterable of Change
    values : mapping of str to value
        By the changes' names; a change without one is not made.

    Returns
    -------
    BaseBlade

    Raises
    ------
    RefusedError
        A change cannot be made.
    """
    for change in changes:
        if change.name in values:
            base = make_change(base, change, values[change.name])
    return base


def blade_texts(base: BaseBlade) -> BladeTexts:
    """The files of a blade.

    Parameters
    ----------
    base : BaseBlade

    Returns
    -------
    BladeTexts
    """
    head = _HEAD.format(file=" ".join(base.file.split()))
    files = {f"{base.stem}.yaml": head + yaml_text(base.data), base.data["planform"]: base.table, **base.profiles}
    return BladeTexts(base.stem, files)


def yaml_text(data: Mapping[str, Any]) -> str:
    """Plain values as YAML: a line for every entry of every part.

    Parameters
    ----------
    data : mapping of str to value

    Returns
    -------
    str

    Examples
    --------
    >>> print(yaml_text({"title": "a", "plies": [{"ply": "skin", "thickness": 1e-3}]}), end="")
    title: "a"
    plies:
      - {ply: "skin", thickness: 0.001}
    """
    return "".join(f"{line}\n" for key, value in data.items() for line in _part(key, value, "", 2))


def _part(key: str, value: Any, indent: str, depth: int) -> list[str]:
    name = _key(key)
    if depth and isinstance(value, dict) and value and any(isinstance(each, dict) for each in value.values()):
        inside = [line for k, v in value.items() for line in _part(k, v, f"{indent}  ", depth - 1)]
        return [f"{indent}{name}:", *inside]
    if depth and isinstance(value, list) and any(isinstance(each, dict) for each in value):
        return [f"{indent}{name}:", *(f"{indent}  - {_flow(each)}" for each in value)]
    return [f"{indent}{name}: {_flow(value)}"]


def _flow(value: Any) -> str:
    if isinstance(value, dict):
        return f"{{{', '.join(f'{_key(k)}: {_flow(v)}' for k, v in value.items())}}}"
    if isinstance(value, list):
        return f"[{', '.join(map(_flow, value))}]"
    # every text in quotes: no word of it can then be read as a number or a truth
    return json.dumps(value, ensure_ascii=False)


def _key(key: str) -> str:
    return key if _PLAIN_KEY.fullmatch(key) else json.dumps(key, ensure_ascii=False)


def _named_text(folder: Path, name: str, findings: Findings, *, kind: str) -> InputText | None:
    beside = folder / name
    place = beside if beside.exists() or kind != "profile file" else geometry_folder() / name
    return read_text(place, name, findings=findings, kind=kind, is_strict=kind != "profile file")


def _plain_name(name: str, names: dict[str, str], usual: str) -> str:
    """A name without folders, no two files with the same."""
    if name not in names:
        plain = re.split(r"[/\\]", name)[-1] or usual
        stem, point, ending = plain.rpartition(".")
        while plain in names.values():
            stem = f"{stem}-"
            plain = f"{stem}{point}{ending}"
        names[name] = plain
    return names[name]
