"""What changed between two built meshes, from their files alone."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from blades import demonstration, rule
from sample_meshes import GLASS_UD, box_with_web, sandwich, tube
from solver_runs import needs_ccx, solve_deck

from skinmesh.check.reading import BuiltMesh, read_built_mesh
from skinmesh.commands.main import main
from skinmesh.compare.closest import closest_points
from skinmesh.compare.parametric import points_at, skin_grid
from skinmesh.compare.run import MeshDifference, compare_directories, compare_meshes
from skinmesh.compare.surface import BY_NUMBER, BY_PLACE
from skinmesh.compare.values import CHANGED, GONE, NEW
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.errors import InputError
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import mass_properties
from skinmesh.mesh.planform import planform
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.files import write

FORMATS = ("vtu",)


def written(mesh: ShellMesh, folder: Path, formats: tuple[str, ...] = FORMATS) -> BuiltMesh:
    write(mesh, folder, formats=formats)
    return read_built_mesh(folder)


def compared(old: ShellMesh, new: ShellMesh, folder: Path) -> MeshDifference:
    return compare_meshes(written(old, folder / "old"), written(new, folder / "new"))


# --- real blades ------------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def blade():
    return demonstration(mesh=rule(0.4, close_gap=0.012))


@pytest.fixture(scope="module")
def old(blade, tmp_path_factory) -> BuiltMesh:
    return written(build_mesh(blade), tmp_path_factory.mktemp("old"), ("vtu", "inp", "bdf", "msh"))


def rebuilt(changed, old: BuiltMesh, folder: Path) -> MeshDifference:
    """The difference that a rebuild under kept numbers makes."""
    return compare_meshes(old, written(build_mesh(changed, keep=old.mesh), folder))


def test_a_rebuild_of_an_unchanged_blade_is_equal(blade, old, tmp_path):
    found = rebuilt(blade, old, tmp_path)
    assert found.is_equal
    assert found.files_in_one == ("msh", "inp", "bdf")


def test_chord_seven_per_cent_wider_outboard(blade, old, tmp_path):
    table = blade.stations
    outboard = table.z > table.z[-1] * 2 / 3
    changed = replace(blade, stations=replace(table, chord=np.where(outboard, 1.07 * table.chord, table.chord)))
    found = rebuilt(changed, old, tmp_path)
    assert not found.is_equal
    assert found.numbering.is_kept
    (column,) = found.stations.columns
    assert (column.name, column.stations, column.of) == ("chord", int(outboard.sum()), len(table.z))
    assert column.share == pytest.approx((0.07, 0.07), rel=1e-9)
    assert column.z == (table.z[outboard][0], table.z[-1])
    # The table's stations are node rings, and the mesh has the table's chord there.
    new = found.new.mesh
    assert found.surface.nodes.way == BY_NUMBER
    moves = np.linalg.norm(new.nodes - old.mesh.nodes, axis=1)
    assert found.surface.nodes.largest == moves.max()
    assert found.surface.nodes.rms == pytest.approx(np.sqrt(np.mean(moves**2)), rel=1e-12)
    # No node is further from the old skin than from where it was before.
    assert np.all(found.surface.shape.distance <= moves[found.surface.shape.node - 1] + 1e-9)
    assert 0.02 < found.surface.shape.largest <= moves.max()
    ring = planform(new)
    tip = ring.chord[-1] - planform(old.mesh).chord[-1]
    assert tip == pytest.approx(0.07 * table.chord[-1], rel=1e-3)
    assert found.elements.turned.max() > 0.0
    mass = {value.name: value for value in found.whole}["mass"]
    assert mass.difference == pytest.approx(mass_properties(new).mass - mass_properties(old.mesh).mass, rel=1e-6)


def test_a_wider_cap_slides_nodes_along_a_skin_that_stays(blade, old, tmp_path):
    cap = blade.layout.caps[0]
    wider = replace(cap, width=Spanwise([0, 5, 22.5], [0.47, 0.47, 0.17]))
    found = rebuilt(replace(blade, layout=replace(blade.layout, caps=(wider,))), old, tmp_path)
    assert found.surface.nodes.largest > 0.02
    assert found.surface.shape.largest < 1e-3 * blade.stations.chord.max()
    assert found.surface.shape.largest < 0.05 * found.surface.nodes.largest
    assert not found.stations.columns
    assert found.largest["width of suction main cap"].difference == pytest.approx(0.05, abs=0.002)
    entry = {entry.name: entry for entry in found.regions}["suction main cap"]
    assert entry.state == CHANGED
    assert entry.value("mass").difference > 5.0


def test_a_shorter_web_changes_its_span_and_no_width(blade, old, tmp_path):
    webs = tuple(replace(web, span=(web.span[0], 20.9)) for web in blade.layout.webs)
    found = rebuilt(replace(blade, layout=replace(blade.layout, webs=webs)), old, tmp_path)
    changed = {entry.name: entry for entry in found.regions if not entry.value("to z").is_equal}
    assert set(changed) == {"fore web", "aft web"}
    assert (changed["aft web"].value("to z").old, changed["aft web"].value("to z").new) == (21.5, 20.9)
    assert abs(found.largest["width of aft web"].difference) < 1e-3
    assert found.surface.shape.largest < 1e-3


def test_plies_that_change_tell_their_mass_to_the_last_digit(blade, old, tmp_path):
    """On an unchanged surface, what the changes of stacks add up to is the change of the blade's mass."""
    plies = list(blade.plies)
    plies[1] = replace(plies[1], count=constant(22))
    plies[2] = replace(plies[2], thickness=constant(0.014))
    plies[5] = replace(plies[5], angle=np.radians(40.0))
    found = rebuilt(replace(blade, plies=tuple(plies)), old, tmp_path)
    assert found.surface.nodes.largest == 0.0
    assert found.surface.shape.largest == 0.0
    mass = {value.name: value for value in found.whole}["mass"]
    assert mass.difference > 10.0
    assert sum(change.mass for change in found.elements.stacks) == pytest.approx(mass.difference, rel=1e-9)
    assert sum(change.elements for change in found.elements.stacks) == found.elements.stack_changed.sum()
    of_ply = {entry.name: entry for entry in found.plies}
    assert sum(entry.value("mass").difference for entry in found.plies) == pytest.approx(mass.difference, rel=1e-9)
    assert {name for name, entry in of_ply.items() if abs(entry.value("mass").difference) > 1e-9} == {"cap", "core"}
    assert (of_ply["core"].value("thickness").old, of_ply["core"].value("thickness").new) == ("12", "14")
    assert (of_ply["web face"].value("angle").old, of_ply["web face"].value("angle").new) == ("45", "40")
    words = " | ".join(change.what for change in found.elements.stacks)
    assert "core: 12 to 14 mm" in words
    assert "web face: 45 to 40°" in words
    assert "cap: " in words
    areas = [change.area for change in found.elements.stacks]
    assert areas == sorted(areas, reverse=True)


