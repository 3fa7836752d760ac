"""The checks of a built mesh: sound meshes pass, files that cannot be read are refused, the command answers."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from hashlib import sha256
from pathlib import Path

import blades
import numpy as np
import pytest
from click.testing import CliRunner
from numpy.testing import assert_allclose, assert_array_equal
from sample_meshes import HOSTILE, box_with_web, numbered_box, sandwich, tube
from solver_runs import read_keyword_deck

from skinmesh.check.finding import FAIL, NOT_MADE, PASS, VERDICTS, WARN, Finding
from skinmesh.check.limits import DEFAULT_LIMITS, set_limits
from skinmesh.check.reading import read_built_mesh
from skinmesh.check.run import CheckReport, check_directory, checks_json, write_checks
from skinmesh.commands.check_command import check
from skinmesh.definition.blade import COUNTER_CLOCKWISE, FromAxis, Layout, NacaProfile, PlyRule, Source, WebRule
from skinmesh.definition.spanwise import constant
from skinmesh.errors import InputError, OutputError
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.files import write

DECKS = ("vtu", "inp", "bdf", "msh")


def report_of(mesh: ShellMesh, directory: Path, *, formats: tuple[str, ...] = DECKS) -> CheckReport:
    write(mesh, directory, formats=formats)
    return check_directory(directory)


def lines_of(report: CheckReport, check_name: str) -> list[Finding]:
    return [finding for finding in report.findings if finding.check == check_name]


def failed(report: CheckReport) -> list[str]:
    return [f"{f.check}: {f.measured}; {f.where}" for f in report.findings if f.verdict == FAIL]


def short_blade(**changes: object):
    """A short untwisted blade with one web and a blunt trailing edge."""
    table = blades.stations([0.0, 2.0, 4.0], [1.0, 0.9, 0.8], ["foil", "foil", "foil"])
    webs = (WebRule("web", blades.foot(FromAxis(constant(0.0))), (0.5, 3.5)),)
    layout = Layout(webs=webs, leading_strip=constant(0.05), trailing_strip=constant(0.08))
    plies = (
        blades.skin_ply(0.002),
        PlyRule("web face", blades.GLASS, constant(0.002), constant(1), 0.5, ("webs",)),
    )
    rule = blades.rule(0.08, **changes)
    return blades.blade(table, {"foil": NacaProfile("0021", 0.01)}, layout=layout, plies=plies, mesh=rule)


@pytest.mark.parametrize("hand", ["clockwise", COUNTER_CLOCKWISE])
@pytest.mark.parametrize(("order", "shape"), [(1, "quad"), (2, "quad"), (1, "triangle"), (2, "triangle")])
def test_a_sound_blade_fails_nowhere(tmp_path: Path, hand: str, order: int, shape: str) -> None:
    blade = replace(short_blade(order=order, shape=shape), hand=hand)
    report = report_of(build_mesh(blade), tmp_path)
    assert failed(report) == []
    assert {f.check for f in report.findings if f.verdict == NOT_MADE} <= {"fidelity", "inputs"}
    assert [f.verdict for f in lines_of(report, "MSH file")] == [PASS, PASS]


@pytest.mark.parametrize("order", [1, 2])
def test_the_mesh_comes_back_from_its_files(tmp_path: Path, order: int) -> None:
    mesh = build_mesh(short_blade(order=order))
    write(mesh, tmp_path, formats=("vtu",))
    found = read_built_mesh(tmp_path).mesh
    assert found.order == order
    assert_array_equal(found.nodes, mesh.nodes)
    assert_array_equal(found.connectivity, mesh.connectivity)
    assert_array_equal(found.points[found.cells[:, :4]], mesh.points[mesh.cells[:, :4]])
    for name in ("region", "stack", "offset", "e1", "e2", "e3", "element_number"):
        assert_array_equal(getattr(found, name), getattr(mesh, name), err_msg=name)
    for name in ("sheet", "row", "seam", "node_number"):
        assert_array_equal(getattr(found, name)[: mesh.n_nodes], getattr(mesh, name)[: mesh.n_nodes], err_msg=name)
    assert found.regions == mesh.regions
    assert [label for label, _ in found.report.rows] == [label for label, _ in mesh.report.rows]
    assert_allclose([z for _, z in found.report.rows], [z for _, z in mesh.report.rows], rtol=1e-11)
    assert [s.content_name for s in found.stacks] == [s.content_name for s in mesh.stacks]
    used = {layer.material for stack in mesh.stacks for layer in stack.layers}
    assert {layer.material for stack in found.stacks for layer in stack.layers} == used
    for name in mesh.node_sets:
        assert_array_equal(np.sort(found.node_set(name)), mesh.node_set(name), err_msg=name)


def test_mid_nodes_that_a_file_lacks_lie_in_the_middle_of_edges(tmp_path: Path) -> None:
    write(build_mesh(short_blade(order=1)), tmp_path, formats=("vtu",))
    built = read_built_mesh(tmp_path)
    mesh = built.mesh
    assert not built.has_mid_nodes
    corners = mesh.points[mesh.cells[:, :4]]
    assert_allclose(mesh.points[mesh.cells[:, 4:]], 0.5 * (corners + np.roll(corners, -1, axis=1)), atol=1e-15)


def test_hostile_names_and_odd_numbers(tmp_path: Path) -> None:
    mesh = numbered_box()
    names = ("=1+2", "'quoted", "@sum")
    plies = [replace(layer, ply=names[i % 3]) for i, layer in enumerate(sandwich())]
    stacks = tuple(replace(stack, layers=tuple(plies[: len(stack.layers)])) for stack in mesh.stacks)
    write(replace(mesh, stacks=stacks), tmp_path, formats=DECKS)
    report = check_directory(tmp_path)
    assert [region.name for region in report.built.mesh.regions] == list(HOSTILE)
    assert report.built.mesh.stacks[0].layers[0].ply == "=1+2"
    assert not lines_of(report, "files agree")[1].where
    for name in ("joints", "axes", "keyword deck", "bulk data", "MSH file", "mass", "files agree"):
        assert all(finding.verdict == PASS for finding in lines_of(report, name)), name


def test_without_plies_the_checks_of_plies_are_not_made(tmp_path: Path) -> None:
    report = report_of(tube(16, 4), tmp_path)
    assert failed(report) == []
    not_made = {finding.check for finding in report.findings if finding.verdict == NOT_MADE}
    assert not_made >= {"coverage", "missing plies", "ply drops", "inner face", "offset", "rigid knots", "ply order"}
    assert {finding.verdict for finding in lines_of(report, "joints")} == {PASS}


def test_a_check_that_cannot_be_made_is_no_pass(tmp_path: Path) -> None:
    report = report_of(tube(16, 4, layers=sandwich()), tmp_path, formats=("vtu",))
    for name in ("keyword deck", "bulk data"):
        (line,) = lines_of(report, name)
        assert line.verdict == NOT_MADE
        assert "there is no sample." in line.measured
    assert report.counts[NOT_MADE] >= 2


def test_thickness_over_radius_of_a_tube(tmp_path: Path) -> None:
    layer = Layer("shell", blades.GLASS, 0.06, 0.0)
    report = report_of(tube(48, 4, radius=0.5, layers=[layer]), tmp_path, formats=("vtu",))
    (line,) = lines_of(report, "thickness over radius")
    assert line.verdict == WARN
    # A polygon turns by 2π/n over the distance of its sides' middles.
    expected = 0.06 / 0.5 * (2 * np.pi / 48) / (2 * np.sin(np.pi / 48) * np.cos(np.pi / 48))
    assert [region["largest"] for region in line.details["regions"]] == pytest.approx([expected] * 2, rel=5e-3)


@pytest.mark.parametrize("depth", [0.7, 0.9, 1.3])
def test_folding_of_a_tube(tmp_path: Path, depth: float) -> None:
    layers = [Layer(f"ply {k}", blades.GLASS, depth * 0.5 / 40, 0.7 * (-1) ** k) for k in range(40)]
    report = report_of(tube(64, 2, radius=0.5, layers=layers), tmp_path, formats=("vtu",))
    (line,) = lines_of(report, "inner face")
    assert line.details["depth"] == pytest.approx(depth, rel=0.02)
    assert line.verdict == (PASS if depth < 0.8 else WARN if depth < 1.0 else FAIL)
    assert len(line.elements) == (0 if depth < 0.8 else 128)


def wedge(thickness: float) -> ShellMesh:
    """An untwisted symmetric blade with a trailing edge that is nearly a wedge."""
    table = blades.stations([0.0, 1.0, 2.0], [1.0, 1.0, 1.0], ["foil"] * 3)
    blade = blades.blade(
        table, {"foil": NacaProfile("0012", 0.0)}, plies=[blades.skin_ply(thickness)], mesh=blades.rule(0.04)
    )
    return build_mesh(blade)


def half_thickness(x: float) -> float:
    """NACA 0012 (Report 460, from memory), its gap of 0.00126 at each side closed linearly."""
    root = 0.2969 * np.sqrt(x) - 0.1260 * x - 0.3516 * x**2 + 0.2843 * x**3 - 0.1015 * x**4
    return float(0.6 * root - 0.00126 * x)


@pytest.mark.parametrize("thickness", [0.001, 0.004])
def test_overlap_begins_where_the_section_is_as_thin_as_both_laminates(tmp_path: Path, thickness: float) -> None:
    report = report_of(wedge(thickness), tmp_path, formats=("vtu",))
    (line,) = lines_of(report, "trailing-edge overlap")
    x = np.linspace(0.5, 1.0, 5001)
    thin = np.array([half_thickness(value) for value in x]) < thickness
    expected = 1.0 - x[np.argmax(thin)]
    for station in line.details["stations"]:
        # Edges are sampled at sixths of elements of 0.04 m.
        assert station["share_of_chord"] == pytest.approx(expected, abs=0.012)


@pytest.mark.parametrize(("web_thickness", "verdict"), [(0.002, PASS), (0.005, WARN)])
def test_a_web_that_ends_on_thin_skin_is_named(tmp_path: Path, web_thickness: float, verdict: str) -> None:
    blade = short_blade()
    plies = tuple(replace(p, thickness=constant(web_thickness)) if "webs" in p.covers else p for p in blade.plies)
    (line,) = lines_of(report_of(build_mesh(replace(blade, plies=plies)), tmp_path, formats=("vtu",)), "web ends")
    assert line.verdict == verdict
    assert [(end["z_m"], end["skin_m"], end["web_m"]) for end in line.details["ends"]] == [
        (z, 0.002, web_thickness) for z in (0.5, 0.5, 3.5, 3.5)
    ]
    assert "web, z = 0.500 m on " in line.where
    assert bool(len(line.elements)) == (verdict == WARN)


def test_limits_can_be_set(tmp_path: Path) -> None:
    write(build_mesh(short_blade()), tmp_path, formats=("vtu",))
    loose = check_directory(tmp_path, limits={"aspect": (50, 100)})
    strict = check_directory(tmp_path, limits={"aspect": (1.0, 1.01)})
    verdicts = [
        next(f.verdict for f in report.findings if f.details.get("metric") == "aspect") for report in (loose, strict)
    ]
    assert verdicts == [PASS, FAIL]
    assert "set by the user" in next(f.source for f in loose.findings if f.details.get("metric") == "aspect")


@pytest.mark.parametrize(
    ("wanted", "text"),
    [
        ({"aspekt": (1, 2)}, "no such limit"),
        ({"aspect": (1, 2, 3)}, "a warning and a failure"),
        ({"aspect": (float("nan"), 2)}, "a warning and a failure"),
        ({"aspect": (9, 2)}, "the warning must come first"),
        ({"scaled Jacobian": (0.2, 0.4)}, "the warning must come first"),
    ],
)
def test_wrong_limits_are_refused(wanted: dict[str, tuple[float, ...]], text: str) -> None:
    with pytest.raises(InputError, match=text):
        set_limits(wanted)


def test_every_limit_says_where_it_comes_from() -> None:
    assert all(limit.source and limit.text for limit in DEFAULT_LIMITS.values())


def test_inputs_are_held_against_their_hashes(tmp_path: Path) -> None:
    folder = tmp_path / "blade"
    folder.mkdir()
    for name in ("sample.yaml", "sample.csv"):
        (folder / name).write_text(name)
    sources = tuple(Source(name, sha256(name.encode()).hexdigest()) for name in ("sample.yaml", "sample.csv"))
    write(replace(tube(8, 2), sources=sources), tmp_path / "mesh", formats=("vtu",))

    def line() -> Finding:
        return lines_of(check_directory(tmp_path / "mesh"), "inputs")[0]

    assert (line().verdict, line().where) == (PASS, "")
    (folder / "sample.csv").write_text("changed")
    assert (line().verdict, line().where) == (WARN, "changed: sample.csv")
    (folder / "sample.csv").unlink()
    assert (line().verdict, line().where) == (PASS, "not found: sample.csv")
    (folder / "sample.yaml").unlink()
    assert line().verdict == NOT_MADE


def spoil(ending: str, change: Callable[[str], str]) -> Callable[[Path], None]:
    def apply(directory: Path) -> None:
        path = directory / f"sample.{ending}"
        path.write_text(change(path.read_text(encoding="utf-8")), encoding="utf-8")

    return apply


def without_key(key: str) -> Callable[[str], str]:
    def change(text: str) -> str:
        summary = json.loads(text)
        del summary[key]
        return json.dumps(summary)

    return change


@pytest.mark.parametrize(
    ("damage", "text"),
    [
        (lambda directory: (directory / "sample.vtu").unlink(), r"sample\.vtu: 1 problem\n.*cannot be read"),
        (lambda directory: (directory / "sample.vtu").write_bytes(b""), r"sample\.vtu: 1 problem\n.*cannot be read"),
        (lambda directory: (directory / "sample.stacks.csv").unlink(), r"sample\.stacks\.csv.*\n.*cannot be read"),
        (lambda directory: (directory / "sample.summary.json").unlink(), "holds no file"),
        (lambda directory: (directory / "b.summary.json").write_text("{}"), "holds 2 meshes"),
        (spoil("summary.json", lambda text: text[:200]), r"sample\.summary\.json.*\n.*cannot be read"),
        (spoil("summary.json", lambda _: "[]"), "must be an object"),
        (spoil("summary.json", without_key("materials")), r"sample\.summary\.json: 1 problem\n  materials: is missing"),
        (spoil("summary.json", without_key("regions")), "regions: is missing"),
        (spoil("summary.json", without_key("mass_kg")), "mass_kg: is missing"),
        (spoil("summary.json", without_key("counts")), "counts: is missing"),
        (spoil("summary.json", lambda text: text.replace('"order": 2', '"order": NaN')), "NaN is no number"),
        (spoil("stacks.csv", lambda text: text.replace("0.002", "O.002")), "not a number"),
        (spoil("stacks.csv", lambda text: text.replace("0.002", "nan")), "not a number"),
        (spoil("stacks.csv", lambda text: text.replace("0.002", "-0.002")), "not a number"),
        (spoil("stacks.csv", lambda text: text.replace("balsa", "balza")), "no material 'balza'"),
        (spoil("stacks.csv", lambda text: text.split("\n")[0] + "\n"), "more stacks than the table"),
    ],
)
def test_files_that_cannot_be_read_are_refused(tmp_path: Path, damage: Callable[[Path], None], text: str) -> None:
    write(box_with_web(layers=sandwich(), web_layers=sandwich()[:2]), tmp_path, formats=("vtu",))
    damage(tmp_path)
    with pytest.raises(InputError, match=text):
        check_directory(tmp_path)


@pytest.mark.parametrize("name", ["nowhere", "file"])
def test_a_directory_is_wanted(tmp_path: Path, name: str) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="a folder that 'skinmesh build' wrote"):
        check_directory(tmp_path / name)


def faulty() -> ShellMesh:
    mesh = build_mesh(short_blade())
    return replace(mesh, offset=-mesh.offset)


def test_report_as_json_and_as_sets(tmp_path: Path) -> None:
    report = report_of(faulty(), tmp_path)
    json_path, sets_path = write_checks(report)
    content = json.loads(json_path.read_text(encoding="utf-8"))
    assert content["passed"] is False
    assert content["counts"] == report.counts
    assert len(content["findings"]) == len(report.findings) == sum(content["counts"].values())
    assert "qualified engineer" in content["caution"]
    deck = read_keyword_deck(sets_path.read_text(encoding="ascii"))
    named = {entry["element_set"]: entry for entry in content["findings"] if entry["element_set"]}
    assert set(deck.element_sets) == set(named)
    for name, numbers in deck.element_sets.items():
        assert len(numbers) == named[name]["n_elements"]
        assert set(named[name]["worst_elements"]) <= set(numbers)
        assert len(named[name]["worst_elements"]) == min(len(numbers), 100)
    assert named["CHECK_OFFSET_1"]["verdict"] == FAIL
    assert all(entry["limit"] and entry["source"] for entry in content["findings"] if entry["verdict"] != NOT_MADE)
    assert {entry["verdict"] for entry in content["findings"]} <= set(VERDICTS)
    assert checks_json(check_directory(tmp_path)) == checks_json(report)
    assert not [path for path in tmp_path.iterdir() if path.name.startswith(".")]


def test_a_new_build_takes_the_old_report_away(tmp_path: Path) -> None:
    write_checks(report_of(faulty(), tmp_path, formats=("vtu",)))
    write(build_mesh(short_blade()), tmp_path, formats=("vtu",))
    assert sorted(path.name for path in tmp_path.iterdir()) == ["test.stacks.csv", "test.summary.json", "test.vtu"]


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write anywhere")
def test_a_folder_that_cannot_be_written(tmp_path: Path) -> None:
    report = report_of(tube(8, 2), tmp_path, formats=("vtu",))
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(OutputError, match="cannot write"):
            write_checks(report)
    finally:
        tmp_path.chmod(0o700)


def test_a_report_in_the_way_is_an_output_error(tmp_path: Path) -> None:
    report = report_of(tube(8, 2), tmp_path, formats=("vtu",))
    (tmp_path / "sample.checks.json").mkdir()
    with pytest.raises(OutputError, match=r"cannot write .*checks\.json"):
        write_checks(report)


@pytest.mark.parametrize(("make", "status"), [(lambda: build_mesh(short_blade()), 0), (faulty, 1)])
def test_the_command_answers_with_its_status(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, make: Callable[[], ShellMesh], status: int
) -> None:
    monkeypatch.chdir(tmp_path)
    write(make(), tmp_path / "mesh", formats=("vtu",))
    result = CliRunner().invoke(check, ["mesh"], catch_exceptions=False)
    assert result.exit_code == status
    lines = result.output.rstrip().split("\n")
    assert "certifies nothing" in lines[-1]
    assert all(len(line) <= 160 for line in lines)
    assert "\x1b" not in result.output
    assert (tmp_path / "mesh" / "test.checks.json").is_file()
    for word in ("verdict", "measured", "limit (from)", "worst at", "no pass"):
        assert word in result.output
    assert any(line.startswith("fail ") for line in lines) == bool(status)
    first = lines.index("Look first at") + 1
    assert lines[first].startswith("fail  offset " if status else "warn  ")


def test_the_command_in_a_pipe(tmp_path: Path) -> None:
    write(tube(16, 4, layers=sandwich()), tmp_path, formats=("vtu",))
    program = "from skinmesh.commands.check_command import check; check()"
    done = subprocess.run(
        [sys.executable, "-c", program, str(tmp_path), "--timings"], capture_output=True, text=True, check=False
    )
    assert (done.returncode, done.stderr) == (0, "")
    assert "trailing-edge overlap" in done.stdout
    assert "peak MB" in done.stdout
