"""The mesh of whole blades: joints, normals, frames, areas, stacks."""

from __future__ import annotations

import os
import signal
import threading
from dataclasses import replace

import gmsh
import numpy as np
import pytest
from blades import BOTH, FOAM, blade, demonstration, foot, rule, skin_ply, stations, tube
from scipy.special import ellipe
from topology import consistent_orientation, edges, outward_share, stray_free_edges

from skinmesh.definition.blade import (
    ArcLength,
    CapRule,
    ChordFraction,
    CircleProfile,
    FromAxis,
    Layout,
    NacaProfile,
    PlyRule,
    WebRule,
)
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.errors import InputError, MeshError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.kernel import gmsh_session
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.surface.loft import loft_surface

CASES = [
    (hand, order, shape)
    for hand in ("clockwise", "counter-clockwise")
    for order in (1, 2)
    for shape in ("quad", "triangle")
]


@pytest.fixture(scope="module", params=CASES, ids=lambda case: "-".join(map(str, case)))
def mesh(request) -> ShellMesh:
    hand, order, shape = request.param
    definition = demonstration(hand=hand)
    return build_mesh(replace(definition, mesh=replace(definition.mesh, order=order, shape=shape)))


def test_elements_are_of_one_shape(mesh):
    assert mesh.cells.shape[1] in (6, 8)
    for k in range(mesh.cells.shape[1] - 1):  # no collapsed element
        assert np.all(mesh.cells[:, k, None] != mesh.cells[:, k + 1 :])


def test_free_edges_only_at_root_tip_and_web_ends(mesh):
    assert stray_free_edges(mesh) == 0


def test_every_node_is_used(mesh):
    assert np.array_equal(np.unique(mesh.cells), np.arange(len(mesh.points)))
    assert np.array_equal(np.unique(mesh.cells[:, : mesh.n_sides]), np.arange(mesh.n_corners))


def test_edges_are_shared_by_two_elements_and_three_at_web_feet(mesh):
    pairs, count, _ = edges(mesh)
    feet = np.zeros(len(mesh.points), dtype=bool)
    for name in mesh.node_sets:
        if name.endswith("foot"):
            feet[mesh.node_sets[name]] = True
    assert set(np.unique(count)) <= {1, 2, 3}
    threefold = pairs[count == 3]
    assert len(threefold)
    assert np.all(feet[threefold])
    n_foot_edges = sum(
        len(mesh.node_set(name)[mesh.node_set(name) < mesh.n_corners]) - 1
        for name in mesh.node_sets
        if name.endswith("foot")
    )
    assert len(threefold) == n_foot_edges


def test_normals_point_outwards_on_the_skin_and_forward_on_webs(mesh):
    assert consistent_orientation(mesh)
    assert outward_share(mesh) == 1.0
    towards_nose = 1.0 if mesh.hand == "counter-clockwise" else -1.0
    for i, region in enumerate(mesh.regions):
        if region.kind == "web":
            assert np.all(mesh.e3[mesh.region == i, 1] * towards_nose > 0.5)


def test_connectivity_turns_about_e3(mesh):
    x = mesh.points[mesh.connectivity[:, : mesh.n_sides]]
    normal = np.sum(np.cross(x, np.roll(x, -1, axis=1)), axis=1)  # twice the vector area
    assert np.all(np.sum(normal * mesh.e3, axis=1) > 0)


def test_frames_are_orthonormal_and_right_handed(mesh):
    frame = np.stack([mesh.e1, mesh.e2, mesh.e3], axis=1)
    np.testing.assert_allclose(frame @ frame.transpose(0, 2, 1), np.broadcast_to(np.eye(3), frame.shape), atol=1e-9)
    np.testing.assert_allclose(np.linalg.det(frame), 1.0, atol=1e-9)
    assert np.all(mesh.e1[:, 2] > 0.5)
    assert np.abs(mesh.e2[:, 2]).max() < 1e-12


