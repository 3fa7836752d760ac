"""The register of file formats. A format is one module of ``skinmesh.write.formats`` that registers itself."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from skinmesh.mesh.shellmesh import ShellMesh

Writer = Callable[[ShellMesh, Path], None]


@dataclass(frozen=True)
class Format:
    """One file format.

    Attributes
    ----------
    name : str
        What the user types after ``--formats``; also the file's suffix.
    summary : str
        A few words for the help.
    write : callable
        ``write(mesh, path)``; leaves the mesh as it was.
    parts : str
        Regular expression of the names of the further files in :func:`parts_folder`, which the writer makes; empty
        where one file is all. A later build removes such files, and no others.
    """

    name: str
    summary: str
    write: Writer
    parts: str = ""


FORMATS: dict[str, Format] = {}


def register_format(name: str, *, summary: str, write: Writer, parts: str = "") -> None:
    """Enter a format into the register."""
    FORMATS[name] = Format(name, summary, write, parts)


def parts_folder(path: Path) -> Path:
    """Folder for the further files of a format, beside its file.

    >>> parts_folder(Path("blade-mesh/blade.vtm")).name
    'blade.vtm.d'
    """
    return path.with_name(f"{path.name}.d")
