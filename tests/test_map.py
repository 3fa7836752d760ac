"""Nodes and elements of an earlier mesh carried to one of another layout."""

from __future__ import annotations

import csv
import json
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from blades import demonstration, rule
from test_keep import run

import skinmesh
from skinmesh.definition.spanwise import constant
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.carry import map_meshes
from skinmesh.mesh.lattice import read_lattice
from skinmesh.mesh.measure import element_areas
from skinmesh.write.map_tables import MAP_FILES, map_files


def plain(**changes):
    return demonstration(mesh=rule(0.6, close_gap=0.012, turning=0.8, chord_error=0.01, **changes))


def one_web(blade):
    return replace(blade, layout=replace(blade.layout, webs=blade.layout.webs[:1]))


def one_station_more(blade):
    table = blade.stations
    values = {
        name: np.insert(getattr(table, name), 6, np.interp(11.0, table.z, getattr(table, name)))
        for name in ("z", "chord", "twist", "pitch_axis", "prebend", "sweep")
    }
    profile = (*table.profile[:6], None, *table.profile[6:])
    ratio = np.insert(table.thickness_ratio, 6, np.nan)
    return replace(blade, stations=replace(table, profile=profile, thickness_ratio=ratio, **values))


def shorter_webs(blade):
    """The webs end past the station at 19 m no longer, but before it."""
    webs = tuple(replace(web, span=(web.span[0], 17.3)) for web in blade.layout.webs)
    return replace(blade, layout=replace(blade.layout, webs=webs))


CHANGES = {
    "one web": one_web,
    "one station more": one_station_more,
    "shorter webs": shorter_webs,
    "finer": lambda b: replace(b, mesh=replace(b.mesh, size=constant(0.45))),
    "triangles": lambda b: replace(b, mesh=replace(b.mesh, shape="triangle")),
    "first order": lambda b: replace(b, mesh=replace(b.mesh, order=1)),
    "closed earlier": lambda b: replace(b, mesh=replace(b.mesh, close_gap=0.03)),
    "longer": lambda b: one_station_more(replace(b, stations=replace(b.stations, z=1.1 * b.stations.z))),
}


@cache
def built(name, back=False):
    """An earlier mesh and a later one, and the map between them."""
    meshes = mesh_of(""), mesh_of(name)
    return map_meshes(*(meshes[::-1] if back else meshes))


@cache
def mesh_of(change):
    return build_mesh(CHANGES[change](plain()) if change else plain())


@pytest.mark.parametrize("shape", ["quad", "triangle"])
@pytest.mark.parametrize("order", [1, 2])
def test_the_map_of_a_kept_mesh_is_the_identity(shape, order):
    blade = plain(shape=shape, order=order)
    old = build_mesh(blade)
    table = blade.stations
    new = build_mesh(replace(blade, stations=replace(table, chord=1.05 * table.chord, z=1.02 * table.z)), keep=old)
    for carried in (map_meshes(old, old), map_meshes(old, new)):
        assert carried.is_identity
        np.testing.assert_array_equal(carried.nodes.nearest, np.arange(old.n_nodes))
        np.testing.assert_array_equal(carried.elements.new, carried.elements.old)
        np.testing.assert_allclose(carried.elements.share_of_new, 1.0, atol=1e-12)


@pytest.mark.parametrize("back", [False, True])
@pytest.mark.parametrize("name", CHANGES)
def test_every_element_is_shared_out_in_full(name, back):
    carried = built(name, back)
    pairs = carried.elements
    for own, share, mesh in (
        (pairs.new, pairs.share_of_new, carried.new),
        (pairs.old, pairs.share_of_old, carried.old),
    ):
        total = np.bincount(own[own >= 0], weights=share[own >= 0], minlength=len(mesh.cells))
        np.testing.assert_allclose(total, 1.0, atol=1e-7)


@pytest.mark.parametrize("back", [False, True])
@pytest.mark.parametrize("name", CHANGES)
def test_forces_arrive_with_their_sum_and_almost_their_moment(name, back):
    """Random forces at all nodes that are not gone: shared out among corners none is lost, and arms change little."""
    carried = built(name, back)
    nodes, old, new = carried.nodes, carried.old, carried.new
    there = ~nodes.is_gone
    force = np.random.default_rng(5).normal(size=(old.n_nodes, 3)) * there[:, None]
    arrived = np.zeros((len(new.points), 3))
    corners = new.cells[nodes.element[there], : new.n_sides]
    np.add.at(arrived, corners, nodes.weight[there][..., None] * force[there][:, None])
    np.testing.assert_allclose(arrived.sum(axis=0), force.sum(axis=0), atol=1e-9)
    if name != "longer":
        # corner nodes of curved elements stand for a place on the chord: off by the sagitta at most
        place = np.einsum("nk,nkx->nx", nodes.weight[there], new.points[corners])
        off = np.linalg.norm(place - old.points[: old.n_nodes][there], axis=1)
        assert np.quantile(off, 0.99) < 0.03
        assert off.max() < 0.12


