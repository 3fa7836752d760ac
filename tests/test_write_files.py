"""All files or none, whatever fails and whenever the process dies."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import fields, replace
from itertools import count
from pathlib import Path

import numpy as np
import pytest
from sample_meshes import box_with_web, numbered_box, sandwich, tube

from skinmesh.errors import InputError, OutputError
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write import placing
from skinmesh.write.files import DEFAULT_FORMATS, STALE_FILES, write
from skinmesh.write.placing import new_files
from skinmesh.write.registry import FORMATS, Format

TABLES = ["sample.stacks.csv", "sample.summary.json"]


def box() -> ShellMesh:
    return box_with_web(layers=sandwich(), web_layers=sandwich()[:2])


def contents(directory: Path) -> dict[str, bytes]:
    """Every file below a directory, hidden ones too."""
    return {
        str(path.relative_to(directory)): path.read_bytes() if path.is_file() else b"directory"
        for path in directory.rglob("*")
    }


def own(name: str) -> bool:
    return name.endswith(".own")


def put(directory: Path, **texts: str) -> None:
    """Replace the files ``*.own`` of a directory."""
    with new_files(directory, is_own=own) as stage:
        for name, text in texts.items():
            (stage / f"{name}.own").write_text(text)


def failing_format(error: BaseException) -> Format:
    def write_half(_mesh: ShellMesh, path: Path) -> None:
        path.write_text("half")
        raise error

    return Format("vtu", "fails", write_half)


def test_files_and_sizes(tmp_path: Path) -> None:
    written = write(box(), tmp_path / "out")
    names = [f"sample.{name}" for name in DEFAULT_FORMATS]
    assert [file.name for file in written] == [*names[:2], "sample.vtm.d/", *names[2:], *TABLES]
    sizes = {path.name: path.stat().st_size for path in (tmp_path / "out").iterdir() if path.is_file()}
    sizes["sample.vtm.d/"] = sum(path.stat().st_size for path in (tmp_path / "out" / "sample.vtm.d").iterdir())
    assert {file.name: file.size for file in written} == sizes
    assert all(file.size > 0 for file in written)


def test_every_module_of_formats_is_in_the_register() -> None:
    folder = Path(sys.modules["skinmesh.write.formats"].__path__[0])
    assert {path.stem for path in folder.glob("[a-z]*.py")} == set(FORMATS)
    assert set(DEFAULT_FORMATS) <= set(FORMATS)


def test_a_folder_holds_only_what_the_next_build_knows_as_its_own(tmp_path: Path) -> None:
    """Else it would never be removed."""
    for stem in ("sample", "Blatt [1] ä"):
        mesh = replace(numbered_box(), stem=stem)
        write(mesh, tmp_path / stem)
        files = list((tmp_path / stem / f"{stem}.vtm.d").iterdir())
        assert len(files) == len(mesh.regions) + len(mesh.node_sets)
        assert all(re.fullmatch(FORMATS["vtm"].parts, path.name) for path in files)
        write(mesh, tmp_path / stem, formats=[])
        assert sorted(contents(tmp_path / stem)) == [name.replace("sample", stem) for name in TABLES]


@pytest.mark.parametrize("exchange", [True, False])
@pytest.mark.parametrize("neighbour", [True, False])
def test_blocks_of_an_earlier_mesh_go_with_it(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, exchange: bool, neighbour: bool
) -> None:
    """The box has a web and its feet, the tube has not; other folders stay."""
    if not exchange:
        monkeypatch.setattr(placing, "_LIBC", None)
    out = tmp_path / "out"
    write(box(), out, formats=["vtm"])
    assert (out / "sample.vtm.d" / "region-3-fore-web.vtu").is_file()
    if neighbour:
        (out / "other.vtm.d").mkdir()
        (out / "other.vtm.d" / "region-1.vtu").write_text("of another blade")
    write(tube(8, 2), out, formats=["vtm"])
    write(tube(8, 2), tmp_path / "fresh", formats=["vtm"])
    found = contents(out)
    assert (found.pop("other.vtm.d", None), found.pop("other.vtm.d/region-1.vtu", None)) == (
        (b"directory", b"of another blade") if neighbour else (None, None)
    )
    assert found == contents(tmp_path / "fresh")
    assert {path.name for path in tmp_path.iterdir()} == {"out", "fresh"}


@pytest.mark.parametrize("name", ["notes.txt", "region-1.vtu.bak", "region-9/"])
@pytest.mark.parametrize("formats", [["vtm"], ["inp"]])
def test_a_folder_of_blocks_with_something_else_in_it_is_refused_before_any_work(
    tmp_path: Path, name: str, formats: list[str]
) -> None:
    out = tmp_path / "out"
    write(box(), out, formats=["vtm"])
    foreign = out / "sample.vtm.d" / name
    foreign.mkdir() if name.endswith("/") else foreign.write_text("mine")
    before = contents(tmp_path)
    told: list[str] = []
    with pytest.raises(OutputError, match=re.escape(f"holds '{name.rstrip('/')}', which skinmesh did not write")):
        write(tube(8, 2), out, formats=formats, progress=lambda stage, _done: told.append(stage))
    assert contents(tmp_path) == before
    assert not told


def test_a_file_or_link_in_place_of_the_folder_of_blocks(tmp_path: Path) -> None:
    """Neither is ours: nothing is replaced, and what the link leads to stays."""
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "region-1.vtu").write_text("mine")
    for kind in ("file", "link"):
        out = tmp_path / kind
        out.mkdir()
        place = out / "sample.vtm.d"
        place.write_text("mine") if kind == "file" else place.symlink_to(tmp_path / "mine")
        before = contents(tmp_path)
        with pytest.raises(OutputError, match="cannot write into"):
            write(box(), out, formats=["vtm"])
        assert contents(tmp_path) == before


def test_writing_leaves_the_mesh_as_it_was(tmp_path: Path) -> None:
    mesh = box()
    arrays = {f.name: v.copy() for f in fields(mesh) if isinstance(v := getattr(mesh, f.name), np.ndarray)}
    sets = {name: nodes.copy() for name, nodes in mesh.node_sets.items()}
    write(mesh, tmp_path / "out")
    for name, array in arrays.items():
        assert np.array_equal(getattr(mesh, name), array)
    assert {name: nodes.tolist() for name, nodes in mesh.node_sets.items()} == {k: v.tolist() for k, v in sets.items()}


def test_two_writes_give_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a", "b"):
        write(box(), tmp_path / name)
    assert contents(tmp_path / "a") == contents(tmp_path / "b")


def test_unknown_formats_are_named_with_the_known_ones(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"no format 'vtx'; known: .*msh.*did you mean 'vtu'") as caught:
        write(box(), tmp_path / "out", formats=["vtx", "vtu", "zzz"])
    assert len(caught.value.problems) == 2
    assert not (tmp_path / "out").exists()


def test_files_of_formats_not_asked_for_now_are_removed_and_others_stay(tmp_path: Path) -> None:
    out = tmp_path / "out"
    write(box(), out, formats=["vtu", "msh"])
    (out / "notes.txt").write_text("mine")
    (out / "other.vtu").write_text("of another blade")
    (out / "results").mkdir()
    write(box(), out, formats=["msh", "msh"])
    assert sorted(path.name for path in out.iterdir()) == sorted(
        ["notes.txt", "other.vtu", "results", "sample.msh", *TABLES]
    )
    assert (out / "notes.txt").read_text() == "mine"
    write(box(), out, formats=[])
    assert not (out / "sample.msh").exists()


def test_extras_come_with_the_mesh_and_old_ones_go_with_it(tmp_path: Path) -> None:
    def note(mesh: ShellMesh, path: Path) -> None:
        path.write_text(mesh.title)

    written = write(box(), tmp_path / "out", formats=[], extras={"note.txt": note, "other.txt": None})
    assert [file.name for file in written] == [*TABLES, "sample.note.txt"]
    assert (tmp_path / "out" / "sample.note.txt").read_text() == "Sample box"
    write(box(), tmp_path / "out", formats=[], extras={"note.txt": None})
    assert sorted(contents(tmp_path / "out")) == sorted(TABLES)


def test_what_commands_wrote_beside_an_earlier_mesh_goes(tmp_path: Path) -> None:
    """It speaks of that mesh, or has its colours; another stem's stays."""
    out = tmp_path / "out"
    out.mkdir()
    for ending in STALE_FILES:
        (out / f"sample.{ending}").write_text("old")
        (out / f"other.{ending}").write_text("other")
    write(box(), out, formats=[])
    assert sorted(contents(out)) == sorted([*TABLES, *(f"other.{ending}" for ending in STALE_FILES)])


