"""The main job: from a checked blade to its shell mesh."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import BladeDefinition, PlyRule
from skinmesh.definition.names import resolve_cover
from skinmesh.mesh.assemble import assemble_mesh, tie_parts
from skinmesh.mesh.closing import closing_elements
from skinmesh.mesh.inner_face import find_narrow_elements, find_thick_elements
from skinmesh.mesh.keep import (
    check_kept_rule,
    keep_stack_numbers,
    kept_layout,
    kept_topology,
    with_kept_numbers,
)
from skinmesh.mesh.midsurface import move_to_middle
from skinmesh.mesh.plane import cut_patches, mesh_patches
from skinmesh.mesh.shellmesh import NO_STACK, BuildReport, ShellMesh
from skinmesh.skin.cover import cover_strips
from skinmesh.skin.flatpattern import ply_areas, region_polygons
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.doubts import doubtful_profiles, doubtful_stations
from skinmesh.surface.loft import loft_surface
from skinmesh.wording import counted

Progress = Callable[[str, float], None]


def build_mesh(blade: BladeDefinition, *, keep: ShellMesh | None = None, progress: Progress | None = None) -> ShellMesh:
    """Build the layered shell mesh of a blade.

    Writes no file and leaves no global state behind; works off the main thread.

    Parameters
    ----------
    blade : BladeDefinition
    keep : ShellMesh, optional
        An earlier mesh of the same layout, whose numbers, sets and connectivity are to stay: each node keeps its
        parametric coordinates and goes to their place on the new surface. The mesh kernel is not run.
    progress : callable, optional
        Called with the name of each stage and the share of the work done when it begins.

    Returns
    -------
    ShellMesh

    Raises
    ------
    InputError
        The layout does not fit on the skin, or the mesh would be far too large.
    LayoutChanged
        The layout is not that of the mesh to keep.
    MeshError
        The mesh kernel did something other than what it was asked.
    """
    tell = progress or _silent
    tell("surface", 0.0)
    surface = loft_surface(blade)
    tell("skin", 0.05)
    if keep is not None:
        check_kept_rule(blade, keep)
    skin, warnings = unroll_skin(blade, surface, kept=None if keep is None else kept_layout(keep))
    tell("plies", 0.2)

    def covered(ply: PlyRule) -> frozenset[str]:
        return frozenset().union(*(resolve_cover(name, blade.layout) for name in ply.covers))

    stacks = cover_strips(blade, skin, covered)
    if keep is not None:
        stacks = keep_stack_numbers(stacks, keep)
    report = BuildReport(
        warnings=(
            *doubtful_stations(blade.stations),
            *doubtful_profiles(blade.profiles),
            *warnings,
            *stacks.warnings,
        ),
        ply_end_move=stacks.largest_move,
        ply_end_place=stacks.move_place,
        rows=tuple(zip(skin.rows.labels, skin.rows.z.tolist(), strict=True)),
        seams=skin.seams.labels,
        stations=surface.stations,
        developed_areas={name: float(polygon.area) for name, polygon in region_polygons(skin).items()},
        ply_areas=ply_areas(blade, skin, covered),
        mesh_rule=blade.mesh,
        table=blade.stations,
    )
    tell("mesh", 0.3)
    if keep is None:
        regular = mesh_patches(cut_patches(skin), skin, shape=blade.mesh.shape)
        tell("elements", 0.5)
        closing = closing_elements(skin, shape=blade.mesh.shape)
        topology = tie_parts(skin, (regular, closing), hand=blade.hand)
    else:
        topology = kept_topology(keep, skin)
        tell("elements", 0.5)
    mesh = assemble_mesh(blade, skin, topology, stacks, report)
    if blade.mesh.surface == "mid":
        tell("mid surface", 0.65)
        mesh, limited = move_to_middle(mesh)
        mesh = replace(mesh, report=replace(mesh.report, warnings=mesh.report.warnings + limited))
    tell("checks", 0.8)
    mesh = _with_thick_elements(mesh)
    if blade.plies:
        mesh = _with_bare_elements(mesh)
    if keep is not None:
        mesh = with_kept_numbers(mesh, keep)
    tell("done", 1.0)
    return mesh


def _with_thick_elements(mesh: ShellMesh) -> ShellMesh:
    """Name the elements whose laminate is too thick for the surface that carries them, or for their own width."""
    failing, doubtful = find_thick_elements(mesh)
    candidates = {
        "folded laminate": failing,
        "thick laminate": doubtful,
        "narrow elements": find_narrow_elements(mesh),
    }
    sets = {name: found for name, found in candidates.items() if len(found)}
    if not sets:
        return mesh
    texts = tuple(_thick_text(mesh, name, found) for name, found in sets.items())
    report = replace(mesh.report, warnings=mesh.report.warnings + texts)
    return replace(mesh, element_sets={**mesh.element_sets, **sets}, report=report)


def _with_bare_elements(mesh: ShellMesh) -> ShellMesh:
    """Name the elements that no ply covers."""
    bare = np.flatnonzero(mesh.stack == NO_STACK)
    if len(bare) == 0:
        return mesh
    them = "it" if len(bare) == 1 else "them"
    text = f"bare elements: no ply covers {counted(len(bare), 'element')} ({_place(mesh, bare)}); "
    text += f"the decks give {them} no section"
    report = replace(mesh.report, warnings=(text, *mesh.report.warnings))
    return replace(mesh, element_sets={**mesh.element_sets, "bare elements": bare}, report=report)


def _place(mesh: ShellMesh, found: NDArray[np.int64]) -> str:
    """Regions and span of some elements, and the first of their numbers."""
    regions = ", ".join(mesh.regions[i].name for i in np.unique(mesh.region[found]))
    z = mesh.points[mesh.cells[found, : mesh.n_sides], 2]
    shown = ", ".join(str(number) for number in mesh.element_number[found][:8])
    word = "element" if len(found) == 1 else "elements"
    return f"{regions}, z = {z.min():.3f} to {z.max():.3f} m; {word} {shown}{', …' if len(found) > 8 else ''}"


def _thick_text(mesh: ShellMesh, name: str, found: NDArray[np.int64]) -> str:
    rule = {
        "folded laminate": "is thicker than the surface's curvature allows: its inner face folds, and a solver of"
        " layered shells stops there; take fewer plies or larger elements",
        "thick laminate": "fills more than 0.8 of the radius of curvature",
        "narrow elements": "is thicker than {their} shortest edge is long; shell theory says little there",
    }[name].format(their="its" if len(found) == 1 else "their")
    return f"{name}: the laminate of {counted(len(found), 'element')} {rule} ({_place(mesh, found)})"


def _silent(stage: str, done: float) -> None:
    """Progress that nobody wants to hear of."""