@pytest.mark.parametrize("name", CHANGES)
def test_the_nearest_node_is_one_of_the_element_that_holds_the_place(name):
    nodes, new = built(name).nodes, built(name).new
    there = ~nodes.is_gone
    held = new.connectivity[nodes.element[there]]
    assert np.all(np.any(held == nodes.nearest[there][:, None], axis=1))
    np.testing.assert_allclose(nodes.weight[there].sum(axis=1), 1.0, atol=1e-12)
    assert nodes.weight.min() >= 0.0
    assert np.all(np.isnan(nodes.distance) == nodes.is_gone)


def test_a_web_less_takes_its_own_places_along_and_no_others():
    carried = built("one web")
    old, nodes = carried.old, carried.nodes
    inside_web = old.sheet[: old.n_nodes] == 2
    np.testing.assert_array_equal(nodes.is_gone, inside_web)
    gone = np.unique(carried.elements.old[carried.elements.new < 0])
    is_aft = np.array([region.name == "aft web" for region in old.regions])[old.region]
    np.testing.assert_array_equal(gone, np.flatnonzero(is_aft))
    # away from the lost seam the nodes lie where they lay, whatever their seam number is now
    assert carried.seams.gone == ("pressure aft web foot", "suction aft web foot")
    kept = nodes.is_same & (nodes.nearest >= 0)
    assert kept.sum() > 500
    moved = np.linalg.norm(carried.new.points[nodes.nearest[kept]] - old.points[: old.n_nodes][kept], axis=1)
    assert moved.max() < 0.02  # the grading of a gap may be another one
    assert np.median(moved) < 1e-3
    # regions are found again by name
    pairs = carried.elements
    both = (pairs.new >= 0) & (pairs.old >= 0)
    before = np.array([region.name for region in old.regions])[old.region[pairs.old[both]]]
    after = np.array([region.name for region in carried.new.regions])[carried.new.region[pairs.new[both]]]
    np.testing.assert_array_equal(before, after)


def test_a_shorter_web_loses_what_lies_beyond_its_new_end():
    """The station at 19 m stays; what the web had beyond 17.3 m is gone, and so is none of the skin."""
    carried = built("shorter webs")
    old, nodes = carried.old, carried.nodes
    z = old.points[: old.n_nodes, 2]
    on_web = old.sheet[: old.n_nodes] > 0
    np.testing.assert_array_equal(nodes.is_gone, on_web & (z > 17.3 + 1e-9))


def test_stations_are_found_again_when_a_row_is_added():
    carried = built("one station more")
    assert carried.rows.new == ("station 06, new",)
    assert carried.rows.gone == ()
    z = [dict(enumerate(z for _, z in mesh.report.rows)) for mesh in (carried.old, carried.new)]
    assert all(z[0][i] == pytest.approx(z[1][j], abs=0.01) for i, j in carried.rows.pairs)
    # a longer blade with a station more: by its share of the length
    longer = built("longer")
    assert longer.rows.new == ("station 06, new",)


@pytest.mark.parametrize("name", ["one web", "finer", "triangles", "one station more"])
def test_a_pressure_that_is_even_stays_so_and_one_that_varies_keeps_its_force(name):
    carried = built(name)
    pairs, old, new = carried.elements, carried.old, carried.new
    both = (pairs.new >= 0) & (pairs.old >= 0)

    def carry(values):
        return np.bincount(
            pairs.new[both], weights=pairs.share_of_new[both] * values[pairs.old[both]], minlength=len(new.cells)
        )

    on_skin = np.array([region.kind != "web" for region in new.regions])[new.region]
    np.testing.assert_allclose(carry(np.full(len(old.cells), 700.0))[on_skin], 700.0, rtol=1e-7)
    middle = old.points[old.cells[:, : old.n_sides]].mean(axis=1)
    pressure = 100.0 + 20.0 * middle[:, 2]
    old_skin = np.array([region.kind != "web" for region in old.regions])[old.region]
    force = float((pressure * element_areas(old))[old_skin].sum())
    assert float((carry(pressure) * element_areas(new))[on_skin].sum()) == pytest.approx(force, rel=2e-3)


