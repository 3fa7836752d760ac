"""The finished shell mesh: arrays, names and cheap properties. The one argument of every writer."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import MeshRule, Source, StationTable
from skinmesh.frozen import freeze_array
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Stack

NO_STACK = -1


@dataclass(frozen=True)
class Region:
    """A named part of the blade.

    Attributes
    ----------
    name : str
        In full: 'suction main cap', 'fore web', 'trailing base'.
    side : int
        1 suction, −1 pressure, 0 web or base.
    kind : str
        'strip', 'panel', 'cap', 'web' or 'base'.
    """

    name: str
    side: int
    kind: str


@dataclass(frozen=True)
class MeshOrigin:
    """The build that divided a mesh whose numbers were kept since.

    Attributes
    ----------
    title : str
    sources : tuple of Source
        Its input files.
    """

    title: str
    sources: tuple[Source, ...]


@dataclass(frozen=True, eq=False)
class BuildReport:
    """What the build has to say beside the mesh.

    Attributes
    ----------
    warnings : tuple of str
        One sentence each, with the place and the amount.
    ply_end_move : float, m
        Largest move of a ply end to an element row; 0 without plies.
    ply_end_place : str
        Which ply end that was: ply, layer, wanted z.
    rows : tuple of (str, float)
        Label and z of every row, root first.
    seams : tuple of str
        Label of every seam, from the pressure trailing edge over the nose to the suction trailing edge.
    stations : (k,) float array, m
        z of the table's stations.
    developed_areas : mapping of str to float, m²
        Flat-pattern area of each skin region, from polygons on the developed skin.
    ply_areas : mapping of str to float, m²
        Flat-pattern area of each ply, all its layers together, at its exact ends.
    mesh_rule : MeshRule, optional
        What was asked of the mesh; None where that is not known.
    table : StationTable, optional
        The station table as it was read; None where that is not known.
    divided_by : MeshOrigin, optional
        The earlier build whose divisions and numbers were kept; then sizes in ``mesh_rule`` are not those of the mesh.
        None where it is the build's own.
    """

    warnings: tuple[str, ...] = ()
    ply_end_move: float = 0.0
    ply_end_place: str = ""
    rows: tuple[tuple[str, float], ...] = ()
    seams: tuple[str, ...] = ()
    stations: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    developed_areas: Mapping[str, float] = field(default_factory=dict)
    ply_areas: Mapping[str, float] = field(default_factory=dict)
    mesh_rule: MeshRule | None = None
    table: StationTable | None = None
    divided_by: MeshOrigin | None = None


@dataclass(frozen=True, eq=False)
class ShellMesh:
    """A layered shell mesh of a whole blade.

    Nodes are numbered from one in files, here from zero; corner nodes come first. The mesh always knows its
    second-order form, since one of the decks needs it; ``order`` says which one the user asked for.

    Attributes
    ----------
    title, stem, hand : str
        From the blade file.
    order : int
        1 or 2.
    surface : str
        Reference surface: 'outer' or 'mid'.
    points : (n, 3) float array, m
        All nodes of the second-order mesh, the ``n_corners`` corner nodes first.
    n_corners : int
    cells : (m, 8) or (m, 6) int array
        Corners, then mid nodes 12, 23, 34, 41 (12, 23, 31), counter-clockwise about e3.
    region : (m,) int array
        Index into ``regions``.
    stack : (m,) int array
        Index into ``stacks``, NO_STACK where no ply lies.
    offset : (m,) float array
        Height of the reference surface over the middle of the laminate along +e3, as a share of the thickness:
        0.5 on the skin of an outer mesh, 0 on webs.
    e1, e2, e3 : (m, 3) float array
        Element axes: orthonormal, right-handed.
    sheet : (n,) int array
        0 skin, k the k-th web.
    row, seam : (n,) float array
        Parametric coordinates.
    regions : tuple of Region
    stacks : tuple of Stack
    materials : mapping of str to Material
        All that the blade file defines.
    node_sets : mapping of str to int array
        Node indices, corner and mid nodes, increasing.
    element_sets : mapping of str to int array
        Element indices of sets beside the regions, such as 'thick laminate'.
    node_number : (n,) int array
        Solver numbers, one-based.
    element_number : (m,) int array
        Solver numbers, one-based.
    sources : tuple of Source
    report : BuildReport
    """

    title: str
    stem: str
    hand: str
    order: int
    surface: str
    points: NDArray[np.float64]
    n_corners: int
    cells: NDArray[np.int64]
    region: NDArray[np.int64]
    stack: NDArray[np.int64]
    offset: NDArray[np.float64]
    e1: NDArray[np.float64]
    e2: NDArray[np.float64]
    e3: NDArray[np.float64]
    sheet: NDArray[np.int64]
    row: NDArray[np.float64]
    seam: NDArray[np.float64]
    regions: tuple[Region, ...]
    stacks: tuple[Stack, ...]
    materials: Mapping[str, Material]
    node_sets: Mapping[str, NDArray[np.int64]]
    element_sets: Mapping[str, NDArray[np.int64]]
    node_number: NDArray[np.int64]
    element_number: NDArray[np.int64]
    sources: tuple[Source, ...]
    report: BuildReport

    def __post_init__(self) -> None:
        n, m = len(self.points), len(self.cells)
        freeze_array(self, "points", shape=(None, 3))
        freeze_array(self, "cells", shape=(None, None), dtype=np.int64)
        for name in ("region", "stack", "element_number"):
            freeze_array(self, name, shape=(m,), dtype=np.int64)
        for name in ("sheet", "node_number"):
            freeze_array(self, name, shape=(n,), dtype=np.int64)
        freeze_array(self, "offset", shape=(m,))
        for name in ("e1", "e2", "e3"):
            freeze_array(self, name, shape=(m, 3))
        for name in ("row", "seam"):
            freeze_array(self, name, shape=(n,))

    @property
    def n_sides(self) -> int:
        """Corners of an element: 4 or 3."""
        return int(self.cells.shape[1]) // 2

    @property
    def n_nodes(self) -> int:
        """Number of nodes of the mesh in the order that was asked for."""
        return len(self.points) if self.order == 2 else self.n_corners

    @property
    def nodes(self) -> NDArray[np.float64]:
        """(n_nodes, 3) float array, m: the nodes in the order that was asked for."""
        return self.points[: self.n_nodes]

    @property
    def connectivity(self) -> NDArray[np.int64]:
        """(m, k) int array: the elements in the order that was asked for, k = 3, 4, 6 or 8."""
        return self.cells if self.order == 2 else self.cells[:, : self.n_sides]

    def node_set(self, name: str) -> NDArray[np.int64]:
        """Indices of a node set, without mid nodes where the mesh has none."""
        nodes = self.node_sets[name]
        return nodes[nodes < self.n_nodes]

    @cached_property
    def side(self) -> NDArray[np.int64]:
        """(m,) int array: 1 suction, −1 pressure, 0 web or base."""
        return np.array([region.side for region in self.regions], dtype=np.int64)[self.region]

    @cached_property
    def thickness(self) -> NDArray[np.float64]:
        """(m,) float array, m: 0 where no ply lies."""
        return np.array([stack.thickness for stack in self.stacks] + [0.0])[self.stack]

    @cached_property
    def areal_mass(self) -> NDArray[np.float64]:
        """(m,) float array, kg/m²."""
        return np.array([stack.areal_mass for stack in self.stacks] + [0.0])[self.stack]

    @cached_property
    def n_plies(self) -> NDArray[np.int64]:
        """(m,) int array: layers of each element."""
        return np.array([len(stack.layers) for stack in self.stacks] + [0], dtype=np.int64)[self.stack]
