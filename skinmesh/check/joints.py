"""Joints: every edge shared by as many elements as its regions call for, and normals that agree across it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components

from skinmesh.check.edges import EdgeTable, edge_table, skin_elements
from skinmesh.check.finding import Finding, listed, not_made, span_of, verdict_of
from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.measure import element_areas, element_centres
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

RULE = "2 on the skin and within a web, 3 at a web's foot, 1 at root, tip and web ends"
SOURCE = "what a closed skin with webs inside is"


def check_joints(mesh: ShellMesh) -> list[Finding]:
    """Edges by how many elements share them.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    list of Finding
    """
    table = edge_table(mesh)
    web_uses = _web_uses(mesh, table)
    n_web = web_uses.sum(axis=1)
    n_skin = table.count - n_web
    at_end = _on_blade_end(mesh, table.ends)
    on_skin = n_skin > 0
    is_foot = (n_skin == 2) & (n_web > 0) & (web_uses.max(axis=1, initial=0) == 1)
    is_good_skin = on_skin & (n_web == 0) & ((n_skin == 2) | ((n_skin == 1) & at_end))
    is_good_web = ~on_skin & ((n_web == 2) | ((n_web == 1) & (at_end | _on_web_end(mesh, table, web_uses))))
    bad = ~(is_foot | is_good_skin | is_good_web)
    is_free = bad & (table.count == 1)
    twisted = _with_two_middles(mesh, table)
    elements = np.unique(table.uses_element[(bad | twisted)[table.uses_edge]])
    n_torn = int(np.count_nonzero(twisted))
    measured = (
        f"{len(table.count)} edges: {np.count_nonzero(is_foot)} at web feet, "
        f"{np.count_nonzero(~bad & (table.count == 1))} free at ends; "
        f"{np.count_nonzero(is_free)} stray free edges, {np.count_nonzero(bad & ~is_free)} shared by a wrong number"
    )
    if n_torn:
        measured += f", {n_torn} with two mid nodes"
    middle = mesh.points[table.ends].mean(axis=1)
    strays = [
        {"nodes": mesh.node_number[ends].tolist(), "z_m": round(float(z), 6), "elements": int(count)}
        for ends, z, count in zip(table.ends[bad], middle[bad, 2], table.count[bad], strict=True)
    ]
    at_z = listed(f"{z:.3f}" for z in np.unique(np.round(middle[bad, 2], 3)))
    verdict = verdict_of(fails=len(elements))
    where = f"edges at z = {at_z} m; {span_of(mesh, elements)}" if bad.any() else span_of(mesh, elements)
    return [Finding("joints", measured, RULE, SOURCE, verdict, where, elements, {"stray_edges": strays})]


def check_normals(mesh: ShellMesh) -> list[Finding]:
    """Orientation of the elements: the same on both sides of an edge, outwards on skins, forwards on webs.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    list of Finding
    """
    normal = element_axes(mesh.points, mesh.connectivity)[2]
    lines = [_skin_normals(mesh, normal), _stored_normals(mesh, normal)]
    webs = np.setdiff1d(np.arange(len(mesh.cells)), skin_elements(mesh))
    return [*lines, _web_normals(mesh, normal, webs)] if len(webs) else lines


def _skin_normals(mesh: ShellMesh, normal: NDArray[np.float64]) -> Finding:
    """Parts of the skin that edges tie together must turn one way, and that way must be outwards."""
    skin = skin_elements(mesh)
    table = edge_table(mesh, skin)
    edge, pairs = table.pairs()
    start = table.first_use[edge]
    opposed = table.uses_forward[start] == table.uses_forward[start + 1]
    m = len(mesh.cells)
    uses = np.bincount(pairs.ravel(), minlength=m)
    against = np.bincount(pairs[opposed].ravel(), minlength=m)
    flipped = np.flatnonzero(2 * against > uses)
    flipped = flipped if len(flipped) or not opposed.any() else np.unique(pairs[opposed])
    agreeing = pairs[~opposed]
    graph = coo_matrix((np.ones(len(agreeing)), (agreeing[:, 0], agreeing[:, 1])), shape=(m, m))
    part = connected_components(graph, directed=False)[1]
    # The flux of (x, y, 0)/2 out of a tube with plane ends across z is its volume: a part that turns inwards counts
    # the other way. The largest part alone is weighed: a small one has no inside of its own.
    largest = np.bincount(part[skin]).argmax()
    own = skin[part[skin] == largest]
    centre = element_centres(mesh)[own, :2] - _axis_at(mesh, own)
    volume = float(np.einsum("ij,ij,i->", centre, normal[own, :2], element_areas(mesh)[own]) / 2.0)
    beyond = own if volume <= 0 else flipped
    measured = (
        f"skin: {np.count_nonzero(opposed)} of {len(edge)} edges between elements that turn opposite ways, "
        f"enclosed volume {volume:.4g} m³"
    )
    return Finding(
        "normals",
        measured,
        "no such edge, volume above 0",
        "e3 is the outward normal on skins",
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
    )


def _axis_at(mesh: ShellMesh, elements: Ints) -> NDArray[np.float64]:
    """(k, 2) middle of leading and trailing edge at the elements' z, so that sweep and prebend count for nothing."""
    edges = _edge_lines(mesh)
    z = mesh.points[mesh.cells[elements, : mesh.n_sides], 2].mean(axis=1)
    if edges is None:
        return np.zeros((len(elements), 2))
    lines = [np.column_stack([np.interp(z, line[:, 2], line[:, axis]) for axis in (0, 1)]) for line in edges]
    middle: NDArray[np.float64] = 0.5 * (lines[0] + lines[1])
    return middle


