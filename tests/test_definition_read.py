"""What a sound blade becomes: values in SI units, numbers of YAML 1.2, tables as programs export them."""

from __future__ import annotations

import hashlib
import json
import os
from pathlib import Path

import numpy as np
import pytest
from blade_files import BLADE, PROFILE, TABLE, replaced, write_blade
from hypothesis import given, settings
from hypothesis import strategies as st

from skinmesh.definition.blade import (
    PRESSURE,
    SUCTION,
    AcrossCap,
    ArcLength,
    BladeDefinition,
    ChordFraction,
    CircleProfile,
    FileProfile,
    FromAxis,
    NacaProfile,
)
from skinmesh.definition.filetext import read_text
from skinmesh.definition.problems import Findings
from skinmesh.definition.read import load_blade
from skinmesh.definition.schema import json_schema
from skinmesh.definition.yamltree import read_document
from skinmesh.errors import InputError
from skinmesh.laminate.material import Material

EXAMPLES = [
    path for path in sorted((Path(__file__).parents[1] / "examples").glob("*/*.yaml")) if path.parent.name != "sweeps"
]


@pytest.fixture
def blade(tmp_path: Path) -> BladeDefinition:
    return load_blade(write_blade(tmp_path))


def test_values_are_in_si_units(blade):
    assert (blade.title, blade.stem, blade.hand) == ("test blade, invented", "blade", "clockwise")
    assert blade.stations.z.tolist() == [0, 1, 3, 6, 9, 10]
    assert blade.stations.twist == pytest.approx(np.radians([12, 12, 8, 3, 1, 0]))
    assert blade.stations.profile == ("ring", "ring", "thick", None, "thin", "thin")
    assert np.isnan(blade.stations.thickness_ratio).tolist() == [True, True, True, False, True, True]
    assert blade.stations.prebend.tolist() == [0] * 6
    assert isinstance(blade.profiles["ring"], CircleProfile)
    assert blade.profiles["thin"] == NacaProfile("4418", 0.004)
    assert isinstance(blade.profiles["thick"], FileProfile)
    assert len(blade.plies) == 4
    assert blade.plies[0].angle == pytest.approx(np.pi / 4)
    assert (blade.plies[1].span, blade.plies[1].step_root, blade.plies[1].step_tip) == ((0.4, 9.5), 0.1, 0.0)
    assert blade.plies[1].count(5.0) == 10
    assert blade.plies[2].covers == ("leading panel", "suction trailing panel")
    assert blade.plies[3].thickness(5.0) == pytest.approx(1.5e-3)
    assert blade.mesh.across == {"suction main cap": 6, "pressure main cap": 6}
    assert (blade.mesh.size(3.0), blade.mesh.order, blade.mesh.close_gap) == (0.12, 2, 0.004)


def test_layout(blade):
    (cap,) = blade.layout.caps
    assert isinstance(cap.centre, FromAxis)
    assert cap.width(5.0) == pytest.approx(0.25)
    assert cap.sides == (SUCTION, PRESSURE)
    fore, aft = blade.layout.webs
    assert fore.span == (1.0, 9.0)
    assert {side: type(foot) for side, foot in fore.feet.items()} == {SUCTION: AcrossCap, PRESSURE: AcrossCap}
    assert aft.span == (0.0, 10.0)
    assert {side: type(foot) for side, foot in aft.feet.items()} == {SUCTION: ChordFraction, PRESSURE: ArcLength}
    assert blade.layout.leading_strip is not None
    assert blade.layout.trailing_strip is not None


def test_sources_and_lines(blade, tmp_path):
    assert [source.file for source in blade.sources] == ["blade.yaml", "table.csv", "thick.dat"]
    for source in blade.sources:
        assert source.sha256 == hashlib.sha256((tmp_path / source.file).read_bytes()).hexdigest()
    assert blade.lines is not None
    assert blade.lines["plies[2].thickness"] == 25
    assert blade.lines["layout.caps.main cap.width"] == 13
    assert blade.lines["mesh.size"] == 29


