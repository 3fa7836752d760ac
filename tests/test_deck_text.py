"""Deck text: names, numbers, blocks."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_meshes import BALSA, GLASS_UD, box_with_web, sandwich, tube
from solver_runs import STEEL, twisted_tube

from skinmesh.laminate.merge import merge_equal_layers
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.write.deck_text import (
    ascii_text,
    element_groups,
    exact,
    number_lines,
    rows_text,
    safe_names,
    split_labels,
)
from skinmesh.write.formats.bdf import long_field, real_field
from skinmesh.write.ply_directions import TOLERANCE, share_directions


@given(st.lists(st.text(max_size=100)))
def test_names_are_safe_and_all_different(names):
    result = safe_names(names, taken=["ALL"])
    assert set(result) == set(names)
    assert len(set(result.values()) | {"ALL"}) == len(result) + 1
    assert all(re.fullmatch(r"[A-Z][A-Z0-9_]{0,79}", deck_name) for deck_name in result.values())


def test_names_read_like_the_users():
    assert safe_names(["station 00", "fore web suction foot"]) == {
        "station 00": "STATION_00",
        "fore web suction foot": "FORE_WEB_SUCTION_FOOT",
    }
    assert safe_names(["all", "x" * 90, "x" * 91], taken=["ALL"]) == {
        "all": "ALL_2",
        "x" * 90: "X" * 80,
        "x" * 91: "X" * 78 + "_2",
    }


@given(st.text())
def test_comment_text_is_one_line_of_ascii(text):
    assert re.fullmatch(r"[ -~]*", ascii_text(text))


@given(st.lists(st.integers(1, 10**8)), st.integers(1, 20))
def test_number_lines_lose_nothing(numbers, per_line):
    text = number_lines(np.array(numbers, dtype=np.int64), per_line=per_line)
    assert [int(part) for part in text.replace("\n", "").split(",") if part] == numbers
    assert all(line.count(",") <= per_line for line in text.splitlines())
    # A comma at the end of the last line would ask for one more line.
    assert not text.endswith(",\n")


@given(st.lists(st.floats(allow_nan=False, allow_infinity=False, width=64), min_size=1))
def test_numbers_of_the_keyword_deck_fit_twenty_characters(values):
    array = exact(np.array(values))
    array = array[np.abs(array) < 1e90]
    for value, text in zip(array, "".join(rows_text("%.14g\n", [array])).split(), strict=True):
        assert len(text) <= 20
        assert float(text) == pytest.approx(value, rel=1e-13, abs=0)


@given(st.floats(-1e12, 1e12))
def test_fields_of_bulk_data_fit_and_hold_the_nearest_number(value):
    for write, width, error in ((real_field, 8, 5e-3), (long_field, 16, 2e-9)):
        text = write(value)
        assert len(text) <= width
        assert "." in text
        found = float(re.sub(r"(?<=[0-9.])([+-])", r"e\1", text))
        assert found == pytest.approx(value, rel=error, abs=1e-90)


@pytest.mark.parametrize("n_rows", [0, 1, 49_999, 50_000, 120_001])
def test_rows_in_blocks_are_rows(n_rows):
    numbers = np.arange(n_rows)
    assert "".join(rows_text("%d;%s\n", [numbers, ["x"] * n_rows])) == "".join(f"{k};x\n" for k in range(n_rows))


def test_split_labels_is_a_partition():
    label = np.random.default_rng(3).integers(-1, 5, 200)
    parts = split_labels(label, 6)
    assert [label[part].tolist() for part in parts] == [[k] * np.count_nonzero(label == k) for k in range(6)]
    assert all(np.all(np.diff(part) > 0) for part in parts)


def test_groups_of_elements():
    mesh = box_with_web(layers=sandwich())
    groups = element_groups(mesh)
    assert list(groups) == [
        "suction panel",
        "pressure panel",
        "fore web",
        "suction",
        "pressure",
        "webs",
        "stack 1",
        "without plies",
    ]
    assert np.array_equal(groups["without plies"], np.flatnonzero(mesh.region == 2))
    assert sorted(np.concatenate([groups["suction"], groups["pressure"], groups["webs"]])) == list(
        range(len(mesh.cells))
    )


def test_merging_keeps_thickness_order_and_mass():
    layers = (
        Layer("a", GLASS_UD, 1e-3, 0.0),
        Layer("b", GLASS_UD, 2e-3, 0.0),
        Layer("c", BALSA, 5e-3, 0.0),
        Layer("d", GLASS_UD, 1e-3, 0.3),
        Layer("e", GLASS_UD, 1e-3, -0.3),
        Layer("f", STEEL, 1e-3, 0.3),
        Layer("g", STEEL, 1e-3, 0.0),
    )
    stack = Stack(layers)
    merged = Stack(merge_equal_layers(stack))
    assert [(layer.material.name, layer.angle) for layer in merged.layers] == [
        ("glass UD", 0.0),
        ("balsa", 0.0),
        ("glass UD", 0.3),
        ("glass UD", -0.3),
        ("steel", 0.0),
    ]
    assert merged.thickness == pytest.approx(stack.thickness, rel=1e-14)
    assert merged.areal_mass == pytest.approx(stack.areal_mass, rel=1e-14)
    assert merge_equal_layers(merged) == merged.layers


@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_shared_directions_are_few_and_right(shape):
    mesh = twisted_tube(80, 60, layers=sandwich(), shape=shape)
    shared = share_directions(mesh, [merge_equal_layers(stack) for stack in mesh.stacks])
    assert shared.error.max() <= TOLERANCE
    assert shared.is_along_z.all()
    assert len(shared.vectors) < len(mesh.cells) / 3
    assert np.linalg.norm(shared.vectors, axis=2) == pytest.approx(1.0)
    own = share_directions(mesh, [merge_equal_layers(stack) for stack in mesh.stacks], tolerance=0.0)
    assert len(own.vectors) == len(mesh.cells)
    assert own.error.max() < 1e-12


def test_the_number_of_directions_does_not_grow_with_the_mesh():
    counts = []
    for n in (40, 160):
        mesh = tube(n, 10 * n // 40, layers=sandwich(), taper=0.9)
        counts.append(len(share_directions(mesh, [mesh.stacks[0].layers]).vectors))
    assert counts[1] <= 4 * counts[0]


def test_axes_that_are_not_the_pitch_axis_get_their_own_directions():
    mesh = twisted_tube(16, 8, layers=(Layer("a", GLASS_UD, 0.001, 0.0),))
    turned = replace(mesh, e1=mesh.e2, e2=-mesh.e1)
    shared = share_directions(turned, [mesh.stacks[0].layers])
    assert not shared.is_along_z.any()
    assert shared.error.max() <= TOLERANCE
    assert shared.bunch.min() >= 0
