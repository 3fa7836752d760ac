"""Panels that are wide for their thickness, as where a core was left out."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import Finding, listed, not_made, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.spantable import SpanTable, region_widths
from skinmesh.laminate.theory import laminate_stiffness
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

KINDS = ("panel", "cap", "web")


def check_slenderness(mesh: ShellMesh, table: SpanTable, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Width of panels, caps and webs over the thickness of a solid plate that bends and stretches as the laminate does.

    Buckling goes with the square of this ratio; curvature, which helps, is left out, and so is the shear of the core.

    Parameters
    ----------
    mesh : ShellMesh
    table : SpanTable
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding

    Notes
    -----
    A solid plate of thickness t has D / A = t² / 12, in both directions. D is taken about the neutral axis,
    D − B A⁻¹ B (Jones, Mechanics of Composite Materials, 2nd ed. 1999, section 4.3, from memory).
    """
    if not mesh.stacks:
        return [not_made("slender panels", "the blade file has no plies")]
    limit = limits["width over thickness"]
    stiffness = laminate_stiffness(mesh.stacks)
    A, B = stiffness.A, stiffness.B
    D = stiffness.D - B @ np.linalg.solve(A, B)
    solid = np.sqrt(12.0 * np.sqrt(D[:, 0, 0] * D[:, 1, 1] / (A[:, 0, 0] * A[:, 1, 1])))
    solid = np.append(solid, np.inf)
    widths = region_widths(mesh, table)
    entries: list[dict[str, Any]] = []
    elements: list[NDArray[np.int64]] = []
    for region, named in enumerate(mesh.regions):
        rows, stacks = table.main_stacks(region)
        if named.kind not in KINDS or not len(rows):
            continue
        ratio = widths[region, rows] / solid[stacks]
        k = int(ratio.argmax())
        poor = rows[ratio > limit.warn]
        entries.append(
            {
                "region": named.name,
                "largest": round(float(ratio[k]), 1),
                "z_m": round(float(table.z[rows[k]]), 6),
                "width_m": round(float(widths[region, rows[k]]), 4),
                "thickness_m": round(float(solid[stacks[k]]), 6) if np.isfinite(solid[stacks[k]]) else 0.0,
                "beyond": table.z_text(poor) if len(poor) else "",
            }
        )
        elements.append(np.flatnonzero((mesh.region == region) & np.isin(table.row, poor)))
    if not entries:
        return []
    ordered = sorted(entries, key=lambda entry: -float(entry["largest"]))
    beyond = [entry for entry in ordered if entry["beyond"]]
    largest = float(ordered[0]["largest"])
    return [
        Finding(
            "slender panels",
            f"width over thickness as a solid plate {largest:.0f} at most; "
            f"{counted(len(beyond), 'panel, cap or web', 'panels, caps or webs')} beyond",
            limit.text,
            limit.source,
            verdict_of(fails=largest > limit.fail, warns=len(beyond)),
            listed(
                f"{entry['region']}{', ' + entry['beyond'] if entry['beyond'] else ''}: at z = {entry['z_m']:.3f} m "
                f"{entry['width_m']:.2f} m wide and as a solid plate {1e3 * entry['thickness_m']:.1f} mm thick"
                for entry in (beyond or ordered[:1])
            ),
            np.concatenate(elements),
            {"regions": entries},
        )
    ]