def test_defaults(tmp_path):
    text = "planform: table.csv\nprofiles: {ring: {circle: true}, thick: {file: thick.dat}, thin: {naca: 0012}}\n"
    blade = load_blade(write_blade(tmp_path, blade=text))
    assert (blade.title, blade.hand, blade.plies, dict(blade.materials)) == ("blade", "clockwise", (), {})
    assert blade.profiles["thin"] == NacaProfile("0012", None)
    assert (blade.layout.caps, blade.layout.webs, blade.layout.leading_strip) == ((), (), None)
    assert blade.mesh.size(0.0) == pytest.approx(1.6 / 18, abs=1e-4)
    assert (blade.mesh.order, blade.mesh.shape, blade.mesh.surface) == (2, "quad", "outer")


def test_parts_without_content_are_as_if_not_there(tmp_path):
    blade = replaced(BLADE, "mesh:\n  size: 0.12\n  across: {main cap: 6}\n  order: 2\n  close_gap: 0.004\n", "mesh:\n")
    assert load_blade(write_blade(tmp_path, blade=blade)).mesh.order == 2


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_examples_read(path):
    blade = load_blade(path)
    assert blade.plies
    assert all(len(source.sha256) == 64 for source in blade.sources)


# ------------------------------------------------------------------------------------------- YAML 1.2 (core schema)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        # YAML 1.2.2, chapter 10.3.2, from memory
        ("1e-3", 1e-3),
        ("41e9", 41e9),
        ("41.0E+9", 41e9),
        (".5", 0.5),
        ("5.", 5.0),
        ("-0.25", -0.25),
        ("+12", 12),
        ("0o17", 15),
        ("017", 17),
        ("0x1F", 31),
        ("1234567890123456789012", 1234567890123456789012.0),
        ("true", True),
        ("FALSE", False),
        ("no", "no"),
        ("on", "on"),
        ("Yes", "Yes"),
        ("1_000", "1_000"),
        ("12:30", "12:30"),
        ("2024-01-01", "2024-01-01"),
        ("'1e-3'", "1e-3"),
        ("!!str 12", "12"),
        ("!!float 12", 12.0),
        ("-.INF", -np.inf),
        ("e5", "e5"),
        ("1e", "1e"),
        ("0b11", "0b11"),
    ],
)
def test_yaml_12_values(tmp_path, text, value):
    (tmp_path / "a.yaml").write_text(f"a: {text}\n", encoding="utf-8")
    findings = Findings()
    source = read_text(tmp_path / "a.yaml", "a.yaml", findings=findings, kind="blade file")
    assert source is not None
    document = read_document(source, findings)
    assert document is not None
    assert not findings.problems
    assert document.data["a"] == value
    assert isinstance(document.data["a"], bool) == isinstance(value, bool)
    assert isinstance(document.data["a"], str) == isinstance(value, str)


def test_anchors_and_aliases(tmp_path):
    blade = replaced(BLADE, "width: [[0, 0.4], [10, 0.1]]", "width: &taper [[0, 0.4], [10, 0.1]]")
    blade = replaced(blade, "leading strip: {width: 0.1}", "leading strip: {width: *taper}")
    strip = load_blade(write_blade(tmp_path, blade=blade)).layout.leading_strip
    assert strip is not None
    assert strip(5.0) == pytest.approx(0.25)


# --------------------------------------------------------------------------------------------------- station table


def equal_tables(a: BladeDefinition, b: BladeDefinition) -> bool:
    fields = ("z", "chord", "twist", "pitch_axis", "thickness_ratio", "prebend", "sweep")
    same = [np.allclose(getattr(a.stations, f), getattr(b.stations, f), equal_nan=True, rtol=1e-15) for f in fields]
    return all(same) and a.stations.profile == b.stations.profile


def _reordered(text: str) -> str:
    rows = [line.split(",") for line in text.splitlines()[1:]]
    return "\n".join(",".join(row[k].strip() for k in (4, 2, 0, 5, 1, 3)) for row in rows)


