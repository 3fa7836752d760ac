"""A rebuild under the numbers of an earlier mesh."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from time import perf_counter

import gmsh
import numpy as np
import pytest
from blades import demonstration, rule
from topology import consistent_orientation, outward_share, stray_free_edges

import skinmesh
from skinmesh.check.reading import read_built_mesh
from skinmesh.commands.main import main
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.errors import InputError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.keep import kept_layout
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface

ROOT = Path(__file__).parents[1]
BLADES = [
    "examples/marram-24/marram-24.yaml",
    "examples/tidal-6/tidal-6.yaml",
    "tests/published/research-rotor/research-rotor.yaml",
]


def wider_outboard(blade):
    table = blade.stations
    chord = np.where(table.z > table.z[-1] * 2 / 3, 1.07 * table.chord, table.chord)
    return replace(blade, stations=replace(table, chord=chord))


def assert_same_numbers(old: ShellMesh, new: ShellMesh) -> None:
    for name in ("connectivity", "region", "element_number"):
        np.testing.assert_array_equal(getattr(old, name), getattr(new, name))
    for name in ("sheet", "row", "seam", "node_number"):
        np.testing.assert_array_equal(getattr(old, name)[: old.n_nodes], getattr(new, name)[: old.n_nodes])
    assert old.regions == new.regions
    assert old.node_sets.keys() == new.node_sets.keys()
    for name in old.node_sets:
        np.testing.assert_array_equal(old.node_set(name), new.node_set(name))


@pytest.mark.parametrize("path", BLADES)
def test_chord_seven_per_cent_wider_outboard(path, tmp_path):
    blade = skinmesh.load(ROOT / path)
    skinmesh.write(build_mesh(blade), tmp_path)
    old = read_built_mesh(tmp_path).mesh
    changed = wider_outboard(blade)
    new = build_mesh(changed, keep=old)
    assert_same_numbers(old, new)
    # the nodes lie where a skin map made for the new blade has them
    surface = loft_surface(changed)
    skin, _ = unroll_skin(changed, surface, kept=kept_layout(old))
    on_skin = (new.sheet == 0) & (new.seam <= skin.n_seams - 1)
    wanted = skin.points(new.sheet, new.row, new.seam)
    assert np.abs(new.points - wanted)[on_skin].max() < 1e-9
    # and those away from the trailing edge on the surface itself
    inner = on_skin & (new.seam >= 1.0) & (new.seam <= skin.n_seams - 2.0)
    t = skin.surface_parameter(new.row[inner], new.seam[inner])
    assert np.abs(surface.points(new.points[inner, 2], t) - new.points[inner]).max() < 1e-9
    assert stray_free_edges(new) == 0
    assert consistent_orientation(new)
    assert outward_share(new) == 1.0


CHANGES = {
    "length": lambda b: replace(b, stations=replace(b.stations, z=b.stations.z * 1.03)),
    "twist": lambda b: replace(b, stations=replace(b.stations, twist=b.stations.twist + 0.03)),
    "web span": lambda b: replace(
        b, layout=replace(b.layout, webs=tuple(replace(w, span=(3.3, 20.0)) for w in b.layout.webs))
    ),
    "cap width": lambda b: replace(
        b, layout=replace(b.layout, caps=(replace(b.layout.caps[0], width=Spanwise([0, 24], [0.36, 0.1])),))
    ),
    "profile": lambda b: replace(b, profiles={**b.profiles, "thin": b.profiles["mid"]}),
    "size": lambda b: replace(b, mesh=replace(b.mesh, size=constant(0.3))),
    "plies": lambda b: replace(b, plies=b.plies[:-2] + b.plies[-1:]),
}


def moved_web_ends(blade):
    """Web ends clear of the stations, so that a change of span does not part what was one row."""
    webs = tuple(replace(web, span=(3.0, 20.5)) for web in blade.layout.webs)
    return replace(blade, layout=replace(blade.layout, webs=webs))


@pytest.mark.parametrize("name", CHANGES)
@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_other_changes_keep_the_numbers_too(name, shape):
    blade = moved_web_ends(demonstration(mesh=rule(0.2, close_gap=0.012, shape=shape)))
    old = build_mesh(blade)
    new = build_mesh(CHANGES[name](blade), keep=old)
    assert_same_numbers(old, new)
    assert stray_free_edges(new) == 0
    assert outward_share(new) == 1.0


def with_web_ends(blade, share):
    """Web ends between stations, this share of the way from one to the next."""
    z = blade.stations.z

    def moved(end):
        i = int(np.clip(np.searchsorted(z, end), 1, len(z) - 1))
        return float(z[i - 1] + share * (z[i] - z[i - 1]))

    webs = tuple(replace(web, span=(moved(web.span[0]), moved(web.span[1]))) for web in blade.layout.webs)
    return replace(blade, layout=replace(blade.layout, webs=webs))


def longer(blade):
    """Length and web ends by 3 per cent."""
    webs = tuple(replace(w, span=(1.03 * w.span[0], 1.03 * w.span[1])) for w in blade.layout.webs)
    table = replace(blade.stations, z=1.03 * blade.stations.z)
    return replace(blade, stations=table, layout=replace(blade.layout, webs=webs))


def wider_caps(blade):
    caps = tuple(replace(cap, width=Spanwise(cap.width.z, 1.1 * cap.width.value)) for cap in blade.layout.caps)
    return replace(blade, layout=replace(blade.layout, caps=caps))


def other_tip(blade):
    """The profile of the outermost station is that of the last one before it that has another."""
    names = [name for name in blade.stations.profile if name is not None]
    other = next(name for name in reversed(names) if name != names[-1])
    table = replace(blade.stations, profile=(*blade.stations.profile[:-1], other))
    return replace(blade, stations=table)


LISTED = {
    "length": longer,
    "twist": lambda b: replace(b, stations=replace(b.stations, twist=1.2 * b.stations.twist)),
    "web span": lambda b: with_web_ends(b, 0.55),
    "cap width": wider_caps,
    "profile": other_tip,
}


@pytest.mark.parametrize("path", BLADES)
def test_the_listed_changes_keep_the_numbers_of_every_blade(path):
    blade = skinmesh.load(ROOT / path)
    coarse = replace(blade, mesh=replace(blade.mesh, size=Spanwise(blade.mesh.size.z, 2.5 * blade.mesh.size.value)))
    coarse = with_web_ends(coarse, 0.4)
    old = build_mesh(coarse)
    for name, change in LISTED.items():
        new = build_mesh(change(coarse), keep=old)
        assert_same_numbers(old, new)
        assert np.linalg.norm(new.points - old.points, axis=1).max() > 1e-3, name
        assert stray_free_edges(new) == 0, name


def test_an_unchanged_blade_gives_the_same_mesh():
    for hand in ("clockwise", "counter-clockwise"):
        blade = demonstration(hand=hand)
        old = build_mesh(blade)
        new = build_mesh(blade, keep=old)
        assert_same_numbers(old, new)
        np.testing.assert_array_equal(old.points, new.points)
        np.testing.assert_array_equal(old.stack, new.stack)


def test_stack_numbers_stay_where_their_content_stays():
    blade = demonstration(mesh=rule(0.2, close_gap=0.012))
    old = build_mesh(blade)
    thicker = replace(blade, plies=(*blade.plies[:-1], replace(blade.plies[-1], thickness=constant(0.003))))
    new = build_mesh(thicker, keep=old)
    before = {stack.content_name: i for i, stack in enumerate(old.stacks)}
    for i in np.unique(new.stack):
        name = new.stacks[i].content_name
        assert before.get(name, i) == i
    assert sum(new.stacks[i].content_name not in before for i in np.unique(new.stack)) > 0
    in_web = np.array([region.kind == "web" for region in new.regions])[new.region]
    np.testing.assert_array_equal(old.stack[~in_web], new.stack[~in_web])


def test_the_mesh_kernel_is_not_run(monkeypatch):
    blade = demonstration(mesh=rule(0.3, close_gap=0.012))
    old = build_mesh(blade)

    def never(*_args, **_kwargs):
        raise AssertionError("gmsh was started")

    monkeypatch.setattr(gmsh, "initialize", never)
    build_mesh(wider_outboard(blade), keep=old)


def test_another_layout_is_refused_with_what_changed():
    blade = demonstration(mesh=rule(0.3, close_gap=0.012))
    old = build_mesh(blade)
    one_web = replace(blade, layout=replace(blade.layout, webs=blade.layout.webs[:1]))
    with pytest.raises(InputError, match=r"no longer there: .*aft web"):
        build_mesh(one_web, keep=old)
    for change, word in (({"order": 1}, "order"), ({"shape": "triangle"}, "shape")):
        with pytest.raises(InputError, match=word):
            build_mesh(replace(blade, mesh=replace(blade.mesh, **change)), keep=old)


def test_poor_divisions_are_told():
    blade = demonstration(mesh=rule(0.3, close_gap=0.012))
    old = build_mesh(blade)
    table = blade.stations
    slender = replace(blade, stations=replace(table, chord=np.where(table.z > 12, 0.45 * table.chord, table.chord)))
    new = build_mesh(slender, keep=old)
    assert any(text.startswith("kept divisions:") for text in new.report.warnings)


def test_mesh_stage_of_a_rebuild_is_a_small_part_of_a_fresh_one():
    """At the default size of Marram 24, some 14 000 elements; the least of two runs each."""
    blade = demonstration(mesh=rule(0.12, close_gap=0.012))
    old = build_mesh(blade)
    fresh, kept = (min(mesh_stage(blade, keep) for _ in range(2)) for keep in (None, old))
    assert kept < fresh / 5.0


def mesh_stage(blade, keep) -> float:
    times = {}
    build_mesh(blade, keep=keep, progress=lambda stage, _done: times.setdefault(stage, perf_counter()))
    return times["elements"] - times["mesh"]


@pytest.mark.parametrize("order", [1, 2])
def test_from_the_command_line(order, tmp_path, capsys):
    """A chord changed in the table, and a rebuild from files alone; the keyword deck's mid nodes stay too."""
    for name in ("tidal-6.csv", "tidal-6.yaml"):
        text = (ROOT / "examples/tidal-6" / name).read_text().replace("../../geometry/", f"{ROOT}/geometry/")
        (tmp_path / name).write_text(text.replace("order: 2", f"order: {order}"))
    blade = str(tmp_path / "tidal-6.yaml")
    assert run(["build", blade, "-o", str(tmp_path / "before")]) == 0
    table = tmp_path / "tidal-6.csv"
    table.write_text(table.read_text().replace("3.90, 532,", "3.90, 560,"))
    assert run(["build", blade, "-o", str(tmp_path / "after"), "--keep", str(tmp_path / "before")]) == 0
    assert "nodes moved" in capsys.readouterr().out
    old, new = (read_built_mesh(tmp_path / name).mesh for name in ("before", "after"))
    assert_same_numbers(old, new)
    assert 0.001 < np.linalg.norm(new.nodes - old.nodes, axis=1).max() < 0.05
    elements = [
        (tmp_path / name / "tidal-6.inp").read_text().split("*ELEMENT", 1)[1].split("*ELSET", 1)[0].split("*NSET", 1)[0]
        for name in ("before", "after")
    ]
    assert elements[0] == elements[1]
    # whose divisions these are is said, and still after a rebuild of the rebuild
    assert run(["build", blade, "-o", str(tmp_path / "later"), "--keep", str(tmp_path / "after")]) == 0
    before, after, later = (
        json.loads((tmp_path / name / "tidal-6.summary.json").read_text()) for name in ("before", "after", "later")
    )
    assert before["divisions_kept_from"] is None
    for summary in (after, later):
        assert summary["divisions_kept_from"] == {"title": before["title"], "inputs": before["inputs"]}
    assert after["inputs"] != before["inputs"]


def run(arguments: list[str]) -> int:
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    return int(ended.value.code or 0)