def test_every_place_of_a_lattice_is_in_the_element_whose_centre_it_is():
    for shape in ("quad", "triangle"):
        mesh = build_mesh(plain(shape=shape))
        lattice = read_lattice(mesh)
        kinds = np.array([region.kind for region in mesh.regions])[mesh.region]
        for name in lattice.charts:
            own = (
                np.flatnonzero((kinds != "web") & (kinds != "base"))
                if name == "skin"
                else np.flatnonzero(np.array([r.name for r in mesh.regions])[mesh.region] == name)
            )
            closing = np.concatenate([c.element for c in lattice.closings])
            own = own[~np.isin(own, closing)]
            found, weight = lattice.locate(
                name, lattice.corner_row[own].mean(axis=1), lattice.corner_seam[own].mean(axis=1)
            )
            np.testing.assert_array_equal(found, own)
            np.testing.assert_allclose(weight, 1.0 / mesh.n_sides, atol=1e-9)


def test_tables_say_what_the_map_has(tmp_path):
    carried = built("one web")
    files = skinmesh.write(carried.new, tmp_path, formats=("vtu",), extras=map_files(carried))
    assert [file.name for file in files][-3:] == [f"test.{ending}" for ending in MAP_FILES]
    with (tmp_path / "test.map-nodes.csv").open() as file:
        rows = list(csv.DictReader(file))
    nodes = carried.nodes
    assert [int(row["old_node"]) for row in rows] == carried.old.node_number[: carried.old.n_nodes].tolist()
    assert [row["place"] == "gone" for row in rows] == nodes.is_gone.tolist()
    assert [row["place"] == "same" for row in rows] == nodes.is_same.tolist()
    for row, nearest, element, weight, gone in zip(
        rows, nodes.nearest, nodes.element, nodes.weight, nodes.is_gone, strict=True
    ):
        if gone:
            assert not any(value for name, value in row.items() if name not in ("old_node", "place"))
            continue
        assert int(row["new_node"]) == nearest + 1
        assert int(row["in_element"]) == element + 1
        assert [int(row[f"corner_{k}"]) for k in range(1, 5)] == (carried.new.cells[element, :4] + 1).tolist()
        assert [float(row[f"share_{k}"]) for k in range(1, 5)] == pytest.approx(weight.tolist(), abs=1e-8)
    with (tmp_path / "test.map-elements.csv").open() as file:
        rows = list(csv.DictReader(file))
    total: dict[str, float] = {}
    for row in rows:
        total[row["old_element"]] = total.get(row["old_element"], 0.0) + float(row["share_of_old"])
    assert sorted(map(int, total)) == list(range(1, len(carried.old.cells) + 1))
    assert all(value == pytest.approx(1.0, abs=1e-6) for value in total.values())
    summary = json.loads((tmp_path / "test.map.json").read_text())
    assert summary["regions"]["gone"] == ["aft web"]
    assert summary["node_sets"]["gone"] == ["aft web suction foot", "aft web pressure foot"]
    assert summary["nodes"]["gone"] == int(nodes.is_gone.sum())
    assert not summary["is_identity"]


def test_from_the_command_line(tmp_path, capsys):
    """A web less: refused without --map; with it a plain new build, byte for byte, and the tables beside it."""
    assert run(["new", str(tmp_path / "in")]) == 0
    blade = tmp_path / "in" / "marram-24.yaml"
    place = {name: str(tmp_path / name) for name in ("old", "new", "plain")}
    common = ["--size", "0.6", "--formats", "vtu"]
    assert run(["build", str(blade), "-o", place["old"], *common]) == 0
    text = blade.read_text()
    aft = text[text.index("    aft web:") : text.index("  leading strip:")]
    blade.write_text(text.replace(aft, ""))
    assert run(["build", str(blade), "-o", place["new"], "--keep", place["old"], *common]) == 2
    assert "webs no longer there: aft web" in capsys.readouterr().err
    assert not (tmp_path / "new").exists()
    assert run(["build", str(blade), "-o", place["new"], "--keep", place["old"], "--map", *common]) == 0
    said = " ".join(capsys.readouterr().out.split())
    assert "New numbers:" in said
    assert "regions gone aft web" in said
    assert run(["build", str(blade), "-o", place["plain"], *common]) == 0
    for file in ("marram-24.vtu", "marram-24.summary.json", "marram-24.stacks.csv"):
        assert (tmp_path / "new" / file).read_bytes() == (tmp_path / "plain" / file).read_bytes()
    # a build without --map removes the tables of an earlier one
    assert (tmp_path / "new" / "marram-24.map.json").is_file()
    assert run(["build", str(blade), "-o", place["new"], *common]) == 0
    assert not list((tmp_path / "new").glob("*.map*"))
    # nothing to map from
    assert run(["build", str(blade), "-o", place["new"], "--map", *common]) == 2
