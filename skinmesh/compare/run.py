"""What changed between two built meshes, from their files alone."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from skinmesh.check.reading import BuiltMesh, read_built_mesh
from skinmesh.compare.along import Along, LargestChange, largest_change, measured_along
from skinmesh.compare.elements import ElementChange, compare_elements
from skinmesh.compare.files import differing_files, differing_keys, files_in_one, same_stacks, same_vtu
from skinmesh.compare.numbering import Numbering, compare_numbering
from skinmesh.compare.parts import (
    input_entries,
    material_entries,
    ply_entries,
    region_entries,
    setting_values,
    stack_entries,
    whole_values,
)
from skinmesh.compare.stations import StationChange, compare_stations
from skinmesh.compare.surface import SurfaceChange, compare_surfaces
from skinmesh.compare.values import Entry, Value

Progress = Callable[[str, float], None]

PARTS = 60
"""Parts of the span over which masses and widths are averaged, so that rows which moved a little make no difference."""


@dataclass(frozen=True, eq=False)
class MeshDifference:
    """What changed from an old mesh to a new one.

    Attributes
    ----------
    old, new : BuiltMesh
    is_equal : bool
        Whether the files say the same in everything but dates, versions and where kept divisions came from.
    is_same_mesh : bool
        Whether nodes, elements, sets, axes and plies are the same to the last bit, whatever the summaries say beside.
    summary_keys : tuple of str
        Keys of the summary that say something else.
    numbering : Numbering
    stations : StationChange
    whole : tuple of Value
        Counts, area, mass, centre and moments, equal ones too.
    regions, plies, stacks, materials : tuple of Entry
        What came, went or changed.
    settings : tuple of Value
        Title, hand and mesh settings that changed.
    inputs : tuple of Entry
        Input files of another content.
    warnings_gone, warnings_new : tuple of str
    surface : SurfaceChange
    elements : ElementChange
    along : (Along, Along)
        Both meshes along the span.
    largest : mapping of str to LargestChange
        Along the span: chord, twist, thickness of the sections, mass per length, and the width of every region that
        both have (a web's height), in m, rad and kg/m; mass and widths are means over 60 parts of the span.
    files : tuple of str
        Endings of decks and of MSH that differ although the mesh is the same.
    files_in_one : tuple of str
        Endings of formats that only one folder has; these make no difference.
    """

    old: BuiltMesh
    new: BuiltMesh
    is_equal: bool
    is_same_mesh: bool
    summary_keys: tuple[str, ...]
    numbering: Numbering
    stations: StationChange
    whole: tuple[Value, ...]
    regions: tuple[Entry, ...]
    plies: tuple[Entry, ...]
    stacks: tuple[Entry, ...]
    materials: tuple[Entry, ...]
    settings: tuple[Value, ...]
    inputs: tuple[Entry, ...]
    warnings_gone: tuple[str, ...]
    warnings_new: tuple[str, ...]
    surface: SurfaceChange
    elements: ElementChange
    along: tuple[Along, Along]
    largest: Mapping[str, LargestChange]
    files: tuple[str, ...]
    files_in_one: tuple[str, ...]


def compare_directories(old: Path, new: Path, *, progress: Progress | None = None) -> MeshDifference:
    """Read two built meshes and compare them.

    Parameters
    ----------
    old, new : Path
        Folders that a build wrote.
    progress : callable, optional
        Called with the name of each stage and the share of the work done when it begins.

    Returns
    -------
    MeshDifference

    Raises
    ------
    InputError
        A folder holds no mesh, or its files cannot be read.
    """
    tell = progress or _silent
    tell("reading the old mesh", 0.0)
    before = read_built_mesh(old)
    tell("reading the new mesh", 0.2)
    return compare_meshes(before, read_built_mesh(new), progress=lambda name, done: tell(name, 0.4 + 0.6 * done))


def compare_meshes(old: BuiltMesh, new: BuiltMesh, *, progress: Progress | None = None) -> MeshDifference:
    """Compare two meshes that were read back from their files.

    Parameters
    ----------
    old, new : BuiltMesh
    progress : callable, optional

    Returns
    -------
    MeshDifference
    """
    tell = progress or _silent
    tell("numbers", 0.0)
    numbering = compare_numbering(old.mesh, new.mesh)
    has_same_layout = not numbering.layout
    tell("along the span", 0.1)
    along = measured_along(old.mesh), measured_along(new.mesh)
    tell("surface", 0.3)
    surface = compare_surfaces(
        old.mesh, new.mesh, has_same_places=numbering.has_same_places, has_same_layout=has_same_layout
    )
    tell("elements", 0.6)
    elements = compare_elements(
        old.mesh, new.mesh, has_same_elements=numbering.has_same_elements, has_same_layout=has_same_layout
    )
    tell("tables", 0.8)
    is_same_mesh = same_vtu(old.vtu, new.vtu) and same_stacks(old, new)
    files = differing_files(old, new) if is_same_mesh else ()
    keys = differing_keys(old.summary, new.summary)
    warnings = [mesh.report.warnings for mesh in (old.mesh, new.mesh)]
    difference = MeshDifference(
        old=old,
        new=new,
        is_equal=is_same_mesh and not files and not keys,
        summary_keys=keys,
        is_same_mesh=is_same_mesh,
        numbering=numbering,
        stations=compare_stations(old.summary, new.summary),
        whole=whole_values(old.summary, new.summary),
        regions=region_entries(old, new, along),
        plies=ply_entries(old.mesh, new.mesh, along),
        stacks=stack_entries(old.mesh, new.mesh),
        materials=material_entries(old.summary, new.summary),
        settings=setting_values(old.summary, new.summary),
        inputs=input_entries(old.mesh, new.mesh),
        warnings_gone=tuple(text for text in warnings[0] if text not in warnings[1]),
        warnings_new=tuple(text for text in warnings[1] if text not in warnings[0]),
        surface=surface,
        elements=elements,
        along=along,
        largest=_largest(*along),
        files=files,
        files_in_one=files_in_one(old, new),
    )
    tell("done", 1.0)
    return difference


def _largest(old: Along, new: Along) -> dict[str, LargestChange]:
    found = {
        name: largest_change(old.planform.z, before, new.planform.z, after)
        for name, before, after in (
            ("chord", old.planform.chord, new.planform.chord),
            ("twist", old.planform.twist, new.planform.twist),
            ("section thickness", old.planform.thickness, new.planform.thickness),
        )
    }
    ends = np.linspace(max(old.ends[0], new.ends[0]), min(old.ends[-1], new.ends[-1]), PARTS + 1)
    middles = 0.5 * (ends[1:] + ends[:-1])
    found["mass per length"] = largest_change(middles, old.means(old.mass, ends), middles, new.means(new.mass, ends))
    for name, width in new.widths.items():
        if name in old.widths:
            before, after = old.means(old.widths[name], ends), new.means(width, ends)
            # a part in which a region ends would tell of the end and not of the width
            whole = (old.means(old.widths[name] > 0.0, ends) > 1 - 1e-9) & (new.means(width > 0.0, ends) > 1 - 1e-9)
            if whole.any():
                found[f"width of {name}"] = largest_change(middles[whole], before[whole], middles[whole], after[whole])
    return found


def _silent(name: str, done: float) -> None:
    """Progress that nobody wants to hear of."""
