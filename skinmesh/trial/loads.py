"""Loads on the tip's ring as forces at its nodes, in the plane of the section and along its walls.

A transverse force or a torque enters a thin-walled section as shear flow. The flow is the section's own: that of a
torque runs round its cells as Bredt and Batho have it, that of a force follows from the growth of the bending stress
along the span. So no wall is bent by it, a free end keeps its form, and no node gets a moment.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.frozen import freeze_array
from skinmesh.laminate.theory import laminate_stiffness
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.trial.rings import LOBATTO, edge_lengths, edges_on_rows, solver_places

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_CONDITION = 1e8
NOISE = 1e-9


@dataclass(frozen=True, eq=False)
class NodalForces:
    """Forces at nodes.

    Attributes
    ----------
    node : (k,) int array
    force : (k, 3) float array, N
    place : (k, 3) float array, m
        Where the solver lets them act.
    """

    node: Ints
    force: Floats
    place: Floats

    def __post_init__(self) -> None:
        k = len(self.node)
        freeze_array(self, "node", shape=(k,), dtype=np.int64)
        freeze_array(self, "force", shape=(k, 3))
        freeze_array(self, "place", shape=(k, 3))

    def resultant(self, about: Floats) -> Floats:
        """(6,) float array, N and N m: force, and moment about a point, as the solver has them."""
        moment = np.cross(self.place - about, self.force).sum(axis=0)
        return np.concatenate([self.force.sum(axis=0), moment])


def wall_stiffness(mesh: ShellMesh) -> tuple[Floats, Floats]:
    """Membrane stiffness of every element's wall, free to stretch across the blade.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    axial, shear : (m,) float array, N/m
        A11 − A12² / A22 and A66 − A26² / A22; 0 where no ply lies.
    """
    A = laminate_stiffness(mesh.stacks).A
    axial = A[:, 0, 0] - A[:, 0, 1] ** 2 / A[:, 1, 1]
    shear = A[:, 2, 2] - A[:, 1, 2] ** 2 / A[:, 1, 1]
    return np.append(axial, 0.0)[mesh.stack], np.append(shear, 0.0)[mesh.stack]


def tip_forces(mesh: ShellMesh, wanted: Floats, point: Floats) -> NodalForces:
    """Forces on the nodes of the tip's ring with a wanted resultant.

    Parameters
    ----------
    mesh : ShellMesh
        Of second order.
    wanted : (3,) float array
        Force along x and y, N, and torque about +z through ``point``, N m.
    point : (2,) float array, m
        x and y of the place where the force acts.

    Returns
    -------
    NodalForces

    Raises
    ------
    ValueError
        The tip has no closed cell: its walls cannot carry a torque as shear flow.
    """
    tip = np.array([np.round(mesh.row.max(), 9)])
    edges, _, element = edges_on_rows(mesh, tip)
    places = solver_places(mesh)
    tangent = _edge_tangents(places[edges])
    share = edge_lengths(places, edges)[:, None] * LOBATTO
    arm = places[edges][..., :2] - point
    lever = arm[..., 0] * tangent[..., 1] - arm[..., 1] * tangent[..., 0]
    axial, shear = wall_stiffness(mesh)
    flow = _shear_flows(edges[:, :2], share, arm, lever, axial=axial[element], shear=shear[element])
    # force along x, along y, and torque, that a unit flow in each edge makes
    made = np.stack([*np.einsum("ek,ekd->de", share, tangent), np.sum(share * lever, axis=1)]) @ flow
    scale = 1.0 / np.maximum(np.abs(made).max(axis=0), np.finfo(float).tiny)
    if not np.linalg.cond(made * scale) < MOST_CONDITION:
        raise ValueError("the tip has no closed cell, and cannot carry a torque as shear flow")
    in_edge = flow @ (scale * np.linalg.solve(made * scale, wanted))
    nodes, inverse = np.unique(edges, return_inverse=True)
    force = np.zeros((len(nodes), 3))
    np.add.at(force[:, :2], inverse.ravel(), ((in_edge[:, None] * share)[..., None] * tangent).reshape(-1, 2))
    return NodalForces(nodes, force, places[nodes])


def _shear_flows(ends: Ints, share: Floats, arm: Floats, lever: Floats, *, axial: Floats, shear: Floats) -> Floats:
    """Flow in every edge for three motions of the section: curvature growing along x and along y, and twist.

    An edge carries q = G h (Δw / l + θ' p), with w the warping of its ends and p the lever of its tangent. At every end
    the flows that leave it balance the growth of the axial force there (Vlasov's theory of thin-walled beams, from
    memory).

    Returns
    -------
    (e, 3) float array
        Up to a factor in each column.
    """
    nodes, place = np.unique(ends, return_inverse=True)
    start, end = place.reshape(-1, 2).T
    n, edge = len(nodes), np.arange(len(ends))
    length = share.sum(axis=1)
    stiff = shear / length
    gradient = np.zeros((len(ends), n))
    gradient[edge, start], gradient[edge, end] = -1.0, 1.0
    balance = gradient.T @ (stiff[:, None] * gradient)
    weight = axial[:, None] * share
    centre = np.einsum("ek,ekd->d", weight, arm) / weight.sum()
    growth = np.einsum("ek,ekd->ed", weight, arm - centre)
    right = np.zeros((n, 3))
    for side in (start, end):
        np.add.at(right[:, :2], side, 0.5 * growth)
    swept = np.sum(share * lever, axis=1)
    right[:, 2] = -gradient.T @ (stiff * swept)
    # the warping is free to shift as a whole
    mean = balance.trace() / n**2
    warping = np.linalg.solve(balance + mean, right)
    flow = stiff[:, None] * (gradient @ warping)
    flow[:, 2] += stiff * swept
    # an open section leaves nothing but noise
    flow[:, 2] *= np.abs(flow[:, 2]).max() > NOISE * np.abs(stiff * swept).max()
    return np.asarray(flow)


def _edge_tangents(nodes: Floats) -> Floats:
    """(e, 3, 2) unit tangents in the plane of the section, at two corners and the mid node of parabolic edges."""
    first, second, middle = (nodes[:, k, :2] for k in range(3))
    along = np.stack(
        [-1.5 * first - 0.5 * second + 2.0 * middle, 0.5 * first + 1.5 * second - 2.0 * middle, 0.5 * (second - first)],
        axis=1,
    )
    return np.asarray(along / np.linalg.norm(along, axis=2, keepdims=True))
