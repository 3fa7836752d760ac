"""Blade definitions for tests, made in Python without any file."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from skinmesh.definition.blade import (
    PRESSURE,
    SUCTION,
    AcrossCap,
    BladeDefinition,
    CapRule,
    CircleProfile,
    FromAxis,
    Layout,
    MeshRule,
    NacaProfile,
    Place,
    PlyRule,
    StationTable,
    WebRule,
)
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.laminate.material import Material

BOTH = (SUCTION, PRESSURE)
GLASS = Material("glass UD", 41e9, 11.4e9, 11.4e9, 0.28, 0.28, 0.3, 3.9e9, 3.9e9, 4.4e9, 1920.0, source="invented")
FOAM = Material("foam", 5e7, 5e7, 5e7, 0.3, 0.3, 0.3, 2e7, 2e7, 2e7, 80.0, is_isotropic=True, source="invented")


def stations(
    z: Sequence[float],
    chord: Sequence[float],
    profile: Sequence[str | None],
    *,
    twist_degrees: Sequence[float] | float = 0.0,
    ratio: Sequence[float] | None = None,
    pitch_axis: Sequence[float] | float = 0.5,
    prebend: Sequence[float] | float = 0.0,
    sweep: Sequence[float] | float = 0.0,
) -> StationTable:
    n = len(z)
    return StationTable(
        z=np.array(z, dtype=float),
        chord=np.array(chord, dtype=float),
        twist=np.radians(np.broadcast_to(twist_degrees, n)),
        pitch_axis=np.broadcast_to(pitch_axis, n),
        thickness_ratio=np.full(n, np.nan) if ratio is None else np.array(ratio, dtype=float),
        prebend=np.broadcast_to(prebend, n),
        sweep=np.broadcast_to(sweep, n),
        profile=tuple(profile),
    )


def rule(size: float = 0.12, **changes: Any) -> MeshRule:
    return replace(MeshRule(constant(size), {}), **changes)


def foot(place: Place) -> dict[int, Place]:
    return {SUCTION: place, PRESSURE: place}


def skin_ply(thickness: float = 0.004, angle_degrees: float = 0.0) -> PlyRule:
    return PlyRule("shell", GLASS, constant(thickness), constant(1), np.radians(angle_degrees), ("skin",))


def blade(
    table: StationTable,
    profiles: dict[str, Any],
    *,
    layout: Layout | None = None,
    plies: Sequence[PlyRule] | None = None,
    mesh: MeshRule | None = None,
    hand: str = "clockwise",
) -> BladeDefinition:
    return BladeDefinition(
        title="test blade, invented",
        stem="test",
        hand=hand,
        stations=table,
        profiles=profiles,
        materials={"glass UD": GLASS, "foam": FOAM},
        layout=layout or Layout(),
        plies=(skin_ply(),) if plies is None else tuple(plies),
        mesh=mesh or rule(),
    )


def tube(*, radius: float = 0.5, length: float = 3.0, taper: float = 1.0, **more: Any) -> BladeDefinition:
    """A circular tube or cone about z."""
    table = stations([0.0, length], [2.0 * radius, 2.0 * radius * taper], ["ring", "ring"])
    return blade(table, {"ring": CircleProfile()}, **more)


def demonstration(**more: Any) -> BladeDefinition:
    """A whole blade: round root, blunt trailing edge that opens and closes, cap, two webs, cores, twist, prebend."""
    n = np.nan
    table = stations(
        [0, 1.2, 2.2, 4, 6, 9, 14, 19, 22, 23.5, 24],
        [1.2, 1.2, 1.4, 2.0, 2.1, 1.8, 1.35, 0.9, 0.65, 0.5, 0.4],
        ["ring", "ring", None, "thick", None, "mid", "mid", "thin", "thin", "thin", "thin"],
        twist_degrees=[13, 13, 12.5, 11, 9, 6, 3, 1, 0, 0, 0],
        ratio=[n, n, 0.75, n, 0.3, n, n, n, n, n, n],
        pitch_axis=[0.5, 0.5, 0.45, 0.37, 0.34, 0.32, 0.3, 0.3, 0.3, 0.3, 0.3],
        prebend=[0, 0, 0, 0, 0, 0.02, 0.1, 0.25, 0.35, 0.4, 0.42],
        sweep=[0, 0, 0, 0, 0, 0, 0, 0.01, 0.03, 0.05, 0.06],
    )
    profiles = {
        "ring": CircleProfile(),
        "thick": NacaProfile("4440", 0.03),
        "mid": NacaProfile("4424", 0.004),
        "thin": NacaProfile("4418", 0.001),
    }
    layout = Layout(
        caps=(CapRule("main cap", FromAxis(constant(0.0)), Spanwise([0, 5, 22.5], [0.42, 0.42, 0.12]), BOTH),),
        webs=(
            WebRule("fore web", foot(AcrossCap("main cap", constant(0.2))), (1.2, 21.5)),
            WebRule("aft web", foot(AcrossCap("main cap", constant(0.8))), (1.2, 21.5)),
        ),
        leading_strip=Spanwise([0, 24], [0.1, 0.03]),
        trailing_strip=Spanwise([0, 24], [0.14, 0.04]),
    )
    plies = (
        PlyRule("outer skin", GLASS, constant(0.001), constant(2), np.radians(45.0), ("skin",)),
        PlyRule("cap", GLASS, constant(0.0009), constant(20), 0.0, ("main cap",), (0.4, 22.5), 0.05, 0.4),
        PlyRule("core", FOAM, constant(0.012), constant(1), 0.0, ("panels",), (1.8, 18.0)),
        PlyRule("build-up", GLASS, Spanwise([0, 3], [0.012, 0.003]), constant(1), 0.0, ("skin",), (0.0, 3.0)),
        PlyRule("inner skin", GLASS, constant(0.001), constant(1), np.radians(-45.0), ("skin",)),
        PlyRule("web face", GLASS, constant(0.002), constant(2), np.radians(45.0), ("webs",)),
    )
    more.setdefault("mesh", rule(0.12, across={"main cap": 6}, close_gap=0.012))
    return blade(table, profiles, layout=layout, plies=plies, **more)
