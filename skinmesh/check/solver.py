"""What costs a solver of layered shells time, memory or the run: jumps in layers, rigid knots, sheer size."""

from __future__ import annotations

import os
from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.edges import edge_table, skin_elements
from skinmesh.check.finding import Finding, not_made, place_of, verdict_of
from skinmesh.check.limits import SOLVER, Limit
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.inner_face import node_normals
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.deck_text import deck_layers, split_labels
from skinmesh.write.formats.inp import Section, node_allowance

NO_PLIES = "the blade file has no plies"


def check_solver(mesh: ShellMesh, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Layer counts of neighbours, nodes that become rigid knots, and an estimate of the memory.

    Parameters
    ----------
    mesh : ShellMesh
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    if not mesh.stacks:
        return [not_made(name, NO_PLIES) for name in ("layer jumps", "rigid knots", "solver memory")]
    layers = deck_layers(mesh)
    merged = np.array([len(stack) for stack in layers] + [0])[mesh.stack]
    return [
        _jumps(mesh, merged, limits["layer jump"]),
        _knots(mesh, limits["knots"]),
        _memory(mesh, layers),
    ]


def _jumps(mesh: ShellMesh, merged: NDArray[np.int64], limit: Limit) -> Finding:
    _, pair = edge_table(mesh, skin_elements(mesh)).pairs()
    pair = pair[np.all(merged[pair] > 0, axis=1)]
    counts = merged[pair]
    ratio = counts.max(axis=1) / counts.min(axis=1) if len(pair) else np.ones(1)
    worst = int(ratio.argmax())
    beyond = np.unique(pair[ratio > limit.warn]) if len(pair) else np.zeros(0, dtype=np.int64)
    used = merged[merged > 0]
    return Finding(
        "layer jumps",
        f"layers of neighbours on the skin as {ratio[worst]:.1f} : 1 at most, after equal plies are merged; "
        f"{used.min()} to {used.max()} in the whole mesh",
        limit.text,
        f"{limit.source}: beyond it the run may stop with 'increase nk_'",
        verdict_of(fails=ratio[worst] > limit.fail, warns=ratio[worst] > limit.warn),
        place_of(mesh, int(pair[worst, 0])) if len(pair) else "",
        beyond,
    )


def _knots(mesh: ShellMesh, limit: Limit) -> Finding:
    nodes, groups = np.unique(node_normals(mesh).node, return_counts=True)
    is_knot = groups > 1
    share = float(is_knot.mean())
    return Finding(
        "rigid knots",
        f"{np.count_nonzero(is_knot)} of {len(nodes)} nodes ({100 * share:.1f} %) tie elements of different thickness, "
        "offset or normal",
        limit.text,
        f"{limit.source}; with knots everywhere bending is 11 % too stiff in CalculiX 2.20",
        verdict_of(fails=share > limit.fail, warns=share > limit.warn),
        details={"share": share},
    )


def _memory(mesh: ShellMesh, layers: list[tuple[Layer, ...]]) -> Finding:
    sections = tuple(
        Section(f"S{k}", elements, k, 0.0, -1, True)
        for k, elements in enumerate(split_labels(mesh.stack, len(mesh.stacks)))
        if len(elements)
    )
    allowance = node_allowance(mesh, sections, layers)
    machine = _machine_memory()
    needed = f"about {allowance.memory / 1e9:.2f} GB for a run of layered shells"
    source = f"rough formula, {SOLVER}"
    if machine is None:
        return not_made("solver memory", f"{needed}; this system does not tell how much it has")
    return Finding(
        "solver memory",
        needed,
        f"warn {machine / 1e9:.2f} GB",
        f"memory of this computer; {source}",
        verdict_of(fails=False, warns=allowance.memory > machine),
        details={"bytes": round(allowance.memory)},
    )


def _machine_memory() -> float | None:
    names = getattr(os, "sysconf_names", {})
    if "SC_PHYS_PAGES" not in names or "SC_PAGE_SIZE" not in names:
        return None
    return float(os.sysconf("SC_PHYS_PAGES")) * float(os.sysconf("SC_PAGE_SIZE"))
