"""The mesh's sections at the stations against the exact ones, made anew from station table and profiles."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from skinmesh.check.edges import edge_table, skin_elements
from skinmesh.check.finding import Finding, not_made, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition, CircleProfile, NacaProfile, Profile
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.surface.loft import Surface, loft_surface
from skinmesh.surface.profile import naca_loop, read_unit_shape
from skinmesh.wording import counted

Complex = NDArray[np.complex128]
Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

GRID = np.sin(np.linspace(-0.5 * np.pi, 0.5 * np.pi, 801)) ** 3
"""Where a search for the nearest point begins: finer at the nose, where t is 0."""
ROUNDS = 3
ALONG_EDGE = np.array([0.5 - np.sqrt(1.0 / 12.0), 0.5, 0.5 + np.sqrt(1.0 / 12.0)])
"""Where a smooth curve stands farthest off a parabola through both ends and the middle, and off a straight line."""
SHARP = 1e-9
"""Metres between the trailing edges of a sharp section."""
TILT = 0.009
"""A profile whose leading edge lies nearer to its origin than this share of the chord keeps its own axes, surely."""
HALF_SHARE = 1.02
"""Nodes in the middle of a laminate lie at half of its thickness; corners of walls and slopes add a little."""


@dataclass(frozen=True, eq=False)
class _Ring:
    """The skin's nodes and edges on one station.

    Attributes
    ----------
    name : str
    z : float, m
    chord : float, m
    nodes : (n,) int array
    edges : (e, 3) int array
        Corner, mid node, corner.
    closed_by : float, m
        How far the build moved the trailing edges to close them; 0 where they stand apart or were sharp.
    """

    name: str
    z: float
    chord: float
    nodes: Ints
    edges: Ints
    closed_by: float


def check_sections(
    mesh: ShellMesh, blade: BladeDefinition, *, has_mid_nodes: bool, limits: Mapping[str, Limit]
) -> list[Finding]:
    """Nodes and element edges at the stations, the given profiles, chord and twist, against the exact sections.

    Parameters
    ----------
    mesh : ShellMesh
    blade : BladeDefinition
        Read from the files that the mesh was built from.
    has_mid_nodes : bool
        Whether the mid nodes are those of the build.
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    surface = loft_surface(blade)
    rings = _rings(mesh, surface, has_mid_nodes=has_mid_nodes)
    if not rings:
        return [not_made("fidelity", "nodes against the profiles: no station has a ring of nodes")]
    found = [_profiles(surface, blade, limits["profile points"])]
    if mesh.surface != "outer":
        edges = not_made("fidelity", "edges against the exact sections: the nodes lie in the middle of the laminate")
        return [_depths(mesh, surface, rings), edges, *found]
    return [
        *_nodes_and_edges(mesh, surface, rings, has_mid_nodes, limits),
        *found,
        _chord_and_twist(mesh, blade, rings, limits["chord and twist"]),
    ]


def _rings(mesh: ShellMesh, surface: Surface, *, has_mid_nodes: bool) -> list[_Ring]:
    last = float(len(mesh.report.seams) - 1)
    on_skin = (mesh.sheet == 0) & (mesh.seam <= last)
    told = on_skin if has_mid_nodes else on_skin & (np.arange(len(mesh.points)) < mesh.n_corners)
    table = edge_table(mesh, skin_elements(mesh))
    edges = np.column_stack([table.ends[:, 0], table.uses_middle[table.first_use], table.ends[:, 1]])
    across = (mesh.row[edges[:, 0]] == mesh.row[edges[:, 2]]) & np.all(on_skin[edges], axis=1)
    edges = edges[across]
    rings = []
    for k, z in enumerate(mesh.report.stations.tolist()):
        members = mesh.node_sets.get(f"station {k:02d}", np.zeros(0, dtype=np.int64))
        nodes = members[told[members]]
        if not len(nodes):
            continue
        row = mesh.row[nodes[0]]
        gap = float(np.linalg.norm(np.diff(surface.points(z, np.array([-1.0, 1.0])), axis=0)))
        is_closed = not np.any(mesh.seam[nodes] == last)
        own = edges[mesh.row[edges[:, 0]] == row]
        chord = float(surface.chord(z))
        rings.append(_Ring(f"station {k:02d}", z, chord, nodes, own, 0.5 * gap if is_closed and gap > SHARP else 0.0))
    return rings


def _plane(points: Floats, *, is_mirrored: bool) -> Complex:
    """Places in the plane of a section, y + i x, as the surface has them before it is mirrored."""
    y = -points[..., 1] if is_mirrored else points[..., 1]
    return np.asarray(y + 1j * points[..., 0])