def test_another_size_is_compared_by_parametric_places(blade, old, tmp_path):
    """The same blade in another mesh: differences are those that the coarser mesh cannot resolve."""
    fine = replace(blade, mesh=replace(blade.mesh, size=constant(0.2)))
    found = compare_meshes(old, written(build_mesh(fine), tmp_path))
    assert not found.numbering.is_kept
    assert found.surface.shape.rms < 1e-3
    assert np.median(found.surface.shape.distance) < 1e-4
    assert not found.stations.entries
    assert [value.name for value in found.settings] == ["mesh.size"]
    assert np.median(found.elements.tilted) < np.radians(0.05)
    assert "NOT the same" in found.numbering.sentence


def test_a_web_more_is_named(blade, old, tmp_path):
    web = replace(blade.layout.webs[0], name="nose web", span=(3.0, 12.0))
    feet = {side: replace(place, across=constant(0.05)) for side, place in web.feet.items()}
    layout = replace(blade.layout, webs=(replace(web, feet=feet), *blade.layout.webs))
    found = compare_meshes(old, written(build_mesh(replace(blade, layout=layout)), tmp_path))
    (entry,) = [entry for entry in found.regions if entry.state == NEW]
    assert entry.name == "nose web"
    assert (entry.value("from z").new, entry.value("to z").new) == (3.0, 12.0)
    assert "web new: nose web" in found.numbering.layout
    assert "the layout differs" in found.numbering.sentence
    assert "nose web suction foot" in found.numbering.sets_new
    assert found.surface.shape.largest < 0.002
    back = compare_meshes(found.new, old)
    assert [entry.name for entry in back.regions if entry.state == GONE] == ["nose web"]


