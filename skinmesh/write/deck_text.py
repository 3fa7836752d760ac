"""Text for solver decks: whole blocks at once, and names that every reader accepts."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable, Iterator, Sequence
from itertools import chain

import numpy as np
from numpy.typing import NDArray

from skinmesh.laminate.merge import merge_equal_layers
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.shellmesh import ShellMesh

LONGEST_NAME = 80
_BLOCK = 50_000


def rows_text(row: str, columns: Sequence[NDArray[np.generic] | Sequence[object]]) -> Iterator[str]:
    """Many lines by one ``%``-format a block, which is far faster than a loop over lines.

    Parameters
    ----------
    row : str
        Format of one line, with its line feed.
    columns : sequence of arrays or of sequences of str
        One a conversion in ``row``, all of one length.

    Yields
    ------
    str
        Some ten thousand lines each.

    Examples
    --------
    >>> "".join(rows_text("%d,%.1f\\n", [np.array([1, 2]), np.array([0.5, 1.5])]))
    '1,0.5\\n2,1.5\\n'
    """
    n_rows = len(columns[0]) if columns else 0
    for start in range(0, n_rows, _BLOCK):
        parts = [column[start : start + _BLOCK] for column in columns]
        lists = [part.tolist() if isinstance(part, np.ndarray) else part for part in parts]
        yield (row * len(lists[0])) % tuple(chain.from_iterable(zip(*lists, strict=True)))


def number_lines(numbers: NDArray[np.int64], *, per_line: int = 12) -> str:
    """Whole numbers in comma-separated lines, as set cards want them.

    Examples
    --------
    >>> number_lines(np.array([1, 2, 3]), per_line=2)
    '1,2,\\n3\\n'
    """
    full, rest = divmod(len(numbers), per_line)
    line = ",".join(["%d"] * per_line)
    text = (f"{line},\n" * full) % tuple(numbers[: full * per_line].tolist())
    if rest:
        return text + ",".join(map(str, numbers[full * per_line :].tolist())) + "\n"
    return text[:-2] + "\n" if text else ""


def safe_names(names: Iterable[str], *, taken: Iterable[str] = ()) -> dict[str, str]:
    """Deck names of the user's names: upper case with underscores, ASCII, at most 80 characters, all different.

    Parameters
    ----------
    names : iterable of str
    taken : iterable of str
        Deck names that are in use already.

    Returns
    -------
    dict of str to str
        Deck name of every name. A name that would begin with a digit, or be empty, gets ``N_`` in front: a bare
        number is no name in a deck.

    Examples
    --------
    >>> safe_names(["suction main cap", "Suction Main-Cap", "1st web", "Größe"])["Größe"]
    'GROSSE'
    >>> list(safe_names(["suction main cap", "Suction Main-Cap", "1st web"]).values())
    ['SUCTION_MAIN_CAP', 'SUCTION_MAIN_CAP_2', 'N_1ST_WEB']
    """
    used = set(taken)
    result: dict[str, str] = {}
    for name in names:
        if name in result:
            continue
        plain = re.sub(r"[^A-Z0-9]+", "_", ascii_text(name).upper().replace("?", "_")).strip("_")
        plain = plain if plain[:1].isalpha() else f"N_{plain}".rstrip("_")
        plain = plain[:LONGEST_NAME]
        candidate, count = plain, 1
        while candidate in used:
            count += 1
            candidate = f"{plain[: LONGEST_NAME - 1 - len(str(count))]}_{count}"
        used.add(candidate)
        result[name] = candidate
    return result


def ascii_text(text: str) -> str:
    """A user's text for a comment: one line of ASCII, accents dropped, anything else a question mark.

    Examples
    --------
    >>> ascii_text("Flügel 24 m,\\nérable 中")
    'Flugel 24 m, erable ?'
    """
    spread = unicodedata.normalize("NFKD", " ".join(text.split()).replace("ß", "ss"))
    bare = "".join(mark for mark in spread if not unicodedata.combining(mark))
    return "".join(mark if " " <= mark <= "~" else "?" for mark in bare)


def exact(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Values that ``%.14g`` writes in at most 20 characters, all that some readers look at in a field."""
    return np.where(np.abs(values) < 1e-90, 0.0, values)


def deck_layers(mesh: ShellMesh) -> list[tuple[Layer, ...]]:
    """Layers of every stack as decks list them: merged, from the negative-normal face upwards.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    list of tuple of Layer
        One a stack.
    """
    return [merge_equal_layers(stack)[::-1] for stack in mesh.stacks]


def set_names(mesh: ShellMesh) -> tuple[dict[str, str], dict[str, str]]:
    """Deck names of the node sets and of the element sets, the same in every deck.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    node_names, element_names : dict of str to str
        By the name of the set in ``mesh.node_sets`` and in :func:`element_groups`.
    """
    return safe_names(mesh.node_sets, taken=("ALL",)), safe_names(element_groups(mesh), taken=("ALL",))


def element_groups(mesh: ShellMesh) -> dict[str, NDArray[np.int64]]:
    """Every named set of elements: regions, sides, webs, stacks, bare elements, and the mesh's own further sets.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    dict of str to int array
        Element indices by name; no set is empty.
    """
    webs = np.array([region.kind == "web" for region in mesh.regions])[mesh.region]
    groups = {
        region.name: indices
        for region, indices in zip(mesh.regions, split_labels(mesh.region, len(mesh.regions)), strict=True)
    }
    further = {
        "suction": np.flatnonzero(mesh.side > 0),
        "pressure": np.flatnonzero(mesh.side < 0),
        "webs": np.flatnonzero(webs),
        **{f"stack {k + 1}": indices for k, indices in enumerate(split_labels(mesh.stack, len(mesh.stacks)))},
        "without plies": np.flatnonzero(mesh.stack < 0),
        **mesh.element_sets,
    }
    for name, indices in further.items():
        groups.setdefault(name, indices)
    return {name: indices for name, indices in groups.items() if len(indices)}


def split_labels(label: NDArray[np.int64], n_labels: int) -> list[NDArray[np.int64]]:
    """Indices that carry each of the labels 0, 1, …, in increasing order; negative labels are left out.

    Parameters
    ----------
    label : (m,) int array
    n_labels : int

    Returns
    -------
    list of int array

    Examples
    --------
    >>> [indices.tolist() for indices in split_labels(np.array([1, -1, 0, 1]), 3)]
    [[2], [0, 3], []]
    """
    order = np.argsort(label, kind="stable")
    edges = np.searchsorted(label[order], np.arange(n_labels + 1))
    return [order[edges[k] : edges[k + 1]] for k in range(n_labels)]
