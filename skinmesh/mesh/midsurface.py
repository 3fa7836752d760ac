"""The reference surface in the middle of the laminate: every node moved inward by half of the local thickness."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import shapely
from numpy.typing import NDArray

from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.inner_face import NodeNormals, node_normals
from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_STRETCH = 1.5  # at a corner a node moves at most this many times half of the thickness
ROOM_SHARE = 0.45  # of the distance to the opposite wall: both walls move, and stay apart
OFFSET_STEP = 0.05  # an eccentricity left at a thickness step is rounded to this share of the thickness
NO_ROOM_NEEDED = 1.0 - 1e-9
N_HALVINGS = 6
LEAST_AREA_SHARE = 0.1  # an element that keeps less of its area than this counts as folded


def move_to_middle(mesh: ShellMesh) -> tuple[ShellMesh, tuple[str, ...]]:
    """Move a mesh from the outer face of its laminate to the middle.

    At a node where the surface is smooth, the move goes along the mean normal by half of the mean thickness of the
    elements round it. At an edge, such as the corner of a blunt trailing edge, it is the least move that takes every
    wall inward by half of its own thickness. Nodes of a web follow its feet. What eccentricity remains in an element,
    beside a step in thickness or where a move was limited, is kept as its offset, so that the outer face stays where
    it was.

    Parameters
    ----------
    mesh : ShellMesh
        With its nodes on the outer face.

    Returns
    -------
    ShellMesh
    tuple of str
        Warnings: where moves were limited, because the walls would cross or an element would fold.
    """
    on_skin = np.array([region.kind != "web" for region in mesh.regions])[mesh.region]
    wanted = _wanted_moves(mesh, on_skin)
    moves, is_limited = _limited_by_room(mesh, wanted)
    moves, is_folded = _without_folds(mesh, moves, on_skin)
    _carry_webs(mesh, moves, on_skin)
    points = mesh.points + moves
    e1, e2, e3 = element_axes(points, mesh.connectivity)
    inward = np.einsum("ekd,ed->e", moves[mesh.cells], mesh.e3) / mesh.cells.shape[1]
    share = 0.5 + inward / np.where(mesh.thickness > 0.0, mesh.thickness, np.inf)
    offset = np.where(on_skin & (mesh.thickness > 0.0), np.round(share / OFFSET_STEP) * OFFSET_STEP, 0.0)
    moved = replace(mesh, points=points, e1=e1, e2=e2, e3=e3, offset=offset, surface="mid")
    told = [
        _told(mesh, nodes, reason)
        for nodes, reason in (
            (is_limited, "opposite walls would cross"),
            (is_folded, "elements would fold"),
        )
        if nodes.any()
    ]
    return moved, tuple(told)


def _wanted_moves(mesh: ShellMesh, on_skin: NDArray[np.bool_]) -> Floats:
    """(n, 3) moves of the skin's nodes, those of webs zero."""
    skin = np.flatnonzero(on_skin)
    normals = _smooth_normals(mesh, skin)
    half = 0.5 * np.repeat(mesh.thickness[skin], mesh.cells.shape[1])
    group = normals.group.ravel()
    count = np.bincount(group, minlength=len(normals.normals))
    depth = np.bincount(group, weights=half, minlength=len(count)) / count
    # least-norm solution of n · move = −depth for all walls at a node
    matrix, right = np.zeros((len(mesh.points), 3, 3)), np.zeros((len(mesh.points), 3))
    np.add.at(matrix, normals.node, normals.normals[:, :, None] * normals.normals[:, None, :])
    np.add.at(right, normals.node, -depth[:, None] * normals.normals)
    moves = np.zeros((len(mesh.points), 3))
    n_walls = np.bincount(normals.node, minlength=len(mesh.points))
    moves[n_walls == 1] = right[n_walls == 1]
    edges = np.flatnonzero(n_walls > 1)
    moves[edges] = np.einsum("nij,nj->ni", np.linalg.pinv(matrix[edges], rcond=1e-6, hermitian=True), right[edges])
    deepest = np.zeros(len(mesh.points))
    np.maximum.at(deepest, normals.node, depth)
    length = np.linalg.norm(moves, axis=1)
    return np.asarray(moves * np.minimum(1.0, MOST_STRETCH * deepest / np.where(length > 0.0, length, 1.0))[:, None])


