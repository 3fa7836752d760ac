"""The reference surface in the middle of the laminate: every node moved inward by half of the local thickness."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import shapely
from numpy.typing import NDArray

from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.inner_face import NodeNormals, inner_face_ratio, node_normals
from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.wording import counted

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_STRETCH = 1.5  # at a corner a node moves at most this many times half of the thickness
ROOM_SHARE = 0.45  # of the distance to the opposite wall: both walls move, and stay apart
OFFSET_STEP = 0.05  # an eccentricity left at a thickness step is rounded to this share of the thickness
NO_ROOM_NEEDED = 1.0 - 1e-9
N_HALVINGS = 12
LEAST_CORNER_SHARE = 0.4  # an element whose corner spans less than this share of what it did counts as folded


def move_to_middle(mesh: ShellMesh) -> tuple[ShellMesh, tuple[str, ...]]:
    """Move a mesh from the outer face of its laminate to the middle.

    At a node where the surface is smooth, the move goes along the mean normal by half of the mean thickness of the
    elements round it. At an edge, such as a sharp trailing edge, it is the least move that takes every wall inward by
    half of its own thickness. Nodes of a web follow its feet, and those of the trailing base the two trailing edges,
    which move with their own sides: a narrow base could not hold a move of its own. What eccentricity remains in an
    element, beside a step in thickness or where a move was limited, is kept as its offset, so that the outer face
    stays where it was.

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
    kinds = np.array([region.kind for region in mesh.regions])[mesh.region]
    on_skin = kinds != "web"
    on_sides = on_skin & (kinds != "base")
    moves, is_limited = _limited_by_room(mesh, _wanted_moves(mesh, on_sides))
    _carry_base(mesh, moves, on_sides)
    moves, is_folded = _without_folds(mesh, moves, on_skin)
    moved, has_thick = _without_folded_laminates(mesh, moves, on_skin)
    told = [
        _told(mesh, nodes, reason)
        for nodes, reason in (
            (is_limited, "opposite walls would cross"),
            (is_folded, "elements would fold"),
            (has_thick, "the laminate would fold"),
        )
        if nodes.any()
    ]
    return moved, tuple(told)


def _moved(mesh: ShellMesh, moves: Floats, on_skin: NDArray[np.bool_]) -> ShellMesh:
    """The mesh with its nodes moved, its axes made anew, and the eccentricity that remains as its offset."""
    points = mesh.points + moves
    e1, e2, e3 = element_axes(points, mesh.connectivity)
    inward = np.einsum("ekd,ed->e", moves[mesh.cells], mesh.e3) / mesh.cells.shape[1]
    share = 0.5 + inward / np.where(mesh.thickness > 0.0, mesh.thickness, np.inf)
    offset = np.where(on_skin & (mesh.thickness > 0.0), np.round(share / OFFSET_STEP) * OFFSET_STEP, 0.0)
    return replace(mesh, points=points, e1=e1, e2=e2, e3=e3, offset=offset, surface="mid")


def _without_folded_laminates(
    mesh: ShellMesh, moves: Floats, on_skin: NDArray[np.bool_]
) -> tuple[ShellMesh, NDArray[np.bool_]]:
    """Halve the moves round elements whose laminate folds on the moved surface and did not before."""
    moves = moves.copy()
    halved = np.zeros(len(mesh.points), dtype=bool)
    _carry_webs(mesh, moves, on_skin)
    moved = _moved(mesh, moves, on_skin)
    folded = inner_face_ratio(moved) <= 0.0
    if not folded.any():
        return moved, halved
    was_sound = inner_face_ratio(mesh) > 0.0
    for _ in range(N_HALVINGS):
        nodes = np.unique(mesh.cells[folded & was_sound & on_skin])
        if len(nodes) == 0:
            break
        moves[nodes] *= 0.5
        halved[nodes] = True
        _carry_webs(mesh, moves, on_skin)
        moved = _moved(mesh, moves, on_skin)
        folded = inner_face_ratio(moved) <= 0.0
    return moved, halved


def _wanted_moves(mesh: ShellMesh, on_sides: NDArray[np.bool_]) -> Floats:
    """(n, 3) moves of the nodes of both sides, others zero."""
    skin = np.flatnonzero(on_sides)
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
    before = _corner_areas(mesh.points[corners])
    size = np.sum(before**2, axis=2)
    for _ in range(N_HALVINGS):
        after = _corner_areas((mesh.points + moves)[corners])
        folded = np.any(np.sum(after * before, axis=2) < LEAST_CORNER_SHARE * size, axis=1)
        if not folded.any():
            break
        nodes = np.unique(mesh.cells[on_skin][folded])
        moves[nodes] *= 0.5
        halved[nodes] = True
    return moves, halved


def _corner_areas(x: Floats) -> Floats:
    """(m, k, 3) vector areas that the edges span at each corner."""
    return np.asarray(np.cross(np.roll(x, -1, axis=1) - x, np.roll(x, 1, axis=1) - x))


def _carry_base(mesh: ShellMesh, moves: Floats, on_sides: NDArray[np.bool_]) -> None:
    """Let the inner nodes of the trailing base follow the two trailing edges, in proportion to their place between."""
    is_inner = mesh.sheet == 0
    is_inner[np.unique(mesh.cells[on_sides])] = False
    inner = np.flatnonzero(is_inner)
    if len(inner) == 0:
        return
    last = np.floor(mesh.seam[inner].min())
    edges = [np.flatnonzero((mesh.sheet == 0) & (mesh.seam == seam)) for seam in (last, 0.0)]
    share = (mesh.seam[inner] - last)[:, None]
    moves[inner] = _along(mesh, moves, edges[0], inner) * (1.0 - share) + _along(mesh, moves, edges[1], inner) * share


def _along(mesh: ShellMesh, moves: Floats, line: Ints, nodes: Ints) -> Floats:
    """Moves of a line of nodes along the span, at the rows of other nodes."""
    line = line[np.argsort(mesh.row[line])]
    return np.column_stack([np.interp(mesh.row[nodes], mesh.row[line], moves[line, axis]) for axis in range(3)])


def _carry_webs(mesh: ShellMesh, moves: Floats, on_skin: NDArray[np.bool_]) -> None:
    """Let the nodes of webs follow their feet, in proportion to their height."""
    for sheet in range(1, int(mesh.sheet.max()) + 1):
        own = np.flatnonzero(mesh.sheet == sheet)
        region = mesh.region[~on_skin & np.any(mesh.sheet[mesh.cells] == sheet, axis=1)][0]
        feet = [mesh.node_sets[f"{mesh.regions[region].name} {side} foot"] for side in ("pressure", "suction")]
        at_feet = [_along(mesh, moves, foot, own) for foot in feet]
        height = mesh.seam[own][:, None]
        moves[own] = at_feet[0] * (1.0 - height) + at_feet[1] * height


def _told(mesh: ShellMesh, nodes: NDArray[np.bool_], reason: str) -> str:
    z = mesh.points[nodes, 2]
    return (
        f"mid surface: the move of {counted(int(nodes.sum()), 'node')} was limited, since {reason}"
        f" (z = {z.min():.3f} to {z.max():.3f} m)"
    )
