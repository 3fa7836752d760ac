"""Laminates too thick for the surface that carries them.

A layered shell is laid out in its solver as solid layers between the reference surface and the inner face. Where the
surface turns more sharply than the laminate is thick, or an element is narrower than that, the inner face folds over
and the solver stops with a nonpositive Jacobian determinant. This module finds such elements beforehand, with the
solid's own determinant at the solver's own integration points.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.laminate.merge import merge_equal_layers
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

KNOT_COSINE = np.cos(np.radians(20.0))
"""Elements at a node share a mean normal while their own normals lie within 20° (seen in CalculiX 2.20)."""

DOUBTFUL_RATIO = 0.2
"""On a smooth arc the ratio is 1 − depth / radius: below 0.2 the laminate fills more than 0.8 of the radius."""

_CHUNK = 8192
_TWO_LEVELS = 0.5 + np.array([-0.5, 0.5]) / np.sqrt(3.0)
_THREE_LEVELS = 0.5 + np.array([-0.5, 0.0, 0.5]) * np.sqrt(0.6)

_QUAD_NODES = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1], [0, -1], [1, 0], [0, 1], [-1, 0]], dtype=float)
_QUAD_GAUSS = _QUAD_NODES[:4] / np.sqrt(3.0)
_TRIANGLE_NODES = np.array([[0, 0], [1, 0], [0, 1], [0.5, 0], [0.5, 0.5], [0, 0.5]])
_TRIANGLE_GAUSS = np.array([[1, 1], [4, 1], [1, 4]]) / 6.0


@dataclass(frozen=True, eq=False)
class NodeNormals:
    """The mean normals of a mesh's nodes: one a node where the surface is smooth, several where it has a knot.

    Attributes
    ----------
    group : (m, k) int array
        Index into ``normals`` for every node of every element.
    normals : (g, 3) float array
        Unit vectors.
    node : (g,) int array
        The node that each normal stands on.
    """

    group: Indices
    normals: Floats
    node: Indices


def shape_functions(n_nodes: int, places: Floats) -> tuple[Floats, Floats, Floats]:
    """Second-order shape functions and their derivatives at places of the unit element.

    Parameters
    ----------
    n_nodes : int
        8 (quadrilateral, coordinates in [−1, 1]) or 6 (triangle, unit right triangle).
    places : (p, 2) float array

    Returns
    -------
    values, along_first, along_second : (p, n_nodes) float array

    Notes
    -----
    Zienkiewicz & Taylor, The Finite Element Method, vol. 1: serendipity quadrilateral and quadratic triangle
    (from memory).

    Examples
    --------
    >>> values, _, _ = shape_functions(8, np.array([[0.3, -0.2]]))
    >>> round(float(values.sum()), 12)
    1.0
    """
    x, y = places[:, :1], places[:, 1:]
    if n_nodes == 6:
        far = 1.0 - x - y
        zero = np.zeros_like(x)
        values = [far * (2 * far - 1), x * (2 * x - 1), y * (2 * y - 1), 4 * far * x, 4 * x * y, 4 * y * far]
        first = [1 - 4 * far, 4 * x - 1, zero, 4 * (far - x), 4 * y, -4 * y]
        second = [1 - 4 * far, zero, 4 * y - 1, -4 * x, 4 * x, 4 * (far - y)]
        return np.hstack(values), np.hstack(first), np.hstack(second)
    a, b = _QUAD_NODES[:4, 0], _QUAD_NODES[:4, 1]
    corner = 0.25 * (1 + a * x) * (1 + b * y) * (a * x + b * y - 1)
    corner_first = 0.25 * a * (1 + b * y) * (2 * a * x + b * y)
    corner_second = 0.25 * b * (1 + a * x) * (a * x + 2 * b * y)
    below, above = (1 - y), (1 + y)
    left, right = (1 - x), (1 + x)
    flat_x, flat_y = 1 - x * x, 1 - y * y
    middle = np.hstack([flat_x * below, right * flat_y, flat_x * above, left * flat_y]) / 2
    middle_first = np.hstack([-x * below, flat_y / 2, -x * above, -flat_y / 2])
    middle_second = np.hstack([-flat_x / 2, -y * right, flat_x / 2, -y * left])
    return (
        np.hstack([corner, middle]),
        np.hstack([corner_first, middle_first]),
        np.hstack([corner_second, middle_second]),
    )


def middle_height(mesh: ShellMesh) -> Floats:
    """Height of the middle of the laminate over the reference surface, along +e3.

    The one formula for the offset of the laminate: negative where the laminate lies inside its surface.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m,) float array, m
    """
    return -mesh.offset * mesh.thickness + 0.0


def centre_normals(mesh: ShellMesh) -> Floats:
    """Unit normals at the middle of the second-order elements, where a solver lays down its material axes.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m, 3) float array
    """
    n_nodes = mesh.cells.shape[1]
    middle = np.array([[0.0, 0.0]]) if n_nodes == 8 else np.array([[1.0, 1.0]]) / 3.0
    return _normals_at(mesh, middle)[:, 0]


def node_normals(mesh: ShellMesh) -> NodeNormals:
    """The mean normals on which a layered shell is given its thickness.

    Elements that meet at a node share one normal, the mean of their own there, as long as their own lie within 20° of
    the first one's and thickness and offset are the same. The rest form the next group.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    NodeNormals
    """
    m, k = mesh.cells.shape
    own = _normals_at(mesh, _QUAD_NODES if k == 8 else _TRIANGLE_NODES).reshape(-1, 3)
    kind = np.column_stack([mesh.offset, np.round(mesh.thickness, 12)])
    kind_of_element = np.unique(kind, axis=0, return_inverse=True)[1].ravel()
    flat = mesh.cells.ravel()
    order = np.argsort(flat, kind="stable")
    node, element_kind, normal = flat[order], np.repeat(kind_of_element, k)[order], own[order]

    group = np.full(m * k, -1, dtype=np.int64)
    pending = np.arange(m * k)
    n_groups = 0
    while len(pending):
        is_first = np.r_[True, node[pending[1:]] != node[pending[:-1]]]
        visit = np.cumsum(is_first) - 1
        first = pending[is_first][visit]
        joins = (element_kind[pending] == element_kind[first]) & (
            np.einsum("ij,ij->i", normal[pending], normal[first]) > KNOT_COSINE
        )
        joins[is_first] = True
        group[pending[joins]] = n_groups + visit[joins]
        n_groups += int(visit[-1]) + 1
        pending = pending[~joins]

    sums = np.zeros((n_groups, 3))
    for axis in range(3):
        sums[:, axis] = np.bincount(group, weights=normal[:, axis], minlength=n_groups)
    owner = np.zeros(n_groups, dtype=np.int64)
    owner[group] = node
    in_cells = np.empty(m * k, dtype=np.int64)
    in_cells[order] = group
    return NodeNormals(in_cells.reshape(m, k), _unit(sums), owner)


def inner_face_ratio(mesh: ShellMesh) -> Floats:
    """How much of its area the laminate keeps at its worst place inside each element.

    The position of a place in the laminate is Y = x + (z − offset·t) n, with x on the reference surface and n the
    interpolated mean normals of the nodes. The ratio is the least value of det[Y_ξ, Y_η, n] there over the same on the
    reference surface, at the integration points: 2 × 2 (3 in a triangle) and two levels in each merged layer (three
    in a triangle of one layer). It is 1 − depth / R on a smooth arc of radius R, and at 0 or below a solver refuses
    the element. Found by experiment with CalculiX 2.20, which stops where the least ratio is not positive.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m,) float array
        1 where no ply lies.
    """
    normals = node_normals(mesh)
    k = mesh.cells.shape[1]
    values, along_first, along_second = shape_functions(k, _QUAD_GAUSS if k == 8 else _TRIANGLE_GAUSS)
    levels = _gauss_levels(mesh)
    shift = middle_height(mesh)
    ratio = np.ones(len(mesh.cells))
    layered = np.flatnonzero(mesh.stack >= 0)
    for start in range(0, len(layered), _CHUNK):
        chosen = layered[start : start + _CHUNK]
        x, n = mesh.points[mesh.cells[chosen]], normals.normals[normals.group[chosen]]
        x_first, x_second, n_first, n_second = (
            np.einsum("pk,ekd->epd", derivative, field)
            for field in (x, n)
            for derivative in (along_first, along_second)
        )
        middle = np.einsum("pk,ekd->epd", values, n)
        # det(h) = (x_ξ + h n_ξ) × (x_η + h n_η) · n is a parabola in the height h over the reference surface.
        constant = _triple(x_first, x_second, middle)
        slope = _triple(n_first, x_second, middle) + _triple(x_first, n_second, middle)
        bend = _triple(n_first, n_second, middle)
        height = (levels[mesh.stack[chosen]] + shift[chosen, None])[:, None, :]
        determinant = constant[..., None] + height * (slope[..., None] + height * bend[..., None])
        at_surface = np.maximum(np.abs(constant), np.finfo(float).tiny)
        ratio[chosen] = (determinant.min(axis=2) / at_surface).min(axis=1)
    return ratio


def find_thick_elements(mesh: ShellMesh) -> tuple[Indices, Indices]:
    """Elements whose laminate is too thick for the surface's curvature.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    failing : int array
        Elements that a solver of layered shells refuses: the inner face is folded.
    doubtful : int array
        Further elements whose laminate fills more than 0.8 of the radius of curvature: they run, and their answer
        deserves a look.
    """
    ratio = inner_face_ratio(mesh)
    return np.flatnonzero(ratio <= 0.0), np.flatnonzero((ratio > 0.0) & (ratio < DOUBTFUL_RATIO))


def find_narrow_elements(mesh: ShellMesh) -> Indices:
    """Elements with an edge shorter than their laminate is thick.

    They run; shell theory says little there, and a finer mesh makes more of them (common practice).

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    int array
    """
    corners = mesh.points[mesh.cells[:, : mesh.n_sides]]
    shortest = np.linalg.norm(np.roll(corners, -1, axis=1) - corners, axis=2).min(axis=1)
    return np.flatnonzero(mesh.thickness > shortest)


def _normals_at(mesh: ShellMesh, places: Floats) -> Floats:
    """(m, p, 3) unit normals of the second-order elements at places of the unit element."""
    _, along_first, along_second = shape_functions(mesh.cells.shape[1], places)
    normals = np.empty((len(mesh.cells), len(places), 3))
    for start in range(0, len(mesh.cells), _CHUNK):
        x = mesh.points[mesh.cells[start : start + _CHUNK]]
        normals[start : start + _CHUNK] = np.cross(
            np.einsum("pk,ekd->epd", along_first, x), np.einsum("pk,ekd->epd", along_second, x)
        )
    return _unit(normals)


def _gauss_levels(mesh: ShellMesh) -> Floats:
    """(number of stacks, levels) heights over the laminate's middle; short stacks repeat their last level."""
    rows = []
    for stack in mesh.stacks:
        thickness = np.array([layer.thickness for layer in merge_equal_layers(stack)])
        top = 0.5 * stack.thickness - np.r_[0.0, np.cumsum(thickness)[:-1]]
        # A triangle of one layer is an ordinary wedge in the solver, with three levels (seen in CalculiX 2.20).
        shares = _THREE_LEVELS if mesh.n_sides == 3 and len(thickness) == 1 else _TWO_LEVELS
        rows.append(np.ravel(top[:, None] - thickness[:, None] * shares))
    width = max((len(row) for row in rows), default=0)
    return np.array([np.pad(row, (0, width - len(row)), mode="edge") for row in rows]).reshape(len(rows), width)


def _triple(a: Floats, b: Floats, c: Floats) -> Floats:
    product: Floats = np.einsum("...i,...i->...", np.cross(a, b), c)
    return product


def _unit(vectors: Floats) -> Floats:
    """Unit vectors; a zero vector stays zero."""
    length = np.linalg.norm(vectors, axis=-1, keepdims=True)
    unit: Floats = vectors / np.where(length > 0.0, length, 1.0)
    return unit
