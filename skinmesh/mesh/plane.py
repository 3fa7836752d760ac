"""The developed skin as four-sided patches, and their mesh by gmsh in the plane."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.errors import MeshError
from skinmesh.mesh.kernel import gmsh_session
from skinmesh.skin.skinmap import SKIN, SkinMap

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

QUADRILATERAL, TRIANGLE = 3, 2  # element types of gmsh


@dataclass(frozen=True, eq=False)
class Patches:
    """Four-sided patches between neighbouring rows and seams. Sheets lie beside each other in the plane.

    Attributes
    ----------
    strip : (p,) int array
    sheet : (p,) int array
    band : (p,) int array
        Index of the row before the patch.
    seam : (p,) float array
        Seam coordinate at the patch's left edge; the patch is one unit wide.
    n_across : (p,) int array
    n_along : (p,) int array
    point : (p, 4) int array
        Corner points, counter-clockwise from the lower left.
    points : (k, 2) float array, m
    """

    strip: Ints
    sheet: Ints
    band: Ints
    seam: Floats
    n_across: Ints
    n_along: Ints
    point: Ints
    points: Floats


@dataclass(frozen=True, eq=False)
class PlaneMesh:
    """Elements by the parametric coordinates of their nodes.

    Attributes
    ----------
    level : (m, k) float array
        Place of each node among the lines of the levels; lines of corner nodes have even numbers.
    seam : (m, k) float array
        Seam coordinate, on webs the height.
    sheet : (m,) int array
    strip : (m,) int array
    """

    level: Floats
    seam: Floats
    sheet: Ints
    strip: Ints


def cut_patches(skin: SkinMap) -> Patches:
    """Cut the developed skin, the trailing base and the webs into patches.

    Parameters
    ----------
    skin : SkinMap

    Returns
    -------
    Patches
        Skin seams lie at their true arc length; base and webs are strips of unit width.
    """
    arc = skin.seams.arc[::2][skin.levels.row_starts]
    z = skin.rows.z
    n_gaps = skin.n_seams - 1
    grids = [(SKIN, arc, np.arange(len(z)), np.arange(n_gaps), np.arange(n_gaps, dtype=float), skin.gaps.n)]
    for base in skin.bases:
        rows = np.arange(base.first_row, base.last_row + 1)
        edges = np.tile([0.0, 1.0], (len(rows), 1))
        grids.append(
            (SKIN, edges, rows, np.array([skin.base_strip]), np.array([float(n_gaps)]), np.array([skin.n_base]))
        )
    for web in skin.webs:
        rows = np.arange(web.first_row, web.last_row + 1)
        edges = np.tile([0.0, 1.0], (len(rows), 1))
        grids.append((web.sheet, edges, rows, np.array([skin.web_strip(web)]), np.zeros(1), np.array([web.n_height])))
    parts, points, n_points, right = [], [], 0, 0.0
    for sheet, edges, rows, strips, seams, n_across in grids:
        x = edges + (right - edges.min())
        right = float(x.max()) + 1.0
        points.append(np.stack([x, np.broadcast_to(z[rows][:, None], x.shape)], axis=-1).reshape(-1, 2))
        number = n_points + np.arange(x.size).reshape(x.shape)
        n_points += x.size
        corners = np.stack([number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]], axis=-1)
        band, across = np.meshgrid(rows[:-1], np.arange(len(strips)), indexing="ij")
        parts.append(
            (
                strips[across].ravel(),
                np.full(band.size, sheet),
                band.ravel(),
                seams[across].ravel(),
                n_across[across].ravel(),
                skin.levels.n[band].ravel(),
                corners.reshape(-1, 4),
            )
        )
    strip, sheet_of, band, seam, across, along, point = (np.concatenate(column) for column in zip(*parts, strict=True))
    return Patches(strip, sheet_of, band, seam, across, along, point, np.concatenate(points))


def mesh_patches(patches: Patches, skin: SkinMap, *, shape: str) -> PlaneMesh:
    """Mesh all patches.

    The kernel makes corner nodes. Mid nodes are the parametric middles of their edges: the surface, not the plane,
    says where they lie.

    Parameters
    ----------
    patches : Patches
    skin : SkinMap
    shape : str
        'quad' or 'triangle'.

    Returns
    -------
    PlaneMesh

    Raises
    ------
    MeshError
        The kernel warned, or made other elements or another number of them than the divisions call for.
    """
    kind, n_sides = (QUADRILATERAL, 4) if shape == "quad" else (TRIANGLE, 3)
    expected = patches.n_across * patches.n_along * (1 if shape == "quad" else 2)
    with gmsh_session() as gmsh:
        for option, value in (
            ("Mesh.RecombineNodeRepositioning", 0),
            ("Mesh.Smoothing", 0),
        ):
            gmsh.option.setNumber(option, value)
        surfaces = _enter_patches(gmsh, patches, shape)
        gmsh.model.mesh.generate(2)
        types = set(gmsh.model.mesh.getElementTypes(2))
        if types != {kind}:
            raise MeshError(f"the mesh kernel made elements of types {sorted(types)}, wanted {kind} alone")
        blocks = [gmsh.model.mesh.getElementsByType(kind, surface)[1].reshape(-1, n_sides) for surface in surfaces]
        counts = np.array([len(block) for block in blocks])
        if np.any(counts != expected):
            p = int(np.flatnonzero(counts != expected)[0])
            raise MeshError(
                f"patch of '{skin.strips[patches.strip[p]].name}' after row {patches.band[p]}: the mesh kernel made"
                f" {counts[p]} elements, wanted {expected[p]}"
            )
        tags, coordinates, _ = gmsh.model.mesh.getNodes()
    place = np.empty((int(tags.max()) + 1, 2))
    place[tags] = coordinates.reshape(-1, 3)[:, :2]
    nodes = place[np.concatenate(blocks)]
    return _parametric(patches, skin, np.repeat(np.arange(len(counts)), counts), nodes)


def _enter_patches(gmsh, patches: Patches, shape: str) -> list[int]:  # type: ignore[no-untyped-def]
    """Enter points, lines and transfinite surfaces into the model; a line per pair of points, shared by its patches."""
    geo = gmsh.model.geo
    points = [geo.addPoint(x, y, 0.0) for x, y in patches.points]
    ends = np.stack([patches.point, np.roll(patches.point, -1, axis=1)], axis=-1)  # (p, 4, 2)
    divisions = np.stack([patches.n_across, patches.n_along] * 2, axis=1)
    pairs, inverse = np.unique(np.sort(ends, axis=-1).reshape(-1, 2), axis=0, return_inverse=True)
    n_of_line = np.empty(len(pairs), dtype=int)
    n_of_line[inverse.ravel()] = divisions.ravel()
    if np.any(n_of_line[inverse.ravel()] != divisions.ravel()):
        raise MeshError("two patches call for different divisions of the line between them")
    lines = np.array([geo.addLine(points[a], points[b]) for a, b in pairs])
    for line, n in zip(lines, n_of_line, strict=True):
        geo.mesh.setTransfiniteCurve(line, int(n) + 1)
    signed = np.where(ends[..., 0] < ends[..., 1], 1, -1) * lines[inverse.reshape(-1, 4)]
    surfaces = []
    for loop, corners in zip(signed, patches.point, strict=True):
        surface = geo.addPlaneSurface([geo.addCurveLoop(loop.tolist())])
        geo.mesh.setTransfiniteSurface(
            surface, "Alternate" if shape == "triangle" else "Left", [points[c] for c in corners]
        )
        if shape == "quad":
            geo.mesh.setRecombine(2, surface)
        surfaces.append(surface)
    geo.synchronize()
    return surfaces


def _parametric(patches: Patches, skin: SkinMap, patch: Ints, nodes: Floats) -> PlaneMesh:
    """Parametric coordinates of element nodes, on the exact lattice of their patch's divisions."""
    corner = patches.points[patches.point[patch]][:, :, None]  # (m, 4, 1, 2)
    up = (nodes[..., 1] - corner[:, 0, :, 1]) / (corner[:, 3, :, 1] - corner[:, 0, :, 1])
    left = corner[:, 0, :, 0] + up * (corner[:, 3, :, 0] - corner[:, 0, :, 0])
    right = corner[:, 1, :, 0] + up * (corner[:, 2, :, 0] - corner[:, 1, :, 0])
    across = (nodes[..., 0] - left) / (right - left)
    n_up, n_across = patches.n_along[patch][:, None], patches.n_across[patch][:, None]
    steps = np.rint(up * n_up), np.rint(across * n_across)
    if max(np.abs(up * n_up - steps[0]).max(), np.abs(across * n_across - steps[1]).max()) > 0.01:
        raise MeshError("the mesh kernel moved nodes off their divisions")
    level = 2.0 * (skin.levels.row_starts[patches.band[patch]][:, None] + steps[0])
    seam = patches.seam[patch][:, None] + steps[1] / n_across
    return PlaneMesh(with_middles(level), with_middles(seam), patches.sheet[patch], patches.strip[patch])


def with_middles(corners: NDArray[np.floating]) -> Floats:
    """Values at corner and mid nodes, (m, 2k), from those at the corners, (m, k)."""
    return np.hstack([corners, 0.5 * (corners + np.roll(corners, -1, axis=1))])
