"""A cut at constant z with every layer as a four-sided figure, its thickness true across the wall."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.show.outline import cut_sides_at

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_SHARPEST_MITRE = 0.3
"""Least cosine between the normals of walls that share a mitred end; sharper corners stay open."""


@dataclass(frozen=True, eq=False)
class Section:
    """The walls of a mesh where a plane of constant z cuts it.

    Attributes
    ----------
    z : float, m
    element : (k,) int array
        Which element each wall belongs to.
    ends : (k, 2, 2) float array, m
        (y, x) of both ends on the reference surface.
    across : (k, 2, 2) float array
        From each end towards the +e3 face: times a height over the reference surface it gives the place of that
        height. Neighbours of one sheet share it, which leaves both walls as thick as they are.
    normal : (k, 2) float array
        Unit vector across each wall, on the side of +e3.
    joints : (n, 2) float array, m
        (y, x) where walls of different sheets meet: feet of webs, corners of a blunt trailing edge.
    """

    z: float
    element: Ints
    ends: Floats
    across: Floats
    normal: Floats
    joints: Floats


@dataclass(frozen=True, eq=False)
class Layers:
    """All layers of a section.

    Attributes
    ----------
    wall : (n,) int array
        Index into the section's walls.
    stack, order : (n,) int array
        Index of the stack, and of the layer within it, the +e3 face first.
    corners : (n, 4, 2) float array, m
        (y, x): both ends at the outer face, then both at the inner one.
    """

    wall: Ints
    stack: Ints
    order: Ints
    corners: Floats


def section_at(mesh: ShellMesh, z: float) -> Section:
    """Cut a mesh with a plane of constant z.

    Parameters
    ----------
    mesh : ShellMesh
    z : float, m

    Returns
    -------
    Section
    """
    lines, element, sides = cut_sides_at(mesh, z)
    ends = lines[..., ::-1]
    along = ends[:, 1] - ends[:, 0]
    length = np.maximum(np.linalg.norm(along, axis=1), 1e-12)
    normal = np.column_stack([-along[:, 1], along[:, 0]]) / length[:, None]
    outwards = np.einsum("kd,kd->k", normal, mesh.e3[element][:, 1::-1])
    normal = np.where(outwards[:, None] < 0, -normal, normal)

    is_apart = np.array([region.kind in ("web", "base") for region in mesh.regions])
    sheet = np.where(is_apart[mesh.region[element]], mesh.region[element] + 1, 0)
    key = np.column_stack([np.repeat(sheet, 2), sides.reshape(-1, 2)])
    other = _other_wall(key)
    dot = np.einsum("kd,ked->ke", normal, normal[other])
    is_mitred = (other != np.arange(len(element))[:, None]) & (dot > _SHARPEST_MITRE)
    mitre = (normal[:, None] + normal[other]) / (1.0 + np.where(is_mitred, dot, 1.0))[..., None]
    across = np.where(is_mitred[..., None], mitre, normal[:, None])
    return Section(z, element, ends, across, normal, _joints(key, ends.reshape(-1, 2)))


def layers_of(mesh: ShellMesh, section: Section, *, factor: float = 1.0) -> Layers:
    """Every layer of every wall.

    Parameters
    ----------
    mesh : ShellMesh
    section : Section
    factor : float
        How many times thicker than they are the layers are drawn, about the reference surface.

    Returns
    -------
    Layers
    """
    stack = mesh.stack[section.element]
    covered = np.flatnonzero(stack != NO_STACK)
    counts = np.array([len(one.layers) for one in mesh.stacks], dtype=np.int64)
    starts = np.r_[0, np.cumsum(counts)]
    # Depth of every layer's outer and inner face under the +e3 face, all stacks one after the other.
    thick = np.array([layer.thickness for one in mesh.stacks for layer in one.layers])
    inner = np.cumsum(thick) - np.repeat(np.r_[0.0, np.cumsum(thick)][starts[:-1]], counts)

    wall = np.repeat(covered, counts[stack[covered]])
    order = np.arange(len(wall)) - np.repeat(
        np.cumsum(counts[stack[covered]]) - counts[stack[covered]], counts[stack[covered]]
    )
    layer = starts[stack[wall]] + order
    top = (0.5 - mesh.offset[section.element]) * mesh.thickness[section.element]
    faces = factor * (top[wall][:, None] - np.column_stack([inner[layer] - thick[layer], inner[layer]]))
    places = section.ends[wall][:, None] + faces[..., None, None] * section.across[wall][:, None]
    corners = np.stack([places[:, 0, 0], places[:, 0, 1], places[:, 1, 1], places[:, 1, 0]], axis=1)
    return Layers(wall, stack[wall], order, corners)


def outer_faces(mesh: ShellMesh, section: Section, *, factor: float = 1.0) -> Floats:
    """(k, 2, 2) float array, m: (y, x) of both ends of each wall's +e3 face.

    Parameters
    ----------
    mesh : ShellMesh
    section : Section
    factor : float
        As in ``layers_of``.
    """
    top = factor * (0.5 - mesh.offset[section.element]) * mesh.thickness[section.element]
    return np.asarray(section.ends + top[:, None, None] * section.across)


def _other_wall(key: Ints) -> Ints:
    """(k, 2) int array: the wall that shares an end, itself where none does or more than one."""
    own = np.repeat(np.arange(len(key) // 2), 2)
    _, place, count = np.unique(key, axis=0, return_inverse=True, return_counts=True)
    total = np.bincount(place.ravel(), weights=own).astype(np.int64)
    other = np.where(count[place.ravel()] == 2, total[place.ravel()] - own, own)
    return np.asarray(other.reshape(-1, 2))


def _joints(key: Ints, points: Floats) -> Floats:
    """Places on element sides where more than one sheet ends."""
    found, first = np.unique(key, axis=0, return_index=True)
    _, start, count = np.unique(found[:, 1:], axis=0, return_index=True, return_counts=True)
    # Sorted by sheet first, so that the side's first place is one of its own.
    return np.asarray(points[first[start[count > 1]]])