def test_progress_names_every_file_before_it_is_written(tmp_path: Path) -> None:
    told: list[tuple[str, float]] = []
    write(box(), tmp_path / "out", formats=["inp"], progress=lambda stage, done: told.append((stage, done)))
    assert [stage for stage, _ in told] == ["write inp", "write stacks.csv", "write summary.json"]
    assert [done for _, done in told] == pytest.approx([0.0, 1 / 3, 2 / 3])


def test_a_failing_extra_changes_nothing(tmp_path: Path) -> None:
    out = tmp_path / "out"
    write(tube(8, 2), out)
    before = contents(tmp_path)
    with pytest.raises(RuntimeError, match="bug"):
        write(box(), out, extras={"note.txt": failing_format(RuntimeError("bug")).write})
    assert contents(tmp_path) == before


@pytest.mark.parametrize("error", [OSError(28, "No space left on device"), RuntimeError("bug"), KeyboardInterrupt()])
@pytest.mark.parametrize("earlier", [False, True])
def test_a_failing_writer_changes_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: BaseException, earlier: bool
) -> None:
    out = tmp_path / "deep" / "out"
    if earlier:
        write(tube(8, 2), out)
    before = contents(tmp_path)
    monkeypatch.setitem(FORMATS, "vtu", failing_format(error))
    wanted = OutputError if isinstance(error, OSError) else type(error)
    with pytest.raises(wanted, match="No space left" if isinstance(error, OSError) else None):
        write(box(), out)
    assert contents(tmp_path) == before


