"""New files in place of old ones, all of them or none.

The files are made in a hidden directory beside the wanted one and put in place when all are there. What can happen
then, and what a reader finds in the directory if the process is killed at any moment:

* There is no such directory yet: one rename. Nothing, or all new.
* It holds nothing but files of ours, and the system can exchange two directories (Linux): one exchange. All old, or
  all new.
* It holds other files too, or is our working directory: they stay untouched, and ours are moved one by one, first all
  old files and folders out, then all new ones in. Never old beside new; what is missing, the next run puts back.

A run that was killed leaves its hidden directory behind. The next run into the same directory undoes what was half done
and removes it; a lock on the hidden directory tells it from that of a run which still works.
"""

from __future__ import annotations

import ctypes
import os
import shutil
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from secrets import token_hex

from skinmesh.errors import OutputError

try:
    import fcntl
except ImportError:  # pragma: no cover - not on Windows
    fcntl = None  # type: ignore[assignment]

_LIBC = ctypes.CDLL(None, use_errno=True) if os.name == "posix" else None
_AT_FDCWD, _RENAME_EXCHANGE = -100, 2
_NAMES = ".names"
"""List of the new files, in the hidden directory, for whoever has to undo a move."""


@contextmanager
def new_file(path: Path) -> Iterator[Path]:
    """Give a place beside a file for its new content, and move that there when all of it is written.

    Parameters
    ----------
    path : Path

    Yields
    ------
    Path
        Of the same suffix, in the same directory; gone afterwards, whatever happens.

    Raises
    ------
    OutputError
        The file cannot be written; what was there before is there still.
    """
    unfinished = path.with_name(f".{token_hex(4)}.{path.name}")
    try:
        yield unfinished
        unfinished.replace(path)
    except OSError as error:
        raise OutputError(f"cannot write {path}: {error.strerror or error}") from error
    finally:
        unfinished.unlink(missing_ok=True)


@contextmanager
def new_files(directory: Path, *, is_own: Callable[[str], bool]) -> Iterator[Path]:
    """Give an empty directory to write files into; when all went well they take the place of the old ones.

    Parameters
    ----------
    directory : Path
        Where the files shall lie in the end; made, with its parents, where it is missing.
    is_own : callable
        Whether a file of this name in ``directory`` is one of ours. Those that are not made anew are removed; all other
        files are left alone. It is asked for ``name/`` about a folder, and for ``name/file`` about all that lies in a
        folder of ours.

    Yields
    ------
    Path
        An empty directory.

    Raises
    ------
    OutputError
        ``directory`` is not a directory, or a folder of ours in it holds what is not ours; everything is as it was
        before.
    OSError
        The system refused; everything is as it was before.
    """
    directory = directory.resolve()
    if directory.exists() and not directory.is_dir():
        raise OutputError(f"{directory} is a file; a directory is needed there")
    with ExitStack() as undo:
        for parent in _missing_parents(directory):
            parent.mkdir()
            undo.callback(_remove_if_empty, parent)
        home = _home(directory)
        _clear_up(home, directory)
        if directory.exists():
            _own_entries(directory, is_own)  # refuses before the work is done
        stage = home / f"{_mark(directory)}new-{token_hex(4)}"
        stage.mkdir()
        with _removed_at_last(stage):
            yield stage
            _put_in_place(stage, directory, is_own)
            undo.pop_all()


def _mark(directory: Path) -> str:
    """How the names of our hidden directories begin."""
    return f".{directory.name}.skinmesh-"


def _missing_parents(directory: Path) -> list[Path]:
    return [parent for parent in reversed(directory.parents) if not parent.exists()]


def _remove_if_empty(directory: Path) -> None:
    if not any(directory.iterdir()):
        directory.rmdir()


def _home(directory: Path) -> Path:
    """Where the hidden directory goes: beside the wanted one, or into it where that cannot be."""
    parent = directory.parent
    if not directory.exists():
        return parent
    is_beside = os.access(parent, os.W_OK | os.X_OK) and parent.stat().st_dev == directory.stat().st_dev
    return parent if is_beside and not directory.is_mount() else directory


@contextmanager
def _removed_at_last(stage: Path) -> Iterator[None]:
    """Hold the lock that says a run is alive, and remove its hidden directory in the end."""
    handle = _lock(stage)
    try:
        yield
    finally:
        if stage.exists():
            shutil.rmtree(stage, ignore_errors=True)
        if handle is not None:
            os.close(handle)