def _nearest(surface: Surface, z: float, points: Complex, *, rounds: int = ROUNDS) -> tuple[Floats, Floats]:
    """Distance of places from the section at z, and the surface parameter of the nearest point: Gauss and Newton's."""
    _, twist, _, prebend, sweep = surface.planform(z)[:5]
    points = (points - sweep - 1j * prebend) * np.exp(-1j * twist)
    start = surface.section(z, GRID)
    tree = cKDTree(np.column_stack([start.real, start.imag]))
    distance, nearest = tree.query(np.column_stack([points.real, points.imag]))
    t = best = GRID[nearest]
    for last in [*[False] * rounds, True]:
        place, rate, _ = surface.section_rates(z, t)
        off = np.abs(points - place)
        best, distance = np.where(off < distance, t, best), np.minimum(off, distance)
        if not last:
            step = np.real((points - place) * rate.conj()) / np.maximum(np.abs(rate) ** 2, 1e-300)
            t = np.clip(t + step, -1.0, 1.0)
    return distance, best


def _nodes_and_edges(
    mesh: ShellMesh, surface: Surface, rings: list[_Ring], has_mid_nodes: bool, limits: Mapping[str, Limit]
) -> list[Finding]:
    entries: list[dict[str, Any]] = []
    wrong: list[Ints] = []
    coarse: list[Ints] = []
    last = float(len(mesh.report.seams) - 1)
    node_limit, edge_limit = limits["nodes off the sections"], limits["chord error"]
    for ring in rings:
        # Where the build closed a thin trailing edge, it moved the nodes behind the last seam on either side.
        aft = (mesh.seam < 1.0) | (mesh.seam > last - 1.0)
        allowed = np.where(aft, ring.closed_by, 0.0)
        place = _plane(mesh.points, is_mirrored=surface.is_mirrored)
        node_off = np.maximum(_nearest(surface, ring.z, place[ring.nodes])[0] - allowed[ring.nodes], 0.0)
        is_mid = ring.nodes >= mesh.n_corners
        first, middle, second = (place[ring.edges[:, i], None] for i in range(3))
        straight = first + ALONG_EDGE * (second - first)
        curved = straight + 4.0 * ALONG_EDGE * (1.0 - ALONG_EDGE) * (middle - 0.5 * (first + second))
        edge_allowed = allowed[ring.edges].max(axis=1)[:, None]
        stand = [
            np.maximum(off.reshape(straight.shape) - edge_allowed, 0.0).max(axis=1)
            for off in np.split(_nearest(surface, ring.z, np.concatenate([straight, curved]).ravel(), rounds=1)[0], 2)
        ]
        own = stand[1] if has_mid_nodes else stand[0]
        wrong.append(ring.nodes[node_off > node_limit.warn * ring.chord])
        coarse.append(ring.edges[own > edge_limit.warn * ring.chord, 1])
        entries.append(
            {
                "station": ring.name,
                "z_m": ring.z,
                "chord_m": round(ring.chord, 6),
                "corner_nodes_m": float(f"{node_off[~is_mid].max(initial=0.0):.3g}"),
                "mid_nodes_m": float(f"{node_off[is_mid].max(initial=0.0):.3g}") if has_mid_nodes else None,
                "edges_m": float(f"{own.max(initial=0.0):.3g}"),
                "straight_edges_m": float(f"{stand[0].max(initial=0.0):.3g}"),
                "edges_share_of_chord": float(f"{own.max(initial=0.0) / ring.chord:.3g}"),
                "nodes_share_of_chord": float(f"{node_off.max(initial=0.0) / ring.chord:.3g}"),
                "trailing_edge_closed_by_m": float(f"{ring.closed_by:.3g}"),
            }
        )
    return [
        _node_line(mesh, entries, np.concatenate(wrong), node_limit, has_mid_nodes),
        _edge_line(mesh, entries, np.concatenate(coarse), edge_limit, has_mid_nodes),
    ]


def _node_line(mesh: ShellMesh, entries: list[dict[str, Any]], wrong: Ints, limit: Limit, has_mid: bool) -> Finding:
    worst = max(entries, key=lambda entry: float(entry["nodes_share_of_chord"]))
    corner = max(entry["corner_nodes_m"] for entry in entries)
    mid = f", mid nodes by {1e3 * max(entry['mid_nodes_m'] for entry in entries):.2g} mm" if has_mid else ""
    closed = max(entry["trailing_edge_closed_by_m"] for entry in entries)
    note = (
        f"; where a thin trailing edge is closed, both sides moved by {1e3 * closed:.2g} mm at most" if closed else ""
    )
    share = float(worst["nodes_share_of_chord"])
    return Finding(
        "fidelity",
        f"corner nodes off the exact sections of {len(entries)} stations by {1e3 * corner:.2g} mm at most{mid} "
        f"({share:.2g} of the chord){note}",
        limit.text,
        f"{limit.source}; sections made anew from station table and profiles",
        verdict_of(fails=share > limit.fail, warns=share > limit.warn),
        f"{worst['station']}, z = {worst['z_m']:.3f} m",
        _elements_with(mesh, wrong),
        {"stations": entries},
    )