def test_a_file_in_the_way(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("a file")
    with pytest.raises(OutputError, match="is a file"):
        write(box(), tmp_path / "out")
    with pytest.raises(OutputError, match="cannot write into"):
        write(box(), tmp_path / "out" / "below")
    assert contents(tmp_path) == {"out": b"a file"}


@pytest.mark.skipif(os.geteuid() == 0, reason="the super-user may write everywhere")
def test_a_directory_that_may_not_be_written(tmp_path: Path) -> None:
    tmp_path.chmod(0o500)
    with pytest.raises(OutputError, match="Permission denied"):
        write(box(), tmp_path / "out")
    tmp_path.chmod(0o700)


def test_a_directory_in_place_of_a_file(tmp_path: Path) -> None:
    out = tmp_path / "out"
    put(out, a="old a", b="old b")
    (out / "c.own").mkdir()
    before = contents(tmp_path)
    with pytest.raises(OSError, match=r"c\.own"):
        put(out, a="new a", c="new c")
    assert contents(tmp_path) == before


@pytest.mark.parametrize("exchange", [True, False])
def test_old_files_go_and_new_ones_come(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, exchange: bool) -> None:
    if not exchange:
        monkeypatch.setattr(placing, "_LIBC", None)
    out = tmp_path / "out"
    put(out, a="1", b="1")
    out.chmod(0o750)
    put(out, b="2", c="2")
    assert contents(out) == {"b.own": b"2", "c.own": b"2"}
    assert out.stat().st_mode & 0o777 == 0o750
    assert list(tmp_path.iterdir()) == [out]


def test_a_working_directory_and_foreign_files_stay_the_same_directory(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    out = tmp_path / "out"
    put(out, a="1")
    inode = out.stat().st_ino
    monkeypatch.chdir(out)
    put(Path(), a="2")
    assert out.stat().st_ino == inode
    assert contents(Path()) == {"a.own": b"2"}
    monkeypatch.chdir(tmp_path)
    (out / "notes").write_text("mine")
    put(out, a="3")
    assert out.stat().st_ino == inode
    assert contents(tmp_path) == {"out": b"directory", "out/a.own": b"3", "out/notes": b"mine"}


def test_a_link_to_a_directory_stays_a_link(tmp_path: Path) -> None:
    put(tmp_path / "real", a="1")
    (tmp_path / "link").symlink_to(tmp_path / "real")
    put(tmp_path / "link", a="2")
    assert (tmp_path / "link").is_symlink()
    assert contents(tmp_path / "real") == {"a.own": b"2"}


def test_a_parent_that_may_not_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The hidden directory then goes into the directory itself."""
    put(tmp_path / "out", a="1")
    monkeypatch.setattr(placing.os, "access", lambda _path, _mode: False)
    with new_files(tmp_path / "out", is_own=own) as stage:
        assert stage.parent == tmp_path / "out"
        (stage / "b.own").write_text("2")
    assert contents(tmp_path) == {"out": b"directory", "out/b.own": b"2"}


@pytest.mark.parametrize("step", range(1, 6))
def test_a_failing_move_is_undone(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: int) -> None:
    """Two old files out, two new ones in, and the last rename that makes the old ones rubbish: each may fail."""
    out = tmp_path / "out"
    put(out, a="1", b="1")
    (out / "notes").write_text("mine")
    before = contents(tmp_path)
    rename, calls = Path.rename, 0

    def failing_rename(path: Path, target: Path) -> Path:
        nonlocal calls
        calls += 1
        if calls == step:
            raise OSError(5, "Input/output error")
        return rename(path, target)

    monkeypatch.setattr(Path, "rename", failing_rename)
    with pytest.raises(OSError, match="Input/output error"):
        put(out, b="2", c="2")
    assert contents(tmp_path) == before


def test_a_failing_move_of_a_folder_is_undone(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """File, folder and two tables out, the same in, and the last rename: each may fail."""
    out = tmp_path / "out"
    write(box(), out, formats=["vtm"])
    (out / "notes").write_text("mine")
    before = contents(tmp_path)
    rename = Path.rename
    for step in range(1, 11):
        calls = count(1)

        def failing_rename(path: Path, target: Path, calls: Iterator[int] = calls, step: int = step) -> Path:
            if next(calls) == step:
                raise OSError(5, "Input/output error")
            return rename(path, target)

        monkeypatch.setattr(Path, "rename", failing_rename)
        if step == 10:  # one more than there are
            break
        with pytest.raises(OutputError, match="Input/output error"):
            write(tube(8, 2), out, formats=["vtm"])
        assert contents(tmp_path) == before
    write(tube(8, 2), out, formats=["vtm"])
    assert not (out / "sample.vtm.d" / "region-3-fore-web.vtu").exists()
    assert (out / "notes").read_text() == "mine"


VICTIM = """
import os, signal, sys
from pathlib import Path
from skinmesh.write import placing

def die(*_): os.kill(os.getpid(), signal.SIGKILL)

out, step = Path(sys.argv[1]), int(sys.argv[2])
rename, exchange, calls = Path.rename, placing._exchange, 0

def counted(path, target):
    global calls
    calls += 1
    if calls == step: die()
    result = rename(path, target)
    return result

Path.rename = counted
if step == -1:
    placing._exchange = lambda stage, directory: exchange(stage, directory) and die()
with placing.new_files(out, is_own=lambda name: name.endswith(".own")) as stage:
    (stage / "b.own").write_text("2")
    if step == 0: die()
    (stage / "c.own").write_text("2")
print(calls)
"""


def run_victim(out: Path, step: int) -> int:
    return subprocess.run(
        [sys.executable, "-c", VICTIM, str(out), str(step)], capture_output=True, check=False
    ).returncode


def can_exchange(directory: Path) -> bool:
    first, second = directory / "first", directory / "second"
    first.mkdir()
    second.mkdir()
    can = placing._exchange(first, second)
    first.rmdir()
    second.rmdir()
    return can


@pytest.mark.parametrize("step", [0, -1])
def test_a_kill_leaves_all_old_or_all_new(tmp_path: Path, step: int) -> None:
    """While the files are made, and right after the exchange."""
    if step == -1 and not can_exchange(tmp_path):
        pytest.skip("this system cannot exchange two directories")
    out = tmp_path / "out"
    put(out, a="1", b="1")
    assert run_victim(out, step) == -signal.SIGKILL
    new = {"b.own": b"2", "c.own": b"2"}
    assert contents(out) == ({"a.own": b"1", "b.own": b"1"} if step == 0 else new)
    assert len(list(tmp_path.iterdir())) == 2
    put(out, d="3")
    assert contents(tmp_path) == {"out": b"directory", "out/d.own": b"3"}


@pytest.mark.parametrize("step", range(1, 6))
def test_a_kill_between_moves_never_mixes_and_is_undone_by_the_next_run(tmp_path: Path, step: int) -> None:
    out = tmp_path / "out"
    put(out, a="1", b="1")
    (out / "notes").write_text("mine")
    before = contents(out)
    assert run_victim(out, step) == -signal.SIGKILL
    found = contents(out)
    assert found.pop("notes") == b"mine"
    assert len(set(found.values())) <= 1

    with pytest.raises(RuntimeError), new_files(out, is_own=own):
        raise RuntimeError
    assert contents(tmp_path) == {"out": b"directory"} | {f"out/{name}": text for name, text in before.items()}


def test_the_victim_would_have_lived(tmp_path: Path) -> None:
    out = tmp_path / "out"
    put(out, a="1", b="1")
    (out / "notes").write_text("mine")
    assert run_victim(out, 6) == 0
    assert contents(out) == {"b.own": b"2", "c.own": b"2", "notes": b"mine"}


def test_a_run_that_still_works_is_not_cleared_away(tmp_path: Path) -> None:
    out = tmp_path / "out"
    with new_files(out, is_own=own) as slow:
        (slow / "a.own").write_text("slow")
        put(out, a="quick")
        assert contents(slow) == {"a.own": b"slow"}
    assert contents(tmp_path) == {"out": b"directory", "out/a.own": b"slow"}


def test_a_neighbour_of_a_similar_name_is_not_touched(tmp_path: Path) -> None:
    near = tmp_path / ".out.skinmesh-old-notes"
    near.mkdir()
    (tmp_path / "out-2").mkdir()
    put(tmp_path / "out", a="1")
    assert near.is_dir()
    assert (tmp_path / "out-2").is_dir()


def test_names_of_other_languages_in_every_file(tmp_path: Path) -> None:
    mesh = box()
    names = ("Gürtel außen", "<script>", 'Steg "vorn"')
    mesh = replace(
        mesh,
        title="Flügel",
        regions=tuple(replace(region, name=name) for region, name in zip(mesh.regions, names, strict=True)),
    )
    written = write(mesh, tmp_path / "out")
    assert len(written) == len(DEFAULT_FORMATS) + 3
    assert "Gürtel außen" in (tmp_path / "out" / "sample.summary.json").read_text(encoding="utf-8")
