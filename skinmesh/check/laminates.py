"""Laminates that can be built and are probably not meant: unbalanced, weak, turned caps, core out of place."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import Finding, listed, not_made, regions_of, verdict_of
from skinmesh.check.limits import Limit
from skinmesh.check.spantable import SpanTable, region_widths
from skinmesh.definition.blade import PRESSURE, SIDE_NAMES, SUCTION
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Stack
from skinmesh.laminate.theory import laminate_stiffness
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

NO_PLIES = "the blade file has no plies"
CORE_MODULUS = 1e9
"""Pa. A material that is softer than this in its plane is taken for a core."""
CORE_RULE = f"our choice, no source; core is what is softer than {CORE_MODULUS / 1e9:g} GPa in its plane"


def check_laminates(mesh: ShellMesh, table: SpanTable, *, limits: Mapping[str, Limit]) -> list[Finding]:
    """Balance, weakest laminate, stiffness of caps along the blade, and where core lies.

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
        return [not_made(name, NO_PLIES) for name in ("balance", "weak laminates", "core")]
    stiffness = laminate_stiffness(mesh.stacks).A
    return [
        _balance(mesh, stiffness, limits["unbalance"]),
        _weakest(mesh, table, stiffness, limits["stiffness over the median"]),
        *_caps(mesh, table, stiffness, limits["cap along over across"]),
        *_core(mesh, table),
    ]


def is_core(material: Material) -> bool:
    """Whether a material is so soft in its plane that it can only be a core.

    Parameters
    ----------
    material : Material

    Returns
    -------
    bool
    """
    return max(material.E1, material.E2) < CORE_MODULUS


def _balance(mesh: ShellMesh, A: Floats, limit: Limit) -> Finding:
    """Coupling of stretch and shear, A16 and A26, against the geometric mean of the stiffnesses that they couple."""
    along, across, shear = A[:, 0, 0], A[:, 1, 1], A[:, 2, 2]
    coupling = np.maximum(np.abs(A[:, 0, 2]) / np.sqrt(along * shear), np.abs(A[:, 1, 2]) / np.sqrt(across * shear))
    of_element = np.append(coupling, 0.0)[mesh.stack]
    beyond = np.flatnonzero(of_element > limit.warn)
    beyond = beyond[np.argsort(-of_element[beyond], kind="stable")]
    worst = mesh.stacks[int(coupling.argmax())]
    return Finding(
        "balance",
        f"stretch and shear coupled by {coupling.max():.3f} at most (A16, A26 over the root of what they couple); "
        f"{counted(len(beyond), 'element')} with unbalanced plies",
        limit.text,
        f"{limit.source}; meant where a blade is to twist as it bends",
        verdict_of(fails=coupling.max() > limit.fail, warns=len(beyond)),
        f"{unpaired_plies(worst)}; {regions_of(mesh, beyond)}" if len(beyond) else "",
        beyond,
        {"coupling": [round(float(value), 6) for value in coupling]},
    )


def unpaired_plies(stack: Stack) -> str:
    """The angle whose plies have the least of a counterpart at the opposite angle, and both thicknesses.

    Parameters
    ----------
    stack : Stack

    Returns
    -------
    str
        Empty where every angle has its counterpart.
    """
    sums: dict[int, list[float]] = {}
    names: dict[int, dict[str, None]] = {}
    for layer in stack.layers:
        degrees = round(100 * layer.angle_degrees)
        if degrees % 9000:
            sums.setdefault(abs(degrees), [0.0, 0.0])[degrees < 0] += layer.thickness
            names.setdefault(abs(degrees), {})[layer.ply] = None
    if not sums:
        return ""
    worst = max(sums, key=lambda degrees: abs(sums[degrees][0] - sums[degrees][1]))
    plus, minus = sums[worst]
    plies = listed(f"'{name}'" for name in names[worst])
    return f"{1e3 * plus:.2f} mm at +{worst / 100:g}°, {1e3 * minus:.2f} mm at -{worst / 100:g}° ({plies})"


def _weakest(mesh: ShellMesh, table: SpanTable, A: Floats, limit: Limit) -> Finding:
    value = np.append(A[:, 0, 0] + A[:, 1, 1], 0.0)
    area = region_widths(mesh, table) * np.diff(table.z)
    main = np.full(area.shape, len(mesh.stacks))
    for region in range(len(mesh.regions)):
        rows, stacks = table.main_stacks(region)
        main[region, rows] = stacks
    weight = np.bincount(main.ravel(), weights=area.ravel(), minlength=len(value))[:-1]
    order = np.argsort(value[:-1], kind="stable")
    passed = np.searchsorted(np.cumsum(weight[order]), 0.5 * weight.sum())
    median = value[order[min(int(passed), len(order) - 1)]]
    ratio = value[:-1] / median
    of_element = np.append(ratio, np.inf)[mesh.stack]
    beyond = np.flatnonzero(of_element < limit.warn)
    beyond = beyond[np.argsort(of_element[beyond], kind="stable")]
    worst = int(ratio.argmin())
    stack = mesh.stacks[worst]
    plies = listed(f"'{name}'" for name in dict.fromkeys(layer.ply for layer in stack.layers))
    place = regions_of(mesh, beyond) or regions_of(mesh, np.flatnonzero(mesh.stack == worst))
    return Finding(
        "weak laminates",
        f"stiffness in its plane of the weakest laminate {ratio.min():.3f} of the median; "
        f"{counted(len(beyond), 'element')} below the limit",
        limit.text,
        limit.source,
        verdict_of(fails=ratio.min() < limit.fail, warns=len(beyond)),
        f"{1e3 * stack.thickness:.2f} mm of {plies}; {place}",
        beyond,
    )


