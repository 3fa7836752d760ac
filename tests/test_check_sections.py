"""The mesh's sections against the exact ones: sound meshes, closed forms, and faults of a known size."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import blades
import numpy as np
import pytest

import skinmesh
from skinmesh.check.finding import FAIL, NOT_MADE, PASS, WARN, Finding
from skinmesh.check.limits import DEFAULT_LIMITS
from skinmesh.check.run import check_directory
from skinmesh.check.sections import check_sections
from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.shellmesh import ShellMesh

NODES, EDGES, PROFILES, TABLE = range(4)


@cache
def demonstration(hand: str = "clockwise", **changes: Any) -> BladeDefinition:
    blade = blades.demonstration(mesh=blades.rule(0.6, close_gap=0.012, **changes))
    return replace(blade, hand=hand)


@cache
def sound() -> ShellMesh:
    return build_mesh(demonstration())


def lines(mesh: ShellMesh, blade: BladeDefinition) -> list[Finding]:
    return check_sections(mesh, blade, has_mid_nodes=mesh.order == 2, limits=DEFAULT_LIMITS)


def stations(finding: Finding) -> list[Mapping[str, Any]]:
    return list(finding.details["stations"])


@pytest.mark.parametrize("hand", ["clockwise", COUNTER_CLOCKWISE])
@pytest.mark.parametrize("changes", [{"order": 1}, {"shape": "triangle"}, {"close_gap": 0.0}])
def test_nodes_lie_on_the_exact_sections(hand: str, changes: dict[str, Any]) -> None:
    blade = replace(demonstration(hand), mesh=replace(demonstration().mesh, **changes))
    found = lines(build_mesh(blade), blade)
    assert [found[k].verdict for k in (NODES, PROFILES, TABLE)] == [PASS] * 3
    entries = stations(found[NODES])
    assert len(entries) == len(blade.stations.z)
    for entry in entries:
        assert entry["corner_nodes_m"] < 1e-12
        assert entry["mid_nodes_m"] is None or entry["mid_nodes_m"] < 1e-12
    # Where the edge is closed, both sides went by half of the gap that profile and chord give: 0.001 of 0.65 m.
    assert entries[8]["trailing_edge_closed_by_m"] == pytest.approx(
        0.0 if "close_gap" in changes else 0.5e-3 * 0.65, rel=0.01
    )


def test_nodes_in_the_middle_lie_inside_by_half_of_the_laminate() -> None:
    blade = replace(demonstration(), mesh=replace(demonstration().mesh, surface="mid"))
    mesh = build_mesh(blade)
    found = lines(mesh, blade)
    assert [finding.verdict for finding in found] == [PASS, NOT_MADE, PASS]
    at_root = np.isin(mesh.cells, mesh.node_sets["root"]).any(axis=1)
    half = 0.5 * mesh.thickness[at_root].max()
    assert half == pytest.approx(stations(found[NODES])[0]["deepest_m"], rel=1e-3)
    station = mesh.node_sets["station 05"]
    points = mesh.points.copy()
    points[station] += 0.004 * np.sign(points[station, :1]) * np.eye(3)[0]
    outside = lines(replace(mesh, points=points), blade)[NODES]
    assert outside.verdict == WARN
    assert outside.where == "station 05, z = 9.000 m"


@pytest.mark.parametrize("order", [1, 2])
def test_edges_of_a_tube(order: int) -> None:
    """A chord over the angle 2θ stands off its circle by R (1 − cos θ); a parabola by less than R θ⁴ / 8."""
    blade = blades.tube(radius=0.5, mesh=blades.rule(0.2, order=order))
    mesh = build_mesh(blade)
    finding = lines(mesh, blade)[EDGES]
    ring = mesh.node_sets["root"]
    place = mesh.points[ring[ring < mesh.n_corners]]
    turn = np.sort(np.arctan2(place[:, 0], place[:, 1]))
    gap = np.diff(np.append(turn, turn[0] + 2.0 * np.pi)).max() / 2.0
    expected = 0.5 * (1.0 - np.cos(gap))
    entries = stations(lines(mesh, blade)[NODES])
    assert entries[0]["straight_edges_m"] == pytest.approx(expected, rel=0.01)
    assert finding.verdict == PASS
    if order == 2:
        assert 0.0 < entries[0]["edges_m"] < 0.5 * gap**4 / 8.0


def test_a_node_off_the_surface_is_named() -> None:
    mesh = sound()
    ring = mesh.node_sets["station 04"]
    ring = ring[(mesh.sheet[ring] == 0) & (ring < mesh.n_corners)]
    node = ring[mesh.points[ring, 0].argmax()]
    points = mesh.points.copy()
    points[node, 0] += 0.0005
    finding = lines(replace(mesh, points=points), demonstration())[NODES]
    assert finding.verdict == WARN
    assert finding.where == "station 04, z = 6.000 m"
    assert stations(finding)[4]["corner_nodes_m"] == pytest.approx(0.0005, rel=0.01)
    assert set(finding.elements) == set(np.flatnonzero(np.any(mesh.cells == node, axis=1)))


def test_mid_nodes_on_straight_edges_are_named() -> None:
    mesh = sound()
    points = mesh.points.copy()
    corners = mesh.points[mesh.cells[:, :4]]
    points[mesh.cells[:, 4:]] = 0.5 * (corners + np.roll(corners, -1, axis=1))
    found = lines(replace(mesh, points=points), demonstration())
    assert [found[k].verdict for k in (NODES, EDGES)] == [FAIL, WARN]
    for entry in stations(found[NODES]):
        assert entry["corner_nodes_m"] < 1e-12
        assert entry["mid_nodes_m"] == pytest.approx(entry["edges_m"], rel=1e-6)


@pytest.mark.parametrize(
    ("column", "change", "expected"), [("chord", 1.02, 0.02 / 1.02), ("twist", np.radians(2.0), np.radians(2.0))]
)
def test_another_table_is_noticed(column: str, change: float, expected: float) -> None:
    """The mesh of one table against another with one station's chord or twist changed."""
    blade = demonstration()
    values = getattr(blade.stations, column).copy()
    values[6] = values[6] * change if column == "chord" else values[6] + change
    other = replace(blade, stations=replace(blade.stations, **{column: values}))
    found = lines(sound(), other)
    assert found[NODES].verdict == FAIL
    assert found[NODES].where == found[TABLE].where[: len(found[NODES].where)] == "station 06, z = 14.000 m"
    before = {entry["station"]: entry["share"] for entry in stations(lines(sound(), blade)[TABLE])}
    assert stations(found[TABLE])[6]["share"] == pytest.approx(expected, abs=1.2 * before["station 06"] + 1e-4)
    assert found[PROFILES].verdict == PASS


