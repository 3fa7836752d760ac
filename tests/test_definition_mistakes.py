"""Mistakes of users, one by one and many at once: file, line, field and words of every message."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

import pytest
from blade_files import BLADE, PROFILE, TABLE, replaced, write_blade

from skinmesh.definition.read import load_blade
from skinmesh.errors import InputError, Problem


@dataclass(frozen=True)
class Mistake:
    """One change of the sound files and what must be said of it."""

    old: str
    new: str
    line: int
    field: str
    words: tuple[str, ...]


def wrong(old: str, new: str, line: int, field: str, *words: str) -> Mistake:
    return Mistake(old, new, line, field, words)


def problems_of(path: Path) -> tuple[Problem, ...]:
    with pytest.raises(InputError) as caught:
        load_blade(path)
    return caught.value.problems


def only_problem(path: Path) -> Problem:
    problems = problems_of(path)
    assert len(problems) == 1, problems
    return problems[0]


IN_BLADE = [
    # fields
    wrong("hand: clockwise", "hand: left", 2, "hand", "must be clockwise or counter-clockwise", "'left'"),
    wrong("hand: clockwise", "hand: counterclockwise", 2, "hand", "did you mean 'counter-clockwise'?"),
    wrong("hand: clockwise", "handed: clockwise", 2, "handed", "no such field", "known: title, hand", "mean 'hand'?"),
    wrong("planform: table.csv\n", "", 0, "planform", "missing", "stations.csv"),
    wrong("planform: table.csv", "planform:", 3, "planform", "missing or has no value"),
    wrong("planform: table.csv", "planform: [table.csv]", 3, "planform", "must be a text", "['table.csv']"),
    wrong("title: test blade, invented", "title: 24", 1, "title", "must be a text, got 24", 'quotes: "24"'),
    wrong("title: test", "hand: clockwise\ntitle: test", 3, "hand", "twice", "line 1", "line 3"),
    wrong("order: 2", "order: 3", 31, "mesh.order", "must be 1 or 2, got 3"),
    wrong("order: 2", "order: true", 31, "mesh.order", "must be 1 or 2, got true"),
    wrong("order: 2", "ordre: 2", 31, "mesh.ordre", "no such field", "did you mean 'order'?"),
    wrong("order: 2", "shape: quads", 31, "mesh.shape", "must be quad or triangle", "did you mean 'quad'?"),
    wrong("order: 2", "surface: inner", 31, "mesh.surface", "must be outer or mid, got 'inner'"),
    wrong("order: 2", "turning: 0", 31, "mesh.turning", "must be > 0, got 0"),
    wrong("order: 2", "chord_error: 0.5", 31, "mesh.chord_error", "must be ≤ 0.1, got 0.5"),
    wrong("order: 2", "cut_at_ply_ends: no", 31, "mesh.cut_at_ply_ends", "must be true or false, got 'no'"),
    wrong("order: 2", "least_spacing: 0", 31, "mesh.least_spacing", "must be > 0, got 0"),
    wrong("close_gap: 0.004", "close_gap: -0.004", 32, "mesh.close_gap", "must be ≥ 0, got -0.004"),
    wrong("close_gap: 0.004", "close_gap: .nan", 32, "mesh.close_gap", "must be a finite number, got nan"),
    wrong(
        "close_gap: 0.004", "close_gap: 4 mm", 32, "mesh.close_gap", "must be a number, got '4 mm'", "leave the unit"
    ),
    wrong("size: 0.12", "size: 0", 29, "mesh.size", "must be > 0, got 0"),
    wrong("size: 0.12", "size: 0.0005", 29, "mesh.size", "million", "take", "usual size is 0.0889 m"),
    wrong("size: 0.12", "size: 1e-200", 29, "mesh.size", "far too many elements"),
    wrong("size: 0.12", "size: 0,12", 29, "mesh.size", "'0,12' is not a number", "with a point: 0.12"),
    wrong("size: 0.12", "size: 1_0", 29, "mesh.size", "'1_0' is not a number", "without anything between"),
    wrong("size: 0.12", "size: .inf", 29, "mesh.size", "must be a finite number, got inf"),
    wrong("size: 0.12", "size: chrod_m", 29, "mesh.size", "no column", "'chrod_m'", "did you mean 'chord_m'?"),
    wrong("size: 0.12", "size: pitch_axis", 29, "mesh.size", "is a length", "carries no unit", "end in _m or _mm"),
    wrong("across: {main cap: 6}", "across: {spar cap: 6}", 30, "mesh.across.spar cap", "no region", "'main cap'?"),
    wrong("across: {main cap: 6}", "across: {main cap: 0}", 30, "mesh.across.main cap", "must be ≥ 1, got 0"),
    wrong("across: {main cap: 6}", "across: {main cap: 2.5}", 30, "mesh.across.main cap", "whole number, got 2.5"),
    wrong("across: {main cap: 6}", "across: 6", 30, "mesh.across", "must be a group of fields", "got 6"),
    # profiles
    wrong("{circle: true}", "{circle: false}", 5, "profiles.ring.circle", "must be true, got false"),
    wrong("{circle: true}", "{}", 5, "profiles.ring", "must be one of", "circle: true", "naca", "file"),
    wrong("{circle: true}", '{circle: true, naca: "0012"}', 5, "profiles.ring", "one of", "got circle and naca"),
    wrong("{circle: true}", "{circel: true}", 5, "profiles.ring.circel", "no such field", "did you mean 'circle'?"),
    wrong("{circle: true}", "circle", 5, "profiles.ring", "must be a group of fields", "got 'circle'"),
    wrong('naca: "4418"', "naca: 44 18", 7, "profiles.thin.naca", "four digits", "'44 18'"),
    wrong('naca: "4418"', 'naca: "23012"', 7, "profiles.thin.naca", "four digits", "'23012'"),
    wrong('naca: "4418"', 'naca: "4400"', 7, "profiles.thin.naca", "thickness", "cannot be 00"),
    wrong('naca: "4418"', 'naca: "4018"', 7, "profiles.thin.naca", "camber and its place", "'4018'"),
    wrong("trailing_gap: 0.004", "trailing_gap: 0.4", 7, "profiles.thin.trailing_gap", "must be < 0.3, got 0.4"),
    wrong(
        "{file: thick.dat}",
        "{file: thick.dat, trailing_gap: 0.1}",
        6,
        "profiles.thick.trailing_gap",
        "NACA profile only",
    ),
    wrong("{file: thick.dat}", "{file: thikc.dat}", 6, "profiles.thick.file", "neither at", "geometry", "'thick.dat'?"),
    # materials
    wrong("nu12: 0.28, ", "", 9, "materials.glass", "orthotropic material without nu12"),
    wrong("nu12: 0.28", "nu12: 0.28, E: 1e9", 9, "materials.glass", "has E of an isotropic", "keep one kind"),
    wrong("{E: 0.05e9, nu: 0.3, density: 80}", "{density: 80}", 10, "materials.foam", "elastic constants", "{E, nu}"),
    wrong("E: 0.05e9, nu: 0.3", "E: 0.05e9", 10, "materials.foam", "isotropic material without nu"),
    wrong("density: 80", "density: 0", 10, "materials.foam.density", "must be > 0, got 0"),
    wrong("density: 80", "density: 0.08", 10, "materials.foam.density", "0.08 kg/m³", "1.92 g/cm³ is 1920"),
    wrong(", density: 80", "", 10, "materials.foam.density", "missing", "kg/m³"),
    wrong("nu: 0.3", "nu: 0.5", 10, "materials.foam.nu", "must lie between -1 and 0.5, got 0.5"),
    wrong("E1: 41.0e9", "E1: 41", 9, "materials.glass.E1", "41 Pa is softer", "41 GPa is 41e9"),
    wrong("E1: 41.0e9", "E1: 41 GPa", 9, "materials.glass.E1", "must be a number, got '41 GPa'", "leave the unit"),
    wrong("E1: 41.0e9", "E1: -41.0e9", 9, "materials.glass.E1", "must be > 0, got -4.1e+10"),
    wrong("nu12: 0.28", "nu12: 1.9", 9, "materials.glass", "no material", "|nu12| must be < √(E1/E2) = 1.896", "1.9"),
    wrong("nu12: 0.28", "nu12: 1.5", 9, "materials.glass", "no material", "1 - nu12 nu21", "nu21 given for nu12"),
    wrong("nu12: 0.28", "nu12: 0.28, nu23: 1.2", 9, "materials.glass", "|nu23| must be < √(E2/E3) = 1, got 1.2"),
    # layout
    wrong("width: [[0, 0.4], [10, 0.1]]", "width: [0, 0.4]", 13, "layout.caps.main cap.width", "[z, value] pairs"),
    wrong(
        "[[0, 0.4], [10, 0.1]]", "[[0, 0.4], [0, 0.1]]", 13, "layout.caps.main cap.width", "z must increase", "pair 2"
    ),
    wrong(
        "[[0, 0.4], [10, 0.1]]", "[[0, 0.4], [9, l]]", 13, "layout.caps.main cap.width", "pair 2: 'l' is not a number"
    ),
    wrong(
        "[[0, 0.4], [10, 0.1]]", "[[0, 0.4], [9, 0]]", 13, "layout.caps.main cap.width", "must be > 0, got 0 at z = 9"
    ),
    wrong("[[0, 0.4], [10, 0.1]]", "[]", 13, "layout.caps.main cap.width", "empty"),
    wrong("[[0, 0.4], [10, 0.1]]", "{a: 1}", 13, "layout.caps.main cap.width", "a group of fields"),
    wrong(
        "{from_axis: 0.0}", "{from_axis: 0.0, chord: 0.3}", 13, "layout.caps.main cap.centre", "one place", "got from"
    ),
    wrong("{from_axis: 0.0}", "{}", 13, "layout.caps.main cap.centre", "must give one place", "got nothing"),
    wrong("{from_axis: 0.0}", "0.0", 13, "layout.caps.main cap.centre", "must be a group of fields", "got 0"),
    wrong("{from_axis: 0.0}", "{chord: 30}", 13, "layout.caps.main cap.centre.chord", "between 0 and 1, got 30"),
    wrong(
        "{from_axis: 0.0}", "{chord: chord_m}", 13, "layout.caps.main cap.centre.chord", "without a unit", "'chord_m'"
    ),
    wrong("centre: {from_axis: 0.0}, ", "", 13, "layout.caps.main cap.centre", "missing", "from_axis"),
    wrong(
        "centre: {from_axis", "sides: top, centre: {from_axis", 13, "layout.caps.main cap.sides", "suction, pressure"
    ),
    wrong("{cap: main cap, across: 0.2}", "{cap: main cap}", 15, "layout.webs.fore web.foot", "cap without across"),
    wrong(
        "{cap: main cap, across: 0.2}",
        "{cap: man cap, across: 0.2}",
        15,
        "layout.webs.fore web.foot.cap",
        "no cap 'man cap'",
        "'main cap'?",
    ),
    wrong("across: 0.2", "across: 1.2", 15, "layout.webs.fore web.foot.across", "between 0 and 1, got 1.2"),
    wrong("span: [1.0, 9.0]", "span: [9.0, 1.0]", 15, "layout.webs.fore web.span", "root to tip", "[9, 1]"),
    wrong(
        "span: [1.0, 9.0]",
        "span: [1.0, 11.0]",
        15,
        "layout.webs.fore web.span",
        "web ends at z = 11, beyond",
        "z = 0 to 10",
    ),
    wrong("span: [1.0, 9.0]", "span: [-1, 9]", 15, "layout.webs.fore web.span", "web starts at z = -1, before"),
    wrong("span: [1.0, 9.0]", "span: [1.0]", 15, "layout.webs.fore web.span", "two numbers", "[1]"),
    wrong("span: [1.0, 9.0]", "plane_twist: 5", 15, "layout.webs.fore web.plane_twist", "from_axis only"),
    wrong("suction: {chord: 0.6}, ", "", 17, "layout.webs.aft web.foot", "pressure side only", "give suction too"),
    wrong("suction: {chord: 0.6}", "arc: 0.2, suction: {chord: 0.6}", 17, "layout.webs.aft web.foot", "both sides"),
    wrong("fore web:", "skin:", 15, "layout.webs.skin", "'skin' has a meaning of its own"),
    wrong("fore web:", "suction web:", 15, "layout.webs.suction web", "meaning of its own"),
    wrong(
        "    main cap: {centre",
        "    main cap: {centre: {arc: 1}, width: 1}\n    main cap: {centre",
        14,
        "layout.caps.main cap",
        "line 13",
        "line 14",
    ),
    wrong("fore web:", "main cap:", 15, "layout.webs.main cap", "a cap has this name too"),
    wrong("fore web:", '"  ":', 15, "layout.webs.  ", "blanks at its ends"),
    wrong(
        "leading strip: {width: 0.1}", "leading strip: 0.1", 18, "layout.leading strip", "group of fields", "got 0.1"
    ),
    wrong(
        "leading strip: {width: 0.1}",
        "nose strip: {width: 0.1}",
        18,
        "layout.nose strip",
        "no such field",
        "leading strip",
    ),
    # plies
    wrong(
        "covers: [skin]",
        "covers: [spar cap]",
        21,
        "plies[0].covers",
        "no region 'spar cap'",
        "leading panel",
        "did you mean 'main cap'?",
    ),
    wrong("covers: [skin]", "covers: skin", 21, "plies[0].covers", "must be a list, got 'skin'", "write [skin]"),
    wrong("covers: [skin]", "covers: []", 21, "plies[0].covers", "list is empty"),
    wrong("covers: [skin]", "covers: [skin, skin]", 21, "plies[0].covers", "'skin' is there twice"),
    wrong("covers: [skin]", "covers: [1]", 21, "plies[0].covers[0]", "must be a text, got 1"),
    wrong("covers: [skin]", "covers: [middle panel]", 21, "plies[0].covers", "no region 'middle panel'"),
    wrong(", covers: [skin]", "", 21, "plies[0].covers", "missing", "[skin]"),
    wrong(
        "material: glass, thickness: 0.9e-3",
        "material: gals, thickness: 0.9e-3",
        21,
        "plies[0].material",
        "no material 'gals'",
        "known: glass, foam",
        "'glass'?",
    ),
    wrong("thickness: 0.9e-3", "thickness: -0.0012", 21, "plies[0].thickness", "must be > 0, got -0.0012"),
    wrong(
        "thickness: 0.9e-3", "thickness: 0.9", 21, "plies[0].thickness", "more than half the longest chord", "0.9e-3"
    ),
    wrong("thickness: 0.9e-3", "thickness: true", 21, "plies[0].thickness", "must be a number", "got true"),
    wrong("angle: 45", "angle: ±45", 21, "plies[0].angle", "must be a number, got '±45'"),
    wrong("angle: 45", "angle: 450", 21, "plies[0].angle", "must be ≤ 360, got 450"),
    wrong(
        "angle: 45",
        "outline: [[0, 0], [1, 0], [1, 1]]",
        21,
        "plies[0].outline",
        "not available in this version",
        "span",
    ),
    wrong("angle: 45", "angel: 45", 21, "plies[0].angel", "no such field", "did you mean 'angle'?"),
    wrong("count: 10", "count: -1", 22, "plies[1].count", "between 0 and 1000, got -1"),
    wrong("span: [0.4, 9.5]", "span: [0.4, 10.5]", 22, "plies[1].span", "ply ends at z = 10.5, beyond the blade"),
    wrong("root: 0.1", "root: -0.1", 22, "plies[1].step.root", "must be ≥ 0, got -0.1"),
    wrong("root: 0.1", "foot: 0.1", 22, "plies[1].step.foot", "no such field", "did you mean 'root'?"),
    wrong("thickness: 0.01", "thickness: 0.01\n    thickness: 0.02", 26, "plies[2].thickness", "line 25", "line 26"),
    wrong(
        "material: foam\n", "material: foam\n    matrial: foam\n", 25, "plies[2].matrial", "did you mean 'material'?"
    ),
    # YAML itself
    wrong("order: 2", "order: [2", 32, "", "not YAML", "'[' is not closed", "line 31"),
    wrong("order: 2", "\torder: 2", 31, "", "not YAML", "tab"),
    wrong("order: 2", "order: *base", 31, "", "not YAML", "alias"),
    wrong("order: 2", "order: !!python/name:os.system", 31, "mesh.order", "tag", "python/name", "leave it out"),
    wrong("order: 2", "order: !mine 2", 31, "mesh.order", "tag !mine"),
    wrong("order: 2", "order: !!int two", 31, "mesh.order", "'two' does not suit its tag !!int"),
    wrong("order: 2", "order: a: b", 31, "", "not YAML", "':'"),
    wrong("order: 2", "<<: {order: 2}", 31, "mesh.<<", "merge keys", "YAML 1.1"),
    wrong("order: 2", "? [a]\n  : 2", 31, "mesh", "must be a word"),
    wrong("title: test blade, invented", "title: a\x07b", 1, "", "character that plain text cannot have"),
    wrong("title: test blade, invented", 'title: "a\\ud800b"', 1, "title", "cannot be shown"),
    wrong("order: 2", "order: 2\n---\na: 1", 32, "", "several documents"),
]

IN_TABLE = [
    wrong("3.0, 1.6, 8", "3.0, l.6, 8", 5, "row 3 (z_m = 3), chord_m", "'l.6' is not a number"),
    wrong("3.0, 1.6, 8", "3.0, -1.6, 8", 5, "row 3 (z_m = 3), chord_m", "chord must be > 0, got -1.6"),
    wrong("3.0, 1.6, 8", "3.0, nan, 8", 5, "row 3 (z_m = 3), chord_m", "must be a finite number, got 'nan'"),
    wrong("3.0, 1.6, 8", "3.0, #N/A, 8", 5, "row 3 (z_m = 3), chord_m", "must be a finite number, got '#N/A'"),
    wrong("3.0, 1.6, 8", "3.0, 1e999, 8", 5, "row 3 (z_m = 3), chord_m", "must be a finite number, got '1e999'"),
    wrong("3.0, 1.6, 8", "3.0, , 8", 5, "row 3 (z_m = 3), chord_m", "cell is empty"),
    wrong(
        "3.0, 1.6, 8", "3.0, 1.6 m, 8", 5, "row 3 (z_m = 3), chord_m", "'1.6 m' is not a number", "leave the unit out"
    ),
    wrong("3.0, 1.6, 8", "0.5, 1.6, 8", 5, "row 3 (z_m = 0.5), z_m", "z must increase", "got 0.5 after 1"),
    wrong("3.0, 1.6, 8", "1.0, 1.6, 8", 5, "row 3 (z_m = 1), z_m", "z must increase"),
    wrong(
        "0.0, 1.0, 12, 0.5, ring,", "-0.5, 1.0, 12, 0.5, ring,", 3, "row 1 (z_m = -0.5), z_m", "0 or above, got -0.5"
    ),
    wrong("8, 0.36", "800, 0.36", 5, "row 3 (z_m = 3), twist_deg", "between -180 and 180 degrees, got 800"),
    wrong("8, 0.36", "8, 36", 5, "row 3 (z_m = 3), pitch_axis", "fraction", "got 36", "divided by 100"),
    wrong(", 0.24", ", 24", 6, "row 4 (z_m = 6), thickness_ratio", "at most 1", "got 24", "divided by 100"),
    wrong(", 0.24", ", 0.24, 7", 6, "", "this row has 7 cells, the header 6"),
    wrong(
        "0.36, thick", "0.36, thik", 5, "row 3 (z_m = 3), profile", "no profile 'thik' in the blade file", "'thick'?"
    ),
    wrong("0.0, 1.0, 12, 0.5, ring,", "0.0, 1.0, 12, 0.5, ,", 3, "row 1 (z_m = 0), profile", "first station must name"),
    wrong("0, 0.3, thin,\n", "0, 0.3, , 0.2\n", 8, "row 6 (z_m = 10), profile", "last station must name"),
    wrong("chord_m,", "chord,", 2, "chord", "must carry a unit", "chord_m or chord_mm"),
    wrong("chord_m,", "chord_cm,", 2, "chord_cm", "must carry a unit that is known", "chord_m or chord_mm"),
    wrong("twist_deg", "twist_rad", 2, "twist_rad", "must carry a unit", "twist_deg"),
    wrong("pitch_axis", "Pitch_axis", 2, "Pitch_axis", "must be pitch_axis"),
    wrong(" thickness_ratio", " z_m", 2, "z_m", "twice"),
    wrong(" thickness_ratio", " chord_mm", 2, "", "chord_m and chord_mm give the same"),
    wrong(
        " thickness_ratio", " thicknes_ratio", 2, "thicknes_ratio", "no such column", "did you mean 'thickness_ratio'?"
    ),
    wrong("profile, thickness_ratio", ", thickness_ratio", 2, "", "column 5 has no name"),
    wrong(
        "# an invented table\nz_m, chord_m, twist_deg, pitch_axis, profile, thickness_ratio\n",
        "",
        1,
        "",
        "first row must name the columns",
    ),
]

IN_PROFILE = [
    wrong(PROFILE, "title\n1 0\n0.5 0.1\n0 0\n0.5 -0.1\n1 0\n", 0, "", "has 5 different points", "at least 10"),
    wrong(PROFILE, "title only\nand words\n", 0, "", "no line with two numbers"),
    wrong("70 10\n", "70 nan\n", 5, "", "'70 nan' is no point", "finite"),
    wrong("70 10\n", "70 ten\n", 5, "", "'70 ten' stands between the points, after 3 of them"),
    wrong("70 10\n", "70,0 10,0\n", 5, "", "decimal commas"),
    wrong("70 10\n55 14\n", "55 14\n70 10\n", 5, "", "jumps back", "out of order"),
    wrong("100 1.5\n", "100 -3\n", 2, "", "crosses itself"),
    wrong(PROFILE, "\n".join(PROFILE.splitlines()[:12]), 12, "", "no loop", "last point (0, 0)", "100% of the chord"),
    wrong(
        PROFILE,
        PROFILE.replace("thick outline, invented", "thick\n12 11"),
        2,
        "",
        "counts 12 and 11",
        "23 points",
        "21 follow",
    ),
    wrong(PROFILE, PROFILE.replace("thick outline, invented", "thick\n11 10"), 3, "", "first block", "from 100 to 0"),
    wrong(PROFILE, "\n".join(f"{x} 0" for x in range(12)), 0, "", "one line"),
    wrong(
        PROFILE,
        "\n".join(f"{y} {x}" for x, y in (line.split() for line in PROFILE.splitlines()[1:])),
        0,
        "",
        "as high as long",
    ),
]


@pytest.mark.parametrize("mistake", IN_BLADE, ids=lambda m: f"{m.field}: {m.new[:30]!r}")
def test_mistakes_in_the_blade_file(tmp_path, mistake):
    path = write_blade(tmp_path, blade=replaced(BLADE, mistake.old, mistake.new))
    check(only_problem(path), mistake, str(path))


@pytest.mark.parametrize("mistake", IN_TABLE, ids=lambda m: f"{m.field}: {m.new[:30]!r}")
def test_mistakes_in_the_station_table(tmp_path, mistake):
    path = write_blade(tmp_path, table=replaced(TABLE, mistake.old, mistake.new))
    problems = [problem for problem in problems_of(path) if problem.file == "table.csv"]
    assert len(problems) == len(problems_of(path))
    check(problems[0], mistake, "table.csv")


@pytest.mark.parametrize("mistake", IN_PROFILE, ids=lambda m: m.words[0])
def test_mistakes_in_a_profile_file(tmp_path, mistake):
    path = write_blade(tmp_path, profile=replaced(PROFILE, mistake.old, mistake.new))
    check(only_problem(path), mistake, "thick.dat")


def check(problem: Problem, mistake: Mistake, file: str) -> None:
    assert problem.file == file
    assert (problem.line, problem.field) == (mistake.line, mistake.field)
    for words in mistake.words:
        assert words in problem.text
    for jargon in ("pydantic", "dict", "str", "NoneType", "validation", "Input should", "Traceback"):
        assert jargon not in problem.text.split()


def test_the_table_of_mistakes_is_long():
    assert len(IN_BLADE) + len(IN_TABLE) + len(IN_PROFILE) > 120


def test_all_mistakes_of_all_files_at_once(tmp_path):
    blade = replaced(BLADE, "hand: clockwise", "hand: left")
    blade = replaced(blade, "thickness: 0.9e-3, angle: 45, covers: [skin]", "thickness: -1, angle: x, covers: [skinn]")
    blade = replaced(blade, "material: foam", "material: faom")
    blade = replaced(blade, "across: {main cap: 6}", "acros: {main cap: 6}")
    table = replaced(replaced(TABLE, "1.6, 8", "l.6, 8"), "0.36, thick", "0.36, thik")
    profile = replaced(PROFILE, "70 10\n", "70 nan\n")
    path = write_blade(tmp_path, blade=blade, table=table, profile=profile)
    found = {(Path(problem.file).name, problem.line, problem.field) for problem in problems_of(path)}
    assert found == {
        ("blade.yaml", 2, "hand"),
        ("blade.yaml", 21, "plies[0].thickness"),
        ("blade.yaml", 21, "plies[0].angle"),
        ("blade.yaml", 21, "plies[0].covers"),
        ("blade.yaml", 24, "plies[2].material"),
        ("blade.yaml", 30, "mesh.acros"),
        ("table.csv", 5, "row 3 (z_m = 3), chord_m"),
        ("table.csv", 5, "row 3 (z_m = 3), profile"),
        ("thick.dat", 5, ""),
    }


def test_one_mistake_is_told_once(tmp_path):
    """A refused cap, strip, material or profile is still known by its name."""
    blade = replaced(BLADE, "width: [[0, 0.4], [10, 0.1]]", "width: wide")
    blade = replaced(blade, "leading strip: {width: 0.1}", "leading strip: {width: -1}")
    blade = replaced(blade, "nu: 0.3", "nu: 3")
    blade = replaced(blade, "{circle: true}", "{circle: 1}")
    blade = replaced(blade, "covers: [skin]", "covers: [leading strip]")
    found = [problem.field for problem in problems_of(write_blade(tmp_path, blade=blade))]
    assert found == [
        "profiles.ring.circle",
        "materials.foam.nu",
        "layout.caps.main cap.width",
        "layout.leading strip.width",
    ]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "is empty"),
        ("# only a comment\n", "group of fields"),
        ("just words\n", "group of fields"),
        ("- a\n- b\n", "group of fields"),
        ("[" * 5000, "nested more than 40 levels"),
        (
            "a: &a [x, x, x, x, x, x, x, x, x, x]\n"
            + "".join(f"{chr(98 + k)}: &{chr(98 + k)} [{', '.join([f'*{chr(97 + k)}'] * 10)}]\n" for k in range(8)),
            "aliases",
        ),
        ("a: &a [*a]\n", "inside its own anchor"),
    ],
    ids=["empty", "comment", "words", "list", "deep", "swelling", "circular"],
)
def test_what_is_no_blade_file(tmp_path, text, words):
    path = tmp_path / "blade.yaml"
    path.write_text(text, encoding="utf-8")
    assert words in problems_of(path)[0].text


@pytest.mark.parametrize("name", ["blade.yaml", "table.csv", "thick.dat"])
@pytest.mark.parametrize("kind", ["missing", "folder", "empty", "binary", "pipe", "dangling link", "link to itself"])
def test_what_is_no_text_file(tmp_path, name, kind):
    path = write_blade(tmp_path)
    target = tmp_path / name
    target.unlink()
    words = {
        "missing": "no such file",
        "folder": "is a folder",
        "empty": "is empty",
        "binary": "is a binary file",
        "pipe": "is a device or a pipe",
        "dangling link": "link that leads nowhere",
        "link to itself": "link",
    }[kind]
    if kind == "folder":
        target.mkdir()
    elif kind == "empty":
        target.write_bytes(b"\n")
    elif kind == "binary":
        target.write_bytes(b"\x7fELF\0\0\0\0")
    elif kind == "pipe":
        os.mkfifo(target)
    elif kind == "dangling link":
        target.symlink_to(tmp_path / "nowhere")
    elif kind == "link to itself":
        target.symlink_to(target)
    assert words in only_problem(path).text


@pytest.mark.parametrize("name", ["blade.yaml", "table.csv", "thick.dat"])
def test_a_file_without_permission(tmp_path, monkeypatch, name):
    path = write_blade(tmp_path)
    read = Path.read_bytes

    def refuse(self: Path) -> bytes:
        if self.name == name:  # root may read everything, so a closed file would prove nothing
            raise PermissionError(13, "Permission denied", str(self))
        return read(self)

    monkeypatch.setattr(Path, "read_bytes", refuse)
    assert "may not be read" in only_problem(path).text


def test_a_table_in_another_encoding(tmp_path):
    path = write_blade(tmp_path)
    (tmp_path / "table.csv").write_bytes(TABLE.replace("an invented table", "größe").encode("latin-1"))
    problem = only_problem(path)
    assert (problem.file, problem.line) == ("table.csv", 1)
    assert "UTF-8" in problem.text


@pytest.mark.parametrize(("rows", "words"), [(2, "has no station"), (3, "has one station")])
def test_tables_that_are_too_short(tmp_path, rows, words):
    table = "".join(TABLE.splitlines(keepends=True)[:rows])
    assert words in problems_of(write_blade(tmp_path, table=table))[0].text


def test_decimal_commas_are_told_once(tmp_path):
    table = TABLE.replace(".", ";").replace(",", ";").replace(";", ",", 0)
    table = "\n".join(
        line.replace(",", ";").replace(".", ",") if not line.startswith("#") else line for line in TABLE.splitlines()
    )
    problem = only_problem(write_blade(tmp_path, table=table))
    assert problem.line == 3
    assert problem.field == "z_m"
    assert "'0,0' has a decimal comma (and " in problem.text
    assert "with a point (0.0)" in problem.text


def test_a_row_with_a_decimal_comma_is_told_once(tmp_path):
    problem = only_problem(write_blade(tmp_path, table=replaced(TABLE, "6.0, 1.2, 3", "6.0, 1,2, 3")))
    assert (problem.line, problem.field) == (6, "")
    assert "7 cells, the header 6; is a comma used both for decimals and between cells?" in problem.text


@pytest.mark.parametrize(
    ("old", "new", "field"),
    [
        ("layout:\n", "lay-out:\n", "lay-out"),
        ("  caps:\n", "  cap:\n", "layout.cap"),
        ("materials:\n", "material:\n", "material"),
        ("profiles:\n", "profile:\n", "profile"),
        ("leading strip: {width: 0.1}", "leading strip: 0.1", "layout.leading strip"),
    ],
)
def test_one_misspelt_part_makes_no_flood(tmp_path, old, new, field):
    blade = replaced(BLADE, "across: {main cap: 6}", "across: {skin: 2}")
    blade = replaced(blade, "foot: {cap: main cap, across: 0.2}", "foot: {chord: 0.3}")
    assert only_problem(write_blade(tmp_path, blade=replaced(blade, old, new))).field == field


def test_a_misspelt_field_is_not_also_missing(tmp_path):
    problem = only_problem(write_blade(tmp_path, blade=replaced(BLADE, "thickness: 0.9e-3", "thicknes: 0.9e-3")))
    assert (problem.line, problem.field) == (21, "plies[0].thicknes")
    assert "did you mean 'thickness'?" in problem.text


def test_a_column_full_of_mistakes_is_summed_up(tmp_path):
    rows = "".join(f"{z}, x, 0, 0.3, ring,\n" for z in range(500))
    table = "z_m, chord_m, twist_deg, pitch_axis, profile, thickness_ratio\n" + rows
    problems = problems_of(write_blade(tmp_path, table=table))
    own = [problem for problem in problems if problem.file == "table.csv"]
    assert len(own) == 11
    assert own[-1].text.startswith("490 further cells")


def test_the_message_as_a_user_sees_it(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    blade = replaced(BLADE, "covers: [skin]", "covers: [spar cap]")
    write_blade(tmp_path, blade=blade, table=replaced(TABLE, "1.6, 8", "l.6, 8"))
    with pytest.raises(InputError) as caught:
        load_blade("blade.yaml")
    assert str(caught.value) == (
        "blade.yaml: 1 problem\n"
        "  line 21, plies[0].covers: no region 'spar cap'; known: leading strip, leading panel, main cap,"
        " trailing panel, trailing strip, trailing base, fore web, aft web, skin, suction, pressure, panels, caps,"
        " strips, webs, all, … — did you mean 'main cap'?\n"
        "table.csv: 1 problem\n"
        "  line 5, row 3 (z_m = 3), chord_m: 'l.6' is not a number"
    )
