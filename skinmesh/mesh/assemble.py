"""From elements in the plane to the finished shell mesh."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition
from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.plane import PlaneMesh
from skinmesh.mesh.shellmesh import BuildReport, Region, ShellMesh
from skinmesh.skin.cover import StackTable
from skinmesh.skin.skinmap import SKIN, SkinMap

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

OUTER_OFFSET = 0.5  # the nodes lie on the +e3 face of the laminate


@dataclass(frozen=True, eq=False)
class Topology:
    """Elements and the nodes that they share, before they are laid on a surface.

    Attributes
    ----------
    sheet : (n,) int array
    row, seam : (n,) float array
        Parametric coordinates of the nodes, the ``n_corners`` corner nodes first.
    n_corners : int
    cells : (m, k) int array
        Corners, then mid nodes, counter-clockwise about the outward normal.
    strip : (m,) int array
    band : (m,) int array
        Row of elements along the span, from the root.
    """

    sheet: Ints
    row: Floats
    seam: Floats
    n_corners: int
    cells: Ints
    strip: Ints
    band: Ints


def tie_parts(skin: SkinMap, parts: tuple[PlaneMesh, ...], *, hand: str) -> Topology:
    """Tie parts of a mesh together and number their nodes and elements.

    Joints are tied by identity: nodes of base and webs that lie on a seam take that seam's own coordinates, and nodes
    with the same coordinates are one node. No distance is ever looked at.

    Parameters
    ----------
    skin : SkinMap
    parts : tuple of PlaneMesh
    hand : str

    Returns
    -------
    Topology
    """
    level, seam, sheet, strip = (
        np.concatenate([np.asarray(getattr(part, name)) for part in parts])
        for name in ("level", "seam", "sheet", "strip")
    )
    band = (np.min(level, axis=1) // 2).astype(int)
    order = np.lexsort((np.min(seam, axis=1), strip, band))
    level, seam, sheet, strip, band = level[order], seam[order], sheet[order], strip[order], band[order]
    n_sides = level.shape[1] // 2
    node_sheet, seam = _tie(skin, level, seam, np.repeat(sheet[:, None], level.shape[1], axis=1))
    keys, cells, n_corners = _number_nodes(level, node_sheet, seam, n_sides)
    row = np.interp(keys[:, 0], np.arange(len(skin.levels.row)), skin.levels.row)
    if hand == COUNTER_CLOCKWISE:
        cells = np.hstack([cells[:, [0, *range(n_sides - 1, 0, -1)]], cells[:, : n_sides - 1 : -1]])
    return Topology(keys[:, 1].astype(int), row, keys[:, 2], n_corners, cells, strip, band)


def assemble_mesh(
    blade: BladeDefinition, skin: SkinMap, topology: Topology, stacks: StackTable, report: BuildReport
) -> ShellMesh:
    """Lay elements on the surface and give each its region, stack and axes.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap
    topology : Topology
    stacks : StackTable
    report : BuildReport

    Returns
    -------
    ShellMesh
    """
    cells, strip = topology.cells, topology.strip
    points = skin.points(topology.sheet, topology.row, topology.seam)
    connectivity = cells if blade.mesh.order == 2 else cells[:, : cells.shape[1] // 2]
    e1, e2, e3 = element_axes(points, connectivity)
    regions, region_of_strip = _regions(skin, strip)
    is_web = np.array([s.kind == "web" for s in skin.strips])[strip]
    return ShellMesh(
        title=blade.title,
        stem=blade.stem,
        hand=blade.hand,
        order=blade.mesh.order,
        surface=blade.mesh.surface,
        points=points,
        n_corners=topology.n_corners,
        cells=cells,
        region=region_of_strip[strip],
        stack=stacks.index[strip, topology.band],
        offset=np.where(is_web, 0.0, OUTER_OFFSET),
        e1=e1,
        e2=e2,
        e3=e3,
        sheet=topology.sheet,
        row=topology.row,
        seam=topology.seam,
        regions=regions,
        stacks=stacks.stacks,
        materials=blade.materials,
        node_sets=_node_sets(skin, topology),
        element_sets={},
        node_number=np.arange(1, len(points) + 1),
        element_number=np.arange(1, len(cells) + 1),
        sources=blade.sources,
        report=report,
    )


def _tie(skin: SkinMap, level: Floats, seam: Floats, sheet: Ints) -> tuple[Ints, Floats]:
    """Give nodes on joints the sheet and seam coordinate of the skin."""
    seam, sheet = seam.copy(), sheet.copy()
    last = float(skin.n_seams - 1)
    for web in skin.webs:
        # both feet are found before either is renamed: a seam may have the number of the other foot's height
        at_pressure, at_suction = ((sheet == web.sheet) & (seam == height) for height in (0.0, 1.0))
        seam[at_pressure], seam[at_suction] = float(web.pressure_seam), float(web.suction_seam)
        sheet[at_pressure | at_suction] = SKIN
    on_skin = sheet == SKIN
    closed = np.interp(level, np.arange(len(skin.closing)), skin.closing) == 1.0
    # the base runs from the last seam back to the first; where the edge is closed all of it is the first seam
    seam[on_skin & (seam == last + 1.0)] = 0.0
    seam[on_skin & closed & (seam >= last)] = 0.0
    return sheet, seam


def _number_nodes(level: Floats, sheet: Ints, seam: Floats, n_sides: int) -> tuple[Floats, Ints, int]:
    """Make one node of equal coordinates, corner nodes first, each kind root to tip."""
    is_mid = np.zeros(level.shape)
    is_mid[:, n_sides:] = 1.0
    keys = np.stack([is_mid, level, sheet, seam], axis=-1).reshape(-1, 4)
    order = np.lexsort(keys.T[::-1])
    ordered = keys[order]
    is_new = np.concatenate([[True], np.any(np.diff(ordered, axis=0) != 0.0, axis=1)])
    number = np.empty(len(keys), dtype=np.int64)
    number[order] = np.cumsum(is_new) - 1
    unique = ordered[is_new]
    return unique[:, 1:], number.reshape(level.shape), int(np.sum(unique[:, 0] == 0.0))


def _regions(skin: SkinMap, strip: Ints) -> tuple[tuple[Region, ...], Ints]:
    """Regions that have elements, leading to trailing edge, suction side first, then base and webs."""
    present = set(np.unique(strip).tolist())
    nose = skin.seams.labels.index("leading edge")
    by_place = [*range(nose, skin.n_seams - 1), *range(nose - 1, -1, -1), *range(skin.base_strip, len(skin.strips))]
    regions = tuple(
        dict.fromkeys(
            Region(skin.strips[s].name, skin.strips[s].side, skin.strips[s].kind) for s in by_place if s in present
        )
    )
    names = {region.name: i for i, region in enumerate(regions)}
    return regions, np.array([names.get(s.name, -1) for s in skin.strips])


def _node_sets(skin: SkinMap, topology: Topology) -> Mapping[str, Ints]:
    row = topology.row
    sets = {"root": np.flatnonzero(row == 0.0), "tip": np.flatnonzero(row == len(skin.rows.z) - 1.0)}
    for i, z in enumerate(skin.surface.stations):
        sets[f"station {i:02d}"] = np.flatnonzero(row == float(skin.rows.index(float(z))))
    on_skin = topology.sheet == SKIN
    for web in skin.webs:
        in_span = on_skin & (row >= web.first_row) & (row <= web.last_row)
        for foot, seam in (("suction foot", web.suction_seam), ("pressure foot", web.pressure_seam)):
            sets[f"{web.name} {foot}"] = np.flatnonzero(in_span & (topology.seam == float(seam)))
    return sets