def test_e1_is_continuous_round_the_nose_and_across_regions(mesh):
    """Neighbours differ by less than the surface turns: nowhere does a direction jump."""
    k = mesh.n_sides
    pairs = np.sort(np.stack([mesh.cells[:, :k], np.roll(mesh.cells[:, :k], -1, axis=1)], -1).reshape(-1, 2), axis=1)
    order = np.lexsort(pairs.T)
    same = np.all(np.diff(pairs[order], axis=0) == 0, axis=1)
    a, b = order[:-1][same] // k, order[1:][same] // k
    kinds = np.array([region.kind for region in mesh.regions])[mesh.region]
    plain = np.isin(kinds[a], ["strip", "panel", "cap"]) & np.isin(kinds[b], ["strip", "panel", "cap"])
    turn = np.degrees(np.arccos(np.clip(np.sum(mesh.e1[a] * mesh.e1[b], axis=1), -1, 1)))
    at_nose = np.abs(np.sum(mesh.e3[a] * mesh.e3[b], axis=1)) > 0.5
    assert turn[plain & at_nose].max() < 10.0


def test_no_bare_element(mesh):
    assert np.all(mesh.stack >= 0)
    assert np.all(mesh.thickness > 0)


def test_mid_nodes_lie_on_the_surface_of_the_skin(mesh):
    """On the round root, where the surface is known: radius 0.6 m about the pitch axis."""
    root = (mesh.points[:, 2] < 1.2 - 1e-9) & (mesh.sheet == 0)
    assert np.sum(root & (np.arange(len(mesh.points)) >= mesh.n_corners)) > 100
    np.testing.assert_allclose(np.hypot(*mesh.points[root, :2].T), 0.6, atol=1e-9)


def test_flat_pattern_of_the_regions_is_that_of_the_skin(mesh):
    from skinmesh.skin.flatpattern import region_polygons, skin_outline
    from skinmesh.skin.unroll import unroll_skin
    from skinmesh.surface.loft import loft_surface

    definition = demonstration(hand=mesh.hand)
    skin, _ = unroll_skin(definition, loft_surface(definition))
    polygons = region_polygons(skin)
    total, outline = sum(p.area for p in polygons.values()), skin_outline(skin)
    assert total == pytest.approx(outline.area, rel=1e-9)
    union = outline
    for polygon in polygons.values():
        union = union.difference(polygon)
    assert union.area < 1e-9 * outline.area


def test_region_areas_sum_to_the_skin(mesh):
    areas = element_areas(mesh)
    by_region = np.bincount(mesh.region, weights=areas)
    assert by_region.sum() == pytest.approx(areas.sum(), rel=1e-9)
    assert np.all(by_region > 0)


def test_stations_are_rings_of_nodes(mesh):
    table = demonstration().stations
    for i, z in enumerate(table.z):
        nodes = mesh.node_sets[f"station {i:02d}"]
        np.testing.assert_allclose(mesh.points[nodes, 2], z, atol=1e-12)
    assert set(mesh.node_sets["root"]) == set(mesh.node_sets["station 00"])
    assert set(mesh.node_sets["tip"]) == set(mesh.node_sets["station 10"])


def test_parametric_coordinates_give_the_points_back(mesh):
    from skinmesh.skin.unroll import unroll_skin
    from skinmesh.surface.loft import loft_surface

    definition = demonstration(hand=mesh.hand)
    skin, _ = unroll_skin(definition, loft_surface(definition))
    np.testing.assert_array_equal(skin.points(mesh.sheet, mesh.row, mesh.seam), mesh.points)


# one mesh each ------------------------------------------------------------------------------------------------------