def test_two_different_blades(old, tmp_path):
    found = compare_meshes(old, written(tube(16, 6, layers=sandwich()), tmp_path))
    assert found.surface.nodes is None
    assert not found.elements.pairs.new.size
    assert {entry.state for entry in found.regions} == {GONE, NEW}


# --- numbers ----------------------------------------------------------------------------------------------------------


def test_equal_means_dates_and_versions_apart(tmp_path, capsys):
    mesh = box_with_web(layers=sandwich())
    for name in ("old", "new"):
        write(mesh, tmp_path / name)
    summary = tmp_path / "new/sample.summary.json"
    told = json.loads(summary.read_text())
    told["versions"]["numpy"] = "99"
    summary.write_text(json.dumps(told))
    deck = tmp_path / "new/sample.inp"
    deck.write_text("** 1 January 2000\n" + deck.read_text())
    assert run(["diff", str(tmp_path / "old"), str(tmp_path / "new"), "--no-picture"]) == 0
    assert "Equal in everything but dates and versions." in capsys.readouterr().out
    # A load typed into the deck is no date.
    deck.write_text(deck.read_text() + "*CLOAD\n1,1,1.\n")
    found = compare_directories(tmp_path / "old", tmp_path / "new")
    assert (found.is_same_mesh, found.is_equal, found.files) == (True, False, ("inp",))
    assert run(["diff", str(tmp_path / "old"), str(tmp_path / "new"), "--no-picture"]) == 1
    assert "files made from them are not: .inp" in capsys.readouterr().out


@pytest.mark.parametrize("key", ["title", "mass_kg", "warnings", "ply_areas_m2", "inputs"])
def test_any_line_of_the_summary_makes_a_difference(key, tmp_path):
    mesh = box_with_web(layers=sandwich())
    for name in ("old", "new"):
        write(mesh, tmp_path / name, formats=FORMATS)
    summary = tmp_path / "new/sample.summary.json"
    told = json.loads(summary.read_text())
    told[key] = {"title": "other", "mass_kg": told["mass_kg"] * 1.001, "warnings": ["new"]}.get(key, type(told[key])())
    if key == "ply_areas_m2":
        told[key] = {"cap": 1.0}
    summary.write_text(json.dumps(told))
    found = compare_directories(tmp_path / "old", tmp_path / "new")
    assert found.is_same_mesh
    assert not found.is_equal


def test_numbers_sets_and_regions(tmp_path):
    mesh = box_with_web(layers=sandwich())
    same = compared(mesh, replace(mesh, points=mesh.points * 1.01), tmp_path / "scaled")
    assert same.numbering.is_kept
    numbered = compared(mesh, replace(mesh, node_number=mesh.node_number + 1), tmp_path / "numbered")
    assert not numbered.numbering.has_same_nodes
    fewer = compared(
        mesh, replace(mesh, node_sets={**mesh.node_sets, "tip": mesh.node_sets["tip"][1:]}), tmp_path / "set"
    )
    assert fewer.numbering.sets_changed == ("tip",)
    assert not fewer.numbering.is_kept
    assert "node sets of other nodes: tip" in fewer.numbering.sentence
    turned = compared(mesh, replace(mesh, cells=np.roll(mesh.cells, 1, axis=0)), tmp_path / "elements")
    assert not turned.numbering.has_same_elements
    assert "Node numbers and node sets stay valid" in turned.numbering.sentence
    moved = compared(mesh, replace(mesh, seam=mesh.seam * 1.001), tmp_path / "places")
    assert moved.numbering.has_same_nodes
    assert not moved.numbering.has_same_places
    region = mesh.region.copy()
    region[0] = 1 - region[0]
    other = compared(mesh, replace(mesh, region=region), tmp_path / "regions")
    assert not other.numbering.has_same_regions


