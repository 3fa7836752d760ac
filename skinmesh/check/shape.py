"""Shape of the elements: quality, density, and how near their edges stay to the surface."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.edges import edge_table, skin_elements
from skinmesh.check.finding import Finding, listed, not_made, place_of, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.spantable import SpanTable
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.quality import (
    aspect_ratio,
    corner_points,
    largest_angle,
    scaled_jacobian,
    smallest_angle,
    warpage,
)
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

METRIC = "metric of the Verdict library"


def check_quality(mesh: ShellMesh, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Aspect ratio, warp, scaled Jacobian and corner angles of every element.

    Parameters
    ----------
    mesh : ShellMesh
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    corners = corner_points(mesh)
    base = np.array([region.kind == "base" for region in mesh.regions])[mesh.region]
    strip = np.array([region.kind == "strip" for region in mesh.regions])[mesh.region]
    of_triangles = "" if mesh.n_sides == 4 else " of triangles"
    values = [("aspect", aspect_ratio(corners), "{} {:.2f} at most")]
    if mesh.n_sides == 4:
        # Verdict's warpage is the cube of the cosine between opposite corners' normals.
        warp = np.degrees(np.arccos(np.clip(np.cbrt(warpage(corners)), -1.0, 1.0)))
        values.append(("warp", warp, "{} {:.1f}° at most"))
    values += [
        (f"scaled Jacobian{of_triangles}", scaled_jacobian(corners), "{} {:.3f} at least"),
        (f"smallest angle{of_triangles}", np.degrees(smallest_angle(corners)), "{} {:.1f}° at least"),
        ("largest angle", np.degrees(largest_angle(corners)), "{} {:.1f}° at most"),
    ]
    lines = []
    for name, value, text in values:
        # The base has elements of its own kind: long strips, and where it closes, the sharp ends of a wedge.
        parts = [(f"{name.removesuffix(of_triangles)} in the trailing base", base)]
        parts += [("aspect in the edge strips", strip), (name, ~base & ~strip)] if name == "aspect" else [(name, ~base)]
        lines += [
            _line(mesh, part, value, np.flatnonzero(own), limits[part], text) for part, own in parts[::-1] if own.any()
        ]
    return lines


def _line(mesh: ShellMesh, name: str, value: Floats, own: Ints, limit: Limit, text: str) -> Finding:
    sign = -1.0 if limit.is_from_below else 1.0
    badness = sign * value[own]
    beyond = np.flatnonzero(~(badness <= sign * limit.warn))
    beyond = beyond[np.argsort(-badness[beyond], kind="stable")]
    n_fail = int(np.count_nonzero(~(badness <= sign * limit.fail)))
    worst = int(own[badness.argmax()])
    return Finding(
        "element quality",
        f"{text.format(name, float(value[worst]))}; "
        f"{counted(len(beyond) - n_fail, 'element')} to warn of, {n_fail} fail",
        limit.text,
        f"{METRIC}; limits {limit.source}",
        verdict_of(fails=n_fail, warns=len(beyond)),
        place_of(mesh, worst),
        own[beyond],
        {"metric": name, "worst": float(value[worst]) if np.isfinite(value[worst]) else None, "fails": n_fail},
    )


def check_density(mesh: ShellMesh, table: SpanTable, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Elements across caps and up webs, and edges shorter than the laminate is thick.

    Parameters
    ----------
    mesh : ShellMesh
    table : SpanTable
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    per_row = np.zeros((len(mesh.regions), table.n_rows), dtype=np.int64)
    np.add.at(per_row, (table.region, table.at_row), table.elements)
    pieces = 1 if mesh.n_sides == 4 else 2
    lines = []
    for kind, name in (("cap", "across a cap"), ("web", "up a web")):
        least = {
            region.name: int(per_row[i][per_row[i] > 0].min()) // pieces
            for i, region in enumerate(mesh.regions)
            if region.kind == kind and per_row[i].any()
        }
        if least:
            limit = limits[name]
            worst = min(least, key=lambda region: least[region])
            lines.append(
                Finding(
                    "mesh density",
                    f"{least[worst]} elements {name} at least",
                    limit.text,
                    limit.source,
                    verdict_of(fails=least[worst] < limit.fail, warns=least[worst] < limit.warn),
                    listed(region for region, count in least.items() if count < limit.warn) or worst,
                    details={"elements": least},
                )
            )
    corners = corner_points(mesh)
    shortest = np.linalg.norm(np.roll(corners, -1, axis=1) - corners, axis=2).min(axis=1)
    ratio = mesh.thickness / np.maximum(shortest, np.finfo(float).tiny)
    limit = limits["thickness over edge"]
    beyond = np.flatnonzero(ratio > limit.warn)
    beyond = beyond[np.argsort(-ratio[beyond], kind="stable")]
    lines.append(
        Finding(
            "mesh density",
            f"thickness over the shortest edge {ratio.max():.2f} at most; "
            f"{counted(len(beyond), 'element')} thicker than that",
            limit.text,
            limit.source,
            verdict_of(fails=ratio.max() > limit.fail, warns=len(beyond)),
            place_of(mesh, int(ratio.argmax())),
            beyond,
        )
    )
    return lines


def check_fidelity(mesh: ShellMesh, *, has_mid_nodes: bool, limits: Mapping[str, Limit]) -> list[Finding]:
    """How far straight element edges stand off the surface, areas against the flat pattern, and the station rings.

    Parameters
    ----------
    mesh : ShellMesh
    has_mid_nodes : bool
        Whether the mid nodes are those of the build.
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    return [
        _chord_error(mesh, limits["chord error"])
        if has_mid_nodes
        else not_made("fidelity", "edges against the surface: a first-order mesh has no mid nodes to tell"),
        _flat_areas(mesh, limits["area against flat pattern"]),
        _station_rings(mesh),
    ]


