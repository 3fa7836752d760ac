"""A solver deck as plain arrays, and how it is held against the mesh."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import FAIL, Finding, listed, span_of, verdict_of
from skinmesh.check.reading import BuiltMesh
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

PLACE = 1e-9
"""Metres by which a node of a deck may be off."""
DIRECTION = 0.01
"""Degrees by which a ply's direction may be off."""
SAME = 1e-6
"""Share by which a thickness or a constant may be off."""
SOURCE = "one build wrote them all"


class DeckError(Exception):
    """A deck cannot be read as one of ours; the message says why."""


@dataclass(frozen=True, eq=False)
class DeckGeometry:
    """Nodes and elements of a deck.

    Attributes
    ----------
    node_number : (n,) int array
        Increasing.
    points : (n, 3) float array, m
    element_number : (m,) int array
        Increasing.
    connectivity : (m, k) int array
        Solver numbers of the nodes.
    """

    node_number: Ints
    points: Floats
    element_number: Ints
    connectivity: Ints

    def positions(self) -> Ints:
        """(m, k) int array: the elements' nodes as indices.

        Raises
        ------
        DeckError
            An element names a node that is not there.
        """
        index = find_numbers(self.node_number, self.connectivity.ravel())
        if np.any(index < 0):
            raise DeckError("elements name nodes that are not there")
        return index.reshape(self.connectivity.shape)


def sorted_geometry(node_number: Ints, points: Floats, element_number: Ints, connectivity: Ints) -> DeckGeometry:
    """Nodes and elements in the order of their numbers."""
    nodes, elements = np.argsort(node_number, kind="stable"), np.argsort(element_number, kind="stable")
    return DeckGeometry(node_number[nodes], points[nodes], element_number[elements], connectivity[elements])


def find_numbers(numbers: Ints, wanted: Ints) -> Ints:
    """Index of each wanted number among increasing numbers, −1 where it is not there.

    Examples
    --------
    >>> find_numbers(np.array([2, 5, 9]), np.array([9, 4]))
    array([ 2, -1])
    """
    index = np.clip(np.searchsorted(numbers, wanted), 0, max(len(numbers) - 1, 0))
    if not len(numbers):
        return np.full(len(wanted), -1, dtype=np.int64)
    return np.where(numbers[index] == wanted, index, -1)


def compare_geometry(check: str, built: BuiltMesh, deck: DeckGeometry, *, has_second_order: bool) -> Finding:
    """Counts, numbers, coordinates and connectivity of a deck against the VTU.

    Parameters
    ----------
    check : str
    built : BuiltMesh
    deck : DeckGeometry
    has_second_order : bool
        Whether the deck has mid nodes whatever the mesh's order.

    Returns
    -------
    Finding
    """
    mesh = built.mesh
    wrong = []
    beyond = np.zeros(len(mesh.cells), dtype=bool)
    has_more_nodes = has_second_order and mesh.order == 1
    if len(deck.node_number) != mesh.n_nodes and not has_more_nodes:
        wrong.append(f"{counted(len(deck.node_number), 'node')} for {mesh.n_nodes}")
    if len(deck.element_number) != len(mesh.cells):
        wrong.append(f"{counted(len(deck.element_number), 'element')} for {len(mesh.cells)}")
    at = find_numbers(deck.node_number, mesh.node_number[: mesh.n_nodes])
    lost = at < 0
    if lost.any():
        wrong.append(f"{counted(int(np.count_nonzero(lost)), 'node is', 'nodes are')} missing")
    off = np.where(lost, 0.0, np.abs(deck.points[np.maximum(at, 0)] - mesh.nodes).max(axis=1))
    moved = np.flatnonzero(off > PLACE)
    if len(moved):
        worst = moved[off[moved].argmax()]
        numbers = listed(str(number) for number in mesh.node_number[moved])
        wrong.append(
            f"{counted(len(moved), 'node lies', 'nodes lie')} "
            f"elsewhere, by {off[worst]:.3g} m at most (nodes {numbers})"
        )
        is_moved = np.zeros(len(mesh.points), dtype=bool)
        is_moved[moved] = True
        beyond |= is_moved[mesh.cells].any(axis=1)
    element = find_numbers(deck.element_number, mesh.element_number)
    if np.any(element < 0):
        wrong.append(f"{counted(int(np.count_nonzero(element < 0)), 'element is', 'elements are')} missing")
    wanted = mesh.node_number[mesh.connectivity]
    if deck.connectivity.shape[1] < wanted.shape[1]:
        raise DeckError(f"its elements have {deck.connectivity.shape[1]} nodes, not {wanted.shape[1]}")
    have = deck.connectivity[np.maximum(element, 0)][:, : wanted.shape[1]]
    other = (element >= 0) & np.any(have != wanted, axis=1)
    if other.any():
        wrong.append(f"{counted(int(np.count_nonzero(other)), 'element has', 'elements have')} other nodes")
    found = np.flatnonzero(beyond | other)
    return Finding(
        check,
        f"{len(deck.node_number)} nodes and {len(deck.element_number)} elements; {'; '.join(wrong) or 'as in the VTU'}",
        f"fail {PLACE:g} m",
        SOURCE,
        verdict_of(fails=len(wrong)),
        span_of(mesh, found),
        found,
    )