def test_nodes_in_another_order_but_of_the_same_numbers_are_the_same(tmp_path):
    mesh = tube(12, 4, layers=sandwich())
    order = np.random.default_rng(3).permutation(mesh.n_corners)
    order = np.concatenate([order, np.arange(mesh.n_corners, len(mesh.points))])
    place = np.argsort(order)
    shuffled = replace(
        mesh,
        points=mesh.points[order],
        cells=place[mesh.cells],
        sheet=mesh.sheet[order],
        row=mesh.row[order],
        seam=mesh.seam[order],
        node_number=mesh.node_number[order],
        node_sets={name: np.sort(place[nodes]) for name, nodes in mesh.node_sets.items()},
    )
    found = compared(mesh, shuffled, tmp_path)
    assert found.numbering.is_kept
    assert found.surface.nodes.largest == 0.0
    assert found.elements.turned.max() == 0.0


# --- surface ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("shape", ["quad", "triangle"])
@pytest.mark.parametrize("share", [1.02, 0.97])
def test_height_over_a_tube_is_the_change_of_its_radius(shape, share, tmp_path):
    radius = 0.5
    pair = [tube(48, 8, radius=r, layers=sandwich(), shape=shape) for r in (radius, radius * share)]
    found = compared(*pair, tmp_path)
    np.testing.assert_allclose(found.surface.height, radius * (share - 1.0), atol=2e-6)
    np.testing.assert_allclose(found.surface.nodes.distance, radius * abs(share - 1.0), rtol=1e-9)
    assert found.largest["chord"].difference == pytest.approx(2 * radius * (share - 1.0), rel=1e-9)


def test_closest_points_of_a_box_are_those_of_its_rectangles():
    """Every element of a box is a rectangle along the axes, to which the distance has a closed form."""
    mesh = box_with_web(layers=sandwich())
    skin = np.flatnonzero(mesh.region != 2)
    rng = np.random.default_rng(11)
    low, high = mesh.points.min(axis=0), mesh.points.max(axis=0)
    points = rng.uniform(low - 0.05, high + 0.05, (200, 3))
    feet = closest_points(mesh, points, elements=skin)
    corners = mesh.points[mesh.cells[skin, :4]]
    nearest = np.clip(points[:, None], corners.min(axis=1), corners.max(axis=1))
    wanted = np.linalg.norm(points[:, None] - nearest, axis=2).min(axis=1)
    far = feet.distance - wanted
    assert far.min() > -1e-12
    # candidates are those round the nearest sample: near the surface they are enough
    near = wanted < 0.05
    assert near.sum() > 50
    np.testing.assert_allclose(feet.distance[near], wanted[near], atol=1e-9)


def test_another_division_of_a_cone_is_the_same_surface(tmp_path):
    coarse, fine = (tube(around, along, taper=0.6, layers=sandwich()) for around, along in ((24, 6), (40, 10)))
    found = compared(coarse, fine, tmp_path / "same")
    assert found.surface.nodes.way == BY_PLACE
    assert found.surface.nodes.largest < 5e-4
    assert found.surface.shape.largest < 1e-4
    # and one that is 10 mm larger is just that
    larger = tube(40, 10, radius=0.51, taper=0.6 * 0.5 / 0.51 + 0.01 / 0.51, layers=sandwich())
    found = compared(coarse, larger, tmp_path / "larger")
    assert found.surface.nodes.largest == pytest.approx(0.01, abs=5e-4)
    assert np.median(found.surface.height) == pytest.approx(0.01 * np.cos(np.arctan(0.1)), abs=1e-4)