def _chord_error(mesh: ShellMesh, limit: Limit) -> Finding:
    """Distance of the mid nodes from the straight edges, as a share of the section's chord there."""
    table = edge_table(mesh, skin_elements(mesh))
    first = table.first_use
    ends = mesh.points[table.ends]
    along = ends[:, 1] - ends[:, 0]
    away = mesh.points[table.uses_middle[first]] - ends.mean(axis=1)
    share = np.einsum("ei,ei->e", away, along) / np.maximum(np.einsum("ei,ei->e", along, along), 1e-300)
    distance = np.linalg.norm(away - share[:, None] * along, axis=1)
    error = distance / _chord_at(mesh, ends[:, :, 2].mean(axis=1))
    is_beyond = error > limit.warn
    worst = int(error.argmax())
    elements = np.unique(table.uses_element[is_beyond[table.uses_edge]])
    return Finding(
        "fidelity",
        f"straight edges stand off the mid nodes by {error[worst]:.5f} of the chord "
        f"({1e3 * distance[worst]:.2f} mm) at most; "
        f"{counted(int(np.count_nonzero(is_beyond)), 'edge')} beyond the limit",
        limit.text,
        limit.source,
        verdict_of(fails=error[worst] > limit.fail, warns=is_beyond.any()),
        place_of(mesh, int(table.uses_element[first[worst]])),
        elements,
    )


def _chord_at(mesh: ShellMesh, z: Floats) -> Floats:
    """Greatest extent of the skin in its own plane, from the rings of nodes at whole rows."""
    on_ring = (mesh.sheet == 0) & (mesh.row == np.round(mesh.row))
    rows, ring = np.unique(mesh.row[on_ring], return_inverse=True)
    ring = ring.ravel()
    levels = np.bincount(ring, weights=mesh.points[on_ring, 2]) / np.bincount(ring)
    own = mesh.points[on_ring, :2]
    extent = np.zeros(len(rows))
    for angle in np.arange(0.0, np.pi, np.pi / 12):
        reach = own @ np.array([np.cos(angle), np.sin(angle)])
        high, low = np.full(len(rows), -np.inf), np.full(len(rows), np.inf)
        np.maximum.at(high, ring, reach)
        np.minimum.at(low, ring, reach)
        extent = np.maximum(extent, high - low)
    chord: Floats = np.interp(z, levels, extent)
    return np.maximum(chord, 1e-12)


def _flat_areas(mesh: ShellMesh, limit: Limit) -> Finding:
    flat = mesh.report.developed_areas
    if not flat:
        return not_made("fidelity", "areas against the flat pattern: the summary has none")
    if mesh.surface != "outer":
        return not_made("fidelity", "areas against the flat pattern: that is the pattern of the outer face")
    areas = np.bincount(mesh.region, weights=element_areas(mesh), minlength=len(mesh.regions))
    own = {region.name: float(area) for region, area in zip(mesh.regions, areas, strict=True) if region.name in flat}
    # A small region may differ by much of its own and little of the blade's: the skin's area is the measure.
    scale = max(sum(flat.values()), 1e-30)
    off = {name: abs(area - flat[name]) / max(flat[name], 0.01 * scale) for name, area in own.items()}
    worst = max(off, key=lambda name: off[name])
    return Finding(
        "fidelity",
        f"area of a region off from its flat pattern by {100 * off[worst]:.2f} % at most",
        limit.text,
        f"{limit.source}; the pattern has true arc lengths and leaves out the slope of the surface along the span",
        verdict_of(fails=off[worst] > limit.fail, warns=off[worst] > limit.warn),
        f"{worst}: {own[worst]:.4g} m² in the mesh, {flat[worst]:.4g} m² in the pattern",
        details={"regions": [{"region": name, "mesh_m2": own[name], "pattern_m2": flat[name]} for name in own]},
    )


def _station_rings(mesh: ShellMesh) -> Finding:
    """Nodes of each station's set against the station's z."""
    z = mesh.report.stations
    missing = [f"station {k:02d}" for k in range(len(z)) if not len(mesh.node_sets.get(f"station {k:02d}", ()))]
    off = np.array(
        [
            np.abs(mesh.points[mesh.node_sets[f"station {k:02d}"], 2] - value).max()
            for k, value in enumerate(z)
            if f"station {k:02d}" not in missing
        ]
        or [0.0]
    )
    allowed = 1e-6 * max(float(np.ptp(mesh.points[:, 2])), 1e-30)
    if mesh.surface != "outer":
        # Nodes that were moved along normals have left the plane where the blade tapers.
        allowed += 0.5 * float(mesh.thickness.max(initial=0.0))
    return Finding(
        "fidelity",
        f"{len(z)} station rings off from their z by {off.max():.2g} m at most, {len(missing)} without nodes",
        f"fail {allowed:.2g} m",
        "sections stay in planes of constant z",
        verdict_of(fails=missing or off.max() > allowed),
        listed(missing) if missing else f"station {int(off.argmax()):02d}",
    )
