"""Results on disk, one file a variant, each put in place whole: what a stopped sweep goes on from."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import asdict, replace
from hashlib import sha256
from pathlib import Path, PurePosixPath

from skinmesh.errors import OutputError
from skinmesh.sweep.plan import BladeTexts, Order
from skinmesh.sweep.variant import Outcome
from skinmesh.version import __version__
from skinmesh.write.placing import new_files

try:
    import fcntl
except ImportError:  # pragma: no cover - not on Windows
    fcntl = None  # type: ignore[assignment]

FORM = 1
"""Raised when a record of an earlier form can no longer be read."""
RECORDS, MESHES, LOCK = "records", "meshes", ".lock"


def variant_key(texts: BladeTexts, base: BladeTexts | None, order: Order) -> str:
    """A name for a result that depends on everything it was made from, and on nothing else.

    Parameters
    ----------
    texts : BladeTexts
    base : BladeTexts, optional
        Whose mesh's numbers are kept.
    order : Order

    Returns
    -------
    str
        32 hexadecimal digits.
    """
    content = [FORM, __version__, texts.stem, dict(texts.files), dict(base.files) if base else None, asdict(order)]
    return sha256(json.dumps(content, ensure_ascii=False).encode("utf-8", "surrogatepass")).hexdigest()[:32]


class Records:
    """The folder of results of a sweep.

    Parameters
    ----------
    directory : Path
        Of the sweep.
    """

    def __init__(self, directory: Path) -> None:
        self.directory = directory
        self._folder = directory / RECORDS

    def mesh_folder(self, key: str) -> Path:
        """Where the files of a variant's mesh are kept."""
        return self.directory / MESHES / key

    def read(self, key: str) -> Outcome | None:
        """The recorded outcome of a variant, None where there is none that can be read.

        Parameters
        ----------
        key : str

        Returns
        -------
        Outcome or None
        """
        try:
            content = json.loads((self._folder / f"{key}.json").read_text(encoding="utf-8"))
            return Outcome(**content["outcome"])
        except (OSError, ValueError, KeyError, TypeError):
            return None

    def add(self, key: str, outcome: Outcome, *, about: Mapping[str, object]) -> None:
        """Record an outcome so that it outlives whatever stops the process now.

        Parameters
        ----------
        key : str
        outcome : Outcome
            Its files are put beside the records, before the record itself.
        about : mapping
            What the variant is, for a reader of the record.

        Raises
        ------
        OutputError
        """
        try:
            if outcome.files:
                self._put_files(self.mesh_folder(key), outcome.files)
            kept = {name: value for name, value in vars(replace(outcome, files={})).items() if name != "files"}
            text = json.dumps({"about": about, "outcome": kept}, indent=1, ensure_ascii=False, allow_nan=False)
            unfinished = self._folder / f".{key}.json"
            with unfinished.open("w", encoding="utf-8", newline="\n") as file:
                file.write(f"{text}\n")
                file.flush()
                os.fsync(file.fileno())
            unfinished.replace(self._folder / f"{key}.json")
            _sync_folder(self._folder)
        except OSError as error:
            raise OutputError(f"cannot write into {self.directory}: {error.strerror or error}") from error

    @staticmethod
    def _put_files(folder: Path, files: Mapping[str, bytes]) -> None:
        with new_files(folder, is_own=lambda _name: True) as stage:
            for name, content in files.items():
                path = stage / PurePosixPath(name)
                path.parent.mkdir(parents=True, exist_ok=True)
                path.write_bytes(content)


@contextmanager
def open_records(directory: Path) -> Iterator[Records]:
    """Open the folder of a sweep for one run alone.

    Parameters
    ----------
    directory : Path
        Made where it is missing.

    Yields
    ------
    Records

    Raises
    ------
    OutputError
        The folder cannot be written, or another sweep is at work in it.
    """
    folder, was_there = directory / RECORDS, directory.exists()
    try:
        folder.mkdir(parents=True, exist_ok=True)
        lock = (folder / LOCK).open("w", encoding="utf-8")
    except OSError as error:
        raise OutputError(f"cannot write into {directory}: {error.strerror or error}") from error
    with lock:
        if fcntl is not None:
            try:
                # the system lets go of it when the process ends, however it ends
                fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
            except OSError as error:
                raise OutputError(f"another sweep is at work in {directory}; wait for it or stop it") from error
        for unfinished in folder.glob(".*.json"):
            unfinished.unlink(missing_ok=True)
        try:
            yield Records(directory)
        finally:
            _remove_if_unused(directory, is_ours=not was_there)


def _remove_if_unused(directory: Path, *, is_ours: bool) -> None:
    """Leave no folder behind where the work never began."""
    folder = directory / RECORDS
    if [path.name for path in folder.iterdir()] == [LOCK] and not any(p != folder for p in directory.iterdir()):
        (folder / LOCK).unlink()
        folder.rmdir()
        if is_ours:
            directory.rmdir()


def _sync_folder(folder: Path) -> None:
    """Make the name of a new file as durable as its content."""
    if os.name == "posix":
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
