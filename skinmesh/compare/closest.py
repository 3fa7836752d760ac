"""The point of a mesh that lies closest to a given one, on the elements' own second-order surface."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from skinmesh.mesh.inner_face import shape_functions
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_STEPS = 8
_SLIGHTLY = 1e-9
_BLOCK = 1 << 15
"""Points worked on at once, so that a million of them need no gigabytes."""


@dataclass(frozen=True, eq=False)
class Feet:
    """Closest points on a mesh.

    Attributes
    ----------
    distance : (p,) float array, m
        Of each given point.
    height : (p,) float array, m
        What of it lies along the normal, positive on the side of the element's e3: all of it, but for points beside an
        edge of the mesh or over a sharp bend.
    element : (p,) int array
        The element that each closest point lies on.
    normal : (p, 3) float array
        Unit normal there.
    """

    distance: Floats
    height: Floats
    element: Ints
    normal: Floats


def closest_points(mesh: ShellMesh, points: Floats, *, elements: Ints) -> Feet:
    """Find the closest points among some elements.

    Parameters
    ----------
    mesh : ShellMesh
    points : (p, 3) float array, m
    elements : (k,) int array
        Where to look; not empty.

    Returns
    -------
    Feet

    Notes
    -----
    Candidates are the element of the nearest sample, four to an element, and those that touch it in the node nearest to
    the point; on each of them projected Gauss–Newton steps find the closest point. Far from the mesh, beside its size,
    another element may be nearer by a little.
    """
    nodes, node_of = np.unique(mesh.cells[elements], return_inverse=True)
    node_of = node_of.reshape(len(elements), -1)
    around = _elements_at(node_of, len(nodes))
    # some in every element: on a thin blade the nearest node may be one of the other side
    samples = np.einsum("sn,end->esd", _sample_weights(mesh), mesh.points[mesh.cells[elements]])
    tree = cKDTree(samples.reshape(-1, 3))
    parts = []
    for start in range(0, len(points), _BLOCK):
        block = points[start : start + _BLOCK]
        first = tree.query(block)[1] // samples.shape[1]
        corners = node_of[first]
        nearest = np.argmin(np.linalg.norm(mesh.points[nodes[corners]] - block[:, None], axis=2), axis=1)
        beside = around[corners[np.arange(len(block)), nearest]]
        parts.append(_feet(mesh, elements[np.column_stack([first, beside])], block))
    if not parts:
        return Feet(np.zeros(0), np.zeros(0), np.zeros(0, dtype=np.int64), np.zeros((0, 3)))
    return Feet(
        np.concatenate([part.distance for part in parts]),
        np.concatenate([part.height for part in parts]),
        np.concatenate([part.element for part in parts]),
        np.concatenate([part.normal for part in parts]),
    )


def _elements_at(node_of: Ints, n_nodes: int) -> Ints:
    """(n_nodes, most) elements at every node; the first one again where there are fewer."""
    node = node_of.ravel()
    element = np.repeat(np.arange(len(node_of)), node_of.shape[1])
    order = np.argsort(node, kind="stable")
    node, element = node[order], element[order]
    start = np.searchsorted(node, np.arange(n_nodes))
    count = np.diff(np.r_[start, len(node)])
    column = np.arange(len(node)) - start[node]
    around = np.repeat(element[start][:, None], int(count.max()), axis=1)
    around[node, column] = element
    return around


def _sample_weights(mesh: ShellMesh) -> Floats:
    """(4, k) shape functions at places that share an element among them."""
    if mesh.n_sides == 4:
        places = np.array([[-0.5, -0.5], [0.5, -0.5], [0.5, 0.5], [-0.5, 0.5]])
    else:
        places = np.array([[1 / 3, 1 / 3], [1 / 6, 1 / 6], [2 / 3, 1 / 6], [1 / 6, 2 / 3]])
    return shape_functions(mesh.cells.shape[1], places)[0]


def _feet(mesh: ShellMesh, candidates: Ints, points: Floats) -> Feet:
    n, most = candidates.shape
    best = np.full(n, np.inf)
    element, normal, height = candidates[:, 0].copy(), np.zeros((n, 3)), np.zeros(n)
    # a foot inside the first element is the closest one; others may lie on the elements beside it
    is_open = np.ones(n, dtype=bool)
    for column in range(most):
        own = np.flatnonzero(is_open & ((candidates[:, column] != candidates[:, 0]) | (column == 0)))
        distance, across, along, inside = _on_elements(mesh, candidates[own, column], points[own])
        better = distance < best[own]
        chosen = own[better]
        best[chosen], element[chosen] = distance[better], candidates[chosen, column]
        normal[chosen], height[chosen] = across[better], along[better]
        is_open[own[inside]] = False
    return Feet(best, height, element, normal)


def _on_elements(mesh: ShellMesh, element: Ints, points: Floats) -> tuple[Floats, Floats, Floats, NDArray[np.bool_]]:
    """Distance to one element each, the unit normal at the foot, what of the distance lies along it, foot inside."""
    nodes = mesh.points[mesh.cells[element]]
    is_quad = mesh.n_sides == 4
    place = np.full((len(element), 2), 0.0 if is_quad else 1.0 / 3.0)
    moving = np.arange(len(element))
    for _ in range(_STEPS):
        before = place[moving]
        after = _step(nodes[moving], before, points[moving], is_quad=is_quad)
        place[moving] = after
        moving = moving[np.abs(after - before).max(axis=1) > _SLIGHTLY]
        if not len(moving):
            break
    gap, first, second = _gap(nodes, place, points)
    normal = np.cross(first, second)
    normal /= np.maximum(np.linalg.norm(normal, axis=1), 1e-300)[:, None]
    along = np.einsum("pd,pd->p", gap, normal)
    if is_quad:
        inside = np.abs(place).max(axis=1, initial=0.0) < 1.0
    else:
        inside = (place.min(axis=1, initial=1.0) > 0.0) & (place.sum(axis=1) < 1.0)
    return np.linalg.norm(gap, axis=1), normal, along, inside


def _step(nodes: Floats, place: Floats, points: Floats, *, is_quad: bool) -> Floats:
    """One projected Gauss–Newton step towards the foot."""
    gap, first, second = _gap(nodes, place, points)
    a, b, c = (np.einsum("pd,pd->p", u, v) for u, v in ((first, first), (first, second), (second, second)))
    right = [np.einsum("pd,pd->p", vector, gap) for vector in (first, second)]
    bottom = np.maximum(a * c - b * b, 1e-300)
    step = np.column_stack([c * right[0] - b * right[1], a * right[1] - b * right[0]]) / bottom[:, None]
    moved = _inside(place + step, is_quad=is_quad)
    if not is_quad:
        return moved
    # where one coordinate is held at a side, the other one slides along it
    held = np.abs(moved) >= 1.0
    slide = np.column_stack([right[0] / np.maximum(a, 1e-300), right[1] / np.maximum(c, 1e-300)])
    on_side = np.abs(place) >= 1.0
    alone = held[:, ::-1] & on_side[:, ::-1] & ~held
    return np.where(alone, np.clip(place + slide, -1.0, 1.0), moved)


def _gap(nodes: Floats, place: Floats, points: Floats) -> tuple[Floats, Floats, Floats]:
    """From a place on each element to the given point, and both tangents there."""
    values, along_first, along_second = shape_functions(nodes.shape[1], place)
    at, first, second = (np.einsum("pn,pnd->pd", weights, nodes) for weights in (values, along_first, along_second))
    return points - at, first, second


def _inside(place: Floats, *, is_quad: bool) -> Floats:
    """The nearest place of the unit element."""
    if is_quad:
        return np.clip(place, -1.0, 1.0)
    low = np.clip(place, 0.0, 1.0)
    excess = np.maximum(low.sum(axis=1) - 1.0, 0.0)[:, None] / 2.0
    shifted = np.clip(low - excess, 0.0, 1.0)
    inside: Floats = shifted / np.maximum(shifted.sum(axis=1), 1.0)[:, None]
    return inside