def test_mirrored_blade_has_the_mirror_image_of_the_laminate():
    """The direction of every fibre is mirrored in y = 0, ply by ply."""
    here, there = (build_mesh(demonstration(hand=hand)) for hand in ("clockwise", "counter-clockwise"))
    mirror = np.array([1.0, -1.0, 1.0])
    np.testing.assert_allclose(here.points * mirror, there.points, atol=1e-12)
    np.testing.assert_allclose(here.e3 * mirror, there.e3, atol=1e-12)
    for a, b in zip(here.stacks, there.stacks, strict=True):
        assert [layer.ply for layer in a.layers] == [layer.ply for layer in b.layers]
    for k in range(3):
        fibre = [
            np.cos(angle)[:, None] * m.e1 + np.sin(angle)[:, None] * m.e2
            for m in (here, there)
            for angle in [np.array([s.layers[min(k, len(s.layers) - 1)].angle for s in m.stacks])[m.stack]]
        ]
        np.testing.assert_allclose(fibre[0] * mirror, fibre[1], atol=1e-12)


@pytest.mark.parametrize(("order", "rate"), [(1, 2.0), (2, 4.0)])
def test_area_of_a_tube_converges_at_its_rate(order, rate):
    errors = []
    exact = 2 * np.pi * 0.5 * 3.0
    for size in (0.4, 0.2, 0.1):
        definition = tube(mesh=rule(size, order=order, chord_error=10.0, turning=10.0))
        errors.append(abs(element_areas(build_mesh(definition)).sum() - exact) / exact)
    assert np.all(np.log2(np.array(errors[:-1]) / errors[1:]) > rate - 0.15)
    assert errors[-1] < (2e-3 if order == 1 else 2e-6)


@pytest.mark.parametrize(("order", "rate"), [(1, 2.0), (2, 4.0)])
def test_area_of_a_cone_converges_at_its_rate(order, rate):
    errors = []
    exact = np.pi * (0.5 + 0.2) * np.hypot(3.0, 0.3)
    for size in (0.4, 0.2, 0.1):
        definition = tube(taper=0.4, mesh=rule(size, order=order, chord_error=10.0, turning=10.0))
        errors.append(abs(element_areas(build_mesh(definition)).sum() - exact) / exact)
    assert np.all(np.log2(np.array(errors[:-1]) / errors[1:]) > rate - 0.2)
    assert errors[-1] < (2e-3 if order == 1 else 3e-6)


def elliptic_prism(twist: float, size: float) -> ShellMesh:
    table = stations([0.0, 4.0], [1.0, 1.0], ["ring", "ring"], twist_degrees=[0.0, twist], ratio=[0.4, 0.4])
    mesh = rule(size, order=1, chord_error=10.0, turning=10.0)
    return build_mesh(blade(table, {"ring": CircleProfile()}, mesh=mesh))


def test_area_of_an_elliptic_prism_is_that_of_its_perimeter():
    """Perimeter 4 a E(e), any handbook of mensuration."""
    exact = 4.0 * 0.5 * ellipe(1.0 - 0.4**2) * 4.0
    errors = [abs(element_areas(elliptic_prism(0.0, size)).sum() - exact) / exact for size in (0.1, 0.05, 0.025)]
    assert np.all(np.log2(np.array(errors[:-1]) / errors[1:]) > 1.7)
    assert errors[-1] < 2e-3


def test_volume_inside_a_twisted_prism_is_area_times_length():
    exact = np.pi * 0.5 * 0.2 * 4.0
    errors = []
    for size in (0.1, 0.05, 0.025):
        mesh = elliptic_prism(50.0, size)
        x = mesh.points[mesh.cells[:, :4]]
        volume = 0.0
        for triangle in (x[:, [0, 1, 2]], x[:, [0, 2, 3]]):
            normal = 0.5 * np.cross(triangle[:, 1] - triangle[:, 0], triangle[:, 2] - triangle[:, 0])
            # the divergence of (x, y, 0) / 2 is one, and its flux through the flat ends is none
            volume += 0.5 * float(np.sum(triangle.mean(axis=1)[:, :2] * normal[:, :2]))
        errors.append(abs(volume - exact) / exact)
    assert np.all(np.log2(np.array(errors[:-1]) / errors[1:]) > 1.7)
    assert errors[-1] < 3e-3