def test_rings_converge_with_the_fourth_power_of_the_step():
    errors = []
    fine = tube(96, 12, taper=0.6)
    for around in (12, 24, 48):
        mesh = tube(around, 6, taper=0.6)
        grid, wanted = skin_grid(mesh), skin_grid(fine)
        found = points_at(mesh, grid, wanted.row, wanted.seam)
        errors.append(np.linalg.norm(found - fine.points[wanted.node], axis=2)[:, 8:-8].max())
    assert errors[0] / errors[1] > 12.0
    assert errors[1] / errors[2] > 12.0


def test_turned_elements_are_counted(tmp_path):
    mesh = tube(12, 4, layers=sandwich())
    angle = np.radians(5.0)
    e1, e2 = mesh.e1.copy(), mesh.e2.copy()
    for k in (3, 10, 17):
        e1[k] = np.cos(angle) * mesh.e1[k] + np.sin(angle) * mesh.e2[k]
        e2[k] = np.cross(mesh.e3[k], e1[k])
    found = compared(mesh, replace(mesh, e1=e1, e2=e2), tmp_path)
    np.testing.assert_array_equal(np.flatnonzero(found.elements.turned > np.radians(1.0)), [3, 10, 17])
    assert found.elements.turned.max() == pytest.approx(angle, abs=1e-9)
    assert found.elements.tilted.max() == 0.0


# --- stacks and tables ------------------------------------------------------------------------------------------------


def test_stacks_are_compared_by_content_not_by_number(tmp_path):
    mesh = tube(12, 4, layers=sandwich(), n_bands=2)
    swapped = replace(mesh, stacks=mesh.stacks[::-1], stack=1 - mesh.stack)
    found = compared(mesh, swapped, tmp_path)
    assert not found.elements.stack_changed.any()
    assert not found.is_equal
    assert [(entry.state, entry.value("number").difference) for entry in found.stacks] == [(CHANGED, 1), (CHANGED, -1)]


def test_new_and_gone_plies_and_materials(tmp_path):
    mesh = tube(12, 4, layers=sandwich())
    other = replace(GLASS_UD, name="other glass", E1=39e9)
    extra = Layer("patch", other, 0.001, 0.0)
    stack = Stack((*mesh.stacks[0].layers[:-1], extra))
    materials = {**mesh.materials, "other glass": other, "glass UD": replace(GLASS_UD, E1=40e9)}
    found = compared(mesh, replace(mesh, stacks=(stack,), materials=materials), tmp_path)
    states = {entry.name: entry.state for entry in found.plies}
    assert states[extra.ply] == NEW
    assert states[mesh.stacks[0].layers[-1].ply] == GONE
    assert {entry.name: entry.state for entry in found.materials}["other glass"] == NEW
    changed = {entry.name: entry for entry in found.materials}["glass UD"]
    assert (changed.value("E1").old, changed.value("E1").new) == (41e9, 40e9)
    assert found.elements.stack_changed.all()


def test_stations_that_came_and_went(blade, old, tmp_path):
    table = blade.stations
    keep = np.arange(len(table.z)) != 6
    fewer = replace(
        table,
        **{
            name: getattr(table, name)[keep]
            for name in ("z", "chord", "twist", "pitch_axis", "thickness_ratio", "prebend", "sweep")
        },
        profile=tuple(np.array(table.profile, dtype=object)[keep]),
    )
    found = compare_meshes(old, written(build_mesh(replace(blade, stations=fewer)), tmp_path))
    (entry,) = found.stations.entries
    assert (entry.state, entry.value("z").old, entry.value("z").new) == (GONE, table.z[6], None)
    summary = old.summary["stations"]
    assert [station["z_m"] for station in summary] == table.z.tolist()
    assert [station["profile"] for station in summary] == list(table.profile)
    np.testing.assert_allclose([station["twist_deg"] for station in summary], np.degrees(table.twist), rtol=1e-11)


