"""What a rebuild changed, for the closing of ``skinmesh build --keep`` and the lines of ``--watch``."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from rich.console import Console, RenderableType
from rich.table import Table
from rich.text import Text

from skinmesh.commands.closing import grouped, print_parts, printable, significant
from skinmesh.errors import LayoutChanged
from skinmesh.mesh.carry import MeshMap
from skinmesh.mesh.keep import compare_quality
from skinmesh.mesh.shellmesh import ShellMesh


def node_moves(old: ShellMesh, new: ShellMesh) -> NDArray[np.float64]:
    """How far every node moved between two meshes of the same numbers, (n,), m."""
    return np.asarray(np.linalg.norm(new.nodes - old.nodes, axis=1))


def other_plies(old: ShellMesh, new: ShellMesh) -> NDArray[np.int64]:
    """Indices of the elements whose plies changed between two meshes of the same numbers."""
    before, after = ([stack.content_name for stack in mesh.stacks] + [""] for mesh in (old, new))
    return np.flatnonzero(np.array(before)[old.stack] != np.array(after)[new.stack])


def print_kept(console: Console, old: ShellMesh, new: ShellMesh, *, directory: Path) -> None:
    """Print how far the nodes moved, how many elements changed their plies, and the quality before and after.

    Parameters
    ----------
    console : rich Console
    old, new : ShellMesh
        Of the same numbers.
    directory : Path
        Where the old mesh lies.
    """
    moves = node_moves(old, new)
    n_changed = len(other_plies(old, new))
    quality, _ = compare_quality(old, new)
    table = Table(box=None, show_header=False, pad_edge=False, padding=(0, 2, 0, 0))
    rows = (
        (
            "nodes moved",
            f"{significant(float(moves.max()))} m at most, {significant(float(np.sqrt(np.mean(moves**2))))} m rms",
        ),
        ("other plies", f"{grouped(n_changed)} elements"),
        ("largest aspect", "{:.1f}, before {:.1f}".format(*quality.largest_aspect[::-1])),
        ("least scaled Jacobian", "{:.3f}, before {:.3f}".format(*quality.smallest_jacobian[::-1])),
        ("divisions", f"those of {_origin(new)}"),
        ("poor elements", "{}, before {}".format(*map(grouped, quality.n_poor[::-1]))),
    )
    for name, value in rows:
        table.add_row(name, value)
    print_parts(console, Text(f"Numbers, sets and connectivity kept from {printable(str(directory))}"), table)


def print_map(console: Console, carried: MeshMap, refusal: LayoutChanged | None, *, directory: Path) -> None:
    """Print why a mesh got new numbers, and what of the old one is found in it again.

    Parameters
    ----------
    console : rich Console
    carried : MeshMap
    refusal : LayoutChanged, optional
        Why the numbers could not be kept.
    directory : Path
        Where the old mesh lies.
    """
    nodes, elements, old = carried.nodes, carried.elements, carried.old
    n_gone, n_same = int(nodes.is_gone.sum()), int(nodes.is_same.sum())
    n_near = old.n_nodes - n_same - n_gone
    parts: list[RenderableType] = []
    if refusal is not None:
        parts.append(Text(f"New numbers: {printable('; '.join(refusal.changes))}"))
    if carried.is_identity:
        parts.append(Text(f"Nodes and elements of {printable(str(directory))} on this mesh: the same, each its own"))
        print_parts(console, *parts)
        return
    table = Table(box=None, show_header=False, pad_edge=False, padding=(0, 2, 0, 0))
    sets = [name for name in old.node_sets if name not in carried.new.node_sets]
    regions = [region.name for region in old.regions if region.name not in {r.name for r in carried.new.regions}]
    for name, value in (
        (
            "nodes",
            f"{grouped(n_same)} in the same place, {grouped(n_near)} near, {grouped(n_gone)} gone",
        ),
        (
            "elements",
            f"{grouped(len(np.unique(elements.old[elements.new < 0])))} old ones with places that are gone,"
            f" {grouped(len(np.unique(elements.new[elements.old < 0])))} new ones with places that were not there",
        ),
        ("regions gone", printable(", ".join(regions)) or "none"),
        ("node sets gone", printable(", ".join(sets)) or "none"),
    ):
        table.add_row(name, value)
    parts += [Text(f"Nodes and elements of {printable(str(directory))} on this mesh, by parametric coordinates"), table]
    print_parts(console, *parts)


def _origin(mesh: ShellMesh) -> str:
    origin = mesh.report.divided_by
    if origin is None:
        return "this build"
    inputs = ", ".join(f"{source.file} {source.sha256[:8]}" for source in origin.sources[:2])
    return printable(f"{origin.title}" + f" ({inputs})" * bool(inputs)) + "; sizes in the blade file are not used"
