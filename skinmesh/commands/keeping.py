"""What a rebuild under kept numbers changed, for the closing of ``skinmesh build --keep``."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from rich.console import Console
from rich.table import Table
from rich.text import Text

from skinmesh.commands.closing import grouped, print_parts, printable, significant
from skinmesh.mesh.keep import compare_quality
from skinmesh.mesh.shellmesh import ShellMesh


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
    moves = np.linalg.norm(new.points[: new.n_nodes] - old.points[: new.n_nodes], axis=1)
    before, after = ([stack.content_name for stack in mesh.stacks] + [""] for mesh in (old, new))
    n_changed = int(np.sum(np.array(before)[old.stack] != np.array(after)[new.stack]))
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
        ("poor elements", "{}, before {}".format(*map(grouped, quality.n_poor[::-1]))),
    )
    for name, value in rows:
        table.add_row(name, value)
    print_parts(console, Text(f"Numbers, sets and connectivity kept from {printable(str(directory))}"), table)
