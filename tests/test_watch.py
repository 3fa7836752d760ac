"""``skinmesh build --watch`` as a user has it: an editor saves, a line says what changed."""

from __future__ import annotations

import os
import queue
import re
import signal
import subprocess
import sys
import threading

import numpy as np
import pytest
from test_keep import assert_same_numbers, run

from skinmesh.check.reading import read_built_mesh

PATIENCE = 60.0  # s; on a busy machine a build that takes half a second may take many


class Watching:
    """A watching process and the lines it says."""

    def __init__(self, folder, *arguments):
        self.process = subprocess.Popen(
            [sys.executable, "-m", "skinmesh", "build", "marram-24.yaml", "-o", "live", "--watch", *arguments],
            cwd=folder,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            encoding="utf-8",
            env={**os.environ, "PYTHONUNBUFFERED": "1", "PYTHONIOENCODING": "utf-8"},
        )
        self.lines: queue.Queue[str] = queue.Queue()
        self.reader = threading.Thread(target=self._read)
        self.reader.start()

    def _read(self):
        for line in self.process.stdout:
            self.lines.put(line.rstrip("\n"))

    def until(self, pattern):
        """All lines up to the first one that fits."""
        said = []
        while True:
            try:
                said.append(self.lines.get(timeout=PATIENCE))
            except queue.Empty:
                pytest.fail(f"no line like {pattern}; said: {said}")
            if re.search(pattern, said[-1]):
                return said

    def stop(self, sign):
        self.process.send_signal(sign)
        return self.process.wait(timeout=PATIENCE)

    def __enter__(self):
        return self

    def __exit__(self, *_error):
        self.process.kill()
        self.reader.join()
        self.process.stdout.close()
        self.process.wait()


def save(path, old, new):
    """Save as editors do: a new file beside, renamed over the old one."""
    text = path.read_text(encoding="utf-8")
    assert old in text
    beside = path.with_suffix(".swp")
    beside.write_text(text.replace(old, new), encoding="utf-8")
    beside.replace(path)


@pytest.fixture
def folder(tmp_path):
    assert run(["new", str(tmp_path)]) == 0
    return tmp_path


SMALL = ("--size", "0.8", "--formats", "vtu")


def test_an_hour_at_the_desk(folder):
    blade, table = folder / "marram-24.yaml", folder / "marram-24.csv"
    live = folder / "live"
    with Watching(folder, *SMALL) as watching:
        watching.until(r"^Watching marram-24.yaml, marram-24.csv, .*\. Ctrl-C ends\.$")
        first = read_built_mesh(live).mesh

        save(table, "11.0,  1.575", "11.0,  1.675")
        line = watching.until("rebuilt in")[-1]
        assert re.fullmatch(
            r"\d\d:\d\d:\d\d rebuilt in [\d.]+ s: numbers kept; mass \S+ → \S+ kg \(\+[\d.]+ %\),"
            r" nodes moved [\d.]+ mm at most.*",
            line.replace("\N{NO-BREAK SPACE}", ""),
        )
        second = read_built_mesh(live).mesh
        assert_same_numbers(first, second)
        moved = 1e3 * np.linalg.norm(second.nodes - first.nodes, axis=1).max()
        assert float(re.search(r"moved ([\d.]+) mm", line)[1]) == pytest.approx(moved, rel=1e-3)

        # one mistake in each file: both are told, and the mesh stays; without new content nothing happens
        written = (live / "marram-24.vtu").stat().st_mtime_ns
        table.touch()
        save(blade, "thickness: 0.7e-3", "thickness: -0.7e-3")
        assert "the last good mesh stays" in watching.until("not built")[-1]
        watching.until("thickness")
        save(table, "11.0,  1.675", "11.0,  l.675")
        said = watching.until("'l.675' is not a number")
        assert any("thickness" in line for line in said)
        assert not any("rebuilt" in line for line in said)
        assert (live / "marram-24.vtu").stat().st_mtime_ns == written

        # mended one after the other
        save(table, "11.0,  l.675", "11.0,  1.675")
        watching.until("thickness")
        save(blade, "thickness: -0.7e-3", "thickness: 0.9e-3")
        assert "elements have other plies" in watching.until("rebuilt in")[-1]

        # another layout, and back to the first one
        text = blade.read_text(encoding="utf-8")
        aft = text[text.index("    aft web:") : text.index("  leading strip:")]
        save(blade, aft, "")
        line = watching.until("rebuilt in")[-1]
        assert "new numbers (" in line
        assert "webs no longer there: aft web" in line
        save(blade, "  leading strip:", aft + "  leading strip:")
        assert "numbers of the first mesh" in watching.until("rebuilt in")[-1]
        assert_same_numbers(first, read_built_mesh(live).mesh)
        assert watching.stop(signal.SIGINT) == 0
        assert watching.until("Stopped watching")


def test_begins_with_a_mistake_and_takes_the_numbers_of_an_old_folder(folder):
    table = folder / "marram-24.csv"
    assert run(["build", str(folder / "marram-24.yaml"), "-o", str(folder / "old"), *SMALL]) == 0
    name = "absent.csv"
    save(folder / "marram-24.yaml", "planform: marram-24.csv", f"planform: {name}")
    with Watching(folder, "--keep", "old", "--map", *SMALL) as watching:
        assert "nothing was written" in watching.until("not built")[-1]
        assert not (folder / "live").exists()
        # the missing file comes
        text = table.read_text(encoding="utf-8").replace("11.0,  1.575", "11.0,  1.675")
        (folder / name).write_text(text, encoding="utf-8")
        assert "numbers kept" in watching.until("rebuilt in")[-1]
        assert (folder / "live" / "marram-24.map-nodes.csv").is_file()
        assert_same_numbers(*(read_built_mesh(folder / place).mesh for place in ("old", "live")))
        watching.until("Watching")
        assert watching.stop(signal.SIGTERM) == 143


def test_stages_of_one_build_are_not_told_of_many(folder, capsys):
    assert run(["build", str(folder / "marram-24.yaml"), "--watch", "--timings"]) == 2
    assert "leave out --watch" in capsys.readouterr().err
