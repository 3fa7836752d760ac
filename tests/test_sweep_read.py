"""The sweep file, what it changes, and the texts that a variant is made of."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sweep_files import CASES, SWEEP, write_sweep, write_tiny_blade

from skinmesh.definition.blade import BladeDefinition
from skinmesh.definition.filetext import InputText, Source
from skinmesh.definition.problems import Findings
from skinmesh.definition.read import load_blade
from skinmesh.definition.spanwise import Spanwise
from skinmesh.definition.yamltree import read_document
from skinmesh.errors import InputError
from skinmesh.sweep.alter import altered_value, share
from skinmesh.sweep.paths import RefusedError, find_field
from skinmesh.sweep.plan import Change
from skinmesh.sweep.read import load_sweep
from skinmesh.sweep.texts import blade_texts, make_change, read_base, variant_blade, yaml_text
from skinmesh.sweep.variant import put_files

REPOSITORY = Path(__file__).parents[1]
BLADES = (
    "examples/marram-24/marram-24.yaml",
    "examples/tidal-6/tidal-6.yaml",
    "tests/published/research-rotor/research-rotor.yaml",
)


def plain(value: object) -> object:
    """A definition as values that compare by their content."""
    if isinstance(value, np.ndarray):
        return value.tolist() if value.dtype.kind != "f" else [repr(each) for each in value.ravel().tolist()]
    if isinstance(value, dict):
        return {key: plain(each) for key, each in value.items()}
    if isinstance(value, tuple | list):
        return [plain(each) for each in value]
    if hasattr(value, "__dict__"):
        return {"type": type(value).__name__, **{key: plain(each) for key, each in vars(value).items()}}
    return value


def without_files(blade: BladeDefinition) -> object:
    content = plain(blade)
    assert isinstance(content, dict)
    for key in ("sources", "lines"):
        del content[key]
    for profile in content["profiles"].values():
        profile.pop("file", None)
    return content


@pytest.mark.parametrize("blade", BLADES)
def test_a_blade_written_as_texts_is_the_same_blade(blade: str, tmp_path: Path) -> None:
    path = put_files(blade_texts(read_base(REPOSITORY / blade, file=blade)), tmp_path)
    assert without_files(load_blade(path)) == without_files(load_blade(REPOSITORY / blade))


NAMES = st.text(st.characters(codec="utf-8", exclude_categories=("Cc", "Cs", "Cn")), min_size=1, max_size=8)
SCALARS = st.one_of(
    st.booleans(),
    st.integers(-(10**15), 10**15),
    st.floats(allow_nan=False, allow_infinity=False),
    NAMES,
    st.sampled_from(["no", "~", "1e3", "0o17", "- a", "a: b", "#", "true", "{", "&a", "*a", "!x", ""]),
)
VALUES = st.recursive(
    SCALARS, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(NAMES, inner, max_size=3), max_leaves=8
)


@settings(deadline=None, max_examples=60, derandomize=True)
@given(st.dictionaries(NAMES, VALUES, min_size=1, max_size=4))
def test_plain_values_survive_being_written(data: dict[str, object]) -> None:
    findings = Findings()
    document = read_document(InputText("a", yaml_text(data), Source("a", "")), findings)
    assert document is not None
    assert not findings.problems
    assert document.data == data


def test_a_path_leads_to_its_field(tmp_path: Path) -> None:
    data = read_base(write_tiny_blade(tmp_path), file="tiny.yaml").data
    assert find_field(data, "layout.webs.web.span[1]") == ("layout", "webs", "web", "span", 1)
    assert find_field(data, "plies.cap.count") == find_field(data, "plies[1].count") == ("plies", 1, "count")
    assert find_field({"a.b": {"c": 1}, "a": {"b": 2}}, "a.b.c") == ("a.b", "c")
    for wrong, told in (
        ("layout.caps.main kap.width", "no field 'main kap' in 'layout.caps'; known: main cap — did you mean"),
        ("plies.kap.count", "no ply 'kap'; known: skin, cap — did you mean 'cap'?"),
        ("plies[2].count", "has the entries [0] to [1], not [2]"),
        ("mesh.size.x", "is a single value"),
        ("layout.webs.web.span.a", "name an entry by its number"),
    ):
        with pytest.raises(RefusedError, match=re.escape(told)):
            find_field(data, wrong)
    data["plies"][0]["ply"] = "cap"
    with pytest.raises(RefusedError, match=r"plies\[0\], plies\[1\]"):
        find_field(data, "plies.cap.count")


@settings(deadline=None, max_examples=60, derandomize=True)
@given(
    st.floats(0.5, 2.0),
    st.floats(1.0, 4.0),
    st.floats(0.0, 2.0),
    st.floats(0.5, 2.0),
)
def test_a_factor_over_a_span_is_whole_inside_and_nothing_outside(
    factor: float, start: float, length: float, ramp: float
) -> None:
    pairs = [[0.0, 3.0], [5.0, 1.0], [8.0, 2.0]]
    change = Change("a", "factor", ("x",), span=(start, start + length), ramp=ramp)
    made = np.array(altered_value(pairs, change, factor, blade_span=(0.0, 8.0)))
    before, after = Spanwise(*np.array(pairs).T), Spanwise(*made.T)
    z = np.linspace(0.0, 8.0, 401)
    part = share(z, change.span, ramp)
    inside, outside = part == 1.0, part == 0.0
    np.testing.assert_allclose(after(z[inside]), factor * before(z[inside]), rtol=1e-9)
    np.testing.assert_allclose(after(z[outside]), before(z[outside]), rtol=1e-9)
    # eight straight parts a ramp follow the curve to a hundredth of the change
    wanted = before(z) * (1.0 + part * (factor - 1.0))
    assert np.abs(after(z) - wanted).max() <= 0.01 * 3.0 * abs(factor - 1.0) + 1e-9


def test_values_of_every_form_change_as_they_should() -> None:
    span = (0.0, 10.0)
    assert altered_value(4, Change("a", "add", ("x",)), 2, blade_span=span) == 6
    assert isinstance(altered_value(4, Change("a", "factor", ("x",)), 1.5, blade_span=span), int)
    assert altered_value([1.0, 9.0], Change("a", "add", ("x",)), 0.5, blade_span=span) == [1.5, 9.5]
    assert altered_value([[0, 1.0], [9, 2.0]], Change("a", "factor", ("x",)), 2, blade_span=span) == [[0, 2], [9, 4]]
    assert altered_value("balsa", Change("a", "set", ("x",)), "foam", blade_span=span) == "foam"
    step = altered_value(1.0, Change("a", "set", ("x",), span=(4.0, 6.0)), 3.0, blade_span=span)
    assert step == [[0, 1], [3.999, 1], [4, 3], [6, 3], [6.001, 1], [10, 1]]
    for before in ("width_m", None, True, {"from_axis": 0.0}):
        with pytest.raises(RefusedError):
            altered_value(before, Change("a", "factor", ("x",)), 2.0, blade_span=span)


def test_a_column_changes_where_it_should_and_no_line_moves(tmp_path: Path) -> None:
    base = read_base(write_tiny_blade(tmp_path), file="tiny.yaml")
    change = Change("a", "factor", column="chord_m", span=(3.0, 4.0), ramp=3.0)
    made = make_change(base, change, 1.2)
    before, after = (load_blade(put_files(blade_texts(b), folder(tmp_path))).stations for b in (base, made))
    np.testing.assert_allclose(after.chord / before.chord, [1.0, 1 + 0.2 / 6, 1.1, 1.2, 1.2], rtol=1e-11)
    assert after.profile == before.profile
    assert np.array_equal(after.twist, before.twist)
    assert [bool(line) for line in made.table.split("\n")] == [False, *[True] * 6, False]
    shift = make_change(base, Change("a", "add", column="twist_deg"), -1.5)
    twist = load_blade(put_files(blade_texts(shift), folder(tmp_path))).stations.twist
    np.testing.assert_allclose(twist, before.twist - np.radians(1.5), atol=1e-12)
    with pytest.raises(RefusedError, match="no station lies"):
        make_change(base, Change("a", "factor", column="chord_m", span=(3.2, 3.8)), 1.2)


def folder(parent: Path) -> Path:
    made = parent / f"b{len(list(parent.iterdir()))}"
    made.mkdir()
    return made


GRID = """\
blade: tiny.yaml
changes:
  chord: {column: chord_m, factor: {from: 0.9, to: 1.1, steps: 3}}
  layers: {field: plies.cap.count, set: [3, 4]}
  material: {field: plies.cap.material, set: glass}
