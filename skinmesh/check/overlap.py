"""Laminates of the two sides that run into each other near the trailing edge, station by station."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import Finding, not_made, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.thick import laid_inwards
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

AFT = 0.5
"""The share of the chord from the leading edge where the look begins."""
SAMPLES = (np.arange(6) + 0.5) / 6
REMEDY = "remedies: thinner plies or a later end of the core there, a thicker trailing edge, a larger close_gap"


@dataclass(frozen=True, eq=False)
class _Ring:
    """Element edges of one side on one section, in the plane of the section."""

    start: Floats
    stop: Floats
    normal: Floats
    depth: Floats
    element: Ints


def check_overlap(mesh: ShellMesh, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Thickness of both laminates against the gap between their faces, along the aft half of every station.

    Parameters
    ----------
    mesh : ShellMesh
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    if not mesh.stacks:
        return [not_made("trailing-edge overlap", "the blade file has no plies")]
    if "leading edge" not in mesh.report.seams or not len(mesh.report.stations):
        return [not_made("trailing-edge overlap", "the summary names no leading edge or no stations")]
    mesh = laid_inwards(mesh)
    limit = limits["overlap"]
    ends = mesh.row[mesh.cells[:, : mesh.n_sides]]
    stations, elements = [], []
    for k in range(len(mesh.report.stations)):
        entry, beyond = _station(mesh, ends, k, limit)
        if entry:
            stations.append(entry)
            elements.append(beyond)
    if not stations:
        return [not_made("trailing-edge overlap", "no station has both sides")]
    worst = max(stations, key=lambda entry: float(entry["share_of_chord"]))
    shares = np.array([entry["share_of_chord"] for entry in stations])
    where = f"{worst['station']}, z = {worst['z_m']:.3f} m: the last {1e3 * worst['length_m']:.0f} mm of the chord"
    if worst["length_m"] > 0:
        where += f"; thickness / gap: {worst['along_chord']}"
    if np.any(shares > limit.warn):
        where += f"; {REMEDY}"
    return [
        Finding(
            "trailing-edge overlap",
            f"laminates of both sides overlap along the last {100 * shares.max():.1f} % of the chord at most; "
            f"{np.count_nonzero(shares > limit.warn)} of {len(stations)} stations beyond the limit",
            limit.text,
            limit.source,
            verdict_of(fails=shares.max() > limit.fail, warns=shares.max() > limit.warn),
            where if worst["length_m"] > 0 else "",
            np.unique(np.concatenate(elements)),
            {"stations": stations},
        )
    ]


def _station(mesh: ShellMesh, ends: Floats, k: int, limit: Limit) -> tuple[dict[str, Any], Ints]:
    """What one station shows, and its overlapping elements where the limit is passed."""
    z = float(mesh.report.stations[k])
    at = _rows_at(mesh, ends, z)
    nothing: dict[str, Any] = {}
    if at is None:
        return nothing, np.zeros(0, dtype=np.int64)
    row, elements = at
    upper, lower = (_ring(mesh, elements[mesh.side[elements] == side], row) for side in (1, -1))
    nose = float(mesh.report.seams.index("leading edge"))
    corners = slice(mesh.n_corners)
    on_row = np.flatnonzero((mesh.sheet[corners] == 0) & (mesh.row[corners] == row))
    front = mesh.points[on_row[mesh.seam[on_row] == nose], :2]
    back = mesh.points[on_row[(mesh.seam[on_row] <= 0) | (mesh.seam[on_row] == len(mesh.report.seams) - 1)], :2]
    if not (len(front) and len(back) and len(upper.start) and len(lower.start)):
        return nothing, np.zeros(0, dtype=np.int64)
    chord = back.mean(axis=0) - front[0]
    length = float(np.linalg.norm(chord))
    places, ratios, touched = [], [], []
    for own, other in ((upper, lower), (lower, upper)):
        place, ratio = _crowding(own, other, front[0], chord / length**2)
        places.append(place.ravel())
        ratios.append(ratio.ravel())
        touched.append(own.element[((ratio > 1.0) & (place > AFT)).any(axis=1)])
    place, ratio = np.concatenate(places), np.concatenate(ratios)
    overlapping = (ratio > 1.0) & (place > AFT)
    share = float(1.0 - place[overlapping].min()) if overlapping.any() else 0.0
    entry = {
        "station": f"station {k:02d}",
        "z_m": z,
        "share_of_chord": round(max(share, 0.0), 4),
        "length_m": round(max(share, 0.0) * length, 5),
        "along_chord": _profile(place, ratio),
    }
    beyond = np.concatenate(touched) if share > limit.warn else np.zeros(0, dtype=np.int64)
    return entry, beyond


def _rows_at(mesh: ShellMesh, ends: Floats, z: float) -> tuple[float, Ints] | None:
    """Row coordinate of a section, and the elements with an edge on it: those behind, at the tip those before."""
    rows = mesh.report.rows
    wanted = [k for k, (_, place) in enumerate(rows) if abs(place - z) <= 1e-6 * max(abs(rows[-1][1]), 1e-30)]
    if not wanted:
        return None
    row = float(wanted[0])
    own = np.flatnonzero((mesh.side != 0) & ((ends == row).sum(axis=1) == 2))
    far = ends[own].max(axis=1) if row < mesh.row.max() else -ends[own].min(axis=1)
    return row, own[far > (row if row < mesh.row.max() else -row)]


def _ring(mesh: ShellMesh, elements: Ints, row: float) -> _Ring:
    corners = mesh.cells[elements, : mesh.n_sides]
    on_row = mesh.row[corners] == row
    ends = corners[on_row].reshape(-1, 2)
    start, stop = mesh.points[ends[:, 0], :2], mesh.points[ends[:, 1], :2]
    along = stop - start
    across = np.column_stack([along[:, 1], -along[:, 0]])
    across /= np.maximum(np.linalg.norm(across, axis=1, keepdims=True), 1e-300)
    sense = np.where(np.einsum("ei,ei->e", across, mesh.e3[elements, :2]) < 0, -1.0, 1.0)
    # From the nodes inwards: all of the laminate where they lie on its outer face.
    depth = (0.5 + mesh.offset[elements]) * mesh.thickness[elements]
    return _Ring(start, stop, across * sense[:, None], depth, elements)


def _crowding(own: _Ring, other: _Ring, front: Floats, chord: Floats) -> tuple[Floats, Floats]:
    """(e, samples) place along the chord, and both thicknesses over the gap along the inward normal."""
    points = own.start[:, None] + SAMPLES[:, None] * (own.stop - own.start)[:, None]
    inward = np.broadcast_to(-own.normal[:, None], points.shape)
    origin, ray = points.reshape(-1, 2), inward.reshape(-1, 2)
    along = other.stop - other.start
    to_start = other.start[None] - origin[:, None]
    # origin + distance · ray = start + share · along
    bottom = _cross(ray[:, None], along[None])
    is_parallel = np.abs(bottom) < 1e-14
    safe = np.where(is_parallel, 1.0, bottom)
    distance = _cross(to_start, along[None]) / safe
    share = _cross(to_start, ray[:, None]) / safe
    hit = ~is_parallel & (share >= -1e-9) & (share <= 1.0 + 1e-9) & (distance > 0.0)
    distance = np.where(hit, distance, np.inf)
    nearest = distance.argmin(axis=1)
    gap = distance[np.arange(len(origin)), nearest]
    slant = np.abs(np.einsum("pi,pi->p", ray, other.normal[nearest]))
    needed = np.repeat(own.depth, len(SAMPLES)) + other.depth[nearest] / np.maximum(slant, 0.1)
    ratio = np.where(np.isfinite(gap), needed / np.maximum(gap, 1e-12), 0.0)
    place = (points - front) @ chord
    return place, ratio.reshape(place.shape)


def _cross(a: Floats, b: Floats) -> Floats:
    product: Floats = a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0]
    return product


def _profile(place: Floats, ratio: Floats) -> str:
    """Largest thickness over gap in the last tenths of the chord."""
    edges = (0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 1.0)
    parts = []
    for low, high in pairwise(edges):
        own = (place > low) & (place <= high)
        if own.any():
            parts.append(f"{min(float(ratio[own].max()), 99.0):.2f} at {low:g}–{high:g}")
    return ", ".join(parts)