def test_rotated_input_gives_the_rotated_mesh():
    """The same blade with 20° more twist throughout is the same mesh, turned about z."""
    definition = demonstration()
    table = definition.stations
    plain = replace(definition, stations=replace(table, prebend=0 * table.z, sweep=0 * table.z))
    turned = replace(plain, stations=replace(plain.stations, twist=table.twist + np.radians(20.0)))
    a, b = build_mesh(plain), build_mesh(turned)
    angle = np.radians(20.0)
    # −twist about z
    matrix = np.array([[np.cos(angle), np.sin(angle), 0], [-np.sin(angle), np.cos(angle), 0], [0, 0, 1]])
    np.testing.assert_array_equal(a.cells, b.cells)
    np.testing.assert_allclose(a.points @ matrix.T, b.points, atol=1e-9)
    np.testing.assert_allclose(a.e1 @ matrix.T, b.e1, atol=1e-9)
    np.testing.assert_array_equal(a.stack, b.stack)


def test_scaled_input_gives_the_scaled_mesh():
    definition = tube(mesh=rule(0.25))
    double = tube(radius=1.0, length=6.0, mesh=rule(0.5))
    a, b = build_mesh(definition), build_mesh(double)
    np.testing.assert_array_equal(a.cells, b.cells)
    np.testing.assert_allclose(2.0 * a.points, b.points, atol=1e-9)


def test_build_leaves_gmsh_closed_and_keeps_the_callers_models():
    build_mesh(tube(mesh=rule(0.5)))
    assert not gmsh.isInitialized()
    gmsh.initialize(readConfigFiles=False)
    try:
        gmsh.model.add("mine")
        gmsh.option.setNumber("Mesh.ElementOrder", 1)
        gmsh.option.setNumber("Mesh.Smoothing", 7)
        gmsh.model.geo.addPoint(0, 0, 0)
        gmsh.model.geo.synchronize()
        build_mesh(tube(mesh=rule(0.5)))
        assert gmsh.isInitialized()
        assert gmsh.model.getCurrent() == "mine"
        assert gmsh.model.list()[-1] == "mine"
        assert len(gmsh.model.getEntities(0)) == 1
        assert gmsh.option.getNumber("Mesh.Smoothing") == 7
        assert gmsh.option.getNumber("Mesh.ElementOrder") == 1
    finally:
        gmsh.finalize()


