"""Walls of a mesh's own elements: every element cut at constant z."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.sections import SectionProperties
from skinmesh.beam.walls import WallLaminates, Walls, condense_laminates
from skinmesh.beam.warping import properties_by_warping
from skinmesh.definition.blade import COUNTER_CLOCKWISE
from skinmesh.laminate.theory import laminate_stiffness, mass_moments
from skinmesh.mesh.inner_face import middle_height, shape_functions
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

N_GAUSS = 2
TOWARDS_TIP = 1e-7
"""A cut at an element row's end is one of the next row: moved by this share of the span."""


def element_row_middles(mesh: ShellMesh) -> tuple[Floats, Floats]:
    """Middles and lengths of the element rows, root first.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (r,) float array, m
        Middle.
    (r,) float array, m
        Length along z.
    """
    corner = slice(mesh.n_corners)
    on_seam = (mesh.sheet[corner] == 0) & (mesh.seam[corner] == 0.0)
    z = np.sort(mesh.points[corner, 2][on_seam])
    return 0.5 * (z[1:] + z[:-1]), np.diff(z)


def mesh_sections(mesh: ShellMesh, z: Floats) -> SectionProperties:
    """Sum over the mesh's elements at cuts of constant z.

    The second-order form of the elements is cut, whichever order the mesh has, and moved by the offset to the middle of
    the laminate.

    Parameters
    ----------
    mesh : ShellMesh
    z : (m,) float array, m
        A cut at the end of an element row is one of the next row.

    Returns
    -------
    SectionProperties
    """
    z = np.asarray(z, dtype=float)
    return properties_by_warping(z, mesh_walls(mesh, z), is_mirrored=mesh.hand == COUNTER_CLOCKWISE)


def mesh_walls(mesh: ShellMesh, z: Floats) -> Walls:
    """Cut the mesh at constant z.

    Parameters
    ----------
    mesh : ShellMesh
    z : (m,) float array, m

    Returns
    -------
    Walls
        One an element and cut; the strip is the element.
    """
    height = mesh.points[:, 2]
    low, high = float(height.min()), float(height.max())
    step = TOWARDS_TIP * (high - low)
    at = np.minimum(np.maximum(z, low) + step, high - step)
    element, section = _crossed(mesh, at)
    corners, local, share = _crossings(mesh, element, at[section])
    line, normal = _lines(mesh, element, local, share)
    laminates = _laminates(mesh).take(mesh.stack[element])
    cosine = np.linalg.norm(mesh.e3[element, :2], axis=1)
    depth = -middle_height(mesh)[element]
    place, steps, normals, ends = _middle_lines(line, normal, cosine, depth)
    # an edge is shared by its elements: so is the node that its crossing makes
    keys = np.sort(corners, axis=2).reshape(-1, 2)
    numbers = (np.repeat(section, 2) * mesh.n_corners + keys[:, 0]) * mesh.n_corners + keys[:, 1]
    found, first, nodes = np.unique(numbers, return_index=True, return_inverse=True)
    return Walls(
        n_sections=len(z),
        section=section,
        strip=element,
        nodes=nodes.reshape(-1, 2),
        node_section=found // mesh.n_corners**2,
        node_place=line[:, [0, 2]].reshape(-1, 2)[first],
        ends=ends,
        place=place,
        step=steps,
        normal=normals,
        cosine=np.repeat(cosine[:, None], N_GAUSS, axis=1),
        laminates=laminates,
    )


def _laminates(mesh: ShellMesh) -> WallLaminates:
    stiffness = laminate_stiffness(mesh.stacks)
    return condense_laminates(stiffness.A, stiffness.B, stiffness.D, mass_moments(mesh.stacks))


