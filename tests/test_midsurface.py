"""The reference surface in the middle of the laminate."""

from __future__ import annotations

from dataclasses import replace
from math import pi
from pathlib import Path

import numpy as np
import pytest
from blades import blade, demonstration, rule, skin_ply, stations, tube
from solver_runs import STEEL, needs_ccx, ring_of, run_solver, tube_strain_and_twist
from topology import consistent_orientation, outward_share, stray_free_edges

import skinmesh
from skinmesh.definition.blade import CircleProfile, PlyRule
from skinmesh.definition.spanwise import constant
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.inner_face import middle_height
from skinmesh.mesh.measure import element_areas, mass_properties, solid_mass
from skinmesh.mesh.quality import corner_points, scaled_jacobian


def on_mid(definition):
    return build_mesh(replace(definition, mesh=replace(definition.mesh, surface="mid")))


@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
def test_nodes_of_a_tube_lie_at_half_of_its_thickness(hand):
    mesh = on_mid(tube(plies=[skin_ply(0.05)], mesh=rule(0.2), hand=hand))
    np.testing.assert_allclose(np.hypot(*mesh.points[:, :2].T), 0.475, atol=1e-7)
    np.testing.assert_array_equal(mesh.offset, 0.0)
    assert mesh.surface == "mid"


def test_mass_of_a_thick_tube_is_that_of_its_ring():
    outer, mid = (f(tube(plies=[skin_ply(0.1)], mesh=rule(0.15))) for f in (build_mesh, on_mid))
    exact = 1920.0 * pi * (0.5**2 - 0.4**2) * 3.0
    assert mass_properties(mid).mass == pytest.approx(exact, rel=1e-5)
    assert mass_properties(outer).mass == pytest.approx(exact * 0.5 / 0.45, rel=1e-5)
    assert solid_mass(outer) == pytest.approx(exact, rel=1e-5)


def test_topology_numbers_and_stacks_are_those_of_the_outer_mesh():
    definition = demonstration()
    outer, mid = build_mesh(definition), on_mid(definition)
    np.testing.assert_array_equal(outer.cells, mid.cells)
    np.testing.assert_array_equal(outer.stack, mid.stack)
    assert stray_free_edges(mid) == 0
    assert consistent_orientation(mid)
    assert outward_share(mid) == 1.0
    # what the move changes is the place of the nodes alone, by no more than the laminate is thick
    move = np.linalg.norm(mid.points - outer.points, axis=1)
    assert 0.0 < move.max() < outer.thickness.max()


def test_the_outer_face_stays_flush_at_steps_in_thickness():
    """The outer face of every element, node height plus offset, lies where the mould is."""
    definition = demonstration()
    outer, mid = build_mesh(definition), on_mid(definition)
    kinds = np.array([region.kind for region in mid.regions])[mid.region]
    smooth = np.isin(kinds, ["cap", "panel"])
    face = mid.points[mid.cells].mean(axis=1) + (middle_height(mid) + 0.5 * mid.thickness)[:, None] * mid.e3
    gap = np.sum((face - outer.points[outer.cells].mean(axis=1)) * outer.e3, axis=1)
    assert np.abs(gap[smooth] / mid.thickness[smooth]).max() < 0.05
    assert np.sum(mid.offset[smooth] != 0.0) > 0  # there are steps


def test_webs_follow_their_feet():
    mid = on_mid(demonstration())
    for k, name in ((1, "fore web"), (2, "aft web")):
        own = np.flatnonzero(mid.sheet == k)
        feet = {}
        for side in ("pressure", "suction"):
            nodes = mid.node_sets[f"{name} {side} foot"]
            order = np.argsort(mid.row[nodes])
            feet[side] = np.column_stack(
                [np.interp(mid.row[own], mid.row[nodes][order], mid.points[nodes][order, axis]) for axis in range(3)]
            )
        height = mid.seam[own][:, None]
        np.testing.assert_allclose(
            mid.points[own], feet["pressure"] * (1 - height) + feet["suction"] * height, atol=1e-9
        )