def _edge_lines(mesh: ShellMesh) -> tuple[NDArray[np.float64], NDArray[np.float64]] | None:
    """Nodes of the leading edge and of the trailing edge, root first; None where the seams have no such name."""
    labels = mesh.report.seams
    if "leading edge" not in labels:
        return None
    lines = []
    for seam in (labels.index("leading edge"), 0):
        corners = slice(mesh.n_corners)
        nodes = np.flatnonzero((mesh.sheet[corners] == 0) & (mesh.seam[corners] == float(seam)))
        if not len(nodes):
            return None
        lines.append(mesh.points[nodes[np.argsort(mesh.points[nodes, 2], kind="stable")]])
    return lines[0], lines[1]


def _web_normals(mesh: ShellMesh, normal: NDArray[np.float64], webs: Ints) -> Finding:
    edges = _edge_lines(mesh)
    if edges is None:
        return not_made("normals", "the summary names no leading edge, so that webs have no fore face")
    z = mesh.points[mesh.cells[webs, : mesh.n_sides], 2].mean(axis=1)
    fore, aft = (np.column_stack([np.interp(z, line[:, 2], line[:, axis]) for axis in (0, 1)]) for line in edges)
    forwards = np.einsum("ij,ij->i", normal[webs, :2], fore - aft)
    beyond = webs[forwards <= 0]
    return Finding(
        "normals",
        f"webs: {len(beyond)} of {len(webs)} elements face aft",
        "none",
        "e3 points towards the leading edge on webs",
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
    )


def _stored_normals(mesh: ShellMesh, normal: NDArray[np.float64]) -> Finding:
    beyond = np.flatnonzero(np.einsum("ij,ij->i", normal, mesh.e3) <= 0)
    return Finding(
        "normals",
        f"node order turns about −e3 in {counted(len(beyond), 'element')}",
        "none",
        "nodes run counter-clockwise about e3",
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
    )


def _web_uses(mesh: ShellMesh, table: EdgeTable) -> Ints:
    """(e, number of webs) how many elements of each web use each edge."""
    webs = [i for i, region in enumerate(mesh.regions) if region.kind == "web"]
    uses = np.zeros((len(table.count), len(webs)), dtype=np.int64)
    region = mesh.region[table.uses_element]
    for column, web in enumerate(webs):
        uses[:, column] = np.bincount(table.uses_edge[region == web], minlength=len(table.count))
    return uses


def _on_blade_end(mesh: ShellMesh, ends: Ints) -> Flags:
    row = mesh.row[ends]
    on_end: Flags = np.all(row == mesh.row.min(), axis=1) | np.all(row == mesh.row.max(), axis=1)
    return on_end


def _on_web_end(mesh: ShellMesh, table: EdgeTable, web_uses: Ints) -> Flags:
    """Edges along the first or the last row of their own web."""
    webs = [i for i, region in enumerate(mesh.regions) if region.kind == "web"]
    row = mesh.row[table.ends]
    on_end = np.zeros(len(table.ends), dtype=bool)
    for column, web in enumerate(webs):
        own = mesh.row[mesh.cells[mesh.region == web, : mesh.n_sides]]
        if own.size:
            at_end = np.all(row == own.min(), axis=1) | np.all(row == own.max(), axis=1)
            on_end |= at_end & (web_uses[:, column] > 0)
    return on_end


def _with_two_middles(mesh: ShellMesh, table: EdgeTable) -> Flags:
    """Edges whose elements have different mid nodes there: torn between their corners."""
    first = np.minimum.reduceat(table.uses_middle, table.first_use)
    last = np.maximum.reduceat(table.uses_middle, table.first_use)
    torn: Flags = first != last
    return torn & (mesh.order == 2)
