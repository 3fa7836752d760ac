"""Mistakes of a design, made in the blade's definition: the checks name each with its place and amount."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import cache
from pathlib import Path

import blades
import numpy as np
import pytest

import skinmesh
from skinmesh.check.drops import check_drops
from skinmesh.check.finding import FAIL, PASS, WARN, Finding
from skinmesh.check.laminates import check_laminates, unpaired_plies
from skinmesh.check.limits import DEFAULT_LIMITS, Limit
from skinmesh.check.notches import check_notches
from skinmesh.check.plies import check_plies
from skinmesh.check.slender import check_slenderness
from skinmesh.check.spantable import region_widths, span_table
from skinmesh.check.webs import check_web_ends
from skinmesh.definition.blade import BladeDefinition, FromAxis, PlyRule, WebRule
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh

EXAMPLES = Path(__file__).parents[1] / "examples"
DESIGN = (check_notches, check_laminates, check_slenderness)
# The meshes here are coarse to be quick, and ply ends go far to meet their rows.
LIMITS = {**DEFAULT_LIMITS, "ply end move": Limit(0.05, np.inf, "a mesh for tests")}

Change = Callable[[BladeDefinition], BladeDefinition]


def ply(
    name: str,
    thickness: float,
    angle: float,
    *covers: str,
    count: float = 1,
    span: tuple[float, float] | None = None,
    step: tuple[float, float] = (0.0, 0.0),
    material: str = "glass",
) -> PlyRule:
    of = blades.FOAM if material == "foam" else blades.GLASS
    return PlyRule(name, of, constant(thickness), constant(count), np.radians(angle), covers, span, *step)


@cache
def sound() -> BladeDefinition:
    plies = (
        ply("skin plus", 0.001, 45, "skin"),
        ply("skin minus", 0.001, -45, "skin"),
        ply("cap", 0.001, 0, "main cap", count=12, span=(0.4, 22.5), step=(0.2, 0.6)),
        ply("core", 0.012, 0, "panels", span=(1.8, 19.0), material="foam"),
        ply("inner minus", 0.001, -45, "skin"),
        ply("inner plus", 0.001, 45, "skin"),
        ply("web plus", 0.001, 45, "webs"),
        ply("web core", 0.01, 0, "webs", material="foam"),
        ply("web minus", 0.001, -45, "webs"),
    )
    blade = blades.demonstration(mesh=blades.rule(0.6, close_gap=0.012))
    webs = tuple(replace(web, span=(1.2, 20.0)) for web in blade.layout.webs)
    return replace(blade, plies=plies, layout=replace(blade.layout, webs=webs))


@cache
def sound_mesh() -> ShellMesh:
    return build_mesh(sound())


def findings(mesh: ShellMesh) -> list[Finding]:
    table = span_table(mesh)
    checks = (check_plies, check_drops, *DESIGN)
    found = [finding for check in checks for finding in check(mesh, table, limits=LIMITS)]
    return [*found, *check_web_ends(mesh, limits=LIMITS)]


def with_ply(name: str, **changes: object) -> Change:
    def change(blade: BladeDefinition) -> BladeDefinition:
        return replace(blade, plies=tuple(replace(p, **changes) if p.name == name else p for p in blade.plies))

    return change


def in_two(name: str, first_end: float, second_start: float) -> Change:
    """A ply laid in two pieces of different names."""

    def change(blade: BladeDefinition) -> BladeDefinition:
        plies: list[PlyRule] = []
        for rule in blade.plies:
            pieces = (("inboard", (0.0, first_end)), ("outboard", (second_start, 24.0)))
            plies += (
                [replace(rule, name=f"{name} {word}", span=span) for word, span in pieces]
                if rule.name == name
                else [rule]
            )
        return replace(blade, plies=tuple(plies))

    return change


def web_to_the_panel(blade: BladeDefinition) -> BladeDefinition:
    """The aft web stands behind the cap and ends over a panel whose core has ended."""
    aft = WebRule("aft web", blades.foot(FromAxis(Spanwise([0, 6, 20], [0.35, 0.35, 0.2]))), (1.2, 20.0))
    return replace(blade, layout=replace(blade.layout, webs=(blade.layout.webs[0], aft)))


def bare_panel_under_the_web(blade: BladeDefinition) -> BladeDefinition:
    moved = web_to_the_panel(blade)
    plies = [
        replace(p, covers=("strips", "caps", "leading panel")) if p.covers == ("skin",) else p for p in moved.plies
    ]
    return replace(moved, plies=(*plies, ply("aft skin", 0.004, 0, "trailing panel", span=(0.0, 19.5))))


def chained(*changes: Change) -> Change:
    def change(blade: BladeDefinition) -> BladeDefinition:
        for own in changes:
            blade = own(blade)
        return blade

    return change


MISTAKES: dict[str, tuple[Change, dict[str, str], tuple[str, ...]]] = {
    "all layers of the caps end at one place": (
        with_ply("cap", span=(0.4, 15.0), step_root=0.1, step_tip=0.0),
        {"ply drops": WARN, "web ends": WARN},
        ("z = 14.919 m: 12 end (cap), -12.00 mm over ", "on suction main cap, pressure main cap"),
    ),
    "core in the edge strips and not in the panels": (
        with_ply("core", covers=("trailing strip", "leading panel")),
        {"core": WARN, "slender panels": WARN},
        ("suction trailing strip, z = 1.", "12.0 mm", "suction trailing panel, z = "),
    ),
    "core under the caps": (
        with_ply("core", covers=("panels", "main cap")),
        {"core": WARN},
        ("suction main cap, z = 1.", "pressure main cap"),
    ),
    "core on one side of the blade": (
        with_ply("core", covers=("suction leading panel", "suction trailing panel")),
        {"core": WARN, "slender panels": WARN},
        ("pressure trailing panel, z = 1.", "none, opposite 12.0 mm"),
    ),
    "+45/+45 on the skin": (
        chained(with_ply("skin minus", angle=np.radians(45.0)), with_ply("inner minus", angle=np.radians(45.0))),
        {"balance": WARN},
        ("4.00 mm at +45°, 0.00 mm at -45° ('skin plus', 'skin minus', 'inner minus', 'inner plus')",),
    ),
    "-45/-45 on the webs": (
        with_ply("web plus", angle=np.radians(-45.0)),
        {"balance": WARN},
        ("0.00 mm at +45°, 2.00 mm at -45° ('web plus', 'web minus'); z = 1.200 to 20.000 m, on fore web, aft web",),
    ),
    "a cap turned by 10°": (
        with_ply("cap", angle=np.radians(10.0)),
        {"balance": WARN},
        ("mm at +10°, 0.00 mm at -10° ('cap'); z = ", " m, on suction main cap, pressure main cap"),
    ),
    "a cap across the blade": (
        with_ply("cap", angle=np.radians(90.0)),
        {"weak laminates": WARN},
        ("suction main cap, z = ",),
    ),
    "a gap between two plies": (
        in_two("inner plus", 10.0, 12.0),
        {"gaps and laps": WARN, "balance": WARN},
        ("3.00 mm of glass UD, beside 4.00 mm (inner plus inboard, inner plus outboard) on ", "1.00 mm at +45°"),
    ),
    "plies that overlap": (
        chained(in_two("inner plus", 12.0, 10.0), in_two("inner minus", 12.0, 10.0)),
        {"gaps and laps": WARN},
        ("6.00 mm of glass UD, beside 4.00 mm (inner ",),
    ),
    "a tip of one thin ply": (
        chained(
            *(with_ply(name, span=(0.0, 21.0)) for name in ("skin plus", "skin minus", "inner minus", "inner plus")),
            lambda blade: replace(blade, plies=(ply("coat", 0.0002, 0, "skin"), *blade.plies)),
        ),
        {"weak laminates": WARN, "slender panels": WARN},
        ("0.20 mm of 'coat'; z = 21.",),
    ),
    "a web that ends over a panel without core": (
        web_to_the_panel,
        {"web ends": WARN},
        ("aft web, z = 20.000 m on suction trailing panel: 12.00 mm on 4.00 mm of skin",),
    ),
    "a web that ends over nothing": (
        bare_panel_under_the_web,
        {"coverage": FAIL, "web ends": FAIL, "slender panels": WARN},
        ("aft web, z = 20.000 m on suction trailing panel: 12.00 mm on no plies",),
    ),
}


def test_the_sound_design_passes() -> None:
    assert [f"{f.check}: {f.measured}" for f in findings(sound_mesh()) if f.verdict != PASS] == []


@pytest.mark.parametrize("mistake", MISTAKES)
def test_a_mistake_is_named_with_its_place(mistake: str) -> None:
    change, expected, texts = MISTAKES[mistake]
    mesh = build_mesh(change(sound()))
    found = findings(mesh)
    worst = {f.check: f.verdict for f in found if f.verdict == WARN} | {
        f.check: f.verdict for f in found if f.verdict == FAIL
    }
    assert worst == expected
    told = "\n".join(f.where for f in found if f.verdict in (WARN, FAIL))
    assert [text for text in texts if text not in told] == [], told
    assert all(len(f.elements) for f in found if f.verdict in (WARN, FAIL))


def test_widths_and_lengths_make_the_area_of_a_prism() -> None:
    table = blades.stations([0.0, 1.0, 3.0], [1.0, 1.0, 1.0], ["foil"] * 3)
    layout = replace(sound().layout, caps=(), webs=())
    profile = {"foil": sound().profiles["thick"]}
    for shape in ("quad", "triangle"):
        rule = blades.rule(0.2, order=1, shape=shape)
        mesh = build_mesh(blades.blade(table, profile, layout=layout, mesh=rule))
        own = span_table(mesh)
        areas = np.bincount(mesh.region, weights=element_areas(mesh))
        np.testing.assert_allclose(region_widths(mesh, own) @ np.diff(own.z), areas, rtol=1e-6)


@pytest.mark.parametrize(("core", "expected"), [(0.0, 0.004), (0.02, None)])
def test_thickness_as_a_solid_plate(core: float, expected: float | None) -> None:
    """Two faces of f round a soft core c bend as ((2f + c)³ − c³) / 12 and stretch as 2f: t² is their quotient × 12."""
    layers = [
        ply("face", 0.002, 0, "skin"),
        ply("middle", 0.02, 0, "skin", material="foam"),
        ply("back", 0.002, 0, "skin"),
    ]
    chosen = layers if core else [layers[0], layers[2]]
    mesh = build_mesh(replace(sound(), plies=(*chosen, ply("web", 0.002, 0, "webs"))))
    (line,) = check_slenderness(mesh, span_table(mesh), limits=DEFAULT_LIMITS)
    wanted = expected or np.sqrt(((0.004 + core) ** 3 - core**3) / 0.004)
    own = next(entry for entry in line.details["regions"] if entry["region"] == "suction main cap")
    # The foam has a thousandth of the glass's stiffness and five times the faces' thickness.
    assert own["thickness_m"] == pytest.approx(wanted, rel=1e-6 if not core else 0.01)
    assert own["largest"] == pytest.approx(own["width_m"] / own["thickness_m"], rel=1e-2)


def test_plies_without_a_counterpart() -> None:
    layers = [Layer(f"ply {k}", blades.GLASS, 0.001, np.radians(angle)) for k, angle in enumerate((0, 30, 30, -30, 90))]
    assert unpaired_plies(Stack(tuple(layers))) == "2.00 mm at +30°, 1.00 mm at -30° ('ply 1', 'ply 2', 'ply 3')"
    assert unpaired_plies(Stack((layers[0],))) == ""


@pytest.mark.parametrize(("end", "verdict"), [(10.0, PASS), (10.15, WARN)])
def test_ply_ends_that_move_far_are_named(end: float, verdict: str) -> None:
    """Rows 0.4 m apart, ends at a row or between two: 0.15 m of 20 m is 0.0075."""
    table = blades.stations([0.0, 20.0], [1.0, 1.0], ["ring", "ring"])
    plies = (blades.skin_ply(), ply("patch", 0.001, 0, "skin", span=(0.0, end)))
    mesh = build_mesh(
        blades.blade(table, {"ring": sound().profiles["ring"]}, plies=plies, mesh=blades.rule(0.4, order=1))
    )
    (line,) = [f for f in check_plies(mesh, span_table(mesh), limits=DEFAULT_LIMITS) if f.check == "ply ends"]
    assert line.verdict == verdict
    assert f"by {end - 10.0:.3f} m at most, {(end - 10.0) / 20.0:.4f} of the blade's length" in line.measured
    assert verdict == PASS or line.where == "ply 'patch', layer 1, tip end at z = 10.150 m"


@pytest.mark.parametrize(("example", "size"), [("marram-24", 0.4), ("tidal-6", 0.15)])
def test_the_examples_are_free_of_such_mistakes(example: str, size: float) -> None:
    blade = skinmesh.load(EXAMPLES / example / f"{example}.yaml")
    mesh = build_mesh(replace(blade, mesh=replace(blade.mesh, size=constant(size), order=1)))
    table = span_table(mesh)
    found = [f for check in DESIGN for f in check(mesh, table, limits=DEFAULT_LIMITS)]
    found += check_web_ends(mesh, limits=DEFAULT_LIMITS)
    assert [f"{f.check}: {f.measured}" for f in found if f.verdict != PASS] == []
    assert len(found) > 7