@pytest.mark.parametrize(
    "change",
    [
        lambda text: text.replace("\n", "\r\n"),
        lambda text: "\ufeff" + text,
        lambda text: text.replace(",", ";"),
        lambda text: text.replace(", ", "\t").replace(",\n", "\t\n"),
        lambda text: text + ",,,,,\n,,,,,\n\n",
        lambda text: text.replace("\n", ",,\n").replace("table,,", "table"),
        lambda text: text.replace("ring,", '"ring",'),
        lambda text: text.replace("6.0, 1.2", "\n# half-way\n6.0, 1.2"),
        lambda text: text.replace("thin,\n", "thin, # tip\n"),
        _reordered,
        lambda text: (
            text.replace("chord_m", "chord_mm")
            .replace(" 1.0,", " 1000,")
            .replace(" 1.6", " 1600")
            .replace(" 1.2,", " 1200,")
            .replace(" 0.8", " 800")
            .replace(" 0.5, 0,", " 500, 0,")
        ),
    ],
    ids=[
        "CRLF",
        "BOM",
        "semicolon",
        "tab",
        "blank rows",
        "blank columns",
        "quotes",
        "comment",
        "comment behind",
        "order",
        "millimetres",
    ],
)
def test_tables_as_programs_write_them(tmp_path, blade, change):
    (tmp_path / "table.csv").write_bytes(change(TABLE).encode("utf-8"))
    assert equal_tables(load_blade(tmp_path / "blade.yaml"), blade)


def test_a_table_in_utf_16(tmp_path, blade):
    (tmp_path / "table.csv").write_bytes(TABLE.encode("utf-16"))
    assert equal_tables(load_blade(tmp_path / "blade.yaml"), blade)


@pytest.mark.parametrize("unit", ["m", "mm"])
def test_columns_used_by_name(tmp_path, unit):
    factor = 1000 if unit == "mm" else 1
    lines = TABLE.splitlines()
    widths = ["", "", 0.4 * factor, 0.3 * factor, "", 0.1 * factor, 0.1 * factor]
    table = "\n".join(
        [lines[0], f"{lines[1]}, band_{unit}", *(f"{a}, {w}" for a, w in zip(lines[2:], widths[1:], strict=True))]
    )
    blade = replaced(BLADE, "width: [[0, 0.4], [10, 0.1]]", f"width: band_{unit}")
    width = load_blade(write_blade(tmp_path, blade=blade, table=table)).layout.caps[0].width
    # blank cells are passed over: straight between the given ones, the ends held
    assert width([0.0, 1.0, 2.0, 6.0, 10.0]) == pytest.approx([0.4, 0.4, 0.35, 0.2, 0.1])


def test_a_faulty_column_is_told_only_where_it_is_used(tmp_path):
    lines = TABLE.splitlines()
    table = "\n".join([f"{lines[1]}, band_m", *(f"{line}, {k}x" for k, line in enumerate(lines[2:]))])
    with pytest.raises(InputError) as unused:
        load_blade(write_blade(tmp_path, table=table))
    assert [(problem.line, problem.field) for problem in unused.value.problems] == [(1, "band_m")]
    blade = replaced(BLADE, "width: [[0, 0.4], [10, 0.1]]", "width: band_m")
    with pytest.raises(InputError) as used:
        load_blade(write_blade(tmp_path, blade=blade, table=table))
    assert [problem.line for problem in used.value.problems] == [2, 3, 4, 5, 6, 7]
    assert "'0x' is not a number" in used.value.problems[0].text


def test_prebend_and_sweep(tmp_path):
    lines = TABLE.splitlines()
    table = "\n".join([f"{lines[1]}, prebend_mm, sweep_m", *(f"{line}, {k}, " for k, line in enumerate(lines[2:]))])
    stations = load_blade(write_blade(tmp_path, table=table)).stations
    assert stations.prebend == pytest.approx(np.arange(6) / 1000)
    assert stations.sweep.tolist() == [0] * 6


# ------------------------------------------------------------------------------------------------------ materials


def material(tmp_path: Path, text: str) -> Material:
    blade = replaced(BLADE, "E1: 41.0e9, E2: 11.4e9, G12: 3.9e9, nu12: 0.28, density: 1920, source: invented", text)
    return load_blade(write_blade(tmp_path, blade=blade)).materials["glass"]


