"""What ``skinmesh new`` writes: the demonstration blade, or a first blade file round the user's own table."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from skinmesh.commands.firstblade import FirstProfile, blade_text
from skinmesh.definition.coordinates import read_coordinates
from skinmesh.definition.filetext import read_text
from skinmesh.definition.packagefiles import geometry_folder, starter_folder
from skinmesh.definition.problems import Findings, nearest, shown
from skinmesh.definition.table import ReadTable, check_extra_columns, read_table
from skinmesh.errors import InputError, OutputError, Problem

_PACKAGED = re.compile(r"(?:\.\./)*geometry/([\w.-]+)")
_ROUND = re.compile(r"circ|cylind|round|tube|(^|[\s_-])ring([\s_-]|$)", re.IGNORECASE)
_NACA = re.compile(r"naca[\s_-]*(\d{4})", re.IGNORECASE)


@dataclass(frozen=True)
class _NewFile:
    """A file to write.

    Attributes
    ----------
    name : str
    content : bytes
    source : Path or None
        The user's own file that it is a copy of.
    """

    name: str
    content: bytes
    source: Path | None = None


def write_starter(directory: Path, *, table: Path | None = None, profiles: Path | None = None) -> tuple[Path, ...]:
    """Write a complete, commented blade that builds at once.

    Parameters
    ----------
    directory : Path
        Made where it is not there. Files in it are never overwritten.
    table : Path, optional
        The user's own station table; without it the demonstration blade is written.
    profiles : Path, optional
        Folder with the profile files that the table names.

    Returns
    -------
    tuple of Path
        The files that were written, the blade file first.

    Raises
    ------
    InputError
        A file is there already, or the table or a profile is wrong.
    OutputError
        The files cannot be written.
    """
    if table is None and profiles is not None:
        raise InputError([Problem("--profiles", 0, "", "goes with --table: the table names the profiles")])
    files = _demonstration() if table is None else _round_own_table(table, profiles)
    return _write(files, directory)


def _demonstration() -> list[_NewFile]:
    """The demonstration blade with the profile files that it uses beside it."""
    folder = starter_folder()
    try:
        paths = sorted(path for path in folder.iterdir() if path.is_file() and not path.name.startswith("."))
        files, names = [], dict[str, None]()
        for path in sorted(paths, key=lambda path: path.suffix != ".yaml"):
            content = path.read_bytes()
            if path.suffix == ".yaml":
                text = content.decode("utf-8")
                names |= dict.fromkeys(_PACKAGED.findall(text))
                content = _PACKAGED.sub(r"\1", text).encode("utf-8")
            files.append(_NewFile(path.name, content))
        files += [_NewFile(name, (geometry_folder() / name).read_bytes()) for name in names]
    except OSError as error:
        raise OutputError(f"the demonstration blade is missing from this installation: {error}") from error
    return files


def _round_own_table(table: Path, folder: Path | None) -> list[_NewFile]:
    findings = Findings()
    text = read_text(table, str(table), findings=findings, kind="station table")
    read = read_table(text, findings) if text else None
    if folder is not None and not folder.is_dir():
        findings.add(str(folder), "is no folder; give the folder that holds the profile files")
        folder = None
    elif read is not None:
        check_extra_columns(read, set(), findings)
    own = _files_in(folder, findings) if folder else []
    found = [_first_profile(name, row, read, own, folder, findings) for name, row in _profile_rows(read)]
    if findings.problems or read is None:
        raise InputError(findings.problems)
    content = blade_text(table, read.stations(), [profile for profile, _ in found if profile])
    files = [_NewFile(f"{table.stem}.yaml", content.encode("utf-8")), _NewFile(table.name, table.read_bytes(), table)]
    sources = dict.fromkeys(source for _, source in found if source)
    return files + [_NewFile(source.name, source.read_bytes(), source) for source in sources]


def _files_in(folder: Path, findings: Findings) -> list[Path]:
    """Files of a folder, those with the usual suffix first."""
    try:
        paths = sorted(path for path in folder.iterdir() if path.is_file() and not path.name.startswith("."))
    except OSError as error:
        findings.add(str(folder), f"cannot be read: {error.strerror or error}")
        return []
    return sorted(paths, key=lambda path: path.suffix.lower() != ".dat")


def _profile_rows(table: ReadTable | None) -> Iterable[tuple[str, int]]:
    """Every profile name of the table with the row that names it first."""
    rows: dict[str, int] = {}
    for row, name in enumerate(table.profile if table else ()):
        if name is not None:
            rows.setdefault(name, row)
    return rows.items()


def _first_profile(
    name: str, row: int, table: ReadTable | None, own: list[Path], folder: Path | None, findings: Findings
) -> tuple[FirstProfile | None, Path | None]:
    """What a name of the table most likely means, and the file to copy."""
    file = next((path for path in own if _key(name) in (_key(path.stem), _key(path.name))), None)
    if file is not None:
        text = read_text(file, str(file), findings=findings, kind="profile file", is_strict=False)
        if text is not None:
            read_coordinates(text, findings)
        return FirstProfile(name, file=file.name), file
    if naca := _NACA.fullmatch(name.strip()):
        return FirstProfile(name, naca=naca[1]), None
    if _ROUND.search(name):
        return FirstProfile(name), None
    if table is not None:
        near = nearest(name, [path.stem for path in own])
        hint = f" — did you mean '{near}'?" if near else ""
        where = f"no file of this name in {folder}" if folder else "give the folder of its file with --profiles"
        findings.add(
            table.file,
            f"the profile {shown(name)} is not known: {where}; 'circle', 'NACA 2412' and the like need no file{hint}",
            place=f"{table.place(row)}, profile",
            line=table.lines[row],
        )
    return None, None


def _key(name: str) -> str:
    """A name without case, blanks and signs."""
    return re.sub(r"[\W_]+", "", name.lower())


def _write(files: list[_NewFile], directory: Path) -> tuple[Path, ...]:
    written: list[Path] = []
    try:
        if directory.exists() and not directory.is_dir():
            raise OutputError(f"{directory}: is a file; give a folder")
        new = [file for file in files if not (file.source and _is_same(directory / file.name, file.source))]
        _refuse_taken_names(new, directory)
        directory.mkdir(parents=True, exist_ok=True)
        for file in new:
            path = directory / file.name
            with path.open("xb") as stream:
                written.append(path)
                stream.write(file.content)
    except OSError as error:
        for path in written:
            path.unlink(missing_ok=True)
        raise OutputError(f"{error.filename or directory}: {error.strerror or error}") from error
    return tuple(written)


def _refuse_taken_names(files: list[_NewFile], directory: Path) -> None:
    names = [file.name for file in files]
    taken = [name for name in names if (directory / name).exists() or (directory / name).is_symlink()]
    twice = [name for name in dict.fromkeys(names) if names.count(name) > 1]
    problems = [
        Problem(str(directory), 0, "", f"two files would be named {name}; rename one of them") for name in twice
    ]
    if taken:
        text = f"{', '.join(taken)} {'is' if len(taken) == 1 else 'are'} there already, and nothing is overwritten"
        problems.append(Problem(str(directory), 0, "", f"{text}; choose another folder"))
    if problems:
        raise InputError(problems)


def _is_same(path: Path, source: Path) -> bool:
    return path.exists() and path.samefile(source)
