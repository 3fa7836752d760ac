"""The command line as a user meets it: what it prints, what it writes, and its exit status."""

from __future__ import annotations

import json
import os
import pty
import re
import select
import signal
import subprocess
import sys
import time
import zipfile
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from rich.console import Console
from sample_meshes import box_with_web, sandwich

import skinmesh
from skinmesh.commands.closing import CAUTION, print_closing, print_timings, significant
from skinmesh.commands.main import main
from skinmesh.commands.stages import Stages
from skinmesh.errors import InputError, MeshError, MissingExtra, OutputError, Problem
from skinmesh.mesh.measure import mass_properties
from skinmesh.mesh.shellmesh import BuildReport, ShellMesh
from skinmesh.write.files import WrittenFile

REPOSITORY = Path(__file__).parents[1]
EXAMPLES = REPOSITORY / "examples"

TABLE = """\
z_m, chord_m, twist_deg, pitch_axis, profile
0,   0.40,    8,         0.5,        ring
0.5, 0.40,    8,         0.5,        ring
1.5, 0.60,    6,         0.35,       foil
4.0, 0.30,    0,         0.35,       foil
"""
BLADE = """\
title: "Small [bold]blade[/bold] $x_1$"
hand: clockwise
planform: small.csv
profiles:
  ring: {circle: true}
  foil: {naca: "4418", trailing_gap: 0.004}
materials:
  glass [red]: {E1: 40e9, E2: 11e9, G12: 3.9e9, nu12: 0.28, density: 1900, source: invented}
layout:
  caps:
    main cap: {centre: {from_axis: 0.0}, width: 0.1}
plies:
  - {ply: "skin [x]", material: "glass [red]", thickness: 1e-3, angle: 45, covers: [skin]}
  - {ply: cap, material: "glass [red]", thickness: 1e-3, count: 3, covers: [main cap],
     span: [0.3, 3.6], step: {root: 0.11, tip: 0.13}}
mesh: {size: 0.1}
"""