def test_limited_moves_are_named():
    """A laminate thicker than a sharp trailing edge has room for: the walls stay apart, and the report says where."""
    definition = demonstration()
    thick = replace(definition, plies=(*definition.plies, replace(definition.plies[0], thickness=constant(0.02))))
    mesh = on_mid(thick)
    assert any(text.startswith("mid surface: the move of") for text in mesh.report.warnings)
    assert stray_free_edges(mesh) == 0
    assert np.all(element_areas(mesh) > 0.0)


def bending(mesh, folder) -> float:
    """Rate of turn between a third and two thirds of a tube under axial end forces in proportion to x."""
    length = mesh.points[:, 2].max()
    corners, middles = ring_of(mesh, length)
    lines = ["*CLOAD"]
    for nodes, share in ((corners, 1 / 3), (middles, 2 / 3)):
        force = 1e6 * share / len(nodes) * 2.0 * mesh.points[nodes, 0] / np.hypot(*mesh.points[nodes, :2].T)
        lines += [f"{mesh.node_number[node]},3,{value:.12g}" for node, value in zip(nodes, force, strict=True)]
    step = "*STEP\n*STATIC\n" + "\n".join(lines) + "\n*NODE PRINT,NSET=ALL\nU\n*END STEP\n"
    table = run_solver(mesh, folder, step=step).displacements("ALL")
    moves = np.full((len(mesh.points), 3), np.nan)
    moves[table[:, 0].astype(int) - 1] = table[:, 1:]
    slopes = [
        np.polyfit(mesh.points[corners, 0], moves[corners, 2], 1)[0]
        for corners, _ in (ring_of(mesh, length / 3), ring_of(mesh, 2 * length / 3))
    ]
    return float((slopes[1] - slopes[0]) / (length / 3))


@pytest.mark.solver
@needs_ccx
@pytest.mark.parametrize("share", [0.02, 0.1, 0.2])
def test_tube_in_a_solver_on_both_surfaces(tmp_path, share):
    """Extension, torsion, bending against the thick ring's A, J and I (any handbook).

    The loads are what an analyst would apply: forces at the nodes, with arms taken from the nodes' coordinates. On the
    mid surface all three agree with theory. On the outer one extension does; the solver lets the forces act at the
    middle of the laminate, so that the torque arrives smaller by the ratio of the radii.
    """
    radius, thickness = 0.5, share * 0.5
    inner, outer = radius - thickness / 2, radius + thickness / 2
    area, second = pi * (outer**2 - inner**2), pi / 4 * (outer**4 - inner**4)
    definition = blade(
        stations([0, 2, 4, 6], [2 * outer] * 4, ["ring"] * 4),
        {"ring": CircleProfile()},
        plies=[PlyRule("wall", STEEL, constant(thickness), constant(1), 0.0, ("skin",))],
        mesh=rule(0.3, chord_error=0.01),
    )
    for surface, mesh in (("mid", on_mid(definition)), ("outer", build_mesh(definition))):
        arm = radius if surface == "mid" else outer
        strain, _ = tube_strain_and_twist(mesh, tmp_path / f"{surface}a", radius=radius, axial=1e6, tangential=0.0)
        _, turn = tube_strain_and_twist(mesh, tmp_path / f"{surface}t", radius=radius, axial=0.0, tangential=1e6)
        curvature = bending(mesh, tmp_path / f"{surface}b")
        assert strain == pytest.approx(1e6 / (STEEL.E1 * area), rel=1e-3)
        ratio = (turn * STEEL.G12 * 2 * second / (1e6 * arm), curvature * STEEL.E1 * second / (1e6 * arm))
        if surface == "mid":
            assert ratio == pytest.approx((1.0, 1.0), rel=2e-4)
        else:
            # torque and moment arrive as radius / arm; the slope read over the outer coordinates does so again
            assert ratio == pytest.approx((radius / outer, (radius / outer) ** 2), rel=1e-3)


@pytest.mark.parametrize("name", ["marram-24", "tidal-6", "research-rotor"])
def test_whole_blades_stay_sound_on_the_mid_surface(name):
    root = Path(__file__).parent
    folder = root / "published" if name == "research-rotor" else root.parent / "examples"
    mesh = on_mid(skinmesh.load(folder / name / f"{name}.yaml"))
    assert "folded laminate" not in mesh.element_sets
    assert scaled_jacobian(corner_points(mesh)).min() > 0.0
    assert outward_share(mesh) == 1.0
    assert stray_free_edges(mesh) == 0
