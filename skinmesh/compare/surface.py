"""How far the surface moved: node by node, at equal parametric coordinates, and as a shape."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.compare.closest import closest_points
from skinmesh.compare.numbering import node_order
from skinmesh.compare.parametric import points_at, skin_grid
from skinmesh.frozen import freeze_array
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

BY_NUMBER, BY_PLACE, BY_DISTANCE = "node by node", "at equal parametric coordinates", "to the closest point"


@dataclass(frozen=True, eq=False)
class Move:
    """How far points of the new mesh lie from where the old mesh has them.

    Attributes
    ----------
    way : str
        BY_NUMBER, BY_PLACE (the skin without the face of a blunt trailing edge), or BY_DISTANCE (the skin).
    distance : (n,) float array, m
    z : (n,) float array, m
        Of the points, on the new mesh.
    node : (n,) int array
        Solver numbers of the points, on the new mesh.
    where : str
        Place of the largest; empty where nothing moved.
    """

    way: str
    distance: Floats
    z: Floats
    node: Ints
    where: str

    def __post_init__(self) -> None:
        for name in ("distance", "z"):
            freeze_array(self, name, shape=(len(self.node),))
        freeze_array(self, "node", shape=(None,), dtype=np.int64)

    @property
    def largest(self) -> float:
        """Largest distance, m."""
        return float(self.distance.max(initial=0.0))

    @property
    def rms(self) -> float:
        """Root mean square over the points, m."""
        return float(np.sqrt(np.mean(self.distance**2))) if len(self.distance) else 0.0


@dataclass(frozen=True, eq=False)
class SurfaceChange:
    """Moves of the nodes, and of the skin as a shape.

    Attributes
    ----------
    nodes : Move or None
        By number where the numbers are the same, at equal parametric coordinates where the layout is; None elsewhere.
    shape : Move
        Distance of the new skin's corner nodes from the old skin, whatever their numbers: nodes that slide along the
        surface do not count.
    height : (n,) float array, m
        What of it lies along the old skin's normal: positive where the new skin lies outside.
    """

    nodes: Move | None
    shape: Move
    height: Floats

    def __post_init__(self) -> None:
        freeze_array(self, "height", shape=(len(self.shape.node),))


def compare_surfaces(old: ShellMesh, new: ShellMesh, *, has_same_places: bool, has_same_layout: bool) -> SurfaceChange:
    """Measure how far the surface moved.

    Parameters
    ----------
    old, new : ShellMesh
    has_same_places : bool
        Whether equal node numbers mean equal parametric coordinates.
    has_same_layout : bool
        Whether rows, seams and webs are the same.

    Returns
    -------
    SurfaceChange
    """
    nodes = _by_number(old, new) if has_same_places else _by_place(old, new) if has_same_layout else None
    skin = [np.flatnonzero(np.array([r.kind != "web" for r in mesh.regions])[mesh.region]) for mesh in (old, new)]
    corners = np.unique(new.cells[skin[1], : new.n_sides])
    distance, height = np.zeros((2, len(corners)))
    moved = np.ones(len(corners), dtype=bool)
    if nodes is not None and nodes.way == BY_NUMBER:
        still = new.node_number[corners]
        moved = nodes.distance[np.searchsorted(nodes.node, still)] > 0.0
    if len(skin[0]) and moved.any():
        distance[moved], height[moved] = _to_skin(old, new, corners[moved], skin)
    return SurfaceChange(nodes, _move(new, BY_DISTANCE, corners, distance), height)


def _to_skin(old: ShellMesh, new: ShellMesh, nodes: Ints, skin: list[Ints]) -> tuple[Floats, Floats]:
    """Distance of nodes to the old skin, and what of it lies along the normal."""
    points = new.points[nodes]
    feet = closest_points(old, points, elements=skin[0])
    distance, height = feet.distance.copy(), feet.height.copy()
    side = np.zeros(len(new.points), dtype=np.int64)
    side[new.cells[skin[1], : new.n_sides]] = new.side[skin[1], None]
    # on a thin blade the search may have ended on the other side: look once more on the own one
    for own in (1, -1):
        doubtful = np.flatnonzero((side[nodes] == own) & (old.side[feet.element] == -own))
        there = np.flatnonzero(old.side == own)
        if len(doubtful) and len(there):
            again = closest_points(old, points[doubtful], elements=there)
            nearer = again.distance < distance[doubtful]
            distance[doubtful[nearer]], height[doubtful[nearer]] = again.distance[nearer], again.height[nearer]
    return distance, height


def _by_number(old: ShellMesh, new: ShellMesh) -> Move:
    before, after = node_order(old), node_order(new)
    return _move(new, BY_NUMBER, after, np.linalg.norm(new.points[after] - old.points[before], axis=1))


def _by_place(old: ShellMesh, new: ShellMesh) -> Move | None:
    grids = [skin_grid(mesh) for mesh in (old, new)]
    if grids[0] is None or grids[1] is None:
        return None
    wanted = points_at(old, grids[0], grids[1].row, grids[1].seam)
    distance = np.linalg.norm(new.points[grids[1].node] - wanted, axis=2)
    return _move(new, BY_PLACE, grids[1].node.ravel(), distance.ravel())


def _move(mesh: ShellMesh, way: str, nodes: Ints, distance: Floats) -> Move:
    where = ""
    if distance.max(initial=0.0) > 0.0:
        where = place_of_node(mesh, int(nodes[np.argmax(distance)]))
    return Move(way, distance, mesh.points[nodes, 2], mesh.node_number[nodes], where)


def place_of_node(mesh: ShellMesh, node: int) -> str:
    """Seam or web, z and solver number of a node, in words."""
    sheet, seam = int(mesh.sheet[node]), float(mesh.seam[node])
    labels = mesh.report.seams
    webs = [region.name for region in mesh.regions if region.kind == "web"]
    if sheet > 0:
        part = webs[sheet - 1] if sheet <= len(webs) else f"web {sheet}"
    elif seam > len(labels) - 1:
        part = "trailing base"
    elif seam == int(seam) and labels:
        part = labels[int(seam)]
    elif labels:
        part = f"{labels[int(seam)]} to {labels[int(seam) + 1]}"
    else:
        part = "skin"
    return f"{part}, z = {mesh.points[node, 2]:.3f} m, node {mesh.node_number[node]}"
