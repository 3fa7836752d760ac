"""Whether the files of two built meshes hold the same, dates and versions apart."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from skinmesh.check.reading import BuiltMesh
from skinmesh.errors import InputError, Problem
from skinmesh.write.formats.vtu import VtuContent

_COMMENTS: Mapping[str, bytes] = {"inp": b"**", "bdf": b"$"}
_WHOLE = ("msh",)
ASIDE = ("versions", "divisions_kept_from")
"""Keys of the summary that tell how a mesh came about: they make no difference."""


def differing_keys(old: Mapping[str, Any], new: Mapping[str, Any]) -> tuple[str, ...]:
    """Keys of two summaries that say something else, those apart that tell how a mesh came about and not what it is.

    Examples
    --------
    >>> differing_keys({"title": "a", "versions": 1}, {"title": "b", "versions": 2, "hand": "clockwise"})
    ('title', 'hand')
    """
    return tuple(key for key in {**old, **new} if key not in ASIDE and old.get(key) != new.get(key))


def same_vtu(old: VtuContent, new: VtuContent) -> bool:
    """Whether all arrays and names of two VTU files are the same, to the last bit."""
    if not (np.array_equal(old.points, new.points) and np.array_equal(old.cells, new.cells)):
        return False
    pairs = ((old.cell_arrays, new.cell_arrays), (old.point_arrays, new.point_arrays), (old.names, new.names))
    return all(
        before.keys() == after.keys() and all(np.array_equal(before[name], after[name]) for name in before)
        for before, after in pairs
    )


def same_stacks(old: BuiltMesh, new: BuiltMesh) -> bool:
    """Whether the tables of stacks are the same."""
    return _same(*(built.file("stacks.csv") for built in (old, new)), comment=None)


def differing_files(old: BuiltMesh, new: BuiltMesh) -> tuple[str, ...]:
    """Endings of files that both folders have and that differ in more than comments.

    Parameters
    ----------
    old, new : BuiltMesh

    Returns
    -------
    tuple of str
        Of the decks and of MSH.

    Raises
    ------
    InputError
        A file is there and cannot be read.
    """
    found = []
    for ending in (*_WHOLE, *_COMMENTS):
        paths = old.file(ending), new.file(ending)
        if all(path.is_file() for path in paths) and not _same(*paths, comment=_COMMENTS.get(ending)):
            found.append(ending)
    return tuple(found)


def files_in_one(old: BuiltMesh, new: BuiltMesh) -> tuple[str, ...]:
    """Endings of decks and meshes that only one of the folders has."""
    return tuple(ending for ending in (*_WHOLE, *_COMMENTS) if old.file(ending).is_file() != new.file(ending).is_file())


def _same(old: Path, new: Path, *, comment: bytes | None) -> bool:
    try:
        before, after = old.read_bytes(), new.read_bytes()
    except OSError as error:
        raise InputError([Problem(str(error.filename), 0, "", f"cannot be read: {error.strerror}")]) from error
    if before == after:
        return True
    if comment is None:
        return False
    lines = [[line for line in text.splitlines() if not line.startswith(comment)] for text in (before, after)]
    return lines[0] == lines[1]
