"""Where plies begin and end along the span: how many at once, and how steeply the thickness changes."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import Finding, listed, not_made, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.spantable import SpanTable
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Ints = NDArray[np.int64]

MOST_PLACES, MOST_REGIONS = 3, 3
"""What the table names of all places; the JSON file has every one."""


def check_drops(mesh: ShellMesh, table: SpanTable, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Layers that end or begin on one element row, and the slope of the step over one element row.

    Parameters
    ----------
    mesh : ShellMesh
    table : SpanTable
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
    """
    if not mesh.stacks:
        return [not_made("ply drops", "the blade file has no plies")]
    drops = _drops(mesh, table)
    if not drops:
        limit = limits["layers ended at once"]
        return [Finding("ply drops", "no ply begins or ends within a region", limit.text, limit.source, "pass")]
    return [
        _line(
            mesh,
            table,
            drops,
            "layers",
            limits["layers ended at once"],
            "{1:.0f} layers at once at most; {0} where plies begin or end, {2} beyond the limit",
        ),
        _line(
            mesh,
            table,
            drops,
            "slope",
            limits["taper"],
            "thickness changes by {1:.3f} of the length of an element row at most; {0} where plies begin or end, "
            "{2} beyond the limit",
        ),
    ]


def _drops(mesh: ShellMesh, table: SpanTable) -> list[dict[str, Any]]:
    thickness = np.array([stack.thickness for stack in mesh.stacks] + [0.0])
    length = np.diff(table.z)
    drops: list[dict[str, Any]] = []
    for region in range(len(mesh.regions)):
        rows, stacks = table.main_stacks(region)
        steps = np.flatnonzero((np.diff(rows) == 1) & (np.diff(stacks) != 0))
        change = table.counts[stacks[steps + 1]] - table.counts[stacks[steps]]
        step = thickness[stacks[steps + 1]] - thickness[stacks[steps]]
        over = 0.5 * (length[rows[steps]] + length[rows[steps + 1]])
        ended, begun = -np.minimum(change, 0).sum(axis=1), np.maximum(change, 0).sum(axis=1)
        for i in np.flatnonzero(ended + begun):
            row = int(rows[steps[i] + 1])
            drops.append(
                {
                    "region": mesh.regions[region].name,
                    "z_m": round(float(table.z[row]), 6),
                    "row": row,
                    "layers_ended": int(ended[i]),
                    "layers_begun": int(begun[i]),
                    "layers": int(max(ended[i], begun[i])),
                    "plies": [table.plies[p] for p in np.flatnonzero(change[i])],
                    "thickness_change_m": round(float(step[i]), 9),
                    "over_m": round(float(over[i]), 6),
                    "slope": round(float(abs(step[i]) / over[i]), 6),
                }
            )
    return drops


def _line(mesh: ShellMesh, table: SpanTable, drops: list[dict[str, Any]], key: str, limit: Limit, text: str) -> Finding:
    values = np.array([drop[key] for drop in drops], dtype=float)
    beyond = np.flatnonzero(values > limit.warn)
    # The worst first, and where layers end before where they begin.
    ordered = sorted(range(len(drops)), key=lambda i: (-values[i], -drops[i]["layers_ended"]))
    places: dict[str, list[str]] = {}
    told = [drops[i] for i in ordered if values[i] > limit.warn] or [drops[ordered[0]]]
    for drop in told:
        places.setdefault(_place(drop), []).append(drop["region"])
    name_of = {region.name: i for i, region in enumerate(mesh.regions)}
    on_rows = np.zeros((len(mesh.regions), table.n_rows), dtype=bool)
    for i in beyond.tolist():
        on_rows[name_of[drops[i]["region"]], drops[i]["row"] - 1 : drops[i]["row"] + 1] = True
    shown = [f"{place}, on {listed(regions, most=MOST_REGIONS)}" for place, regions in places.items()][:MOST_PLACES]
    more = len(places) - len(shown)
    return Finding(
        "ply drops",
        text.format(counted(len(drops), "place"), values.max(), counted(len(beyond), "place")),
        limit.text,
        limit.source,
        verdict_of(fails=np.any(values > limit.fail), warns=len(beyond)),
        "; ".join(shown) + (f"; and {more} more" if more else ""),
        np.flatnonzero(on_rows[mesh.region, table.row]),
        {"drops": drops} if key == "layers" else {},
    )


def _place(drop: Mapping[str, Any]) -> str:
    counts = [f"{drop[f'layers_{word}']} {verb}" for word, verb in (("ended", "end"), ("begun", "begin"))]
    told = ", ".join(text for text in counts if not text.startswith("0 "))
    step = f"{1e3 * drop['thickness_change_m']:+.2f} mm over {drop['over_m']:.3f} m"
    return f"z = {drop['z_m']:.3f} m: {told} ({', '.join(drop['plies'])}), {step}"
