"""Random input gives a blade or reasons, and nothing else."""

from __future__ import annotations

import json
from pathlib import Path

from blade_files import BLADE, write_blade
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from skinmesh.definition.filetext import read_text
from skinmesh.definition.problems import Findings
from skinmesh.definition.read import load_blade
from skinmesh.definition.table import read_table
from skinmesh.errors import InputError, Problem

WORDS = st.sampled_from(
    [
        "a",
        "title",
        "plies",
        "mesh",
        "profiles",
        "layout",
        "caps",
        "{",
        "}",
        "[",
        "]",
        ":",
        ": ",
        "- ",
        "&a ",
        "*a",
        "!!int ",
        "!x ",
        "|",
        ">",
        "'",
        '"',
        "\n",
        "\n  ",
        "\n\n",
        "#",
        "1e9",
        ".5",
        "-",
        ",",
        "\t",
        "\u00e9",
        "\x85",
        "null",
        "true",
        "?",
        "%",
        "@",
        "`",
        "circle",
        "across",
        "centre",
        "width",
        "covers",
        "planform",
        "table.csv",
    ]
)
TEXTS = st.one_of(st.text(max_size=200), st.lists(WORDS, max_size=40).map("".join))


def refused_or_read(path: Path) -> None:
    """A blade, or reasons that can be shown; anything else is an error of the test."""
    problems: tuple[Problem, ...] = ()
    try:
        load_blade(path)
    except InputError as error:
        problems = error.problems or (Problem("", -1, "", ""),)
    assert all(problem.text and problem.line >= 0 for problem in problems)


@given(text=TEXTS)
@example(text="a: 2001-12-14t21:59:43.10-05:00")
@example(text='planform: "a\\0b"\nprofiles: {}')
@example(text="planform: " + "x" * 300 + "\nprofiles: {a: {file: " + "x" * 300 + "}}")
@example(text="profiles: {a: {naca: [1]}}\nplies: {0: 1}")
@example(text="mesh: {size: [[0, 1], [1]]}")
@settings(derandomize=True, deadline=None, max_examples=250, suppress_health_check=list(HealthCheck))
def test_random_blade_files(tmp_path_factory, text):
    folder = tmp_path_factory.mktemp("random")
    path = write_blade(folder)
    path.write_bytes(text.encode("utf-8", errors="surrogatepass"))
    refused_or_read(path)


@given(data=st.binary(max_size=120), name=st.sampled_from(["blade.yaml", "table.csv", "thick.dat"]))
@settings(derandomize=True, deadline=None, max_examples=100, suppress_health_check=list(HealthCheck))
def test_random_bytes(tmp_path_factory, data, name):
    path = write_blade(tmp_path_factory.mktemp("random"))
    (path.parent / name).write_bytes(data)
    refused_or_read(path)


VALUES = st.recursive(
    st.one_of(
        st.none(), st.booleans(), st.integers(-3, 30), st.floats(), st.sampled_from(["skin", "chord_m", "x", "1,5"])
    ),
    lambda inner: st.one_of(
        st.lists(inner, max_size=3), st.dictionaries(st.sampled_from(["cap", "root", "E", "a"]), inner, max_size=2)
    ),
    max_leaves=5,
)
PLACES = [
    "clockwise",
    "table.csv",
    "{circle: true}",
    "thick.dat",
    "41.0e9",
    "80",
    "{from_axis: 0.0}",
    "[[0, 0.4], [10, 0.1]]",
    "{cap: main cap, across: 0.2}",
    "[1.0, 9.0]",
    "{suction: {chord: 0.6}, pressure: {arc: 0.7}}",
    "0.9e-3",
    "45",
    "[skin]",
    "[0.4, 9.5]",
    "{root: 0.1}",
    "0.12",
    "{main cap: 6}",
    "0.004\n",
]


@given(place=st.sampled_from(PLACES), value=VALUES)
@settings(derandomize=True, deadline=None, max_examples=300, suppress_health_check=list(HealthCheck))
def test_any_value_in_any_field(tmp_path_factory, place, value):
    text = json.dumps(value).replace("NaN", ".nan").replace("Infinity", ".inf")
    head, found, tail = BLADE.partition(place)
    assert found
    path = write_blade(
        tmp_path_factory.mktemp("random"), blade=f"{head}{text}\n{tail}" if "\n" in place else head + text + tail
    )
    refused_or_read(path)


CELLS = st.sampled_from(
    [
        "z_m",
        "chord_m",
        "twist_deg",
        "pitch_axis",
        "profile",
        "0",
        "1",
        "-1",
        "1e400",
        "nan",
        "ring",
        "",
        '"',
        "#",
        ",",
        ";",
        "\t",
        "\n",
        "\r\n",
        "1,5",
        "x",
        "\ufeff",
    ]
)


@given(cells=st.lists(CELLS, max_size=60))
@settings(derandomize=True, deadline=None, max_examples=200, suppress_health_check=list(HealthCheck))
def test_random_tables(tmp_path_factory, cells):
    path = tmp_path_factory.mktemp("random") / "table.csv"
    path.write_text(",".join(cells), encoding="utf-8", newline="")
    findings = Findings()
    source = read_text(path, "table.csv", findings=findings, kind="station table")
    table = read_table(source, findings) if source else None
    assert findings.problems or (table is not None and table.is_sound)


@given(
    lines=st.lists(
        st.sampled_from(
            ["1 0", "0 0", "0.5 0.1", "0.5 -0.1", "5 5", "nan 0", "title", "", "1 2 3", "1,0 2,0", "1e999 0"]
        ),
        max_size=30,
    )
)
@settings(derandomize=True, deadline=None, max_examples=200, suppress_health_check=list(HealthCheck))
def test_random_profiles(tmp_path_factory, lines):
    path = write_blade(tmp_path_factory.mktemp("random"), profile="\n".join(lines))
    refused_or_read(path)