def test_isotropic_material(blade):
    foam = blade.materials["foam"]
    assert foam.is_isotropic
    assert {foam.E1, foam.E2, foam.E3} == {0.05e9}
    assert foam.G12 == foam.G13 == foam.G23 == pytest.approx(0.05e9 / 2.6)


def test_what_an_orthotropic_material_leaves_out(tmp_path):
    glass = material(tmp_path, "E1: 41e9, E2: 11e9, G12: 4e9, nu12: 0.28, density: 1900")
    assert (glass.E3, glass.nu13, glass.G13, glass.nu23) == (11e9, 0.28, 4e9, 0.3)
    shear = glass.G23
    assert shear == pytest.approx(11e9 / 2.6)
    assert not glass.is_isotropic


def test_nu23_stays_where_a_material_is_stable(tmp_path):
    """Quasi-isotropic fabric: nu23 < 1 − 2 nu12² for E1 = E2 = E3, the root of Jones's determinant."""
    fabric = material(tmp_path, "E1: 20e9, E2: 20e9, G12: 8e9, nu12: 0.6, density: 1900")
    assert fabric.nu23 == pytest.approx(0.5 * (1 - 2 * 0.36))


@given(
    ratio=st.floats(0.02, 20),
    nu12=st.floats(-1.5, 1.5),
)
@settings(derandomize=True, deadline=None, max_examples=60)
def test_only_stable_materials_pass(tmp_path_factory, ratio, nu12):
    """The compliance of every accepted material has positive eigenvalues; NumPy finds them another way."""
    text = f"E1: {ratio * 1e10}, E2: 1e10, G12: 4e9, nu12: {nu12}, density: 1900"
    try:
        m = material(tmp_path_factory.mktemp("material"), text)
    except InputError:
        s = np.array([[1 / ratio, -nu12 / ratio], [-nu12 / ratio, 1.0]])
        full = np.array([[*s[0], s[0, 1]], [*s[1], 0.0], [s[0, 1], 0.0, 1.0]])  # with nu23 = 0, the mildest choice
        assert np.linalg.eigvalsh(full).min() <= 1e-9
        return
    compliance = np.array(
        [
            [1 / m.E1, -m.nu12 / m.E1, -m.nu13 / m.E1],
            [-m.nu12 / m.E1, 1 / m.E2, -m.nu23 / m.E2],
            [-m.nu13 / m.E1, -m.nu23 / m.E2, 1 / m.E3],
        ]
    )
    assert np.linalg.eigvalsh(compliance).min() > 0


# --------------------------------------------------------------------------------------------------- JSON Schema


def test_json_schema_knows_the_fields_of_the_contract():
    schema = json_schema()
    assert json.loads(json.dumps(schema)) == schema
    assert set(schema["properties"]) == {
        "title",
        "hand",
        "planform",
        "profiles",
        "materials",
        "layout",
        "plies",
        "mesh",
    }
    ply = schema["$defs"]["PlyFields"]
    assert ply["required"] == ["ply", "material", "thickness", "covers"]
    assert set(schema["$defs"]["LayoutFields"]["properties"]) == {"caps", "webs", "leading strip", "trailing strip"}

    def every_field(part: object) -> list[dict[str, object]]:
        if isinstance(part, dict):
            own = list(part["properties"].values()) if isinstance(part.get("properties"), dict) else []
            return own + [field for value in part.values() for field in every_field(value)]
        return [field for value in part for field in every_field(value)] if isinstance(part, list) else []

    fields = every_field(schema)
    assert len(fields) > 50
    assert all(field.get("description") for field in fields)
    assert '"null"' not in json.dumps(schema)


def test_reading_leaves_nothing_behind(tmp_path):
    path = write_blade(tmp_path)
    before = {entry: entry.stat().st_mtime_ns for entry in tmp_path.iterdir()}
    load_blade(os.fspath(path))
    assert {entry: entry.stat().st_mtime_ns for entry in tmp_path.iterdir()} == before
    assert (tmp_path / "thick.dat").read_text(encoding="utf-8") == PROFILE