def test_build_works_off_the_main_thread_and_in_several_at_once():
    results: dict[int, ShellMesh] = {}

    def work(i: int) -> None:
        results[i] = build_mesh(tube(mesh=rule(0.3)))

    threads = [threading.Thread(target=work, args=(i,)) for i in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(results) == 3
    np.testing.assert_array_equal(results[0].points, results[2].points)


def test_a_warning_of_the_kernel_is_an_error():
    with pytest.raises(MeshError, match="warned"), gmsh_session() as kernel:
        kernel.logger.write("Something went another way than asked", "warning")
    assert not gmsh.isInitialized()


def test_a_failure_of_the_kernel_is_an_error_of_ours():
    with pytest.raises(MeshError, match="failed"), gmsh_session() as kernel:
        kernel.model.mesh.getNode(4711)
    assert not gmsh.isInitialized()


@pytest.mark.skipif(os.name != "posix", reason="needs signals")
@pytest.mark.parametrize("off_main_thread", [False, True])
def test_the_kernel_leaves_the_signal_handlers_of_the_process_alone(off_main_thread):
    caught = []
    before = signal.signal(signal.SIGTERM, lambda *_: caught.append("term"))

    def work() -> None:
        with gmsh_session():
            os.kill(os.getpid(), signal.SIGTERM)
        os.kill(os.getpid(), signal.SIGTERM)

    try:
        if off_main_thread:
            thread = threading.Thread(target=work)
            thread.start()
            thread.join()
        else:
            work()
        read_end, write_end = os.pipe()
        os.close(read_end)
        with pytest.raises(BrokenPipeError):
            os.write(write_end, b"x")
        os.close(write_end)
    finally:
        signal.signal(signal.SIGTERM, before)
    assert caught
    assert set(caught) == {"term"}


WEBS = [
    ("on a cap", FromAxis(constant(0.0)), (1.0, 8.0)),
    ("before the cap", ChordFraction(constant(0.15)), (2.0, 9.0)),
    ("behind the cap", ChordFraction(constant(0.7)), (0.0, 10.0)),
    ("by arc", ArcLength(Spanwise([0, 10], [0.5, 0.2])), (3.3, 6.1)),
]


@pytest.mark.parametrize(("place", "span"), [web[1:] for web in WEBS], ids=[web[0] for web in WEBS])
def test_a_web_may_stand_anywhere(place, span):
    table = stations([0, 4, 10], [1.5, 1.2, 0.6], ["n", "n", "n"], twist_degrees=[12, 5, 0], pitch_axis=0.35)
    layout = Layout(
        caps=(CapRule("cap", FromAxis(constant(0.0)), Spanwise([0, 10], [0.3, 0.15]), BOTH),),
        webs=(WebRule("web", foot(place), span),),
    )
    mesh = build_mesh(
        blade(
            table,
            {"n": NacaProfile("0021")},
            layout=layout,
            plies=[skin_ply(), PlyRule("w", FOAM, constant(0.01), constant(1), 0.0, ("webs",))],
            mesh=rule(0.15),
        )
    )
    assert stray_free_edges(mesh) == 0
    assert outward_share(mesh) == 1.0
    web = [region.name for region in mesh.regions].index("web")
    nodes = np.unique(mesh.cells[mesh.region == web])
    assert mesh.points[nodes, 2].min() == pytest.approx(span[0])
    assert mesh.points[nodes, 2].max() == pytest.approx(span[1])


@pytest.mark.parametrize("strip", [None, constant(0.05)])
def test_the_area_of_a_web_is_that_between_its_feet(strip):
    """Whatever the numbers of its seams: without a trailing strip the pressure foot is on seam 1."""
    table = stations([0, 5], [1.5, 1.0], ["n", "n"], pitch_axis=0.35)
    layout = Layout(webs=(WebRule("web", foot(FromAxis(constant(0.0))), (1.0, 4.0)),), trailing_strip=strip)
    definition = blade(table, {"n": NacaProfile("0021")}, layout=layout, plies=(), mesh=rule(0.1))
    mesh = build_mesh(definition)
    surface = loft_surface(definition)
    z = np.linspace(1.0, 4.0, 301)
    t = np.linspace(0.01, 0.99, 4001)
    section = surface.section(z[:, None], t)
    height = 2.0 * np.array([np.interp(0.0, row.real, row.imag) for row in section])  # a symmetric profile
    own = mesh.region == [region.name for region in mesh.regions].index("web")
    assert element_areas(mesh)[own].sum() == pytest.approx(np.trapezoid(height, z), rel=1e-4)
    assert len(np.intersect1d(mesh.node_sets["web suction foot"], mesh.node_sets["web pressure foot"])) == 0


def test_a_web_in_one_twisted_plane_is_flat():
    """With plane_twist the feet lie in one plane although the blade is twisted."""
    table = stations([0, 3, 10], [1.5, 1.2, 0.7], ["n", "n", "n"], twist_degrees=[14, 6, 0], pitch_axis=0.35)
    web = WebRule("web", foot(FromAxis(constant(0.1))), (0.5, 9.5), plane_twist=np.radians(4.0))
    mesh = build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=Layout(webs=(web,)), plies=(), mesh=rule(0.2)))
    nodes = np.unique(mesh.cells[mesh.sheet[mesh.cells].max(axis=1) == 1])
    direction = np.array([np.sin(np.radians(4.0)), np.cos(np.radians(4.0))])
    # Spread over the nodes of the skin map's lines; 1 µm is the ruler's own error
    np.testing.assert_allclose(mesh.points[nodes, :2] @ direction, 0.1, atol=1e-6)


