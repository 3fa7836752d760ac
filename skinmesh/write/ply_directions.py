"""Few directions for many elements: axes that a solver projects onto each shell element.

A solver that projects a given vector X' onto the element finds the ply direction. The blade's own axis z serves every
0° ply at once. For an angled ply of direction d in an element with normal n every X' with X'·(n × d) = 0 is right, so
one vector can serve many elements that face nearly the same way. It is the vector with the least sum of squares of
that product, and its error is checked element by element: what errs too much is taken in smaller bunches, and in the
end alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.laminate.stack import Layer
from skinmesh.mesh.inner_face import centre_normals
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]

TOLERANCE = np.radians(0.005)
_FIRST_TURN = np.radians(4.0)
_FIRST_SLOPE = 0.02
_HALVINGS = 9
_PULL_TO_PLANE = 1e-9


@dataclass(frozen=True, eq=False)
class SharedDirections:
    """Which vector each element's plies are projected from.

    Attributes
    ----------
    angles : tuple of float, rad
        Ply angles in use, increasing.
    bunch : (m,) int array
        Index into ``vectors``; −1 where the blade's axis serves all plies of the element.
    vectors : (b, a, 3) float array
        Unit vector of each bunch for each angle.
    is_along_z : (m,) bool array
        Elements whose 0° plies are projected from the blade's axis.
    error : (m,) float array, rad
        Largest deviation of a ply of the element, within its plane.
    """

    angles: tuple[float, ...]
    bunch: Indices
    vectors: Floats
    is_along_z: NDArray[np.bool_]
    error: Floats

    def vector(self, bunch: int, angle: float) -> Floats:
        """(3,) float array: the vector of one bunch for one ply angle."""
        chosen: Floats = self.vectors[bunch, self.angles.index(angle)]
        return chosen


def share_directions(
    mesh: ShellMesh, layers: Sequence[Sequence[Layer]], *, tolerance: float = TOLERANCE
) -> SharedDirections:
    """Find vectors whose projections are the ply directions of all elements within a tolerance.

    Parameters
    ----------
    mesh : ShellMesh
    layers : sequence of sequence of Layer
        The layers of each stack.
    tolerance : float, rad
        Largest deviation of any ply from its direction.

    Returns
    -------
    SharedDirections
    """
    normals = centre_normals(mesh)
    angles = tuple(sorted({layer.angle for stack in layers for layer in stack}))
    uses = np.array([[any(layer.angle == angle for layer in stack) for angle in angles] for stack in layers])
    needed = np.zeros((len(mesh.cells), len(angles)), dtype=bool)
    layered = mesh.stack >= 0
    needed[layered] = uses.reshape(len(layers), len(angles))[mesh.stack[layered]]

    error = np.zeros(len(mesh.cells))
    axis_error = _deviation(np.broadcast_to([0.0, 0.0, 1.0], mesh.e1.shape), wanted=mesh.e1, normal=normals)
    is_along_z = axis_error <= tolerance
    if 0.0 in angles:
        zero = angles.index(0.0)
        served = is_along_z & needed[:, zero]
        error[served] = axis_error[served]
        needed[served, zero] = False

    bunch = np.full(len(mesh.cells), -1, dtype=np.int64)
    vectors: list[Floats] = []
    n_bunches = 0
    pending = np.flatnonzero(needed.any(axis=1))
    for step in range(_HALVINGS + 1):
        if not len(pending):
            break
        label = _facing(normals[pending], 0.5**step) if step < _HALVINGS else np.arange(len(pending))
        fitted, deviation = _fit(mesh, normals, angles, pending, label)
        worst = np.where(needed[pending], deviation, 0.0).max(axis=1)
        is_good = (worst <= tolerance) if step < _HALVINGS else np.ones(len(pending), dtype=bool)
        kept, renumbered = np.unique(label[is_good], return_inverse=True)
        bunch[pending[is_good]] = n_bunches + renumbered
        error[pending[is_good]] = np.maximum(error[pending[is_good]], worst[is_good])
        vectors.append(fitted[kept])
        n_bunches += len(kept)
        pending = pending[~is_good]
    together = np.concatenate(vectors) if vectors else np.zeros((0, len(angles), 3))
    return SharedDirections(angles, bunch, together, is_along_z, error)


def _facing(normals: Floats, share: float) -> Indices:
    """Label of each normal by its turn about z and its slope along z."""
    turn = np.floor(np.arctan2(normals[:, 1], normals[:, 0]) / (_FIRST_TURN * share)).astype(np.int64)
    slope = np.floor(normals[:, 2] / (_FIRST_SLOPE * share)).astype(np.int64)
    label: Indices = np.unique(turn * (slope.max() - slope.min() + 1) + slope - slope.min(), return_inverse=True)[1]
    return label.ravel()


def _fit(
    mesh: ShellMesh, normals: Floats, angles: tuple[float, ...], elements: Indices, label: Indices
) -> tuple[Floats, Floats]:
    """Best vector of each label and angle, and its deviation in every element."""
    n_labels = int(label.max()) + 1
    normal = normals[elements]
    vectors = np.empty((n_labels, len(angles), 3))
    deviation = np.empty((len(elements), len(angles)))
    for column, angle in enumerate(angles):
        wanted = np.cos(angle) * mesh.e1[elements] + np.sin(angle) * mesh.e2[elements]
        across = np.cross(normal, wanted)
        # The small second term keeps the vector near the elements' plane where the first leaves it free.
        product = across[:, :, None] * across[:, None, :] + _PULL_TO_PLANE * normal[:, :, None] * normal[:, None, :]
        vector = np.linalg.eigh(_sum_by(label, product.reshape(-1, 9)).reshape(-1, 3, 3))[1][:, :, 0]
        forward = np.einsum("ij,ij->i", vector, _sum_by(label, wanted))
        vectors[:, column] = vector * np.where(forward < 0.0, -1.0, 1.0)[:, None]
        deviation[:, column] = _deviation(vectors[label, column], wanted=wanted, normal=normal)
    return vectors, deviation


def _sum_by(label: Indices, values: Floats) -> Floats:
    return np.column_stack([np.bincount(label, weights=column) for column in values.T])


def _deviation(vector: Floats, *, wanted: Floats, normal: Floats) -> Floats:
    """Angle within the element's plane between the projections of a vector and of the wanted direction, rad."""
    across = np.einsum("ij,ij->i", np.cross(normal, wanted), vector)
    flat = wanted - np.einsum("ij,ij->i", wanted, normal)[:, None] * normal
    angle: Floats = np.abs(np.arctan2(across, np.einsum("ij,ij->i", flat, vector)))
    return angle
