"""The input files that a mesh was made from, where they can be found."""

from __future__ import annotations

import os
from collections.abc import Iterable
from hashlib import sha256
from pathlib import Path

from skinmesh.check.finding import Finding, listed, not_made, verdict_of
from skinmesh.check.reading import BuiltMesh
from skinmesh.definition.blade import BladeDefinition, Source
from skinmesh.definition.read import load_blade
from skinmesh.errors import InputError

LARGEST_INPUT = 50_000_000
DEPTH, MOST_FOLDERS = 2, 500


def check_inputs(built: BuiltMesh, *, folders: Iterable[Path]) -> list[Finding]:
    """The input files, where they can be found, against the hashes of the summary.

    Parameters
    ----------
    built : BuiltMesh
    folders : iterable of Path
        Where to look: in them, and down to two folders below.

    Returns
    -------
    list of Finding
    """
    sources = built.mesh.sources
    if not sources:
        return [not_made("inputs", "the summary names no input files")]
    places = _places(folders)
    same: list[str] = []
    changed: list[str] = []
    lost: list[str] = []
    for source in sources:
        found = _files(source, places)
        if any(_is_same(path, source) for path in found):
            same.append(source.file)
        else:
            (changed if found else lost).append(source.file)
    measured = f"{len(same)} of {len(sources)} input files as they were, {len(changed)} changed, {len(lost)} not found"
    if not same and not changed:
        return [not_made("inputs", f"{measured} ({listed(lost)}); name their folder with --inputs")]
    where = "; ".join(
        f"{word}: {listed(names)}" for word, names in (("changed", changed), ("not found", lost)) if names
    )
    return [
        Finding(
            "inputs",
            measured,
            "warn 1 changed",
            "SHA-256 of every input in the summary",
            verdict_of(fails=False, warns=changed),
            where,
        )
    ]


def find_blade(built: BuiltMesh, *, folders: Iterable[Path]) -> tuple[BladeDefinition | None, str]:
    """The definition of the blade, read again from the very files that the mesh was built from.

    Parameters
    ----------
    built : BuiltMesh
    folders : iterable of Path
        As for :func:`check_inputs`.

    Returns
    -------
    BladeDefinition or None
    str
        Why there is none; empty where there is one.
    """
    sources = built.mesh.sources
    if not sources:
        return None, "the summary names no input files"
    found = _files(sources[0], _places(folders))
    if not found:
        return None, f"{sources[0].file} is not found; name its folder with --inputs"
    wanted = {(source.file, source.sha256) for source in sources}
    reason = "the input files that are found are not those of the build"
    for path in found:
        if _is_same(path, sources[0]):
            try:
                blade = load_blade(path)
            except InputError:
                reason = f"{sources[0].file} is found, but not every file that it names"
                continue
            if {(source.file, source.sha256) for source in blade.sources} == wanted:
                return blade, ""
    return None, reason


def _places(folders: Iterable[Path]) -> list[Path]:
    return list(dict.fromkeys(place for folder in folders for place in _with_subfolders(folder)))


def _files(source: Source, places: Iterable[Path]) -> list[Path]:
    """Files of the name of a source, too large ones left out."""
    # The build names a file from the blade file's folder; whoever looks may stand elsewhere.
    names = dict.fromkeys([source.file, Path(source.file).name])
    found = [place / name for place in places for name in names if (place / name).is_file()]
    return [path for path in found if path.stat().st_size <= LARGEST_INPUT]


def _is_same(path: Path, source: Source) -> bool:
    return sha256(path.read_bytes()).hexdigest() == source.sha256


def _with_subfolders(folder: Path) -> list[Path]:
    """A folder and those down to two below it, without hidden ones."""
    found = [folder] if folder.is_dir() else []
    newest = found
    for _ in range(DEPTH):
        newest = [child for parent in newest for child in _children(parent)]
        found = [*found, *newest][:MOST_FOLDERS]
    return found


def _children(folder: Path) -> list[Path]:
    if not os.access(folder, os.R_OK | os.X_OK):
        return []
    return sorted(path for path in folder.iterdir() if path.is_dir() and not path.name.startswith("."))