def compare_sets(check: str, have: Mapping[str, Ints], wanted: Mapping[str, Ints]) -> Finding:
    """Named sets of a deck against those that the mesh has; sets that only the deck has are left alone.

    Parameters
    ----------
    check : str
    have, wanted : mapping of str to int array
        Solver numbers by the deck's name of the set.

    Returns
    -------
    Finding
    """
    wrong = [
        name
        for name, numbers in wanted.items()
        if len(numbers) and not np.array_equal(np.sort(have.get(name, np.zeros(0, dtype=np.int64))), np.sort(numbers))
    ]
    return Finding(
        check,
        f"{len(wrong)} of {len(wanted)} named sets have other members",
        "none",
        SOURCE,
        verdict_of(fails=len(wrong)),
        listed(wrong),
    )


def compare_materials(
    check: str, have: Mapping[str, Iterable[float]], wanted: Mapping[str, Iterable[float]]
) -> Finding:
    """Constants of a deck's materials against those of the summary.

    Parameters
    ----------
    check : str
    have, wanted : mapping of str to floats
        By the summary's name of the material, the constants in one order.

    Returns
    -------
    Finding
    """
    wrong = []
    for name, values in wanted.items():
        told, known = list(have.get(name, ())), list(values)
        if len(told) != len(known) or not np.allclose(told, known, rtol=SAME, atol=0.0):
            wrong.append(name)
    return Finding(
        check,
        f"{len(wrong)} of {len(wanted)} materials have other constants than the summary",
        f"fail {SAME:g} of the value",
        SOURCE,
        verdict_of(fails=len(wrong)),
        listed(sorted(wrong)),
    )


def compare_directions(
    check: str, mesh: ShellMesh, element: Ints, *, have: Floats, wanted: Floats, normal: Floats
) -> Finding:
    """How far directions of plies are turned from where they should point.

    Parameters
    ----------
    check : str
    mesh : ShellMesh
    element : (k,) int array
        Index of the element of each direction.
    have, wanted : (k, 3) float array
        Directions; both are laid into the element's plane.
    normal : (k, 3) float array
        Unit normals of the deck's elements.

    Returns
    -------
    Finding
    """
    flat = wanted - np.einsum("ei,ei->e", wanted, normal)[:, None] * normal
    across = np.einsum("ei,ei->e", np.cross(normal, flat), have)
    turn = np.degrees(np.abs(np.arctan2(across, np.einsum("ei,ei->e", flat, have))))
    worst = float(turn.max(initial=0.0))
    per_element = np.zeros(len(mesh.cells))
    np.maximum.at(per_element, element, turn)
    beyond = np.flatnonzero(per_element > DIRECTION)
    return Finding(
        check,
        f"ply directions off by {worst:.4f}° at most, {counted(len(beyond), 'element')} beyond the limit",
        f"fail {DIRECTION:g}°",
        "fibre directions recomputed from the deck alone",
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
    )


def lines_of_deck(check: str, make: Callable[[], list[Finding]]) -> list[Finding]:
    """What a function finds in a file, or the line for a file that cannot be read any more.

    Parameters
    ----------
    check : str
    make : callable
        Raises DeckError, or what NumPy and Python raise on numbers that are none.

    Returns
    -------
    list of Finding

    Examples
    --------
    >>> lines_of_deck("bulk data", lambda: int("S"))[0].verdict
    'fail'
    """
    try:
        return make()
    except (DeckError, ValueError, IndexError, KeyError) as error:
        return [Finding(check, f"cannot be read: {error}", "readable", SOURCE, FAIL)]
