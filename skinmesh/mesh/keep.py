"""A rebuild under the numbers of an earlier mesh: its parametric coordinates on a new surface."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import SUCTION, BladeDefinition
from skinmesh.errors import LayoutChanged, MeshError, Problem
from skinmesh.mesh.assemble import Topology, tie_parts
from skinmesh.mesh.closing import closing_elements
from skinmesh.mesh.plane import PlaneMesh, with_middles
from skinmesh.mesh.quality import aspect_ratio, corner_points, scaled_jacobian
from skinmesh.mesh.shellmesh import MeshOrigin, ShellMesh
from skinmesh.skin.cover import StackTable
from skinmesh.skin.kept import WAYS_OUT, KeptLayout
from skinmesh.skin.skinmap import SKIN, SkinMap

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

POOR_ASPECT, POOR_JACOBIAN = 10.0, 0.3  # common practice, no source
WORSE = 1.2  # a number of poor elements that grew by more than this factor is worth a warning
_SAME_LINE = 1e-9  # in row coordinates
STANDS_OFF = 5.0  # and so are edges that stand off by this many times what was meant; our choice, no source


@dataclass(frozen=True)
class KeptQuality:
    """Quality of an element shape before and after a rebuild.

    Attributes
    ----------
    largest_aspect, smallest_jacobian : (float, float)
        Before and after.
    n_poor : (int, int)
        Elements beyond an aspect of 10 or under a scaled Jacobian of 0.3.
    """

    largest_aspect: tuple[float, float]
    smallest_jacobian: tuple[float, float]
    n_poor: tuple[int, int]


def kept_layout(old: ShellMesh) -> KeptLayout:
    """Read the layout of a mesh off its parametric coordinates.

    Parameters
    ----------
    old : ShellMesh

    Returns
    -------
    KeptLayout
    """
    is_corner = np.arange(len(old.points)) < old.n_corners
    n_rows, n_seams = len(old.report.rows), len(old.report.seams)
    rows = np.unique(old.row[is_corner & (old.sheet == SKIN) & (old.seam == 0.0)])
    root = old.seam[is_corner & (old.sheet == SKIN) & (old.row == 0.0)]
    on_base = is_corner & (old.sheet == SKIN) & (old.seam > n_seams - 1.0)
    base = np.flatnonzero(on_base)
    base = base[np.isin(old.row[base], rows)]
    webs = tuple(region.name for region in old.regions if region.kind == "web")
    in_base = np.array([region.kind == "base" for region in old.regions])[old.region]
    base_rows = old.row[old.cells[in_base, : old.n_sides]]
    return KeptLayout(
        rows=tuple(label for label, _ in old.report.rows),
        seams=old.report.seams,
        webs=webs,
        n_levels=np.bincount(np.ceil(rows[1:]).astype(int) - 1, minlength=n_rows - 1),
        n_gaps=np.bincount(np.floor(np.unique(root)).astype(int), minlength=n_seams)[: n_seams - 1],
        n_base=1 + len(np.unique(old.seam[base])),
        n_heights=tuple(
            1 + len(np.unique(old.seam[is_corner & (old.sheet == sheet)])) for sheet in range(1, len(webs) + 1)
        ),
        open_bands=tuple(np.unique(np.floor(base_rows.min(axis=1)).astype(int)).tolist()) if len(base_rows) else (),
    )


def check_kept_rule(blade: BladeDefinition, old: ShellMesh) -> None:
    """Refuse a rebuild whose mesh is to be of another kind.

    Raises
    ------
    LayoutChanged
        Order, shape, hand or name differ.
    """
    shape = "quad" if old.n_sides == 4 else "triangle"
    pairs = (
        ("mesh.order", old.order, blade.mesh.order),
        ("mesh.shape", shape, blade.mesh.shape),
        ("hand", old.hand, blade.hand),
    )
    file = blade.sources[0].file if blade.sources else blade.stem
    changed = [(name, f"is now {now}; the mesh to keep has {before}") for name, before, now in pairs if before != now]
    if changed:
        raise LayoutChanged(
            [Problem(file, 0, name, f"{text}. {WAYS_OUT}") for name, text in changed],
            changes=[f"{name} {text}" for name, text in changed],
        )


def kept_topology(old: ShellMesh, skin: SkinMap) -> Topology:
    """Elements and nodes of an earlier mesh, for a new surface.

    Parameters
    ----------
    old : ShellMesh
    skin : SkinMap
        With the divisions of the old mesh.

    Returns
    -------
    Topology
    """
    if old.order == 1:  # files of a first-order mesh hold no mid nodes; those of the keyword deck are made anew
        shape = "quad" if old.n_sides == 4 else "triangle"
        return tie_parts(skin, (_elements(old, skin), closing_elements(skin, shape=shape)), hand=old.hand)
    corners = old.cells[:, : old.n_sides].T  # whole arrays at a time: reducing rows of four is slow
    seam = old.seam[corners]
    lowest = np.minimum.reduce(old.row[corners])
    band = np.searchsorted(skin.levels.row[::2], lowest + _SAME_LINE, side="right") - 1
    # where the edges are closed, the suction side's last nodes have the pressure side's seam, 0
    wraps = np.array([region.side == SUCTION for region in old.regions])[old.region] & (np.minimum.reduce(seam) == 0.0)
    strip = np.ceil(np.maximum.reduce(seam) - _SAME_LINE).astype(np.int64) - 1
    strip = np.where(wraps, skin.n_seams - 2, strip)
    webs = {web.name: skin.web_strip(web) for web in skin.webs}
    own = [skin.base_strip if r.kind == "base" else webs.get(r.name, -1) for r in old.regions]
    strip = np.where(np.array(own)[old.region] >= 0, np.array(own)[old.region], strip)
    return Topology(old.sheet, old.row, old.seam, old.n_corners, old.cells, strip, band)


def _elements(old: ShellMesh, skin: SkinMap) -> PlaneMesh:
    """The elements of an earlier mesh in the lattice of the skin map, those of the closings left out.

    Parameters
    ----------
    old : ShellMesh
    skin : SkinMap
        With the divisions of the old mesh.

    Returns
    -------
    PlaneMesh
    """
    corners = old.cells[:, : old.n_sides]
    if old.hand == "counter-clockwise":
        corners = corners[:, [0, *range(old.n_sides - 1, 0, -1)]]
    node_level = np.interp(old.row[: old.n_corners], skin.levels.row, np.arange(len(skin.levels.row)))
    closing = np.interp(node_level, np.arange(len(skin.closing)), skin.closing)
    last = skin.n_seams - 1
    kinds = np.array([region.kind for region in old.regions])[old.region]
    seam = old.seam[corners]
    low, high = seam.min(axis=1), seam.max(axis=1)
    # an element at a closed edge, which is seam 0, spans all seams if it belongs to the last gap
    strip = np.where(high - low > 1.0 + 1e-9, last - 1, np.maximum(np.ceil(high - 1e-9).astype(int) - 1, 0))
    sheet = np.full(len(corners), SKIN)
    for web in skin.webs:
        own = np.flatnonzero(old.region == [region.name for region in old.regions].index(web.name))
        sheet[own], strip[own] = web.sheet, skin.web_strip(web)
        at_foot = old.sheet[corners[own]] == SKIN
        seam[own] = np.where(at_foot, np.where(seam[own] == web.suction_seam, 1.0, 0.0), seam[own])
    base = np.flatnonzero(kinds == "base")
    strip[base] = skin.base_strip
    seam[base] = np.where(seam[base] == 0.0, last + 1.0, seam[base])
    wrapped = np.flatnonzero((strip == last - 1) & (sheet == SKIN))
    seam[wrapped] = np.where(seam[wrapped] == 0.0, float(last), seam[wrapped])
    keep = np.ones(len(corners), dtype=bool)
    keep[base] = ~np.any((closing[corners[base]] > 0.0) & (closing[corners[base]] < 1.0), axis=1)
    return PlaneMesh(with_middles(node_level[corners[keep]]), with_middles(seam[keep]), sheet[keep], strip[keep])


def keep_stack_numbers(table: StackTable, old: ShellMesh) -> StackTable:
    """Number the stacks so that an equal content has its earlier number.

    A new content takes the number of one that is gone, or the next free one; a number that nothing takes stays with
    its earlier content, which then lies nowhere.

    Parameters
    ----------
    table : StackTable
    old : ShellMesh

    Returns
    -------
    StackTable
    """
    before = {stack.content_name: i for i, stack in enumerate(old.stacks)}
    now = [stack.content_name for stack in table.stacks]
    free = [i for name, i in before.items() if name not in set(now)]
    free += list(range(len(old.stacks), len(old.stacks) + len(now)))
    numbers = np.array([before[name] if name in before else free.pop(0) for name in now], dtype=np.int64)
    stacks = list(old.stacks) + [table.stacks[0]] * max(0, int(numbers.max(initial=-1)) + 1 - len(old.stacks))
    for stack, number in zip(table.stacks, numbers, strict=True):
        stacks[number] = stack
    index = np.where(table.index >= 0, np.append(numbers, 0)[table.index], table.index)
    return replace(table, stacks=tuple(stacks), index=index)


def with_kept_numbers(mesh: ShellMesh, old: ShellMesh) -> ShellMesh:
    """Give a rebuilt mesh the node and element numbers of the old one, and say where its divisions have become poor.

    Raises
    ------
    MeshError
        Connectivity or regions came out differently, which no change of geometry can explain.
    """
    if not (np.array_equal(mesh.connectivity, old.connectivity) and np.array_equal(mesh.region, old.region)):
        raise MeshError("the rebuilt mesh has other elements or regions than the one to keep")
    n = old.n_nodes
    node_number = np.concatenate([old.node_number[:n], mesh.node_number[n:]])
    _, warnings = compare_quality(old, mesh)
    origin = old.report.divided_by or MeshOrigin(old.title, old.sources)
    report = replace(mesh.report, warnings=mesh.report.warnings + warnings, divided_by=origin)
    return replace(mesh, node_number=node_number, element_number=old.element_number, report=report)


def compare_quality(old: ShellMesh, new: ShellMesh) -> tuple[KeptQuality, tuple[str, ...]]:
    """Set element quality before and after side by side, the trailing base left out, where slivers belong.

    Returns
    -------
    KeptQuality
    tuple of str
        Warnings where kept divisions have become poor.
    """
    inner = np.array([region.kind != "base" for region in old.regions])[old.region]
    corners = [corner_points(mesh)[inner] for mesh in (old, new)]
    aspect, jacobian = [aspect_ratio(c) for c in corners], [scaled_jacobian(c) for c in corners]
    poor = [int(np.sum((a > POOR_ASPECT) | (j < POOR_JACOBIAN))) for a, j in zip(aspect, jacobian, strict=True)]
    quality = KeptQuality(
        (float(aspect[0].max()), float(aspect[1].max())),
        (float(jacobian[0].min()), float(jacobian[1].min())),
        (poor[0], poor[1]),
    )
    warnings = list(_standing_off(old, new))
    if poor[1] > WORSE * poor[0]:
        warnings.append(
            f"kept divisions: {poor[1]} elements beyond aspect {POOR_ASPECT:g} or scaled Jacobian {POOR_JACOBIAN:g},"
            f" before {poor[0]}; a build without --keep would divide anew"
        )
    return quality, tuple(warnings)


def _standing_off(old: ShellMesh, new: ShellMesh) -> Iterator[str]:
    """Say where straight edges across the skin have come to stand off it by far more than the mesh rule means."""
    rule, table = new.report.mesh_rule, new.report.table
    if rule is None or table is None:
        return
    k = new.n_sides
    cells = new.cells[np.array([region.kind not in ("base", "web") for region in new.regions])[new.region]]
    first, second, middle = cells[:, :k], np.roll(cells[:, :k], -1, axis=1), cells[:, k:]
    across = new.row[first] == new.row[second]
    first, second, middle = first[across], second[across], middle[across]
    before, after = (
        np.linalg.norm(mesh.points[middle] - 0.5 * (mesh.points[first] + mesh.points[second]), axis=1)
        for mesh in (old, new)
    )
    z = new.points[middle, 2]
    allowed = rule.chord_error * np.interp(z, table.z, table.chord)
    poor = np.flatnonzero((after > STANDS_OFF * allowed) & (after > WORSE * before))
    if len(poor):
        worst = poor[np.argmax(after[poor] / allowed[poor])]
        yield (
            f"kept divisions: straight edges stand off the surface by {1e3 * after[worst]:.3g} mm at z ="
            f" {z[worst]:.3f} m, where mesh.chord_error means {1e3 * allowed[worst]:.3g} mm; a build without --keep"
            " would divide anew"
        )
