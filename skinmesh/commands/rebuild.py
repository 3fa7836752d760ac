"""A build with its files, under the numbers of an earlier mesh where there is one."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

import skinmesh
from skinmesh.commands.stages import Stages
from skinmesh.definition.blade import BladeDefinition
from skinmesh.definition.spanwise import constant
from skinmesh.errors import LayoutChanged, OutputError
from skinmesh.mesh.carry import MeshMap, map_meshes
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.picture import SUBJECTS, picture
from skinmesh.show.viewer_colours import viewer_colours
from skinmesh.write.files import WrittenFile
from skinmesh.write.map_tables import MAP_FILES, map_files

# Where the parts of a build begin on its progress bar.
_BUILD, _MAP, _FILES = 0.05, 0.45, 0.5


@dataclass(frozen=True)
class BuildOrder:
    """What was asked for.

    Attributes
    ----------
    blade_file : Path
    output : Path, optional
    formats : tuple of str
    size : float, optional, m
    pictures : bool
    mapped_from : ShellMesh, optional
        Mesh whose nodes and elements are to be carried to the new one in tables.
    """

    blade_file: Path
    output: Path | None
    formats: tuple[str, ...]
    size: float | None
    pictures: bool
    mapped_from: ShellMesh | None = None

    @property
    def directory(self) -> Path:
        """Where the files go."""
        return self.output or Path(f"{self.blade_file.stem}-mesh")


@dataclass(frozen=True, eq=False)
class Built:
    """What came of it.

    Attributes
    ----------
    mesh : ShellMesh
    files : tuple of WrittenFile
    kept : ShellMesh, optional
        The mesh whose numbers were kept.
    refusal : LayoutChanged, optional
        Why the numbers of the first choice could not be kept.
    carried : MeshMap, optional
    solid_mass : float, optional, kg
        Mass of the layers as solids, from the summary just written, since working it out again takes a while.
    """

    mesh: ShellMesh
    files: tuple[WrittenFile, ...]
    kept: ShellMesh | None
    refusal: LayoutChanged | None
    carried: MeshMap | None
    solid_mass: float | None


def build_files(
    order: BuildOrder, stages: Stages, *, keep: tuple[ShellMesh, ...] = (), or_fresh: bool = False
) -> Built:
    """Read, build and write.

    Parameters
    ----------
    order : BuildOrder
    stages : Stages
    keep : tuple of ShellMesh
        Meshes whose numbers are to stay; the first one that has the layout is taken.
    or_fresh : bool
        Whether a new mesh is made where none has.

    Returns
    -------
    Built

    Raises
    ------
    SkinmeshError
        All that can go wrong on the way; then nothing was written.
    """
    stages.begin("reading", 0.0)
    blade = skinmesh.load(order.blade_file)
    directory = order.directory
    if directory.exists() and not directory.is_dir():  # said before a long build, not after it
        raise OutputError(f"cannot write into {directory}: it is a file; name a folder with -o")
    if order.size is not None:
        blade = replace(blade, mesh=replace(blade.mesh, size=constant(order.size)))
    mesh, kept, refusal = _build(blade, keep, or_fresh, stages.part(_BUILD, _MAP))
    carried = None
    if order.mapped_from is not None:
        stages.begin("map", _MAP)
        carried = map_meshes(order.mapped_from, mesh)
    files = skinmesh.write(
        mesh,
        directory,
        formats=order.formats,
        extras={
            **viewer_colours(order.formats),
            **{f"{word}.png": partial(picture, by=by) if order.pictures else None for by, word in SUBJECTS.items()},
            **(dict.fromkeys(MAP_FILES) if carried is None else map_files(carried)),
        },
        progress=stages.part(_FILES, 1.0),
    )
    stages.end()
    return Built(mesh, files, kept, refusal, carried, _solid_mass(directory / f"{mesh.stem}.summary.json"))


def _solid_mass(summary: Path) -> float | None:
    try:
        return float(json.loads(summary.read_text(encoding="utf-8"))["solid_mass_kg"])
    except OSError:  # moved away meanwhile: no reason to fail a finished build
        return None


def _build(
    blade: BladeDefinition, keep: tuple[ShellMesh, ...], or_fresh: bool, progress: Callable[[str, float], None]
) -> tuple[ShellMesh, ShellMesh | None, LayoutChanged | None]:
    refusal = None
    for old in keep:
        try:
            return skinmesh.build(blade, keep=old, progress=progress), old, refusal
        except LayoutChanged as error:
            refusal = refusal or error
    if refusal is not None and not or_fresh:
        raise refusal
    return skinmesh.build(blade, progress=progress), None, refusal