def _edge_line(mesh: ShellMesh, entries: list[dict[str, Any]], coarse: Ints, limit: Limit, has_mid: bool) -> Finding:
    worst = max(entries, key=lambda entry: float(entry["edges_share_of_chord"]))
    share = float(worst["edges_share_of_chord"])
    straight = max(entry["straight_edges_m"] for entry in entries)
    kind = (
        f"second-order edges, whose corners alone would give {1e3 * straight:.2g} mm," if has_mid else "straight edges"
    )
    return Finding(
        "fidelity",
        f"{kind} stand off the exact sections by {share:.2g} of the chord ({1e3 * worst['edges_m']:.2g} mm) at most",
        limit.text,
        limit.source,
        verdict_of(fails=share > limit.fail, warns=share > limit.warn),
        f"{worst['station']}, z = {worst['z_m']:.3f} m",
        _elements_with(mesh, coarse),
    )


def _elements_with(mesh: ShellMesh, nodes: Ints) -> Ints:
    chosen = np.zeros(len(mesh.points), dtype=bool)
    chosen[nodes] = True
    return np.flatnonzero(chosen[mesh.cells].any(axis=1)) if len(nodes) else np.zeros(0, dtype=np.int64)


def _depths(mesh: ShellMesh, surface: Surface, rings: list[_Ring]) -> Finding:
    """Nodes in the middle of the laminate: inside of the mould face, by half of the thickest laminate there at most."""
    half = np.zeros(len(mesh.points))
    skin = skin_elements(mesh)
    np.maximum.at(half, mesh.cells[skin], 0.5 * mesh.thickness[skin][:, None])
    entries: list[dict[str, Any]] = []
    beyond: list[Ints] = []
    for ring in rings:
        t = _nearest(surface, ring.z, _plane(mesh.points[ring.nodes], is_mirrored=surface.is_mirrored))[1]
        z = np.clip(mesh.points[ring.nodes, 2], *surface.z_ends)
        by_t, by_z = surface.tangents(z, t)
        normal = np.cross(by_t, by_z) * (-1.0 if surface.is_mirrored else 1.0)
        normal /= np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-300)
        depth = -np.einsum("ni,ni->n", mesh.points[ring.nodes] - surface.points(z, t), normal)
        excess = np.maximum(depth - HALF_SHARE * half[ring.nodes], -depth) - 1e-3 * half[ring.nodes] - ring.closed_by
        is_beyond = excess > 1e-6 * ring.chord
        beyond.append(ring.nodes[is_beyond])
        entries.append(
            {
                "station": ring.name,
                "z_m": ring.z,
                "deepest_m": round(float(depth.max()), 7),
                "beyond_m": round(float(excess[is_beyond].max(initial=0.0)), 7),
            }
        )
    nodes = np.concatenate(beyond)
    key = "beyond_m" if len(nodes) else "deepest_m"
    worst = max(entries, key=lambda entry: float(entry[key]))
    return Finding(
        "fidelity",
        f"nodes lie {1e3 * max(entry['deepest_m'] for entry in entries):.2g} mm inside the exact sections at most; "
        f"{counted(len(nodes), 'lies', 'lie')} outside of them or deeper than half of the laminate there, "
        f"by {1e3 * max(entry['beyond_m'] for entry in entries):.2g} mm at most",
        "warn 1",
        "nodes in the middle of the laminate; sections made anew from station table and profiles",
        verdict_of(fails=False, warns=len(nodes)),
        f"{worst['station']}, z = {worst['z_m']:.3f} m",
        _elements_with(mesh, nodes),
        {"stations": entries},
    )


