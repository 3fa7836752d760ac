"""Input that can be built and is probably not meant."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from blades import blade, rule, stations

import skinmesh
from skinmesh.definition.blade import FileProfile, NacaProfile
from skinmesh.mesh.build import build_mesh
from skinmesh.surface.doubts import doubtful_profiles, doubtful_stations
from skinmesh.surface.profile import naca_loop

ROOT = Path(__file__).parents[1]


def file_profile(digits: int | None, n_step: int = 2) -> FileProfile:
    loop = naca_loop("4430", 0.01)[::n_step]
    points = np.column_stack([loop.real, loop.imag])
    points = points if digits is None else np.round(points, digits)
    is_new = np.r_[True, np.any(np.diff(points, axis=0) != 0.0, axis=1)]  # as the reader drops what stands twice
    return FileProfile("own.dat", points[is_new])


def test_typing_errors_in_the_table_stand_out():
    table = stations([0, 1, 2, 3], [2.0, 2.2, 25.0, 1.8], ["n"] * 4, twist_degrees=[12, 105, 9, 8])
    told = doubtful_stations(table)
    assert len(told) == 2
    assert "station 02" in told[1]
    assert "chord of 25 m" in told[1]
    assert "twist of 105°" in told[0]


@pytest.mark.parametrize("name", ["examples/marram-24", "examples/tidal-6", "tests/published/research-rotor"])
def test_sound_blades_raise_no_doubt(name):
    definition = skinmesh.load(ROOT / name / f"{Path(name).name}.yaml")
    assert doubtful_stations(definition.stations) == ()
    if "rotor" not in name:  # the published profile has five digits
        assert doubtful_profiles(definition.profiles) == ()


@pytest.mark.parametrize(("digits", "is_doubtful"), [(None, False), (7, False), (4, True), (3, True)])
def test_rounded_profiles_are_named(digits, is_doubtful):
    told = doubtful_profiles({"own": file_profile(digits)})
    assert bool(told) == is_doubtful
    if told:
        assert "own.dat" in told[0]


def test_rounding_of_a_profile_does_not_multiply_elements():
    table = stations([0, 5], [2.0, 1.5], ["p", "p"], pitch_axis=0.3)
    counts = [
        len(build_mesh(blade(table, {"p": file_profile(digits, n_step=1)}, mesh=rule(0.1))).cells)
        for digits in (None, 4)
    ]
    assert counts[1] < 1.1 * counts[0]


def test_build_tells_its_doubts():
    table = stations([0, 2, 5], [2.0, 20.0, 1.5], ["n", "n", "n"], pitch_axis=0.3)
    mesh = build_mesh(blade(table, {"n": NacaProfile("0021")}, mesh=rule(0.5)))
    assert "stands out" in mesh.report.warnings[0]
