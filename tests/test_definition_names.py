"""Names of regions, and what a name in the blade file stands for."""

from __future__ import annotations

import pytest
from blade_files import BLADE, replaced, write_blade

from skinmesh.definition.blade import (
    PRESSURE,
    SUCTION,
    CapRule,
    ChordFraction,
    FromAxis,
    Layout,
    Place,
    WebRule,
)
from skinmesh.definition.names import cover_names, region_names, resolve_cover
from skinmesh.definition.read import load_blade
from skinmesh.definition.spanwise import constant


def cap(name: str, sides: tuple[int, ...] = (SUCTION, PRESSURE)) -> CapRule:
    return CapRule(name, FromAxis(constant(0.0)), constant(0.1), sides)


def web(name: str) -> WebRule:
    foot: Place = ChordFraction(constant(0.3))
    return WebRule(name, {SUCTION: foot, PRESSURE: foot}, (0.0, 1.0))


LAYOUT = Layout((cap("a"), cap("b", (SUCTION,)), cap("c", (SUCTION,))), (web("w"),), constant(0.1), constant(0.1))


def test_region_names_from_leading_to_trailing_edge():
    assert [region.full for region in region_names(LAYOUT)] == [
        "suction leading strip",
        "suction leading panel",
        "suction a",
        "suction middle panel 1",
        "suction b",
        "suction middle panel 2",
        "suction c",
        "suction trailing panel",
        "suction trailing strip",
        "pressure leading strip",
        "pressure leading panel",
        "pressure a",
        "pressure trailing panel",
        "pressure trailing strip",
        "trailing base",
        "w",
    ]


def test_two_caps_have_one_middle_panel():
    assert "suction middle panel" in {region.full for region in region_names(Layout((cap("a"), cap("b"))))}


@pytest.mark.parametrize(
    ("name", "found"),
    [
        ("a", {"suction a", "pressure a"}),
        ("b", {"suction b"}),
        ("suction a", {"suction a"}),
        ("w", {"w"}),
        ("webs", {"w"}),
        ("trailing base", {"trailing base"}),
        ("caps", {"suction a", "suction b", "suction c", "pressure a"}),
        ("leading strip", {"suction leading strip", "pressure leading strip"}),
    ],
)
def test_what_names_stand_for(name, found):
    assert resolve_cover(name, LAYOUT) == found


def test_groups_of_regions():
    everything = {region.full for region in region_names(LAYOUT)}
    assert resolve_cover("all", LAYOUT) == everything
    assert resolve_cover("skin", LAYOUT) == everything - {"w"}
    parts = [resolve_cover(name, LAYOUT) for name in ("panels", "caps", "strips", "webs", "trailing base")]
    assert frozenset().union(*parts) == everything
    assert sum(map(len, parts)) == len(everything)
    sides = resolve_cover("suction", LAYOUT) | resolve_cover("pressure", LAYOUT)
    assert sides == everything - {"w", "trailing base"}


def test_unknown_and_empty_names():
    with pytest.raises(KeyError, match="leading strip"):
        resolve_cover("leading strip", Layout())
    assert resolve_cover("webs", Layout()) == frozenset()
    for name in cover_names(LAYOUT):
        assert resolve_cover(name, LAYOUT)


def test_across_the_nearer_name_wins(tmp_path):
    across = "across: {suction main cap: 8, main cap: 6, skin: 2, webs: 5}"
    mesh = load_blade(write_blade(tmp_path, blade=replaced(BLADE, "across: {main cap: 6}", across))).mesh
    assert mesh.across["suction main cap"] == 8
    assert mesh.across["pressure main cap"] == 6
    assert mesh.across["suction leading panel"] == 2
    assert mesh.across["fore web"] == 5
