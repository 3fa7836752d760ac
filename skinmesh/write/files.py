"""All files of a mesh at once."""

from __future__ import annotations

import importlib
import pkgutil
import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from os import PathLike
from pathlib import Path

from skinmesh.errors import InputError, OutputError, Problem
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.placing import new_files
from skinmesh.write.registry import FORMATS, Writer, parts_folder
from skinmesh.write.tables import TABLES

for _module in pkgutil.iter_modules([str(Path(__file__).parent / "formats")]):
    importlib.import_module(f"skinmesh.write.formats.{_module.name}")

DEFAULT_FORMATS = ("vtu", "vtm", "msh", "inp", "bdf")
CHECKS_FILE, CHECK_SETS_FILE = "checks.json", "checks.inp"
STALE_FILES = (
    CHECKS_FILE,
    CHECK_SETS_FILE,
    "trial.json",
    "trial.log",
    "trial.png",
    "page.html",
    "colours.json",
    "msh.opt",
    "diff.json",
    "diff.png",
)
"""What commands write beside a mesh; of an earlier mesh they are removed, for they speak of another."""


@dataclass(frozen=True)
class WrittenFile:
    """A file that was written, or a folder of files that belong to one.

    Attributes
    ----------
    name : str
        Without its directory; a folder's ends with a slash.
    size : int, bytes
        Of a folder, that of all its files.
    """

    name: str
    size: int


def write(
    mesh: ShellMesh,
    directory: str | PathLike[str],
    *,
    formats: Iterable[str] = DEFAULT_FORMATS,
    extras: Mapping[str, Writer | None] | None = None,
    progress: Callable[[str, float], None] | None = None,
) -> tuple[WrittenFile, ...]:
    """Write a mesh in the wanted formats, with its table of stacks and its summary.

    The files are named after the mesh: ``stem.vtu``, ``stem.stacks.csv``, ``stem.summary.json``; further files of a
    format lie in a folder of its own, ``stem.vtm.d``. All are written, or none: a call that fails leaves the directory
    as it was. Files of an earlier build of the same stem are replaced, and **removed where their format is not asked
    for now**, for they would show another mesh. Files that are not ours stay; a folder of ours that holds one is
    refused.

    Parameters
    ----------
    mesh : ShellMesh
    directory : path
        Made where it is missing.
    formats : iterable of str
        Names from ``skinmesh.write.registry.FORMATS``.
    extras : mapping of str to callable or None
        Further files that belong to the mesh, such as pictures: ending of the file's name, and what writes it. None
        where it is not wanted this time; an old one is then removed like that of a format.
    progress : callable, optional
        Called with the name of each stage and the share of the work done when it begins.

    Returns
    -------
    tuple of WrittenFile
        The formats in the order asked for, each followed by its folder, the tables, the extras.

    Raises
    ------
    InputError
        There is no such format.
    MeshError
        The mesh kernel failed on the MSH file.
    OutputError
        The directory or a file in it cannot be written, or a folder to be replaced holds a file that is not ours.
    """
    wanted = _known_formats(formats)
    directory = Path(directory)
    extras = extras or {}
    is_own = _own_names(mesh.stem, (*FORMATS, *TABLES, *STALE_FILES, *extras))
    try:
        with new_files(directory, is_own=is_own) as stage:
            writers = {name: FORMATS[name].write for name in wanted}
            writers |= {ending: _table_writer(table) for ending, table in TABLES.items()}
            writers |= {ending: writer for ending, writer in extras.items() if writer is not None}
            paths = [stage / f"{mesh.stem}.{ending}" for ending in writers]
            for k, (ending, path) in enumerate(zip(writers, paths, strict=True)):
                if progress is not None:
                    progress(f"write {ending}", k / len(paths))
                writers[ending](mesh, path)
            written = tuple(file for path in paths for file in _written(path))
    except OSError as error:
        raise OutputError(f"cannot write into {directory}: {error.strerror or error}") from error
    return written


def _own_names(stem: str, endings: Iterable[str]) -> Callable[[str], bool]:
    """Whether a name, or that of a folder or a file in it, is one that a mesh of this stem may have written."""
    files = {f"{stem}.{ending}" for ending in endings}
    parts = {parts_folder(Path(f"{stem}.{name}")).name: form.parts for name, form in FORMATS.items() if form.parts}

    def is_own(name: str) -> bool:
        folder, slash, part = name.partition("/")
        if not slash:
            return name in files
        return folder in parts and (not part or re.fullmatch(parts[folder], part) is not None)

    return is_own


def _written(path: Path) -> list[WrittenFile]:
    """A file, and the folder of its further files."""
    file, folder = WrittenFile(path.name, path.stat().st_size), parts_folder(path)
    if not folder.is_dir():
        return [file]
    return [file, WrittenFile(f"{folder.name}/", sum(part.stat().st_size for part in folder.iterdir()))]


def _table_writer(table: Callable[[ShellMesh], str]) -> Writer:
    def write_table(mesh: ShellMesh, path: Path) -> None:
        path.write_text(table(mesh), encoding="utf-8", newline="\n")

    return write_table


def _known_formats(formats: Iterable[str]) -> tuple[str, ...]:
    wanted = tuple(dict.fromkeys(formats))
    problems = []
    for name in wanted:
        if name not in FORMATS:
            near = get_close_matches(name, FORMATS, n=1)
            hint = f" — did you mean '{near[0]}'?" if near else ""
            problems.append(Problem("formats", 0, "", f"no format '{name}'; known: {', '.join(sorted(FORMATS))}{hint}"))
    if problems:
        raise InputError(problems)
    return wanted