def _smooth_normals(mesh: ShellMesh, skin: Ints) -> NodeNormals:
    """Mean normals of the skin alone, grouped by their angle and not by thickness."""
    n = len(skin)
    bare = replace(
        mesh,
        cells=mesh.cells[skin],
        region=mesh.region[skin],
        stack=np.full(n, NO_STACK),
        offset=np.zeros(n),
        e1=mesh.e1[skin],
        e2=mesh.e2[skin],
        e3=mesh.e3[skin],
        element_number=mesh.element_number[skin],
        element_sets={},
    )
    return node_normals(bare)


def _limited_by_room(mesh: ShellMesh, moves: Floats) -> tuple[Floats, NDArray[np.bool_]]:
    """Shorten moves that would carry a wall past the middle of the distance to the opposite one."""
    on_ring = np.flatnonzero(mesh.sheet == 0)
    length = np.linalg.norm(moves, axis=1)
    room = np.full(len(mesh.points), np.inf)
    order = on_ring[np.lexsort((mesh.seam[on_ring], mesh.row[on_ring]))]
    starts = np.flatnonzero(np.r_[True, np.diff(mesh.row[order]) != 0.0, True])
    for first, last in pairwise(starts.tolist()):
        ring = order[first:last]
        mesh_ring = mesh.points[ring][:, :2]
        if len(ring) > 3:
            room[ring] = _room_inside(mesh_ring, moves[ring, :2])
    share = np.where(length > 0.0, np.minimum(1.0, ROOM_SHARE * room / np.maximum(length, 1e-300)), 1.0)
    return np.asarray(moves * share[:, None]), np.asarray(share < NO_ROOM_NEEDED)


def _room_inside(ring: Floats, moves: Floats) -> Floats:
    """Distance from each point of a closed ring along its move to the ring's other side."""
    length = np.linalg.norm(moves, axis=1)
    direction = moves / np.where(length > 0.0, length, 1.0)[:, None]
    reach = np.ptp(ring, axis=0).max()
    boundary = shapely.linearrings(ring)
    shapely.prepare(boundary)
    # the ray starts a little inside, so that the wall it leaves does not stop it
    start = ring + np.minimum(1e-6 * reach, 0.1 * length)[:, None] * direction
    rays = shapely.linestrings(np.stack([start, ring + reach * direction], axis=1))
    hits = shapely.intersection(rays, boundary)
    distance = shapely.distance(shapely.points(ring), hits)
    return np.where(np.isnan(distance) | (length == 0.0), np.inf, distance)


def _without_folds(mesh: ShellMesh, moves: Floats, on_skin: NDArray[np.bool_]) -> tuple[Floats, NDArray[np.bool_]]:
    """Halve the moves round elements that would turn over or lose nearly all their area, until none does."""
    moves = moves.copy()
    halved = np.zeros(len(mesh.points), dtype=bool)
    corners = mesh.cells[on_skin][:, : mesh.n_sides]
    before = _vector_areas(mesh.points[corners])
    size = np.linalg.norm(before, axis=1)
    for _ in range(N_HALVINGS):
        after = _vector_areas((mesh.points + moves)[corners])
        folded = np.einsum("ed,ed->e", after, before) < LEAST_AREA_SHARE * size**2
        if not folded.any():
            break
        nodes = np.unique(mesh.cells[on_skin][folded])
        moves[nodes] *= 0.5
        halved[nodes] = True
    return moves, halved


def _vector_areas(x: Floats) -> Floats:
    return np.asarray(0.5 * np.sum(np.cross(x, np.roll(x, -1, axis=1)), axis=1))


def _carry_webs(mesh: ShellMesh, moves: Floats, on_skin: NDArray[np.bool_]) -> None:
    """Let the nodes of webs follow their feet, in proportion to their height."""
    for sheet in range(1, int(mesh.sheet.max()) + 1):
        own = np.flatnonzero(mesh.sheet == sheet)
        region = mesh.region[~on_skin & np.any(mesh.sheet[mesh.cells] == sheet, axis=1)][0]
        feet = [mesh.node_sets[f"{mesh.regions[region].name} {side} foot"] for side in ("pressure", "suction")]
        at_feet = [
            np.column_stack([np.interp(mesh.row[own], mesh.row[foot][o], moves[foot][o, axis]) for axis in range(3)])
            for foot in feet
            for o in [np.argsort(mesh.row[foot])]
        ]
        height = mesh.seam[own][:, None]
        moves[own] = at_feet[0] * (1.0 - height) + at_feet[1] * height


def _told(mesh: ShellMesh, nodes: NDArray[np.bool_], reason: str) -> str:
    z = mesh.points[nodes, 2]
    return (
        f"mid surface: the move of {int(nodes.sum())} nodes was limited, since {reason} (z = {z.min():.3f} to"
        f" {z.max():.3f} m)"
    )