def _lock(stage: Path) -> int | None:
    """Take the lock of a hidden directory; None where the system has no such locks."""
    if fcntl is None:
        return None
    handle = os.open(stage, os.O_RDONLY)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        os.close(handle)
        raise
    return handle


def _clear_up(home: Path, directory: Path) -> None:
    """Undo and remove what killed runs have left."""
    for stage in sorted(home.iterdir()):
        if not stage.name.startswith(f"{_mark(directory)}new-") or not stage.is_dir():
            continue
        try:
            handle = _lock(stage)
        except OSError:  # a run that still works holds it
            continue
        _move_back(stage, directory)
        shutil.rmtree(stage, ignore_errors=True)
        if handle is not None:
            os.close(handle)


def _put_in_place(stage: Path, directory: Path, is_own: Callable[[str], bool]) -> None:
    if not directory.exists():
        stage.rename(directory)
        return
    own, has_others = _own_entries(directory, is_own)
    if not has_others and _may_be_exchanged(stage, directory) and _exchange(stage, directory):
        return
    _move(stage, directory, own)


def _own_entries(directory: Path, is_own: Callable[[str], bool]) -> tuple[list[Path], bool]:
    """Files and folders of ours in a directory, and whether it holds others too."""
    hidden = _mark(directory)
    entries = [path for path in directory.iterdir() if not path.name.startswith(hidden)]
    folders = [path for path in entries if path.is_dir() and not path.is_symlink() and is_own(f"{path.name}/")]
    for folder in folders:
        foreign = sorted(
            path.name for path in folder.iterdir() if path.is_dir() or not is_own(f"{folder.name}/{path.name}")
        )
        if foreign:
            text = f"{folder} is to be replaced, but holds '{foreign[0]}', which skinmesh did not write; move it"
            raise OutputError(text)
    own = folders + [path for path in entries if is_own(path.name) and not path.is_dir()]
    return own, len(own) < len(entries)


def _may_be_exchanged(stage: Path, directory: Path) -> bool:
    """Whether nobody would notice that the directory is another one."""
    if stage.parent != directory.parent or _holds_working_directory(directory):
        return False
    old, new = directory.stat(), stage.stat()
    return (old.st_uid, old.st_gid) == (new.st_uid, new.st_gid)


def _holds_working_directory(directory: Path) -> bool:
    try:
        here = Path.cwd()
    except FileNotFoundError:
        return False
    return here == directory or directory in here.parents


def _exchange(stage: Path, directory: Path) -> bool:
    """Let two directories change places at once, by renameat2(2); False where the system cannot."""
    rename = getattr(_LIBC, "renameat2", None)
    if rename is None:
        return False
    shutil.copymode(directory, stage)
    first, second = os.fsencode(stage), os.fsencode(directory)
    return bool(rename(_AT_FDCWD, first, _AT_FDCWD, second, _RENAME_EXCHANGE) == 0)


def _old_files(stage: Path) -> Path:
    return stage.with_name(stage.name.replace(".skinmesh-new-", ".skinmesh-old-"))


def _move(stage: Path, directory: Path, own: list[Path]) -> None:
    """All old files out, then all new files in; back to where all were if anything fails."""
    new = sorted(stage.iterdir())
    (stage / _NAMES).write_text("\n".join(path.name for path in new), encoding="utf-8")
    old = _old_files(stage)
    old.mkdir()
    with ExitStack() as undo:
        undo.callback(_move_back, stage, directory)
        for path in own:
            path.rename(old / path.name)
        for path in new:
            path.rename(directory / path.name)
        # From here on the old files are rubbish, and go with the rest of the hidden directory.
        old.rename(stage / "old")
        undo.pop_all()


def _move_back(stage: Path, directory: Path) -> None:
    """Undo a move, wherever it stopped; nothing where none had begun or all was done."""
    old = _old_files(stage)
    if not old.is_dir():
        return
    for name in (stage / _NAMES).read_text(encoding="utf-8").splitlines():
        if (directory / name).exists() and not (stage / name).exists():
            (directory / name).rename(stage / name)
    for path in old.iterdir():
        path.replace(directory / path.name)
    old.rmdir()