def _caps(mesh: ShellMesh, table: SpanTable, A: Floats, limit: Limit) -> list[Finding]:
    """A cap carries bending: along the blade it is the stiffer."""
    ratio = np.append(A[:, 0, 0] / A[:, 1, 1], np.inf)
    places, elements = [], []
    least, at = np.inf, ""
    for region, named in enumerate(mesh.regions):
        rows, stacks = table.main_stacks(region)
        if named.kind != "cap" or not len(rows):
            continue
        own = ratio[stacks]
        if own.min() < least:
            least, at = float(own.min()), f"{named.name}, {table.z_text(rows[[own.argmin()]])}"
        poor = rows[own < limit.warn]
        if len(poor):
            places.append(f"{named.name}, {table.z_text(poor)}")
            elements.append(np.flatnonzero((mesh.region == region) & np.isin(table.row, poor)))
    if not np.isfinite(least):
        return []
    return [
        Finding(
            "weak laminates",
            f"caps are {least:.2f} times as stiff along the blade as across at least",
            limit.text,
            limit.source,
            verdict_of(fails=least < limit.fail, warns=len(places)),
            listed(places) or at,
            np.concatenate(elements) if elements else np.zeros(0, dtype=np.int64),
        )
    ]


def _core(mesh: ShellMesh, table: SpanTable) -> list[Finding]:
    thickness = np.array(
        [sum(layer.thickness for layer in stack.layers if is_core(layer.material)) for stack in mesh.stacks] + [0.0]
    )
    if not thickness.any():
        return [Finding("core", "no ply is a core", "none to place", CORE_RULE, "pass")]
    core = np.zeros((len(mesh.regions), table.n_rows))
    present = np.zeros(core.shape, dtype=bool)
    for region in range(len(mesh.regions)):
        rows, stacks = table.main_stacks(region)
        core[region, rows], present[region, rows] = thickness[stacks], True
    return [_core_outside_panels(mesh, table, core), _core_on_one_side(mesh, table, core, present)]


def _core_outside_panels(mesh: ShellMesh, table: SpanTable, core: Floats) -> Finding:
    odd = np.array([region.kind in ("cap", "strip", "base") for region in mesh.regions])[:, None] & (core > 0)
    regions = np.flatnonzero(odd.any(axis=1))
    beyond = np.flatnonzero(odd[mesh.region, table.row])
    return Finding(
        "core",
        f"core in {counted(len(regions), 'cap, edge strip or trailing base', 'caps, edge strips or trailing bases')}",
        "warn 1",
        CORE_RULE,
        verdict_of(fails=False, warns=len(regions)),
        listed(
            f"{mesh.regions[i].name}, {table.z_text(np.flatnonzero(odd[i]))}: {1e3 * core[i].max():.1f} mm"
            for i in regions
        ),
        beyond,
    )


def _core_on_one_side(mesh: ShellMesh, table: SpanTable, core: Floats, present: NDArray[np.bool_]) -> Finding:
    number = {region.name: i for i, region in enumerate(mesh.regions)}
    places = []
    odd = np.zeros(core.shape, dtype=bool)
    for i, region in enumerate(mesh.regions):
        if region.side != SUCTION or region.kind != "panel":
            continue
        j = number.get(region.name.replace(SIDE_NAMES[SUCTION], SIDE_NAMES[PRESSURE], 1))
        if j is None:
            continue
        for own, other in ((i, j), (j, i)):
            bare = (core[own] <= 0) & (core[other] > 0) & present[own] & present[other]
            if bare.any():
                odd[own] |= bare
                places.append(
                    f"{mesh.regions[own].name}, {table.z_text(np.flatnonzero(bare))}: none, "
                    f"opposite {1e3 * core[other][bare].max():.1f} mm"
                )
    beyond = np.flatnonzero(odd[mesh.region, table.row])
    return Finding(
        "core",
        f"{counted(len(places), 'panel')} without core where the other side of the blade has it",
        "warn 1",
        CORE_RULE,
        verdict_of(fails=False, warns=len(places)),
        listed(places),
        beyond,
    )
