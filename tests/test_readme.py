"""Every block of code in README.md runs, and prints what the page says."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
import time
from collections.abc import Callable
from itertools import dropwhile
from pathlib import Path

import pytest

import skinmesh
from skinmesh.mesh.measure import element_areas

REPOSITORY = Path(__file__).parents[1]
README = (REPOSITORY / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w+)\n(.*?)^```", README, re.MULTILINE | re.DOTALL)
SHELL = [text for kind, text in BLOCKS if kind == "sh"]
PYTHON = [text for kind, text in BLOCKS if kind == "python"]
SET_UP = "bash examples/first-mesh.sh\n"
CHANGE = "cp -r my-blade wider-blade\n"
SOLVER = "ccx"
READER = "pyNastran"

Shell = Callable[[str], subprocess.CompletedProcess[str]]


@pytest.fixture(scope="module")
def shell(tmp_path_factory: pytest.TempPathFactory) -> Shell:
    """Run a block in one folder for all, where the two commands of the page have run already."""
    folder = tmp_path_factory.mktemp("readme")
    path = f"{Path(sys.executable).parent}{os.pathsep}{os.environ['PATH']}"
    environment = {**os.environ, "PATH": path, "COLUMNS": "80"}

    def run(block: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            ["bash", "-e", "-c", block], cwd=folder, env=environment, capture_output=True, text=True, timeout=900
        )

    done = run(two_commands())
    assert done.returncode == 0, done.stderr
    (folder / "said.txt").write_text(done.stdout)
    return run


def two_commands() -> str:
    (block,) = [text for text in SHELL if text.startswith("skinmesh new ")]
    return block


def masked(said: str) -> list[str]:
    """Lines without what differs from run to run and from machine to machine.

    Those are times, sizes of compressed files, and small differences in per cent.
    """
    said = re.sub(r"Done in [\d.]+ s", "Done in # s", said.replace("\N{NO-BREAK SPACE}", " "))
    said = re.sub(r" +\d+\.\d+ %", " # %", said)
    return [re.sub(r" +[\d.]+ [kM]?B$", " #", line) for line in said.splitlines()]


def test_the_page_has_blocks_of_every_kind() -> None:
    assert {kind for kind, _ in BLOCKS} == {"sh", "text", "csv", "yaml", "python"}
    assert SET_UP in SHELL
    assert sum(f"{SOLVER} -i" in block for block in SHELL) == 1
    assert sum(READER in block for block in PYTHON) == 1


def test_the_two_commands_print_what_the_page_says(shell: Shell) -> None:
    said = shell("cat said.txt").stdout
    (shown,) = [text for kind, text in BLOCKS if kind == "text" and "8-node quadrilaterals" in text]
    assert masked(said)[-len(masked(shown)) :] == masked(shown)
    assert len(masked(shown)) > 20


@pytest.mark.parametrize("command", ["check", "beam"])
def test_other_commands_print_the_lines_that_the_page_shows(shell: Shell, command: str) -> None:
    """A line of the page may end before that of the command, and ``…`` stands for lines left out."""
    (block,) = [text for text in SHELL if text.startswith(f"skinmesh {command} ")]
    (shown,) = re.findall(rf"```sh\n{re.escape(block)}```.*?```text\n(.*?)```", README, re.DOTALL)
    done = shell(block)
    assert done.returncode == 0, done.stderr
    assert_shown(shown, done.stdout)


def assert_shown(shown: str, printed: str) -> None:
    said = iter([*masked(printed), ""])
    is_cut = False
    for line in masked(shown):
        if line == "…":
            is_cut = True
            continue
        if is_cut:
            said = dropwhile(lambda other, line=line: not other.startswith(line), said)
        assert next(said).startswith(line)
        is_cut = False
    assert len(masked(shown)) > 10


def test_a_change_prints_the_lines_that_the_page_shows(shell: Shell) -> None:
    """The last command of the block says by its status that the meshes are not equal."""
    (block,) = [text for text in SHELL if text.startswith(CHANGE)]
    (shown,) = re.findall(rf"```sh\n{re.escape(block)}```.*?```text\n(.*?)```", README, re.DOTALL)
    done = shell(block)
    assert done.returncode == 1, done.stderr
    assert_shown(shown, done.stdout)


@pytest.mark.solver
@pytest.mark.slow
@pytest.mark.skipif(not shutil.which(SOLVER), reason="CalculiX is not installed")
def test_the_solver_runs_the_deck(shell: Shell) -> None:
    (block,) = [text for text in SHELL if f"{SOLVER} -i" in text]
    done = shell(block)
    assert done.returncode == 0, done.stdout[-2000:]
    assert "*ERROR" not in done.stdout
    said = shell("cat marram-24-mesh/marram-24.dat").stdout
    assert "total force" in said
    assert "mass" in said.lower()


@pytest.mark.solver
@pytest.mark.slow
@pytest.mark.skipif(not shutil.which(SOLVER), reason="CalculiX is not installed")
def test_the_trial_prints_such_lines_on_a_coarse_mesh(shell: Shell) -> None:
    """The page shows minutes of work; here a coarse mesh prints lines of the same names, other numbers in them."""
    (block,) = [text for text in SHELL if text.startswith("skinmesh trial ")]
    (shown,) = re.findall(rf"```sh\n{re.escape(block)}```.*?```text\n(.*?)```", README, re.DOTALL)
    text = shell("cat my-blade/marram-24.yaml").stdout
    text = text.replace("\nmesh:\n", "\nmesh:\n  chord_error: 0.05\n  turning: 45\n").replace(
        "{main cap: 6}", "{main cap: 2}"
    )
    assert shell(f"cat > my-blade/coarse.yaml <<'END'\n{text}END\n").returncode == 0
    done = shell("skinmesh build my-blade/coarse.yaml --size 1.5 --formats vtu,inp")
    assert int(re.search(r"elements +([\d\xa0]+)", done.stdout)[1].replace("\xa0", "")) < 3000
    done = shell(block.replace("marram-24", "coarse"))
    assert done.returncode == 0, done.stderr
    said = [line.strip() for line in masked(done.stdout)]
    for line in masked(shown.replace("…\n", "")):
        name = re.match(r"[^\d]*(?:mode \d: \w+)?", line.strip())[0].strip()
        assert any(other.startswith(name) for other in said), name


@pytest.mark.parametrize("block", [text for text in PYTHON if READER not in text])
def test_python_runs(shell: Shell, block: str) -> None:
    done = shell(f"{sys.executable} -W error - <<'END'\n{block}END\n")
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip()


@pytest.mark.reader
@pytest.mark.skipif(not os.environ.get("SKINMESH_PYNASTRAN"), reason="SKINMESH_PYNASTRAN names no Python")
def test_another_reader_runs(shell: Shell) -> None:
    (block,) = [text for text in PYTHON if READER in text]
    done = shell(f"{os.environ['SKINMESH_PYNASTRAN']} - <<'END'\n{block}END\n")
    assert done.returncode == 0, done.stderr
    mass = float(re.match(r"(\d+) kg", done.stdout)[1])
    blade = skinmesh.load(REPOSITORY / "examples" / "marram-24" / "marram-24.yaml")
    mesh = skinmesh.build(blade)
    assert mass == pytest.approx(float((element_areas(mesh) * mesh.areal_mass).sum()), rel=5e-3)


def test_the_parts_of_the_blade_file_make_a_blade(tmp_path: Path) -> None:
    (table,) = [text for kind, text in BLOCKS if kind == "csv"]
    (tmp_path / "reed-12.csv").write_text(table)
    (tmp_path / "reed-12.yaml").write_text("\n".join(text for kind, text in BLOCKS if kind == "yaml"))
    mesh = skinmesh.build(skinmesh.load(tmp_path / "reed-12.yaml"))
    assert mesh.title == "Reed 12, invented 12 m blade"
    assert "folded laminate" not in mesh.element_sets
    assert {region.kind for region in mesh.regions} == {"strip", "panel", "cap", "web", "base"}
    named = {name for region in mesh.regions for name in region.name.split(maxsplit=1)[1:]} | {"web"}
    for word in ("leading strip", "leading panel", "main cap", "trailing panel", "trailing strip", "base"):
        assert word in named


def test_every_shell_and_python_block_is_run_by_a_test() -> None:
    run = [
        SET_UP,
        two_commands(),
        *[text for text in SHELL if SOLVER in text or re.match("skinmesh (check|beam|trial) ", text)],
        *[text for text in SHELL if text.startswith(CHANGE)],
        *[text for text in SHELL if "skinmesh sweep " in text],  # by tests/test_sweep_command.py
    ]
    assert sorted(run) == sorted(SHELL)


def test_links_lead_somewhere() -> None:
    targets = re.findall(r"\]\(([^)#]+)\)", README)
    assert len(targets) >= 3
    assert not [target for target in targets if "://" not in target and not (REPOSITORY / target).exists()]
    named = re.findall(r"`((?:examples|tests|geometry)/[\w./-]*)`", README)
    assert named
    assert not [name for name in named if not (REPOSITORY / name).exists()]


@pytest.mark.slow
def test_the_set_up_script_makes_the_first_mesh_and_is_quick_the_second_time(tmp_path: Path) -> None:
    copy = tmp_path / "clone"
    ignored = shutil.ignore_patterns(
        ".git", ".venv*", ".*_cache", ".benchmarks", ".hypothesis", "*-mesh", "__pycache__"
    )
    shutil.copytree(REPOSITORY, copy, ignore=ignored)
    environment = {key: value for key, value in os.environ.items() if key not in ("VIRTUAL_ENV", "PYTHONPATH")}
    for limit in (600, 60):
        start = time.perf_counter()
        done = subprocess.run(
            SET_UP.split(),
            cwd=copy,
            env=environment,
            capture_output=True,
            text=True,
            timeout=900,
            stdin=subprocess.DEVNULL,
        )
        assert done.returncode == 0, done.stderr
        assert time.perf_counter() - start < limit
        assert (copy / "marram-24-mesh" / "marram-24.regions.png").stat().st_size > 10_000
        assert "skinmesh build my-blade/marram-24.yaml" in done.stdout
    assert done.stderr == ""