@pytest.fixture
def small(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with a small blade, made the current one."""
    (tmp_path / "small.csv").write_text(TABLE)
    (tmp_path / "small.yaml").write_text(BLADE)
    monkeypatch.chdir(tmp_path)
    return tmp_path


class Outcome:
    """Exit status and both outputs of a command run in this process."""

    def __init__(self, status: object, out: str, err: str) -> None:
        self.status, self.out, self.err = status, out, err


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch):
    """Run a command in this process."""
    monkeypatch.setattr(signal, "signal", lambda *_: None)
    monkeypatch.setenv("COLUMNS", "80")

    def call(*arguments: str | Path) -> Outcome:
        capsys.readouterr()
        with pytest.raises(SystemExit) as stop:
            main([str(argument) for argument in arguments])
        return Outcome(stop.value.code, *capsys.readouterr())

    return call


def spawn(*arguments: str, **more) -> subprocess.CompletedProcess[str]:
    """Run a command in a process of its own, its output in pipes."""
    return subprocess.run(
        [sys.executable, "-m", "skinmesh", *arguments], capture_output=True, text=True, timeout=120, check=False, **more
    )


def contents(directory: Path) -> dict[str, bytes]:
    return {str(path.relative_to(directory)): path.read_bytes() for path in directory.rglob("*") if path.is_file()}


# --- help ------------------------------------------------------------------------------------------------------------


def test_help_shows_every_command_and_the_exit_statuses(run) -> None:
    outcome = run("--help")
    assert outcome.status == 0
    for word in ("new", "build", "beam", "check", "trial", "schema", "Exit status: 0 done", "skinmesh new my-blade"):
        assert word in outcome.out


@pytest.mark.parametrize("command", ["new", "build", "beam", "check", "trial", "diff", "schema"])
def test_help_of_a_command_has_an_example_and_fits_80_columns(run, command: str) -> None:
    outcome = run(command, "--help")
    assert outcome.status == 0
    assert re.search(rf"Examples?:\n +skinmesh {command}", outcome.out)
    assert max(map(len, outcome.out.splitlines())) <= 80


def test_the_default_folder_stands_in_the_help(run) -> None:
    assert "stem + '-mesh'" in " ".join(run("build", "--help").out.split())


def test_version(run) -> None:
    outcome = run("--version")
    assert (outcome.status, outcome.out) == (0, f"skinmesh {skinmesh.__version__}\n")


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["bild"], "No such command 'bild'"),
        (["build"], "Missing argument 'BLADE.yaml'"),
        (["build", "small.yaml", "--size", "-1"], "-1.0 is not a length above 0"),
        (["build", "small.yaml", "--size", "nan"], "nan is not a length above 0"),
        (["build", "small.yaml", "--size", "inf"], "inf is not a length above 0"),
        (["build", "small.yaml", "--size", "wide"], "'wide' is not a valid float"),
        (
            ["build", "small.yaml", "--formats", "vtu,bdff"],
            "no format 'bdff'; known: bdf, inp, msh, vtm, vtu; did you mean 'bdf'",
        ),
    ],
)
def test_a_mistyped_command_is_wrong_input(run, small: Path, arguments: list[str], said: str) -> None:
    outcome = run(*arguments)
    assert outcome.status == 2
    assert said in outcome.err
    assert not (small / "small-mesh").exists()


# --- build -----------------------------------------------------------------------------------------------------------


def test_build_writes_every_file_and_sums_up(run, small: Path) -> None:
    outcome = run("build", "small.yaml")
    assert outcome.status == 0, outcome.err
    directory = small / "small-mesh"
    endings = ("vtu", "vtm", "vtm.d", "msh", "inp", "bdf", "stacks.csv", "summary.json", "colours.json", "msh.opt")
    names = {f"small.{ending}" for ending in endings}
    assert {path.name for path in directory.iterdir()} == names
    assert all(name in outcome.out for name in names)
    summary = json.loads((directory / "small.summary.json").read_text())
    mass = float(re.search(r"mass +([\d.\xa0]+) kg", outcome.out)[1].replace("\xa0", ""))
    assert mass == pytest.approx(summary["mass_kg"], rel=1e-3)
    assert f"elements {len(skinmesh.build(skinmesh.load('small.yaml')).cells)}" in " ".join(
        outcome.out.replace("\xa0", "").split()
    )
    assert "Small [bold]blade[/bold] $x_1$" in outcome.out
    assert outcome.err == ""
    assert max(map(len, outcome.out.splitlines())) <= 80
    assert not any(line != line.rstrip() for line in outcome.out.splitlines())
    assert " ".join(CAUTION.split()) in " ".join(outcome.out.split())


def test_the_folder_and_the_formats_are_those_asked_for(run, small: Path) -> None:
    outcome = run("build", "small.yaml", "-o", "a/b [c]", "--formats", "inp, VTU,inp")
    assert outcome.status == 0, outcome.err
    assert sorted(path.name for path in (small / "a" / "b [c]").iterdir()) == [
        "small.colours.json",
        "small.inp",
        "small.stacks.csv",
        "small.summary.json",
        "small.vtu",
    ]
    assert "a/b [c]/" in outcome.out


@pytest.mark.usefixtures("small")
def test_a_size_replaces_that_of_the_blade_file(run) -> None:
    counts = []
    for size in ("0.1", "0.05"):
        outcome = run("build", "small.yaml", "--size", size, "--formats", "vtu")
        assert outcome.status == 0, outcome.err
        counts.append(int(re.search(r"elements +([\d\xa0]+)", outcome.out)[1].replace("\xa0", "")))
    assert run("build", "small.yaml", "--formats", "vtu").out.replace("\xa0", "").count(str(counts[0])) >= 1
    assert counts[1] > 1.8 * counts[0]


def test_pictures_come_with_the_files_and_old_ones_go(run, small: Path) -> None:
    pytest.importorskip("pyvista")
    outcome = run("build", "small.yaml", "--formats", "vtu", "--pictures")
    assert outcome.status == 0, outcome.err
    pictures = {f"small.{word}.png" for word in ("regions", "stacks", "thickness", "e1")}
    assert pictures <= {path.name for path in (small / "small-mesh").iterdir()}
    assert all(name in outcome.out for name in pictures)
    run("build", "small.yaml", "--formats", "vtu")
    assert not list((small / "small-mesh").glob("*.png"))


@pytest.mark.usefixtures("small")
def test_timings_name_the_stages_in_order(run) -> None:
    outcome = run("build", "small.yaml", "--timings", "--formats", "vtu")
    stages = re.findall(r"^(\S.*?) +\d+\.\d\d +\d+$", outcome.out, re.MULTILINE)
    assert stages[0] == "reading"
    assert stages[-4:] == ["write vtu", "write stacks.csv", "write summary.json", "write colours.json"]
    assert {"surface", "skin", "mesh"} <= set(stages)
    peaks = [int(peak) for peak in re.findall(r"^\S.*? +\d+\.\d\d +(\d+)$", outcome.out, re.MULTILINE)]
    assert peaks == sorted(peaks)
    assert peaks[0] > 10


def test_without_plies_the_summary_says_that_the_decks_are_bare(run, small: Path) -> None:
    (small / "small.yaml").write_text(re.sub(r"(?s)plies:.*?(?=mesh:)", "", BLADE))
    outcome = run("build", "small.yaml")
    assert outcome.status == 0, outcome.err
    assert "no plies in the blade file" in outcome.out


def test_a_thick_tube_is_heavier_by_its_surface_than_by_its_layers(run, small: Path) -> None:
    """Ratio of the ring's area to perimeter × thickness: 1 − t/2R."""
    (small / "small.csv").write_text(
        "z_m, chord_m, twist_deg, pitch_axis, profile\n0, 0.4, 0, 0.5, ring\n4, 0.4, 0, 0.5, ring\n"
    )
    (small / "small.yaml").write_text(
        re.sub(r"(?s)layout:.*?plies:", "layout: {}\nplies:", BLADE)
        .replace('  foil: {naca: "4418", trailing_gap: 0.004}\n', "")
        .replace("thickness: 1e-3, angle", "thickness: 20e-3, angle")
        .split("  - {ply: cap")[0]
        + "mesh: {size: 0.1}\n"
    )
    outcome = run("build", "small.yaml", "--formats", "vtu")
    assert outcome.status == 0, outcome.err
    said = outcome.out.replace("\xa0", "")
    mass, solid = (
        float(re.search(rf"^  {name} +([\d.]+) kg", said, re.MULTILINE)[1]) for name in ("mass", "mass as solids")
    )
    assert solid / mass == pytest.approx(1 - 0.02 / 0.4, rel=1e-3)
    assert solid == pytest.approx(1900 * np.pi * (0.2**2 - 0.18**2) * 4.0, rel=1e-3)


@pytest.mark.usefixtures("small")
def test_the_summary_keeps_the_size_that_was_used(run) -> None:
    for arguments, size in (([], 0.1), (["--size", "0.2"], 0.2)):
        run("build", "small.yaml", "--formats", "vtu", *arguments)
        assert json.loads(Path("small-mesh/small.summary.json").read_text())["mesh"]["size"] == size


# --- beam and check --------------------------------------------------------------------------------------------------


def test_beam_prints_and_writes_its_table(run, small: Path) -> None:
    outcome = run("beam", "small.yaml")
    assert outcome.status == 0, outcome.err
    assert max(map(len, outcome.out.splitlines())) <= 80
    assert not any(line != line.rstrip() for line in outcome.out.splitlines())
    table = skinmesh.build(skinmesh.load("small.yaml"))
    masses = {float(row) for row in re.findall(r"^(?:theory|mesh) +([\d.]+) +-?[\d.]+ ", outcome.out, re.MULTILINE)}
    assert len(masses) >= 1
    assert max(masses) == pytest.approx(mass_properties(table).mass, rel=0.02)
    assert outcome.out.splitlines()[-3] == "small-beam.csv"
    assert {path.name for path in small.iterdir()} == {"small.csv", "small.yaml", "small-beam.csv"}
    assert " ".join(CAUTION.split()) in " ".join(outcome.out.split())


def test_beam_says_where_it_cannot_write(run, small: Path) -> None:
    outcome = run("beam", "small.yaml", "-o", "no-folder/table.csv")
    assert outcome.status == 3
    assert "no-folder/table.csv" in outcome.err
    assert {path.name for path in small.iterdir()} == {"small.csv", "small.yaml"}


def test_check_passes_a_build_and_fails_a_broken_one(run, small: Path) -> None:
    run("build", EXAMPLES / "marram-24" / "marram-24.yaml", "-o", "mesh", "--formats", "vtu,inp")
    outcome = run("check", "mesh", "--timings")
    assert outcome.status == 0, outcome.out
    assert not any(line != line.rstrip() for line in outcome.out.splitlines())
    assert re.search(r"^\d+ passed, \d+ warn, 0 failed", outcome.out, re.MULTILINE)
    assert re.search(r"in all +\d", outcome.out)
    assert re.search(r"^writing +\d", outcome.out, re.MULTILINE)
    summary = small / "mesh" / "marram-24.summary.json"
    content = json.loads(summary.read_text())
    content["mass_kg"] *= 1.01
    summary.write_text(json.dumps(content))
    outcome = run("check", "mesh")
    assert outcome.status == 1
    assert re.search(r"^fail +mass", outcome.out, re.MULTILINE)
    assert '"fail"' in (small / "mesh" / "marram-24.checks.json").read_text()


@pytest.mark.usefixtures("small")
def test_check_of_a_folder_without_a_mesh_is_wrong_input(run) -> None:
    outcome = run("check", ".")
    assert outcome.status == 2
    assert outcome.out == ""


# --- mistakes --------------------------------------------------------------------------------------------------------


def test_every_mistake_is_named_with_its_place_and_nothing_is_written(run, small: Path) -> None:
    (small / "small.yaml").write_text(
        BLADE.replace("covers: [main cap]", "covers: [spar cap]").replace("1e-3, angle", "-1e-3, angle")
    )
    (small / "small.csv").write_text(TABLE.replace("0.60", "O.60"))
    before = contents(small)
    outcome = run("build", "small.yaml")
    assert outcome.status == 2
    assert outcome.out == ""
    for word in ("spar cap", "did you mean 'main cap'?", "-0.001", "O.60", "small.csv", "Nothing was written."):
        assert word in outcome.err
    assert contents(small) == before


@pytest.mark.parametrize("name", ["missing.yaml", "."])
def test_a_missing_file_or_a_folder_is_wrong_input(run, small: Path, name: str) -> None:
    outcome = run("build", name)
    assert outcome.status == 2
    assert "Traceback" not in outcome.err
    assert not (small / "small-mesh").exists()


@pytest.mark.usefixtures("small")
@pytest.mark.parametrize(
    ("error", "status", "said"),
    [
        (
            InputError([Problem("small.yaml", 3, "x [y]", "must not\x1b[2J be")]),
            2,
            "line 3, x [y]: must not\N{REPLACEMENT CHARACTER}[2J be",
        ),
        (MeshError("the mesh kernel warned"), 2, "the mesh kernel warned"),
        (OutputError("cannot write into x: No space left on device"), 3, "No space left on device"),
        (MissingExtra("pip install this"), 2, "pip install this"),
        (KeyboardInterrupt(), 130, "Stopped. Nothing was written."),
    ],
)
def test_a_known_error_becomes_a_message_and_a_status(
    run, monkeypatch: pytest.MonkeyPatch, error: BaseException, status: int, said: str
) -> None:
    def fail(*_args, **_kwargs):
        raise error

    monkeypatch.setattr(skinmesh, "build", fail)
    outcome = run("build", "small.yaml")
    assert outcome.status == status
    assert said in outcome.err
    assert outcome.out == ""


def test_a_bug_shows_its_traceback(small: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*_args, **_kwargs):
        raise ZeroDivisionError("a bug")

    monkeypatch.setattr(skinmesh, "build", fail)
    monkeypatch.setattr(signal, "signal", lambda *_: None)
    with pytest.raises(ZeroDivisionError, match="a bug"):
        main(["build", str(small / "small.yaml")])


def test_a_file_where_the_folder_should_be_cannot_be_written(run, small: Path) -> None:
    (small / "small-mesh").write_text("mine")
    outcome = run("build", "small.yaml")
    assert outcome.status == 3
    assert "it is a file" in outcome.err
    assert (small / "small-mesh").read_text() == "mine"


@pytest.mark.usefixtures("small")
def test_pictures_without_their_library_are_refused_before_the_work(run, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "pyvista", None)
    monkeypatch.setattr(skinmesh, "load", lambda *_: pytest.fail("worked in vain"))
    outcome = run("build", "small.yaml", "--pictures")
    assert outcome.status == 2
    assert "pip install pyvista matplotlib" in outcome.err


# --- pipes, terminals, signals ---------------------------------------------------------------------------------------


def test_a_pipe_gets_plain_text_and_no_bar(small: Path) -> None:
    done = spawn("build", "small.yaml", "--formats", "vtu", cwd=small)
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    assert "\x1b" not in done.stdout
    assert "\r" not in done.stdout


@pytest.mark.parametrize("encoding", ["ascii", "iso8859-5"])
def test_an_old_character_set_does_not_stop_the_summary(small: Path, encoding: str) -> None:
    environment = {**os.environ, "PYTHONIOENCODING": encoding}
    done = spawn("build", "small.yaml", "--formats", "vtu", cwd=small, env=environment, errors="replace")
    assert done.returncode == 0, done.stderr
    assert "8-node quadrilaterals" in done.stdout


def test_a_closed_pipe_is_no_traceback(small: Path) -> None:
    command = f"{sys.executable} -m skinmesh schema | head -n 1"
    done = subprocess.run(["bash", "-c", command], capture_output=True, text=True, timeout=60, check=True, cwd=small)
    assert done.stdout.strip() == "{"
    assert "Traceback" not in done.stderr


def on_a_terminal(arguments: Sequence[str], *, cwd: Path, environment: dict[str, str]) -> tuple[int, str]:
    """Run a command with a terminal as its only output."""
    try:
        leader, follower = pty.openpty()
    except OSError as error:
        pytest.skip(f"no terminals on this machine: {error}")
    process = subprocess.Popen(
        [sys.executable, "-m", "skinmesh", *arguments],
        cwd=cwd,
        stdin=follower,
        stdout=follower,
        stderr=follower,
        env={**os.environ, "TERM": "xterm-256color", "COLUMNS": "80", **environment},
    )
    os.close(follower)
    said = b""
    while select.select([leader], [], [], 60)[0]:
        try:
            piece = os.read(leader, 65536)
        except OSError:
            break
        if not piece:
            break
        said += piece
    os.close(leader)
    return process.wait(timeout=60), said.decode()


def test_a_terminal_gets_a_bar_that_goes_away(small: Path) -> None:
    status, said = on_a_terminal(["build", "small.yaml"], cwd=small, environment={})
    assert status == 0, said
    assert "reading" in said
    assert "━" in said
    shown = said[said.rindex("Small [bold]") :]
    assert "━" not in shown
    assert "\x1b[1m" in said


def test_no_color_is_honoured(small: Path) -> None:
    _, said = on_a_terminal(["build", "small.yaml"], cwd=small, environment={"NO_COLOR": "1"})
    assert not re.search(r"\x1b\[[0-9;]*3[0-7]m|\x1b\[38;", said)


@pytest.mark.parametrize(("signal_number", "status"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_a_stopped_build_leaves_nothing_behind(small: Path, signal_number: int, status: int) -> None:
    before = contents(small)
    # The build is slowed down after its last stage, while files are being written.
    program = (
        "import signal, time\n"
        "signal.signal(signal.SIGINT, signal.default_int_handler)  # ignored where the tests run in the background\n"
        "from skinmesh.write import registry\n"
        "import skinmesh.commands.main as m\n"
        "def slow(mesh, path):\n"
        "    path.write_text('half')\n"
        "    print('writing', flush=True)\n"
        "    time.sleep(60)\n"
        "registry.FORMATS['vtu'] = registry.Format('vtu', '', slow)\n"
        "m.main(['build', 'small.yaml', '--formats', 'inp,vtu'])\n"
    )
    with subprocess.Popen(
        [sys.executable, "-c", program], cwd=small, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as process:
        try:
            assert process.stdout.readline() == "writing\n"
            time.sleep(0.1)
            process.send_signal(signal_number)
            _, said = process.communicate(timeout=30)
        finally:
            process.kill()
    assert process.returncode == status, said
    assert "Traceback" not in said
    assert contents(small) == before
    assert {path.name for path in small.iterdir()} == {"small.csv", "small.yaml"}


# --- new and schema --------------------------------------------------------------------------------------------------


def test_the_starter_builds_at_once(run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    outcome = run("new", "my-blade")
    assert outcome.status == 0, outcome.err
    assert (tmp_path / "my-blade" / "marram-24.yaml").is_file()
    assert outcome.out.endswith("\nNext: skinmesh build my-blade/marram-24.yaml\n")
    outcome = run("build", "my-blade/marram-24.yaml", "--size", "0.5", "--formats", "vtu")
    assert outcome.status == 0, outcome.err
    assert (tmp_path / "marram-24-mesh" / "marram-24.vtu").is_file()


def test_the_schema_accepts_the_examples(run) -> None:
    outcome = run("schema")
    assert outcome.status == 0
    schema = json.loads(outcome.out)
    assert {"title", "planform", "profiles", "materials", "layout", "plies", "mesh"} <= set(schema["properties"])
    assert schema["additionalProperties"] is False


# --- the summary by itself -------------------------------------------------------------------------------------------


def closing(mesh: ShellMesh, capsys: pytest.CaptureFixture[str], *, solid_mass: float | None = None) -> str:
    console = Console(width=80, highlight=False, markup=False, emoji=False)
    files = [WrittenFile("a.vtu", 1234567)]
    print_closing(console, mesh, directory=Path("out"), files=files, seconds=1.25, solid_mass=solid_mass)
    return capsys.readouterr().out


@pytest.mark.parametrize(("share", "is_told"), [(0.994, True), (1.006, True), (0.996, False), (1.004, False)])
def test_a_mass_that_curvature_changes_is_told(capsys: pytest.CaptureFixture[str], share: float, is_told: bool) -> None:
    mesh = box_with_web(layers=sandwich())
    mass = share * mass_properties(mesh).mass
    said = closing(mesh, capsys, solid_mass=mass)
    assert bool(re.search(rf"mass as solids +{re.escape(significant(mass))} kg", said)) == is_told
    assert "as solids" not in closing(mesh, capsys)


def test_warnings_are_counted_and_long_lists_are_cut(capsys: pytest.CaptureFixture[str]) -> None:
    mesh = box_with_web(layers=sandwich())
    sentences = tuple(f"seam [{k}] moved :smile: " + "far " * 40 for k in range(30))
    said = closing(replace(mesh, report=BuildReport(warnings=sentences)), capsys)
    assert "30 warnings" in said
    assert said.count("moved :smile:") == 10
    assert "and 20 more in sample.summary.json" in said
    assert max(map(len, said.splitlines())) <= 80


def test_one_warning_is_one_warning(capsys: pytest.CaptureFixture[str]) -> None:
    mesh = replace(box_with_web(layers=sandwich()), report=BuildReport(warnings=("a \x1b[31mred one",)))
    said = closing(mesh, capsys)
    assert "  1 warning\n  - a \N{REPLACEMENT CHARACTER}[31mred one\n" in said
    assert "no warnings" in closing(box_with_web(layers=sandwich()), capsys)


def test_named_elements_are_counted(capsys: pytest.CaptureFixture[str]) -> None:
    mesh = replace(box_with_web(layers=sandwich()), element_sets={"thick laminate": np.arange(7)})
    assert re.search(r"thick laminate +7 +elements", closing(mesh, capsys))


def test_timings_add_up(capsys: pytest.CaptureFixture[str]) -> None:
    stages = Stages(None)
    stages.begin("reading", 0.0)
    tell = stages.part(0.1, 0.9)
    tell("surface", 0.0)
    tell("done", 1.0)
    stages.begin("files", 0.9)
    stages.end()
    stages.end()
    assert [stage.name for stage in stages.finished] == ["reading", "surface", "files"]
    print_timings(Console(width=80), stages.finished)
    said = capsys.readouterr().out
    assert re.search(r"in all +0\.0\d", said)


# --- the wheel -------------------------------------------------------------------------------------------------------


@pytest.mark.slow
def test_the_wheel_carries_starter_and_geometry(tmp_path: Path) -> None:
    subprocess.run(
        [sys.executable, "-m", "pip", "wheel", "--quiet", "--no-deps", "--wheel-dir", str(tmp_path), str(REPOSITORY)],
        check=True,
        timeout=300,
    )
    (wheel,) = tmp_path.glob("skinmesh-*.whl")
    names = zipfile.ZipFile(wheel).namelist()
    for name in ("skinmesh/starter/marram-24.yaml", "skinmesh/starter/marram-24.csv", "skinmesh/commands/main.py"):
        assert name in names
    assert any(name.startswith("skinmesh/geometry/") and name.endswith(".dat") for name in names)
    assert not any("-mesh/" in name or name.startswith("tests/") for name in names)