BLADE = """\
title: Pipe, invented
planform: pipe.csv
profiles: {ring: {circle: true}}
materials: {glass: {E: 20.0e9, nu: 0.3, density: 1900}}
plies: [{ply: wall, material: glass, thickness: 0.004, covers: [all]}]
mesh: {size: 0.2}
"""
TABLE_TEXT = "z_m,chord_m,twist_deg,pitch_axis,profile\n0,0.8,0,0.5,ring\n2,0.8,0,0.5,ring\n"


def test_the_inputs_are_found_or_asked_for(tmp_path: Path) -> None:
    folder = tmp_path / "inputs" / "blade"
    folder.mkdir(parents=True)
    (folder / "pipe.yaml").write_text(BLADE)
    (folder / "pipe.csv").write_text(TABLE_TEXT)
    mesh = skinmesh.build(skinmesh.load(folder / "pipe.yaml"))
    skinmesh.write(mesh, tmp_path / "deep" / "mesh", formats=["vtu"])

    def told(*folders: Path) -> list[Finding]:
        report = check_directory(tmp_path / "deep" / "mesh", input_folders=folders)
        return [f for f in report.findings if f.check == "fidelity" and "section" in f.measured]

    (without,) = told()
    assert without.verdict == NOT_MADE
    assert "--inputs" in without.measured
    assert [finding.verdict for finding in told(tmp_path / "inputs")] == [PASS] * 3
    (folder / "pipe.csv").write_text(TABLE_TEXT.replace("2,0.8", "2,0.9"))
    (changed,) = told(tmp_path / "inputs")
    assert changed.verdict == NOT_MADE
    assert "are not those of the build" in changed.measured
    (folder / "pipe.csv").unlink()
    (lost,) = told(tmp_path / "inputs")
    assert lost.verdict == NOT_MADE
    assert "pipe.yaml is found, but not every file that it names" in lost.measured
