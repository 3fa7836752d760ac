"""``skinmesh sweep`` as a user types it: stopped and resumed, and on a cluster that runs already."""

from __future__ import annotations

import csv
import os
import re
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import psutil
import pytest
from click.testing import CliRunner
from sweep_files import CASES, COARSER, POISONED, SWEEP, write_sweep

from skinmesh.commands.main import cli
from skinmesh.errors import InputError
from skinmesh.sweep import crew
from skinmesh.sweep.read import load_sweep

COMMAND = (sys.executable, "-m", "skinmesh", "sweep", "twelve.yaml")
QUIET = {**os.environ, "PYTHONWARNINGS": "ignore"}  # of the libraries of other processes; pytest's own stay errors
Rows = list[dict[str, str]]


def rows_of(path: Path) -> Rows:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def without_times(rows: Rows) -> Rows:
    return [{name: cell for name, cell in row.items() if name != "seconds"} for row in rows]


def sweep(folder: Path, *more: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*COMMAND, *more], cwd=folder, env=QUIET, capture_output=True, text=True, timeout=600, check=False
    )


def until(holds: object, *, seconds: float = 300.0) -> None:
    assert callable(holds)
    end = time.monotonic() + seconds
    while not holds():
        assert time.monotonic() < end
        time.sleep(0.05)


@pytest.fixture(scope="module")
def resumed(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, dict[str, bytes], str]:
    """A sweep that was killed half-way and started again: its folder, the records at the kill, what it said."""
    folder = tmp_path_factory.mktemp("killed")
    write_sweep(folder)
    records = folder / "twelve-sweep" / "records"
    running = subprocess.Popen(
        [*COMMAND, "--workers", "1", "--no-picture"],
        cwd=folder,
        env=QUIET,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        start_new_session=True,
    )
    until(lambda: len(list(records.glob("[!.]*.json"))) >= 4)
    others = psutil.Process(running.pid).children(recursive=True)
    running.send_signal(signal.SIGKILL)
    running.wait()
    _, alive = psutil.wait_procs(others, timeout=30)
    assert others
    assert not alive
    before = {path.name: path.read_bytes() for path in records.glob("[!.]*.json")}
    done = sweep(folder, "--workers", "2")
    assert done.returncode == 1, done.stderr
    assert done.stderr == ""
    return folder, before, done.stdout


def test_a_killed_sweep_goes_on_with_nothing_lost_and_nothing_done_twice(
    resumed: tuple[Path, dict[str, bytes], str],
) -> None:
    folder, before, said = resumed
    assert 4 <= len(before) < 12
    records = folder / "twelve-sweep" / "records"
    after = {path.name: path.read_bytes() for path in records.glob("[!.]*.json")}
    assert len(after) == 12
    # a record carries the time that its work took: done again it would be another
    assert {name: after[name] for name in before} == before
    assert re.search(rf"{len(before)} were done before, {12 - len(before)} built now", said), said
    rows = rows_of(folder / "twelve-sweep" / "twelve.csv")
    assert [row["name"] for row in rows] == [f"case {k}" for k in range(1, 13)]
    assert sorted(f"{row['key']}.json" for row in rows) == sorted(after)
    assert (folder / "twelve-sweep" / "twelve.png").stat().st_size > 10_000


def test_the_poisoned_variant_is_a_row_with_its_reason_and_the_others_are_whole(
    resumed: tuple[Path, dict[str, bytes], str],
) -> None:
    folder, _, said = resumed
    rows = rows_of(folder / "twelve-sweep" / "twelve.csv")
    (poisoned,) = [row for row in rows if row["status"] == "failed"]
    assert poisoned["variant"] == str(POISONED)
    assert poisoned["reason"] == "plies[1].count: must lie between 0 and 1000, got -1"
    assert poisoned["mass_kg"] == ""
    assert f"variant {POISONED} failed: {poisoned['reason']}" in said
    masses = [float(row["mass_kg"]) for row in rows if row is not poisoned]
    assert masses == sorted(masses)
    whole = {row["variant"]: (row["numbering"], row["numbering_note"]) for row in rows if row is not poisoned}
    # a kept mesh would not hear of another size
    assert whole.pop(str(COARSER)) == ("fresh", "the divisions change with size")
    assert set(whole.values()) == {("kept", "")}


