"""Whether the files agree: counts, stacks and mass."""

from __future__ import annotations

import numpy as np

from skinmesh.check.finding import Finding, listed, not_made, shortened, span_of, verdict_of
from skinmesh.check.reading import BuiltMesh
from skinmesh.mesh.measure import element_areas
from skinmesh.wording import counted

MASS = 1e-6
SAME = 1e-8
MOST_WARNINGS, LONGEST_WARNING = 6, 110
MEASURED = ("bare elements", "folded laminate", "thick laminate", "narrow elements")
"""Beginnings of the build's warnings that the checks measure themselves."""


def check_files(built: BuiltMesh) -> list[Finding]:
    """Counts and names of the summary, and the stacks of the table, against the VTU.

    Parameters
    ----------
    built : BuiltMesh

    Returns
    -------
    list of Finding
    """
    return [_counts(built), _stacks(built), _laminate_arrays(built)]


def _counts(built: BuiltMesh) -> Finding:
    mesh, summary = built.mesh, built.summary
    told = dict(summary["counts"])
    found = {
        "nodes": mesh.n_nodes,
        "elements": len(mesh.cells),
        "quadrilaterals": len(mesh.cells) if mesh.n_sides == 4 else 0,
        "triangles": len(mesh.cells) if mesh.n_sides == 3 else 0,
        "regions": len(mesh.regions),
        "stacks": len(mesh.stacks),
        "elements_without_plies": int(np.count_nonzero(mesh.stack < 0)),
        "node_sets": len(mesh.node_sets),
    }
    wrong = [
        f"{name}: {told.get(name)} in the summary, {count} in the files"
        for name, count in found.items()
        if told.get(name) != count
    ]
    in_region = np.bincount(mesh.region, minlength=len(mesh.regions))
    wrong += [
        f"elements of {region['name']}: {region['elements']} in the summary, {count} in the VTU"
        for region, count in zip(summary["regions"], in_region.tolist(), strict=True)
        if region["elements"] != count
    ]
    names = [f"region: {region.name}" for region in mesh.regions]
    wrong += [f"the VTU does not name '{name}'" for name in names if name not in built.vtu.names]
    repeated = len(mesh.cells) - len(np.unique(mesh.element_number))
    own_numbers = mesh.node_number[: mesh.n_nodes]
    repeated += len(own_numbers) - len(np.unique(own_numbers))
    if repeated:
        wrong.append(f"{repeated} solver numbers are given twice")
    return Finding(
        "files agree",
        f"{counted(len(wrong), 'count or name', 'counts or names')} of the summary against the VTU",
        "none",
        "one build wrote them all",
        verdict_of(fails=len(wrong)),
        listed(wrong),
        details={"differences": wrong},
    )


def _stacks(built: BuiltMesh) -> Finding:
    """The table of stacks, whose content names depend on the plies alone, against summary and VTU."""
    mesh = built.mesh
    told = built.summary["stacks"]
    wrong = []
    for k, (stack, content) in enumerate(zip(mesh.stacks, built.contents, strict=True)):
        entry = told[k] if k < len(told) else {}
        if stack.content_name != content:
            wrong.append(f"stack {k + 1}: its plies are not those of content {content}")
        elif entry.get("content") != content:
            wrong.append(f"stack {k + 1}: content {content} in the table, {entry.get('content')} in the summary")
        elif built.vtu.names.get(f"stack: {content}", np.zeros(1)).tolist() != [k + 1]:
            wrong.append(f"stack {k + 1}: content {content} is not in the VTU")
    return Finding(
        "files agree",
        f"{len(wrong)} of {len(mesh.stacks)} stacks of the table changed since the build",
        "none",
        "a content name is a hash of the plies",
        verdict_of(fails=len(wrong)),
        listed(wrong, most=3),
        details={"differences": wrong},
    )


def _laminate_arrays(built: BuiltMesh) -> Finding:
    mesh, arrays = built.mesh, built.vtu.cell_arrays
    wrong = np.zeros(len(mesh.cells), dtype=bool)
    names = []
    for name, wanted in (
        ("thickness", mesh.thickness),
        ("areal_mass", mesh.areal_mass),
        ("plies", mesh.n_plies),
        ("side", mesh.side),
    ):
        off = ~np.isclose(arrays[name], wanted, rtol=SAME, atol=1e-12)
        wrong |= off
        if off.any():
            names.append(f"{name} of {counted(int(np.count_nonzero(off)), 'element')}")
    beyond = np.flatnonzero(wrong)
    return Finding(
        "files agree",
        f"{counted(len(beyond), 'element')} with arrays in the VTU that are not those of stack and region",
        f"fail {SAME:g} of the value",
        "one build wrote them all",
        verdict_of(fails=len(beyond)),
        f"{listed(names)}; {span_of(mesh, beyond)}" if names else "",
        beyond,
    )


def check_mass(built: BuiltMesh) -> list[Finding]:
    """Σ area × areal mass over the elements against the summary, in all and by region.

    Parameters
    ----------
    built : BuiltMesh

    Returns
    -------
    list of Finding
    """
    mesh, summary = built.mesh, built.summary
    areas = element_areas(mesh)
    masses = areas * built.vtu.cell_arrays["areal_mass"].astype(float)
    lines = []
    for name, values, key, unit in (("mass", masses, "mass_kg", "kg"), ("area", areas, "area_m2", "m²")):
        total, told = float(values.sum()), float(summary[key])
        if name == "mass" and not mesh.stacks:
            lines.append(not_made("mass", "the blade file has no plies"))
            continue
        by_region = np.bincount(mesh.region, weights=values, minlength=len(mesh.regions))
        told_by_region = np.array([float(region[key]) for region in summary["regions"]])
        scale = max(total, told, 1e-30)
        off = np.append(np.abs(by_region - told_by_region), abs(total - told)) / scale
        worst = int(off.argmax())
        place = "in all" if worst == len(mesh.regions) else mesh.regions[worst].name
        lines.append(
            Finding(
                "mass",
                f"{name} {total:.6g} {unit} over the elements, {told:.6g} {unit} in the summary, off {off.max():.1g}",
                f"fail {MASS:g}",
                "the same sum twice",
                verdict_of(fails=off.max() > MASS),
                place if off.max() > MASS else "",
            )
        )
    return lines


def check_build_warnings(built: BuiltMesh) -> list[Finding]:
    """What the build warned of, but for what other checks measure.

    Parameters
    ----------
    built : BuiltMesh

    Returns
    -------
    list of Finding
    """
    told = [text for text in built.mesh.report.warnings if not text.startswith(MEASURED)]
    return [
        Finding(
            "build warnings",
            f"{counted(len(told), 'thing')} that the build warned of and no line here measures",
            "warn 1",
            "what was built otherwise than asked, or looks odd",
            verdict_of(fails=False, warns=len(told)),
            "; ".join(shortened(text, LONGEST_WARNING) for text in told[:MOST_WARNINGS])
            + (f"; and {len(told) - MOST_WARNINGS} more" if len(told) > MOST_WARNINGS else ""),
            details={"warnings": list(told)},
        )
    ]