def test_meshes_of_an_earlier_version_have_no_stations_to_compare(tmp_path):
    mesh = tube(12, 4, layers=sandwich())
    found = compared(mesh, replace(mesh, points=1.1 * mesh.points), tmp_path)
    assert not found.stations.is_known


# --- command ----------------------------------------------------------------------------------------------------------


def run(arguments: list[str]) -> int:
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    return int(ended.value.code or 0)


def test_the_command_says_first_whether_numbers_stay_valid(tmp_path, capsys, monkeypatch):
    monkeypatch.setenv("COLUMNS", "100")
    mesh = box_with_web(layers=sandwich())
    write(mesh, tmp_path / "old", formats=FORMATS)
    write(replace(mesh, points=mesh.points * [1.0, 1.1, 1.0], title="wider"), tmp_path / "new", formats=FORMATS)
    assert run(["diff", str(tmp_path / "old"), str(tmp_path / "new"), "--all"]) == 1
    said = capsys.readouterr().out
    lines = said.splitlines()
    assert "stay valid" in " ".join(lines[1:4])
    assert "nodes moved:" in said
    report = json.loads((tmp_path / "new/sample.diff.json").read_text())
    assert report["numbers"]["kept"]
    assert not report["equal"]
    moves = np.abs(0.1 * mesh.points[:, 1])
    assert report["surface"]["nodes"]["largest_m"] == pytest.approx(moves.max(), rel=1e-8)
    picture = tmp_path / "new/sample.diff.png"
    assert picture.read_bytes().startswith(b"\x89PNG")
    # a comparison without a picture takes away the one of another comparison
    assert run(["diff", str(tmp_path / "new"), str(tmp_path / "new"), "--no-picture"]) == 0
    assert not picture.exists()
    capsys.readouterr()


def test_a_new_build_takes_the_comparison_of_the_old_one_away(tmp_path, capsys):
    mesh = tube(8, 2, layers=sandwich())
    write(mesh, tmp_path, formats=FORMATS)
    assert run(["diff", str(tmp_path), str(tmp_path)]) == 0
    assert (tmp_path / "sample.diff.png").exists()
    write(mesh, tmp_path, formats=FORMATS)
    assert not list(tmp_path.glob("*.diff.*"))
    capsys.readouterr()


def test_the_report_goes_where_it_is_wanted(tmp_path, capsys):
    write(tube(8, 2, layers=sandwich()), tmp_path / "old", formats=FORMATS)
    there = sorted(path.name for path in (tmp_path / "old").iterdir())
    both = [str(tmp_path / "old")] * 2
    assert run(["diff", *both, "-o", str(tmp_path / "change.json"), "--no-picture"]) == 0
    assert json.loads((tmp_path / "change.json").read_text())["equal"]
    assert sorted(path.name for path in (tmp_path / "old").iterdir()) == there
    assert run(["diff", *both, "-o", str(tmp_path / "nowhere/change.json")]) == 3
    assert run(["diff", *both, "-o", str(tmp_path / "change.png")]) == 3
    capsys.readouterr()


def test_wrong_input(tmp_path, capsys):
    write(tube(8, 2, layers=sandwich()), tmp_path / "old", formats=FORMATS)
    assert run(["diff", str(tmp_path / "old"), str(tmp_path / "none")]) == 2
    assert "is not there" in capsys.readouterr().err
    assert run(["diff", str(tmp_path / "old"), str(tmp_path / "old"), "--turn", "nan"]) == 2
    (tmp_path / "old/sample.vtu").unlink()
    with pytest.raises(InputError, match="vtu"):
        compare_directories(tmp_path / "old", tmp_path / "old")
    capsys.readouterr()


