"""What the ends of webs stand on."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from skinmesh.check.edges import skin_elements
from skinmesh.check.finding import Finding, listed, not_made, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.mesh.shellmesh import ShellMesh


def check_web_ends(mesh: ShellMesh, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Thickness of the skin under the ends of each web, against the web's own.

    A web brings its shear into the skin over its last element rows; thin skin in the middle of a panel is a poor
    place for that.

    Parameters
    ----------
    mesh : ShellMesh
    limits : mapping of str to Limit

    Returns
    -------
    list of Finding
        Empty where there are no webs that end within the blade.
    """
    webs = [i for i, region in enumerate(mesh.regions) if region.kind == "web"]
    ends = [entry for web in webs for entry in _ends(mesh, web)]
    if not ends:
        return []
    if not mesh.stacks:
        return [not_made("web ends", "the blade file has no plies")]
    limit = limits["skin under a web's end"]
    ratios = np.array([entry["skin_m"] / max(entry["web_m"], 1e-12) for entry in ends])
    worst = ends[int(ratios.argmin())]
    beyond = [entry for entry, ratio in zip(ends, ratios, strict=True) if ratio < limit.warn]
    return [
        Finding(
            "web ends",
            f"skin under a web's end {ratios.min():.2f} times as thick as the web at least; "
            f"{len(beyond)} of {len(ends)} feet beyond the limit",
            limit.text,
            limit.source,
            # Nothing at all under a web's end is a failure even where the limit is nought.
            verdict_of(fails=ratios.min() < limit.fail or ratios.min() <= 0.0, warns=len(beyond)),
            listed(_place(entry) for entry in (beyond or [worst])),
            np.unique(np.concatenate([entry["elements"] for entry in beyond]))
            if beyond
            else np.zeros(0, dtype=np.int64),
            {"ends": [{key: value for key, value in entry.items() if key != "elements"} for entry in ends]},
        )
    ]


def _place(entry: Mapping[str, Any]) -> str:
    skin = f"{1e3 * entry['skin_m']:.2f} mm of skin" if entry["skin_m"] > 0 else "no plies"
    return f"{entry['web']}, z = {entry['z_m']:.3f} m on {entry['on']}: {1e3 * entry['web_m']:.2f} mm on {skin}"


def _ends(mesh: ShellMesh, web: int) -> list[dict[str, Any]]:
    """The skin at each end of a web that lies within the blade, foot by foot."""
    own = np.flatnonzero(mesh.region == web)
    if not len(own):
        return []
    corners = mesh.cells[own, : mesh.n_sides]
    skin = skin_elements(mesh)
    skin_corners = mesh.cells[skin, : mesh.n_sides]
    ends: list[dict[str, Any]] = []
    for row in (mesh.row[corners].min(), mesh.row[corners].max()):
        if row in (mesh.row.min(), mesh.row.max()):
            continue
        at_end = mesh.row[corners] == row
        is_end = np.zeros(len(mesh.points), dtype=bool)
        is_end[corners[at_end]] = True
        near = np.flatnonzero(is_end[skin_corners].any(axis=1))
        feet = np.intersect1d(corners[at_end], skin_corners[near])
        web_thickness = float(mesh.thickness[own[at_end.any(axis=1)]].max())
        for node in feet.tolist():
            under = skin[near[np.any(skin_corners[near] == node, axis=1)]]
            ends.append(
                {
                    "web": mesh.regions[web].name,
                    "z_m": round(float(mesh.points[node, 2]), 6),
                    "on": ", ".join(mesh.regions[i].name for i in np.unique(mesh.region[under])),
                    "skin_m": round(float(mesh.thickness[under].min()), 9),
                    "web_m": round(web_thickness, 9),
                    "elements": under,
                }
            )
    return ends