"""


@pytest.mark.parametrize(
    ("combine", "values"),
    [
        ("grid", [(0.9, 3), (0.9, 4), (1.0, 3), (1.0, 4), (1.1, 3), (1.1, 4)]),
        ("one by one", [(None, None), (0.9, None), (1.0, None), (1.1, None), (None, 3), (None, 4), (None, None)]),
    ],
)
def test_values_combine(combine: str, values: list[tuple[float, int]], tmp_path: Path) -> None:
    plan = load_sweep(write_sweep(tmp_path, f"{GRID}combine: {combine}\n"))
    assert [(v.values.get("chord"), v.values.get("layers")) for v in plan.variants] == values
    assert [v.number for v in plan.variants] == list(range(1, len(values) + 1))
    assert plan.order.sections == (1.0, 2.0, 3.0)


def test_cases_give_every_variant_its_values_and_its_name(tmp_path: Path) -> None:
    plan = load_sweep(write_sweep(tmp_path))
    assert len(plan.variants) == 12
    assert plan.variants[1].name == "case 2"
    assert plan.variants[1].values == {"outer chord": 1.02, "layers": 4}
    assert variant_blade(plan.base, plan.changes, plan.variants[1].values).data["plies"][1]["count"] == 4
    assert plan.base.data["plies"][1]["count"] == 4


def problems(path: Path) -> str:
    with pytest.raises(InputError) as refused:
        load_sweep(path)
    return str(refused.value)


def test_all_mistakes_are_told_at_once_with_line_and_nearest_name(tmp_path: Path) -> None:
    text = """\