# --- loads of the old mesh on the new one -----------------------------------------------------------------------------


def test_a_load_file_of_the_old_mesh_is_valid_on_the_new_one(blade, old, tmp_path):
    """Its node numbers are there, at the same parametric places, and its sets hold the same nodes."""
    table = blade.stations
    changed = replace(blade, stations=replace(table, chord=np.where(table.z > 16, 1.07 * table.chord, table.chord)))
    new = written(build_mesh(changed, keep=old.mesh), tmp_path, ("vtu", "inp"))
    nose = old.mesh.report.seams.index("leading edge")
    on_nose = np.flatnonzero((old.mesh.sheet == 0) & (old.mesh.seam == nose) & (old.mesh.points[:, 2] > 16))
    text = "*CLOAD\n" + "".join(f"{old.mesh.node_number[k]},1,12.5\n" for k in on_nose) + "TIP,2,3.\n"
    decks = [deck_numbers((built.file("inp")).read_text()) for built in (old, new)]
    for line in text.splitlines()[1:]:
        target = line.split(",")[0]
        if target.isdigit():
            places = []
            for built, (nodes, _) in zip((old, new), decks, strict=True):
                (k,) = np.flatnonzero(built.mesh.node_number == int(target))
                np.testing.assert_allclose(nodes[int(target)], built.mesh.points[k], rtol=1e-9, atol=1e-9)
                places.append((built.mesh.sheet[k], built.mesh.row[k], built.mesh.seam[k]))
            assert places[0] == places[1]
            assert places[0][2] == nose
        else:
            assert decks[0][1][target] == decks[1][1][target]
    assert len(on_nose) > 5


def deck_numbers(text: str) -> tuple[dict[int, list[float]], dict[str, list[int]]]:
    """Nodes and node sets of a keyword deck."""
    nodes: dict[int, list[float]] = {}
    sets: dict[str, list[int]] = {}
    keyword = ""
    for line in text.splitlines():
        if line.startswith("*"):
            keyword = line
            continue
        fields = [field.strip() for field in line.split(",") if field.strip()]
        if keyword.startswith("*NODE,"):
            nodes[int(fields[0])] = [float(field) for field in fields[1:]]
        elif keyword.startswith("*NSET,NSET="):
            sets.setdefault(keyword.removeprefix("*NSET,NSET="), []).extend(map(int, fields))
    return nodes, sets


@pytest.mark.solver
@needs_ccx
def test_a_solver_takes_the_old_load_file_on_the_new_mesh(tmp_path):
    """A load file by number and by set, included in the deck of a tube that grew: the reactions are its loads."""
    before, after = (tube(8, 3, radius=r, layers=sandwich()) for r in (0.5, 0.55))
    assert compared(before, after, tmp_path / "both").numbering.is_kept
    ring = before.node_set("tip")
    loads = "*CLOAD\n" + "".join(f"{before.node_number[k]},1,10.\n" for k in ring) + "TIP,2,2.\n"
    reactions = []
    for name, mesh in (("before", before), ("after", after)):
        folder = tmp_path / name
        write(mesh, folder, formats=("inp",))
        (folder / "loads.inc").write_text(loads)
        deck = folder / "sample.inp"
        head = deck.read_text().split("*BOUNDARY")[0]
        step = "*BOUNDARY\nROOT,1,3\n*STEP\n*STATIC\n*INCLUDE,INPUT=loads.inc\n*NODE PRINT,NSET=ROOT,TOTALS=ONLY\nRF\n"
        deck.write_text(f"{head}{step}*END STEP\n")
        solved = solve_deck(deck)
        reactions.append(solved.block("total force (fx,fy,fz) for set ROOT")[0])
    wanted = [-10.0 * len(ring), -2.0 * len(ring), 0.0]
    for found in reactions:
        np.testing.assert_allclose(found, wanted, rtol=1e-4, atol=1e-2)
