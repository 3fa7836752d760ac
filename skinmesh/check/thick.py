"""Laminates against the surface that carries them: folding, thickness over radius, overlap at the trailing edge."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.edges import skin_elements, smooth_pairs
from skinmesh.check.finding import Finding, not_made, place_of, span_of, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.inner_face import inner_face_ratio
from skinmesh.mesh.measure import element_areas, element_centres
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

NO_PLIES = "the blade file has no plies"


def check_folding(mesh: ShellMesh, *, limits: Mapping[str, Limit], has_mid_nodes: bool) -> list[Finding]:
    """The inner face of the laminate, at the solver's own integration points.

    Parameters
    ----------
    mesh : ShellMesh
    limits : mapping of str to Limit
    has_mid_nodes : bool
        Whether the mid nodes are those of the build.

    Returns
    -------
    list of Finding
    """
    if not mesh.stacks:
        return [not_made("inner face", NO_PLIES)]
    limit = limits["laminate depth over radius"]
    depth = 1.0 - inner_face_ratio(laid_inwards(mesh))
    beyond = np.flatnonzero(depth > limit.warn)
    beyond = beyond[np.argsort(-depth[beyond], kind="stable")]
    n_fail = int(np.count_nonzero(depth >= limit.fail))
    note = "" if has_mid_nodes else " (first-order mesh: mid nodes taken on straight edges)"
    return [
        Finding(
            "inner face",
            f"laminate fills {depth.max():.2f} of the radius of curvature at most; "
            f"{counted(n_fail, 'element folds', 'elements fold')}, "
            f"{counted(len(beyond) - n_fail, 'comes', 'come')} near it{note}",
            limit.text,
            limit.source,
            verdict_of(fails=n_fail, warns=len(beyond)),
            span_of(mesh, beyond) or place_of(mesh, int(depth.argmax())),
            beyond,
            {"depth": float(depth.max()), "fails": n_fail},
        )
    ]


def laid_inwards(mesh: ShellMesh) -> ShellMesh:
    """The mesh with its laminate where it belongs: a wrong offset is for the check of offsets to name.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    ShellMesh
    """
    if mesh.surface != "outer":
        return mesh
    is_web = np.array([region.kind == "web" for region in mesh.regions])[mesh.region]
    return replace(mesh, offset=np.where(is_web, 0.0, 0.5))


def check_radius(mesh: ShellMesh, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Thickness over radius of curvature, region by region.

    Parameters
    ----------
    mesh : ShellMesh
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    if not mesh.stacks:
        return [not_made("thickness over radius", NO_PLIES)]
    if mesh.surface != "outer":
        return [not_made("thickness over radius", f"the limit is for nodes on the outer face, not on '{mesh.surface}'")]
    limit = limits["thickness over radius"]
    ratio = mesh.thickness * _curvature(mesh)
    areas = element_areas(mesh)
    per_region = []
    for i, region in enumerate(mesh.regions):
        own = np.flatnonzero(mesh.region == i)
        if region.kind != "web" and len(own):
            worst = own[ratio[own].argmax()]
            share = float(areas[own[ratio[own] > limit.warn]].sum() / areas[own].sum())
            per_region.append(
                {
                    "region": region.name,
                    "largest": round(float(ratio[worst]), 4),
                    "share_of_area_beyond": round(share, 4),
                    "at": place_of(mesh, int(worst)),
                }
            )
    beyond = np.flatnonzero(ratio > limit.warn)
    beyond = beyond[np.argsort(-ratio[beyond], kind="stable")]
    worst = int(ratio.argmax())
    share = float(areas[beyond].sum() / areas[skin_elements(mesh)].sum())
    return [
        Finding(
            "thickness over radius",
            f"{ratio[worst]:.2f} at most; beyond the limit on {100 * share:.1f} % of the skin's area",
            limit.text,
            limit.source,
            verdict_of(fails=ratio[worst] > limit.fail, warns=len(beyond)),
            place_of(mesh, worst),
            beyond,
            {"regions": per_region},
        )
    ]


def _curvature(mesh: ShellMesh) -> Floats:
    """(m,) largest turning between an element and a neighbour on the skin, over the distance of their middles, 1/m.

    The trailing edges are corners of the section, not curvature: edges on them are left out.
    """
    table, edge, pair = smooth_pairs(mesh)
    normal = element_axes(mesh.points, mesh.connectivity)[2]
    a, b = normal[pair[:, 0]], normal[pair[:, 1]]
    # The angle between two planes, whichever way round a normal goes.
    turn = np.arctan2(np.linalg.norm(np.cross(a, b), axis=1), np.abs(np.einsum("ei,ei->e", a, b)))
    along = mesh.points[table.ends[edge, 1]] - mesh.points[table.ends[edge, 0]]
    along /= np.maximum(np.linalg.norm(along, axis=1, keepdims=True), 1e-300)
    centre = element_centres(mesh)
    middle = mesh.points[table.ends[edge]].mean(axis=1)
    apart = np.zeros(len(edge))
    for side in (0, 1):
        reach = centre[pair[:, side]] - middle
        apart += np.linalg.norm(reach - np.einsum("ei,ei->e", reach, along)[:, None] * along, axis=1)
    curvature = np.zeros(len(mesh.cells))
    for side in (0, 1):
        np.maximum.at(curvature, pair[:, side], turn / np.maximum(apart, 1e-300))
    return curvature