def test_cap_width_is_the_wanted_arc_along_the_whole_span():
    width = Spanwise([0, 4, 10], [0.4, 0.3, 0.1])
    table = stations([0, 4, 10], [1.5, 1.2, 0.6], ["n", "n", "n"], twist_degrees=[12, 5, 0], pitch_axis=0.35)
    layout = Layout(caps=(CapRule("cap", FromAxis(constant(0.05)), width, (1,)),))
    mesh = build_mesh(blade(table, {"n": NacaProfile("2424")}, layout=layout, plies=(), mesh=rule(0.1, order=1)))
    cap = [region.name for region in mesh.regions].index("suction cap")
    assert "pressure cap" not in [region.name for region in mesh.regions]
    cells = mesh.cells[mesh.region == cap]
    strip = np.linalg.norm(np.diff(mesh.points[cells[:, [0, 4, 1]]], axis=1), axis=2).sum(axis=1)
    level = mesh.row[cells[:, 0]]
    for r in np.unique(level)[::5]:
        z = mesh.points[cells[level == r][0, 0], 2]
        assert strip[level == r].sum() == pytest.approx(float(width(z)), rel=2e-4)


def test_several_caps_make_numbered_middle_panels():
    table = stations([0, 5], [1.5, 1.0], ["n", "n"], pitch_axis=0.35)
    caps = tuple(
        CapRule(f"cap {i}", ChordFraction(constant(c)), constant(0.1), BOTH) for i, c in enumerate((0.6, 0.25, 0.42))
    )
    mesh = build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=Layout(caps=caps), mesh=rule(0.2)))
    names = [region.name for region in mesh.regions if region.side == 1]
    assert names == [
        f"suction {name}"
        for name in ("leading panel", "cap 1", "middle panel 1", "cap 2", "middle panel 2", "cap 0", "trailing panel")
    ]


def test_seams_keep_their_spacing_on_a_narrow_tip_and_say_so():
    table = stations([0, 5, 10], [1.5, 1.0, 0.25], ["n", "n", "n"], pitch_axis=0.35)
    layout = Layout(
        caps=(CapRule("cap", FromAxis(constant(0.0)), constant(0.2), BOTH),),
        leading_strip=constant(0.1),
        trailing_strip=constant(0.1),
    )
    mesh = build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=layout, mesh=rule(0.15)))
    told = [text for text in mesh.report.warnings if "to keep" in text]
    assert any("cap fore edge" in text and "z = 10.000" in text for text in told)
    assert stray_free_edges(mesh) == 0


def test_a_cap_wider_than_the_skin_is_an_error_with_its_place():
    layout = Layout(caps=(CapRule("cap", FromAxis(constant(0.0)), constant(0.7), BOTH),))
    table = stations([0, 10], [1.5, 0.5], ["n", "n"], pitch_axis=0.35)
    with pytest.raises(InputError, match=r"wider than the suction skin at z = 10\.000 m"):
        build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=layout))


def test_seams_that_cannot_fit_are_an_error():
    layout = Layout(leading_strip=constant(0.1), trailing_strip=constant(0.1))
    table = stations([0, 10], [1.5, 0.5], ["n", "n"], pitch_axis=0.35)
    with pytest.raises(InputError, match="do not fit"):
        build_mesh(blade(table, {"n": NacaProfile("0021")}, layout=layout, mesh=rule(0.1, least_spacing=constant(0.3))))


def test_without_plies_the_mesh_has_regions_and_no_stack():
    mesh = build_mesh(demonstration().__class__(**{**demonstration().__dict__, "plies": ()}))
    assert mesh.stacks == ()
    assert np.all(mesh.stack == -1)
    assert np.all(mesh.thickness == 0)
    assert len(mesh.regions) == 13
