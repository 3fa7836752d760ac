"""Profile files in both public orderings, and a large public collection of them."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
from blade_files import PROFILE
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from skinmesh.definition.blade import Source
from skinmesh.definition.coordinates import read_coordinates
from skinmesh.definition.filetext import InputText, read_text
from skinmesh.definition.problems import Findings

Floats = NDArray[np.float64]


def read(text: str) -> Floats:
    findings = Findings()
    loop = read_coordinates(InputText("a.dat", text, Source("a.dat", "")), findings)
    assert loop is not None, findings.problems
    assert not findings.problems
    return loop


def refusal(text: str) -> str:
    findings = Findings()
    assert read_coordinates(InputText("a.dat", text, Source("a.dat", "")), findings) is None
    (problem,) = findings.problems
    return problem.text


def listed(points: Floats) -> str:
    return "\n".join(f"{x:.10g} {y:.10g}" for x, y in points)


# a cambered outline by a formula, sharp at its trailing edge, 41 points: suction side first
def outline(n: int = 21, *, gap: float = 0.0) -> Floats:
    x = 0.5 * (1 + np.cos(np.linspace(0, np.pi, n)))
    half = 0.3 * np.sqrt(x) * (1 - x) + 0.5 * gap * x
    camber = 0.2 * x * (1 - x)
    return np.vstack([np.column_stack([x, camber + half]), np.column_stack([x, camber - half])[-2::-1]])


LOOP = outline()


def test_one_loop():
    assert read(f"title\n{listed(LOOP)}\n") == pytest.approx(LOOP)


@pytest.mark.parametrize("gap", [0.0, 0.002, 0.1, 0.25])
def test_sharp_and_blunt(gap):
    loop = outline(gap=gap)
    assert read(listed(loop)) == pytest.approx(loop)


def test_pressure_side_first():
    assert read(listed(LOOP[::-1])) == pytest.approx(LOOP)


@pytest.mark.parametrize("scale", [1e-3, 100.0, 2500.0])
def test_any_chord_length_stays_in_the_file_s_unit(scale):
    assert read(listed(LOOP * scale)) == pytest.approx(LOOP * scale)


def two_blocks(first: Floats, second: Floats, *, counts: str = "{} {}") -> str:
    return f"title\n{counts.format(len(first), len(second))}\n\n{listed(first)}\n\n{listed(second)}\n"


@pytest.mark.parametrize("counts", ["{} {}", "  {}.  {}.", "{}.0, {}.0"])
def test_two_blocks(counts):
    suction, pressure = LOOP[20::-1], LOOP[20:]
    assert read(two_blocks(suction, pressure, counts=counts)) == pytest.approx(LOOP)


def test_two_blocks_with_the_pressure_side_first():
    suction, pressure = LOOP[20::-1], LOOP[20:]
    assert read(two_blocks(pressure, suction)) == pytest.approx(LOOP)


def test_two_blocks_without_a_common_leading_edge():
    suction, pressure = LOOP[20::-1], LOOP[21:]
    assert read(two_blocks(suction, pressure)) == pytest.approx(LOOP)


def test_a_loop_of_two_small_numbers_is_no_line_of_counts():
    """A chord of 12 with a first point (12, 2) looks like counts, and is not."""
    loop = np.vstack([[12.0, 2.0], 12 * LOOP[1:-1], [12.0, -2.0]])
    assert read(listed(loop)) == pytest.approx(loop)


@pytest.mark.parametrize("titles", ["", "one\n", "one\n\ntwo 3\n4 5 6\n", "NACA 4412\n", "x y\n", "#\n# 1\n"])
def test_any_number_of_title_lines(titles):
    assert read(titles + listed(LOOP)) == pytest.approx(LOOP)


@pytest.mark.parametrize("tail", ["\n", "\n\nsource: measured\n1 2 3\nhttp://example.org\n"])
def test_text_behind_the_points(tail):
    assert read(listed(LOOP) + tail) == pytest.approx(LOOP)


@pytest.mark.parametrize("separator", [" ", "\t", ",", ", ", ";", "    "])
def test_separators(separator):
    assert read(listed(LOOP).replace(" ", separator)) == pytest.approx(LOOP)


def test_exponents():
    text = "\n".join(f"{x:.8E} {y:.8E}".replace("E", "D" if k % 2 else "e") for k, (x, y) in enumerate(LOOP))
    assert read(text) == pytest.approx(LOOP, abs=1e-8)


def test_repeated_points_are_dropped():
    assert read(listed(np.repeat(LOOP, 2, axis=0))) == pytest.approx(LOOP)


@pytest.mark.parametrize("shift", [5, 20, 33])
def test_a_closed_loop_may_start_anywhere(shift):
    turned = np.vstack([LOOP[shift:], LOOP[1 : shift + 1]])
    assert read(listed(turned)) == pytest.approx(LOOP)


def test_a_loop_that_starts_within_its_blunt_base():
    base = np.array([[1.0, 0.0]])
    loop = np.vstack([base, outline(gap=0.1), base])
    assert read(listed(loop)) == pytest.approx(loop)


def test_the_outline_of_the_test_blade():
    loop = read(PROFILE)
    assert len(loop) == 21
    assert loop[0].tolist() == [100, 1.5]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda p: p[:21], "is no loop"),
        (lambda p: np.vstack([p[20::-1], p[20:]]), "is no loop"),
        (lambda p: p[[0, 10, 20, 30, 40]], "at least 10"),
        (lambda p: p[[*range(8), 12, 9, 10, 11, 8, *range(13, 41)]], "out of order"),
        (lambda p: np.vstack([p[:5], p[3:4], p[5:]]), "jumps back"),
        (lambda p: p * [1, 0], "one line"),
        (lambda p: p[:, ::-1], "as high as long"),
    ],
    ids=["half", "blocks without counts", "few", "swapped", "back", "flat", "sides"],
)
def test_what_is_no_profile(change, words):
    assert words in refusal(listed(change(LOOP)))


def test_sides_that_cross_at_the_trailing_edge():
    assert "crosses itself near (0.99" in refusal(listed(np.vstack([[1, -0.02], LOOP[1:-1], [1, 0.02]])))


@pytest.mark.parametrize("place", range(2, 39))
def test_every_crossing_is_found(place):
    """A point thrown over to the other side is seen wherever it is."""
    thrown = LOOP.copy()
    thrown[place, 1] = 0.2 * LOOP[place, 0] * (1 - LOOP[place, 0]) - 3 * (LOOP[place, 1] - LOOP[40 - place, 1]) / 2
    if place == 20:  # the leading edge has no other side
        thrown[place] = [0.5, 0.5]
    assert refusal(listed(thrown))


@given(
    n=st.integers(12, 60),
    angle=st.floats(-0.3, 0.3),
    scale=st.floats(1e-3, 1e4),
    gap=st.floats(0, 0.2),
    is_reversed=st.booleans(),
)
@settings(derandomize=True, deadline=None, max_examples=60)
def test_every_sound_loop_reads(n, angle, scale, gap, is_reversed):
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    loop = scale * outline(n, gap=gap) @ turn
    found = read(listed(loop[::-1] if is_reversed else loop))
    assert found == pytest.approx(loop, rel=1e-8, abs=1e-8 * scale)


# ------------------------------------------------------------------------------------- a collection of public airfoils


@pytest.mark.slow
@pytest.mark.skipif(
    "SKINMESH_AIRFOILS" not in os.environ,
    reason="SKINMESH_AIRFOILS names no folder with the coordinate files of the PyPI package AeroSandbox",
)
def test_a_large_public_collection():
    """Every file reads, or is refused for a reason that was found true on looking.

    Looked at: naca23021.dat has dots in the place of two numbers; mh112.dat ends on the pressure side at 86 % of the
    chord.
    """
    files = sorted(Path(os.environ["SKINMESH_AIRFOILS"]).glob("*.dat"))
    assert len(files) > 2000
    refused = {}
    for file in files:
        findings = Findings()
        text = read_text(file, file.name, findings=findings, kind="profile file", is_strict=False)
        loop = read_coordinates(text, findings) if text else None
        if loop is None:
            refused[file.name] = next(iter(findings.problems)).text
            continue
        x, y = loop.T
        assert np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y) > 0
        assert min(x[0], x[-1]) > x.min() + 0.9 * np.ptp(x)
    true_reasons = {"naca23021.dat": "'0.0000 ......' stands between the points", "mh112.dat": "14% of the chord ahead"}
    assert set(refused) <= set(true_reasons)
    assert all(true_reasons[name] in text for name, text in refused.items())