def _crossed(mesh: ShellMesh, z: Floats) -> tuple[Ints, Ints]:
    """Elements with a laminate and the cuts that cross them, sorted by cut."""
    corner_z = mesh.points[mesh.cells[:, : mesh.n_sides], 2]
    order = np.argsort(z, kind="stable")
    first = np.searchsorted(z[order], corner_z.min(axis=1), side="right")
    last = np.searchsorted(z[order], corner_z.max(axis=1), side="left")
    n = np.where(mesh.stack >= 0, np.maximum(last - first, 0), 0)
    element = np.repeat(np.arange(len(n)), n)
    within = np.arange(len(element)) - np.repeat(np.cumsum(n) - n, n)
    section = order[np.repeat(first, n) + within]
    by_section = np.lexsort((element, section))
    return element[by_section], section[by_section]


def _crossings(mesh: ShellMesh, element: Ints, z: Floats) -> tuple[Ints, Ints, Floats]:
    """The two edges of each element that a cut crosses.

    Returns
    -------
    (w, 2, 2) int array
        Their corner nodes, counter-clockwise.
    (w, 2) int array
        Their place round the element.
    (w, 2) float array
        Share of the edge at which it is crossed; edges are straight in z.
    """
    corner = mesh.cells[element][:, : mesh.n_sides]
    edge = np.stack([corner, np.roll(corner, -1, axis=1)], axis=2)
    above = mesh.points[edge, 2] > z[:, None, None]
    crosses = above[..., 0] != above[..., 1]
    local = np.argsort(~crosses, axis=1, kind="stable")[:, :2]
    corners = np.take_along_axis(edge, local[:, :, None], axis=1)
    ends = mesh.points[corners, 2]
    share = (z[:, None] - ends[..., 0]) / (ends[..., 1] - ends[..., 0])
    return corners, local, share


def _lines(mesh: ShellMesh, element: Ints, local: Ints, share: Floats) -> tuple[Floats, Floats]:
    """(w, 3, 2) start, middle and end of every cut on the reference surface, and (w, 2) e3 in its plane."""
    n_sides = mesh.n_sides
    corner = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]] if n_sides == 4 else [[0, 0], [1, 0], [0, 1]], dtype=float)
    start, stop = corner[local], corner[(local + 1) % n_sides]
    ends = start + share[..., None] * (stop - start)
    reference = np.stack([ends[:, 0], 0.5 * (ends[:, 0] + ends[:, 1]), ends[:, 1]], axis=1)
    values, _, _ = shape_functions(mesh.cells.shape[1], reference.reshape(-1, 2))
    nodes = mesh.points[mesh.cells[element], :2]
    line = np.einsum("wik,wkd->wid", values.reshape(len(element), 3, -1), nodes)
    return line, mesh.e3[element, :2]


def _middle_lines(line: Floats, normal: Floats, cosine: Floats, depth: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Samples of the parabola through three points, moved by the depth of the laminate's middle."""
    x, weight = np.polynomial.legendre.leggauss(N_GAUSS)
    at = np.concatenate([x, [-1.0, 1.0]])
    value = np.stack([0.5 * at * (at - 1.0), 1.0 - at**2, 0.5 * at * (at + 1.0)], axis=1)
    rate = np.stack([at - 0.5, -2.0 * at, at + 0.5], axis=1)
    bend = np.array([1.0, -2.0, 1.0])
    place, tangent, curve = value @ line, rate @ line, bend @ line
    speed = np.linalg.norm(tangent, axis=2)
    unit = tangent / speed[..., None]
    side = np.sign(unit[..., 1] * normal[:, None, 0] - unit[..., 0] * normal[:, None, 1])
    outward = side[..., None] * np.stack([unit[..., 1], -unit[..., 0]], axis=-1)
    deep = (depth / cosine)[:, None]
    place = place - deep[..., None] * outward
    turn = (tangent[..., 0] * curve[:, None, 1] - tangent[..., 1] * curve[:, None, 0]) / speed**2
    step = np.maximum(speed - side * deep * turn, 0.0)[..., None] * unit
    return (
        place[:, :N_GAUSS],
        step[:, :N_GAUSS] * weight[:, None],
        outward[:, :N_GAUSS],
        place[:, N_GAUSS:],
    )