blade: tiny.yaml
changes:
  a: {feild: plies.cap.count, set: 3}
  b: {column: cord_m, factor: [1.0, x]}
  c: {column: cord_m, factor: 1.1}
  d: {field: plies.cap.thicknes, set: 1e-3}
  e: {field: plies.cap.angel, set: 45}
  f: {field: plies.cap.span, set: 3, add: 1}
  g: {column: chord_m, factor: 1.1, ramp: 2}
  h: {field: plies.skin.material, factor: 2}
combin: grid
sections: [99]
write: [vtx]
"""
    told = problems(write_sweep(tmp_path, text, cases=None))
    path = tmp_path / "twelve.yaml"
    for line in (
        "line 3, changes.a.feild: there is no such field; known: field, column, set",
        "line 4, changes.b.factor: 'x' is not a number",
        "line 5, changes.c: no column 'cord_m'; known: z_m, chord_m, twist_deg, pitch_axis, profile — did you mean",
        "line 6, changes.d.field: no field 'thicknes' in 'plies[1]'",
        "did you mean 'thickness'?",
        "line 7, changes.e.field: 'plies[1].angel': there is no such field",
        "did you mean 'angle'?",
        "line 8, changes.f: must have one of set, factor, add, got set and add",
        "line 9, changes.g.ramp: belongs to a span",
        "line 10, changes.h: its value is the text 'glass'",
        "line 11, combin: there is no such field",
        "did you mean 'combine'?",
        "line 12, sections: z = 99 lies outside the blade, which goes from 0 to 4 m",
        "line 13, write: no format 'vtx'; known: ",
    ):
        assert line in told, told
    assert told.startswith(f"{path}: ")


def test_mistakes_in_cases_and_in_the_blade_are_told_beside_those_of_the_sweep(tmp_path: Path) -> None:
    path = write_sweep(tmp_path, cases=CASES.replace("layers, size", "layer, size").replace("1.03", "1,03"))
    told = problems(path)
    assert "line 1, layer: no change 'layer'; known: outer chord, layers, size, name — did you mean 'layers'?" in told
    assert "line 1: the column 'layers' is missing" in told
    write_tiny_blade(tmp_path, ("count: 4", "count: -4"))
    path.write_text(SWEEP.replace("cases: twelve-cases.csv\n", "combine: grid\n"))
    told = problems(path)
    assert "line 4, changes.outer chord: takes its values from 'cases', but no table is named" in told
    assert "plies[1].count: must lie between 0 and 1000, got -4" in told
    path.write_text("blade: nowhere.yaml\nchanges: {}\n")
    told = problems(path)
    assert "no such file: the blade file is not at" in told
    assert "line 2, changes: " in told


def test_lists_that_go_together_must_be_as_long(tmp_path: Path) -> None:
    told = problems(write_sweep(tmp_path, f"{GRID}combine: together\n"))
    assert "chord has 3, layers has 2, material has 1" in told