def test_a_sweep_that_is_done_needs_no_worker_and_a_changed_one_only_what_changed(
    resumed: tuple[Path, dict[str, bytes], str],
) -> None:
    """In this process, where no worker can be started: a closed port would be refused."""
    folder, _, _ = resumed
    arguments = ["sweep", "-o", str(folder / "twelve-sweep"), "--scheduler", "tcp://127.0.0.1:9", "--no-picture"]
    again = CliRunner().invoke(cli, [*arguments, str(folder / "twelve.yaml")], standalone_mode=False)
    assert "12 were done before, 0 built now" in again.output
    assert again.return_value == 1
    cases = (folder / "twelve-cases.csv").read_text().splitlines()
    (folder / "fewer.csv").write_text("\n".join([cases[0], *cases[: POISONED - 1 : -1]]))
    (folder / "fewer.yaml").write_text(SWEEP.replace("twelve-cases", "fewer"))
    fewer = CliRunner().invoke(cli, [*arguments, str(folder / "fewer.yaml")], standalone_mode=False)
    assert f"{12 - POISONED + 1} were done before, 0 built now" in fewer.output


README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
EXAMPLE = "examples/sweeps/chord-and-cap.yaml"


def blocks_with(text: str) -> list[str]:
    return [block for block in re.findall(r"^```\w+\n(.*?)^```", README, re.MULTILINE | re.DOTALL) if text in block]


def test_the_page_shows_the_example_and_the_example_is_a_sweep_of_64() -> None:
    path = Path(__file__).parents[1] / EXAMPLE
    (shown,) = blocks_with("changes:")
    wanted = [re.sub(r"\s+#.*", "", line) for line in path.read_text(encoding="utf-8").splitlines()]
    assert shown.splitlines() == [line for line in wanted if line and line[0] != "#"]
    plan = load_sweep(path)
    assert len({(v.values["outer chord"], v.values["cap layers"]) for v in plan.variants}) == 64
    assert blocks_with("skinmesh sweep ")[0] == f"skinmesh sweep {EXAMPLE}\n"


def test_the_lines_of_the_page_start_a_cluster_that_gives_the_same_rows(
    resumed: tuple[Path, dict[str, bytes], str], tmp_path: Path
) -> None:
    (block,) = blocks_with("dask scheduler")
    cases = CASES.splitlines()
    write_sweep(tmp_path, cases="\n".join([cases[0], *cases[POISONED - 1 : POISONED + 2]]))
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    assert block.count("8786") == 3
    lines = block.replace("8786", str(port)).replace(EXAMPLE, "twelve.yaml --no-picture")
    path = f"{Path(sys.executable).parent}{os.pathsep}{os.environ['PATH']}"
    with (tmp_path / "said.txt").open("w") as said:
        running = subprocess.Popen(
            ["bash", "-c", lines],
            cwd=tmp_path,
            env={**QUIET, "PATH": path},
            stdout=said,
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )
        try:
            status = running.wait(timeout=600)
        finally:
            os.killpg(running.pid, signal.SIGKILL)
    assert status == 1
    assert "0 were done before, 3 built now" in (tmp_path / "said.txt").read_text()
    here = without_times(rows_of(resumed[0] / "twelve-sweep" / "twelve.csv"))[POISONED - 2 : POISONED + 1]
    rows = without_times(rows_of(tmp_path / "twelve-sweep" / "twelve.csv"))
    assert [row | {"variant": ""} for row in rows] == [row | {"variant": ""} for row in here]


def test_wrong_input_is_refused_before_any_work(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(crew, "PATIENCE", 0.5)
    path = write_sweep(tmp_path, SWEEP.replace("layers:", "layers: {set: 3}\n  x:"))
    arguments = ["sweep", str(path), "-o", str(tmp_path / "out")]
    with pytest.raises(InputError, match=r"line 5, changes\.layers: must have one of field, column, got none"):
        CliRunner().invoke(cli, arguments, standalone_mode=False, catch_exceptions=False)
    assert not (tmp_path / "out").exists()
    path.write_text(SWEEP)
    for address in ("nonsense://x", "tcp://127.0.0.1:9"):
        with pytest.raises(InputError, match="no scheduler answers there"):
            CliRunner().invoke(cli, [*arguments, "--scheduler", address], standalone_mode=False, catch_exceptions=False)
        assert not (tmp_path / "out").exists()
