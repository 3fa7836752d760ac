"""Plies along the span and on the strips: ends, counts, steps, bands, order, numbering."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from blades import BOTH, FOAM, GLASS, blade, demonstration, foot, rule, skin_ply, stations, tube

from skinmesh.definition.blade import AcrossCap, CapRule, ChordFraction, FromAxis, Layout, NacaProfile, PlyRule, WebRule
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.errors import InputError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.plyspans import layer_spans, ply_ends


def ply(
    name: str = "p", thickness=0.001, count=1, covers=("skin",), span=None, step=(0.0, 0.0), angle=0.0, material=GLASS
):
    return PlyRule(
        name,
        material,
        thickness if isinstance(thickness, Spanwise) else constant(thickness),
        count if isinstance(count, Spanwise) else constant(count),
        np.radians(angle),
        covers,
        span,
        *step,
    )


def layers_at(mesh: ShellMesh, region: str, z: float) -> list[str]:
    """Plies of the element of a region at z, from the +e3 face."""
    i = [r.name for r in mesh.regions].index(region)
    own = np.flatnonzero(mesh.region == i)
    heights = mesh.points[mesh.cells[own, : mesh.n_sides], 2]
    element = own[np.argmax((heights.min(axis=1) < z) & (heights.max(axis=1) > z))]
    return [layer.ply for layer in mesh.stacks[mesh.stack[element]].layers]


def test_layers_follow_the_count():
    spans = layer_spans(ply(count=Spanwise([0, 10], [4, 0])), (0.0, 10.0))
    # layer j lies where 4 − 0.4 z ≥ j − ½
    assert [(s.layer, s.root, pytest.approx(s.tip)) for s in spans] == [
        (1, 0.0, 8.75),
        (2, 0.0, 6.25),
        (3, 0.0, 3.75),
        (4, 0.0, 1.25),
    ]


def test_steps_stagger_both_ends():
    spans = layer_spans(ply(count=3, span=(1.0, 9.0), step=(0.05, 0.5)), (0.0, 10.0))
    assert [(s.layer, pytest.approx(s.root), pytest.approx(s.tip)) for s in spans] == [
        (1, 1.0, 9.0),
        (2, 1.05, 8.5),
        (3, 1.1, 8.0),
    ]


def test_a_count_that_falls_and_rises_makes_two_stretches():
    spans = layer_spans(ply(count=Spanwise([0, 5, 10], [2, 0, 2])), (0.0, 10.0))
    assert [s.layer for s in spans] == [1, 1, 2, 2]
    assert spans[0].tip == pytest.approx(3.75)
    assert spans[1].root == pytest.approx(6.25)


def test_ply_ends_become_rows_on_wish():
    plies = [skin_ply(), ply("short", span=(0.33, 1.71))]
    loose = build_mesh(tube(plies=plies, mesh=rule(0.25)))
    cut = build_mesh(tube(plies=plies, mesh=rule(0.25, cut_at_ply_ends=True)))
    assert loose.report.ply_end_move > 0.01
    assert "'short'" in loose.report.ply_end_place
    assert cut.report.ply_end_move < 1e-12
    assert {0.33, 1.71} <= {z for _, z in cut.report.rows}
    covered = np.array([len(s.layers) for s in cut.stacks])[cut.stack] == 2
    area = element_areas(cut)[covered].sum()
    assert area == pytest.approx(2 * np.pi * 0.5 * (1.71 - 0.33), rel=1e-4)


def test_ply_ends_are_listed_once():
    ends = ply_ends(tube(plies=[ply("a", span=(0.5, 2.0)), ply("b", span=(0.5, 2.5))]))
    assert [z for z, _ in ends] == [0.5, 2.0, 2.5]


def test_the_largest_move_of_a_ply_end_is_its_distance_to_the_nearest_row():
    mesh = build_mesh(tube(plies=[skin_ply(), ply("short", span=(0.0, 1.6))], mesh=rule(0.5)))
    rows = np.unique(mesh.points[: mesh.n_corners, 2].round(12))
    assert mesh.report.ply_end_move == pytest.approx(np.abs(rows - 1.6).min(), abs=1e-12)


def test_a_layer_shorter_than_an_element_row_is_left_out_and_named():
    mesh = build_mesh(tube(plies=[skin_ply(), ply("patch", span=(1.25, 1.35))], mesh=rule(0.5)))
    assert any("'patch'" in text and "left out" in text for text in mesh.report.warnings)


def test_plies_lie_in_schedule_order_from_the_outer_face():
    mesh = build_mesh(demonstration())
    assert layers_at(mesh, "suction main cap", 10.0)[:3] == ["outer skin", "outer skin", "cap"]
    assert layers_at(mesh, "suction main cap", 10.0)[-1] == "inner skin"
    assert layers_at(mesh, "pressure trailing panel", 10.0) == ["outer skin", "outer skin", "core", "inner skin"]
    assert layers_at(mesh, "fore web", 10.0) == ["web face", "web face"]
    assert layers_at(mesh, "suction leading strip", 2.0) == ["outer skin", "outer skin", "build-up", "inner skin"]


def test_a_web_ply_has_the_webs_own_span():
    table = stations([0, 10], [1.5, 1.0], ["n", "n"], pitch_axis=0.35)
    web = WebRule("web", foot(FromAxis(constant(0.0))), (2.0, 7.0))
    plies = [skin_ply(), ply("face", covers=("webs",), count=3, step=(0.5, 1.0), material=FOAM)]
    mesh = build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=Layout(webs=(web,)), plies=plies, mesh=rule(0.1)))
    assert [len(layers_at(mesh, "web", z)) for z in (2.25, 2.75, 4.43, 5.5, 6.5)] == [1, 2, 3, 2, 1]


def test_thickness_along_the_span_lies_in_bands_that_keep_its_mass():
    thickness = Spanwise([0, 3], [0.02, 0.005])
    mesh = build_mesh(tube(plies=[ply(thickness=thickness)], mesh=rule(0.05)))
    used = np.unique(mesh.thickness)
    assert 8 < len(used) < 30
    z = mesh.points[mesh.cells[:, :4], 2].mean(axis=1)
    assert np.abs(mesh.thickness / thickness(z) - 1.0).max() < 0.08
    volume = float(np.sum(mesh.thickness * element_areas(mesh)))
    assert volume == pytest.approx(2 * np.pi * 0.5 * 3.0 * 0.0125, rel=1e-4)


def test_equal_stacks_are_one_and_numbered_root_to_tip():
    mesh = build_mesh(demonstration())
    assert len(set(mesh.stacks)) == len(mesh.stacks)
    assert sorted(np.unique(mesh.stack)) == list(range(len(mesh.stacks)))
    first_row = [mesh.row[mesh.cells[mesh.stack == i]].min() for i in range(len(mesh.stacks))]
    assert first_row == sorted(first_row)


def test_content_names_survive_a_change_elsewhere():
    before = build_mesh(tube(plies=[skin_ply(), ply("short", span=(0.0, 1.0))], mesh=rule(0.5)))
    after = build_mesh(tube(radius=0.6, plies=[skin_ply(), ply("short", span=(0.0, 2.0))], mesh=rule(0.4)))
    assert {s.content_name for s in before.stacks} == {s.content_name for s in after.stacks}


def test_flat_pattern_of_a_ply_is_its_exact_area():
    mesh = build_mesh(
        tube(plies=[skin_ply(), ply("short", span=(0.33, 1.71), count=2, step=(0.1, 0.0))], mesh=rule(0.5))
    )
    wanted = 2 * np.pi * 0.5 * ((1.71 - 0.33) + (1.71 - 0.43))
    assert mesh.report.ply_areas["short"] == pytest.approx(wanted, rel=1e-6)


def test_a_foot_on_a_caps_edge_shares_its_seam():
    table = stations([0, 10], [1.5, 1.0], ["n", "n"], pitch_axis=0.35)
    cap = CapRule("cap", FromAxis(constant(0.0)), constant(0.3), BOTH)
    web = WebRule("web", foot(AcrossCap("cap", constant(0.0))), (1.0, 9.0))
    mesh = build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=Layout((cap,), (web,)), plies=(), mesh=rule(0.2)))
    assert "suction cap fore edge + web foot" in mesh.report.seams
    assert len(mesh.report.seams) == 7


def test_angles_of_a_counter_clockwise_blade_are_turned_round():
    plies = [ply("a", angle=30.0), ply("b", angle=0.0)]
    here, there = (build_mesh(tube(plies=plies, hand=h, mesh=rule(0.5))) for h in ("clockwise", "counter-clockwise"))
    assert [layer.angle_degrees for layer in here.stacks[0].layers] == [30.0, 0.0]
    assert [layer.angle_degrees for layer in there.stacks[0].layers] == [-30.0, 0.0]


def test_size_along_the_span_sets_the_rows():
    size = Spanwise([0, 3], [0.3, 0.05])
    mesh = build_mesh(tube(mesh=replace(rule(0.1), size=size)))
    rows = np.unique(mesh.points[: mesh.n_corners, 2].round(12))
    steps = np.diff(rows)
    assert np.all(np.diff(steps) < 1e-12)
    assert np.all(steps <= size(rows[:-1]) * 1.001)


def test_least_elements_across_a_region():
    definition = demonstration(
        mesh=rule(0.5, across={"main cap": 9, "fore web": 7, "suction leading panel": 5}, close_gap=0.012)
    )
    mesh = build_mesh(definition)
    names = [region.name for region in mesh.regions]
    cells = mesh.row[mesh.cells].min(axis=1)
    for name, least in (
        ("suction main cap", 9),
        ("pressure main cap", 9),
        ("fore web", 7),
        ("suction leading panel", 5),
    ):
        own = mesh.region == names.index(name)
        assert np.bincount(np.unique(cells[own], return_inverse=True)[1]).min() >= least


def test_the_sections_turning_sets_elements_round_the_nose():
    table = stations([0, 5], [1.0, 1.0], ["n", "n"], pitch_axis=0.35)
    mesh = build_mesh(blade(table, {"n": NacaProfile("0012")}, mesh=rule(0.5)))
    k = mesh.n_sides
    on_sides = np.array([region.kind != "base" for region in mesh.regions])[mesh.region]
    ends = on_sides & (mesh.row[mesh.cells[:, :k]].min(axis=1) == 0.0)
    order = np.argsort(mesh.seam[mesh.cells[ends, :k]].min(axis=1))
    e3 = mesh.e3[ends][order]
    turn = np.degrees(np.arccos(np.clip(np.sum(e3[1:] * e3[:-1], axis=1), -1, 1)))
    assert turn.max() < 30.0


def wing(layout: Layout, **more):
    table = stations([0, 5, 10], [1.5, 1.2, 0.8], ["n", "n", "n"], pitch_axis=0.35)
    return blade(table, {"n": NacaProfile("0021")}, layout=layout, **more)


def test_overlapping_caps_are_an_error():
    caps = tuple(
        CapRule(name, ChordFraction(constant(c)), constant(0.3), BOTH) for name, c in (("a", 0.27), ("b", 0.3))
    )
    with pytest.raises(InputError, match="lies over the cap 'a'"):
        build_mesh(wing(Layout(caps=caps)))


def test_crossing_webs_are_an_error():
    webs = (
        WebRule("main", foot(ChordFraction(constant(0.4))), (1.0, 9.0)),
        WebRule("cross", {1: ChordFraction(constant(0.2)), -1: ChordFraction(constant(0.6))}, (2.0, 8.0)),
    )
    with pytest.raises(InputError, match="crosses 'main'"):
        build_mesh(wing(Layout(webs=webs)))


def test_webs_that_lean_on_one_foot_are_none():
    webs = (
        WebRule("fore", {1: ChordFraction(constant(0.3)), -1: ChordFraction(constant(0.4))}, (1.0, 9.0)),
        WebRule("aft", {1: ChordFraction(constant(0.5)), -1: ChordFraction(constant(0.4))}, (1.0, 9.0)),
    )
    mesh = build_mesh(wing(Layout(webs=webs), plies=()))
    np.testing.assert_array_equal(mesh.node_sets["fore pressure foot"], mesh.node_sets["aft pressure foot"])


def test_the_line_of_a_foot_never_moves_a_cap():
    """A web outboard whose line, run on inboard, would cut through the cap."""
    cap = CapRule("cap", ChordFraction(constant(0.3)), Spanwise([0, 10], [0.5, 0.15]), BOTH)
    table = stations([0, 5, 10], [1.5, 1.2, 0.8], ["n", "n", "n"], pitch_axis=0.35)
    web = WebRule("rear", foot(ChordFraction(constant(0.45))), (6.0, 9.0))
    areas = []
    for webs in ((), (web,)):
        mesh = build_mesh(
            blade(table, {"n": NacaProfile("0021")}, layout=Layout((cap,), webs), plies=(), mesh=rule(0.1))
        )
        own = mesh.region == [region.name for region in mesh.regions].index("suction cap")
        areas.append(element_areas(mesh)[own].sum())
    assert areas[1] == pytest.approx(areas[0], rel=1e-4)


def test_layers_that_steps_leave_no_room_for_are_named():
    plies = [skin_ply(), ply("cap", count=20, span=(0.5, 2.5), step=(0.1, 0.1))]
    mesh = build_mesh(tube(plies=plies, mesh=rule(0.3)))
    assert any("'cap': layers 11 to 20 would end before they begin" in text for text in mesh.report.warnings)


def test_bare_elements_are_named_first():
    definition = demonstration(mesh=rule(0.3, close_gap=0.012))
    mesh = build_mesh(replace(definition, plies=definition.plies[1:2]))
    assert mesh.report.warnings[0].startswith("bare elements: no ply covers")
    np.testing.assert_array_equal(mesh.element_sets["bare elements"], np.flatnonzero(mesh.stack < 0))
