"""Rings of nodes round the blade, and the rigid motion that fits each best."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.frozen import freeze_array
from skinmesh.mesh.inner_face import middle_height, node_normals
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LOBATTO = np.array([1.0, 1.0, 4.0]) / 6.0
"""Simpson's weights of an edge's two corners and its mid node."""


@dataclass(frozen=True, eq=False)
class Rings:
    """Nodes on lines of constant row, ring after ring.

    Attributes
    ----------
    z : (r,) float array, m
        Of each ring's section.
    node : (k,) int array
        Indices into the mesh's nodes; a ring has skin and webs.
    ring : (k,) int array
        Which ring the node is on.
    weight : (k,) float array, m
        Length of the wall that belongs to the node, by Simpson's rule on its edges.
    place : (k, 3) float array, m
        Where the solver takes the node to be.
    """

    z: Floats
    node: Ints
    ring: Ints
    weight: Floats
    place: Floats

    def __post_init__(self) -> None:
        k = len(self.node)
        freeze_array(self, "z", shape=(None,))
        freeze_array(self, "node", shape=(k,), dtype=np.int64)
        freeze_array(self, "ring", shape=(k,), dtype=np.int64)
        freeze_array(self, "weight", shape=(k,))
        freeze_array(self, "place", shape=(k, 3))


@dataclass(frozen=True, eq=False)
class RigidMotion:
    """Best rigid motion of every ring.

    Attributes
    ----------
    motion : (..., r, 6) float array, m and rad
        Displacement of the point (0, 0, z), and rotation.
    ovalisation, warping : (..., r) float array, m
        Root mean square of what no rigid motion explains, within the section's plane and across it.
    displacement : (..., r) float array, m
        Root mean square of the whole displacement.
    """

    motion: Floats
    ovalisation: Floats
    warping: Floats
    displacement: Floats


def solver_places(mesh: ShellMesh) -> Floats:
    """Where loads at the nodes act, and displacements are those of.

    In CalculiX 2.20 that is the middle of the laminate at an ordinary node, and the node itself at a knot, where
    elements of different thickness, offset or direction meet (found by experiment).

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (n, 3) float array, m
    """
    normals = node_normals(mesh)
    height = np.zeros(len(normals.normals))
    height[normals.group] = middle_height(mesh)[:, None]
    is_ordinary = np.bincount(normals.node, minlength=len(mesh.points)) == 1
    shift = np.zeros((len(mesh.points), 3))
    shift[normals.node] = height[:, None] * normals.normals
    return np.where(is_ordinary[:, None], mesh.points + shift, mesh.points)


def edges_on_rows(mesh: ShellMesh, levels: Floats) -> tuple[Ints, Ints, Ints]:
    """Element edges that lie on lines of constant row.

    Parameters
    ----------
    mesh : ShellMesh
        Of second order.
    levels : (r,) float array
        Rows, increasing.

    Returns
    -------
    (k, 3) int array
        Two corners and the mid node; every edge once.
    (k,) int array
        Index of its level.
    (k,) int array
        One of the elements that have the edge.
    """
    corners = mesh.cells[:, : mesh.n_sides]
    ends = np.stack([corners, np.roll(corners, -1, axis=1)], axis=-1)
    rows = np.round(mesh.row[ends], 9)
    level = np.clip(np.searchsorted(levels, rows[..., 0] - 1e-8), 0, len(levels) - 1)
    on_level = (np.abs(rows[..., 0] - rows[..., 1]) < 1e-8) & (np.abs(levels[level] - rows[..., 0]) < 1e-8)
    element, side = np.nonzero(on_level)
    middle = mesh.cells[element, mesh.n_sides + side]
    _, first = np.unique(middle, return_index=True)
    element, side, middle = element[first], side[first], middle[first]
    return np.column_stack([ends[element, side], middle]), level[element, side], element


def find_rings(mesh: ShellMesh, levels: Floats, z: Floats) -> Rings:
    """The rings of nodes at some levels.

    Parameters
    ----------
    mesh : ShellMesh
        Of second order.
    levels : (r,) float array
        Rows, increasing.
    z : (r,) float array, m

    Returns
    -------
    Rings
    """
    edges, level, _ = edges_on_rows(mesh, levels)
    places = solver_places(mesh)
    share = edge_lengths(places, edges)[:, None] * LOBATTO
    key = (level[:, None] * len(mesh.points) + edges).ravel()
    unique, inverse = np.unique(key, return_inverse=True)
    weight: Floats = np.bincount(inverse.ravel(), weights=share.ravel(), minlength=len(unique)).astype(float)
    node = unique % len(mesh.points)
    return Rings(z, node, unique // len(mesh.points), weight, places[node])


def edge_lengths(places: Floats, edges: Ints) -> Floats:
    """(k,) lengths of edges through their mid nodes, m."""
    first, second, middle = (places[edges[:, k]] for k in range(3))
    return np.asarray(np.linalg.norm(middle - first, axis=1) + np.linalg.norm(second - middle, axis=1))


def best_rigid_motion(rings: Rings, displacement: Floats) -> RigidMotion:
    """Rigid motion that fits the displacements of each ring best, by least squares weighed by length.

    Parameters
    ----------
    rings : Rings
    displacement : (..., k, 3) float array, m
        Of the rings' nodes.

    Returns
    -------
    RigidMotion
    """
    n_rings = len(rings.z)
    arm = rings.place - np.column_stack([np.zeros((len(rings.ring), 2)), rings.z[rings.ring]])
    columns = np.zeros((len(arm), 3, 6))
    columns[:, [0, 1, 2], [0, 1, 2]] = 1.0
    # θ × arm
    columns[:, 0, 4], columns[:, 0, 5] = arm[:, 2], -arm[:, 1]
    columns[:, 1, 3], columns[:, 1, 5] = -arm[:, 2], arm[:, 0]
    columns[:, 2, 3], columns[:, 2, 4] = arm[:, 1], -arm[:, 0]
    normal = np.zeros((n_rings, 6, 6))
    np.add.at(normal, rings.ring, rings.weight[:, None, None] * np.swapaxes(columns, 1, 2) @ columns)
    lead = displacement.shape[:-2]
    flat = displacement.reshape(-1, len(arm), 3)
    right = np.zeros((n_rings, len(flat), 6))
    np.add.at(right, rings.ring, rings.weight[:, None, None] * np.einsum("kdm,ckd->kcm", columns, flat))
    motion = np.linalg.solve(normal[:, None], right[..., None])[..., 0].swapaxes(0, 1)
    left_over = flat - np.einsum("kdm,ckm->ckd", columns, motion[:, rings.ring])
    total: Floats = np.bincount(rings.ring, weights=rings.weight, minlength=n_rings).astype(float)

    def mean_size(vectors: Floats) -> Floats:
        sums = np.zeros((n_rings, len(flat)))
        np.add.at(sums, rings.ring, (rings.weight * np.sum(vectors**2, axis=-1)).T)
        mean: Floats = np.sqrt(sums / total[:, None]).T.reshape(*lead, n_rings)
        return mean

    return RigidMotion(
        motion.astype(float).reshape(*lead, n_rings, 6),
        mean_size(left_over[..., :2]),
        mean_size(left_over[..., 2:]),
        mean_size(flat),
    )