def _profiles(surface: Surface, blade: BladeDefinition, limit: Limit) -> Finding:
    """Points of the given profiles, put into place by the station table alone, against the sections of the loft."""
    table = blade.stations
    entries: list[dict[str, Any]] = []
    for k, name in enumerate(table.profile):
        # A profile that was scaled or blended has no points of its own.
        if name is None or not np.isnan(table.thickness_ratio[k]):
            continue
        turn = table.chord[k] * np.exp(1j * table.twist[k])
        place = (
            table.sweep[k] + 1j * table.prebend[k] + (_given_points(blade.profiles[name]) - table.pitch_axis[k]) * turn
        )
        off = _nearest(surface, float(table.z[k]), place)[0]
        # Points on the face of a blunt trailing edge lie between the ends of the two sides.
        ends = _plane(surface.points(float(table.z[k]), np.array([-1.0, 1.0])), is_mirrored=surface.is_mirrored)
        worst_off = float(np.minimum(off, _off_segment(place, ends[0], ends[1])).max())
        entries.append({"station": f"station {k:02d}", "z_m": float(table.z[k]), "profile": name, "off_m": worst_off})
    if not entries:
        return not_made("fidelity", "points of the profiles: every station is scaled or blended")
    shares = [entry["off_m"] / table.chord[int(entry["station"][8:])] for entry in entries]
    worst = int(np.argmax(shares))
    entry, share = entries[worst], float(shares[worst])
    return Finding(
        "fidelity",
        f"points of the given profiles off the sections of {len(entries)} stations by {share:.2g} of the chord at most",
        limit.text,
        limit.source,
        verdict_of(fails=share > limit.fail, warns=share > limit.warn),
        f"{entry['station']}, z = {entry['z_m']:.3f} m, profile '{entry['profile']}'",
        details={"profiles": entries},
    )


def _given_points(profile: Profile) -> Complex:
    """Points of a profile as given, as fractions of the chord in its own axes."""
    if isinstance(profile, CircleProfile):
        return np.asarray(0.5 + 0.5 * np.exp(1j * np.linspace(0.0, 2.0 * np.pi, 101)))
    if isinstance(profile, NacaProfile):
        loop = naca_loop(profile.code, profile.trailing_gap)
    else:
        loop = profile.points[:, 0] + 1j * profile.points[:, 1]
    trailing = 0.5 * (loop[0] + loop[-1])
    nose = loop[np.abs(loop - trailing).argmax()]
    if max(abs(nose), abs(trailing.imag)) < TILT * trailing.real:
        return np.asarray(loop / trailing.real)
    # A profile in other axes is turned and moved so that its chord is the unit; how, only the loft knows.
    shape = read_unit_shape(profile)
    return shape.origin + shape.scale * np.concatenate([shape.suction.points, shape.pressure.points])


def _off_segment(points: Complex, start: complex, stop: complex) -> Floats:
    """Distance of places from a straight line between two."""
    along = stop - start
    share = np.real((points - start) * np.conj(along)) / max(abs(along) ** 2, 1e-300)
    return np.asarray(np.abs(points - start - np.clip(share, 0.0, 1.0) * along))


def _chord_and_twist(mesh: ShellMesh, blade: BladeDefinition, rings: list[_Ring], limit: Limit) -> Finding:
    """Line from the leading edge's node to the middle of the trailing edge's, against the station table."""
    nose = float(mesh.report.seams.index("leading edge"))
    last = float(len(mesh.report.seams) - 1)
    table = blade.stations
    entries: list[dict[str, Any]] = []
    for ring in rings:
        k = int(ring.name[8:])
        seam = mesh.seam[ring.nodes]
        place = _plane(mesh.points[ring.nodes], is_mirrored=blade.hand == COUNTER_CLOCKWISE)
        line = place[(seam == 0.0) | (seam == last)].mean() - place[seam == nose].mean()
        off = line / (table.chord[k] * np.exp(1j * table.twist[k])) - 1.0
        entries.append(
            {
                "station": ring.name,
                "z_m": ring.z,
                "chord_m": float(np.abs(line)),
                "table_chord_m": float(table.chord[k]),
                "twist_deg": float(np.degrees(np.angle(line))),
                "table_twist_deg": float(np.degrees(table.twist[k])),
                "share": float(np.abs(off)),
            }
        )
    worst = max(entries, key=lambda entry: float(entry["share"]))
    share = float(worst["share"])
    return Finding(
        "fidelity",
        f"line from leading to trailing edge off from chord and twist of the table by {share:.2g} of the chord at most",
        limit.text,
        f"{limit.source}; the leading edge is the point farthest from the trailing one",
        verdict_of(fails=share > limit.fail, warns=share > limit.warn),
        f"{worst['station']}, z = {worst['z_m']:.3f} m: {worst['chord_m']:.4f} m and {worst['twist_deg']:.2f}°, in the "
        f"table {worst['table_chord_m']:.4f} m and {worst['table_twist_deg']:.2f}°",
        details={"stations": entries},
    )
