"""The loft: through its stations, without overshoot, without kinks, fast."""

from __future__ import annotations

import time

import numpy as np
import pytest
from blades import blade, demonstration, stations
from scipy.interpolate import PchipInterpolator

from skinmesh.definition.blade import CircleProfile, FileProfile, NacaProfile
from skinmesh.surface.loft import loft_surface
from skinmesh.surface.profile import naca_loop, read_unit_shape

T = np.linspace(-1.0, 1.0, 801)


def test_loft_goes_through_every_named_station():
    definition = demonstration()
    surface = loft_surface(definition)
    table = definition.stations
    for i, name in enumerate(table.profile):
        if name is None:
            continue
        shape = read_unit_shape(definition.profiles[name])
        unit = np.where(T < 0, shape.pressure(np.abs(T)), shape.suction(np.abs(T)))
        section = (shape.origin + shape.scale * unit - table.pitch_axis[i]) * table.chord[i]
        plane = table.sweep[i] + 1j * table.prebend[i] + section * np.exp(1j * table.twist[i])
        points = surface.points(table.z[i], T)
        assert np.abs(points[:, 1] + 1j * points[:, 0] - plane).max() < 1e-6 * table.chord[i]


def test_points_of_a_profile_file_lie_on_the_loft():
    loop = naca_loop("2412", 0.004)[::7]
    noisy = loop + 2e-5 * np.random.default_rng(4).standard_normal(len(loop)) * 1j
    file = FileProfile("noisy.dat", 250.0 * np.column_stack([noisy.real, noisy.imag]))
    table = stations([0.0, 2.0, 5.0], [1.5, 1.0, 0.5], ["file", "file", "ring"], pitch_axis=0.3)
    surface = loft_surface(blade(table, {"file": file, "ring": CircleProfile()}))
    trailing = 0.5 * (noisy[0] + noisy[-1])
    wanted = (noisy / trailing.real - 0.3) * 1.0
    section = surface.section(2.0, np.linspace(-1, 1, 40001))
    assert np.abs(section[:, None] - wanted).min(axis=0).max() < 3e-5  # half the spacing of the dense section
    # and exactly, where the parameter of a file point is known: both ends of the loop
    assert abs(section[-1] - wanted[0]) < 1e-12
    assert abs(section[0] - wanted[-1]) < 1e-12


def test_equal_neighbours_stay_equal():
    table = stations(
        [0, 1, 2, 5, 9], [1.2, 1.2, 1.2, 2.0, 0.5], ["ring", "ring", "ring", "n", "n"], twist_degrees=[9, 9, 9, 5, 0]
    )
    surface = loft_surface(blade(table, {"ring": CircleProfile(), "n": NacaProfile("4424")}))
    z = np.linspace(0.0, 2.0, 41)[:, None]
    assert np.abs(surface.points(z, T)[..., :2] - surface.points(0.0, T)[..., :2]).max() < 1e-12


def test_nothing_overshoots_between_stations():
    definition = demonstration()
    surface = loft_surface(definition)
    z = np.linspace(*surface.z_ends, 4001)
    table = definition.stations
    for values, known in ((surface.chord(z), table.chord), (surface.twist(z), table.twist)):
        i = np.clip(np.searchsorted(table.z, z, side="right") - 1, 0, len(table.z) - 2)
        low, high = np.minimum(known[i], known[i + 1]), np.maximum(known[i], known[i + 1])
        assert np.all(values >= low - 1e-12)
        assert np.all(values <= high + 1e-12)


def test_no_kink_in_span_wise_slope():
    surface = loft_surface(demonstration())
    inner = surface.stations[1:-1, None]
    before, after = (surface.tangents(inner + e, T)[1] for e in (-1e-9, 1e-9))
    assert np.abs(after - before).max() < 1e-6


def test_sections_between_stations_have_no_crease():
    """Where the profiles turn smoothly, so does every blend of them: no jump from one knot interval to the next."""
    definition = demonstration()
    surface = loft_surface(definition)
    z = np.linspace(*surface.z_ends, 241)[:, None]
    for side, sign in enumerate((-1.0, 1.0)):
        knots = surface.knots[side][5:-5]
        before, after = (surface.section_rates(z, sign * (knots + e))[1] for e in (-1e-9, 1e-9))
        assert np.abs(np.angle(after / before)).max() < 1e-6
        # and over a tenth of a per cent of the chord the direction turns by little, away from the nose
        t = sign * np.linspace(0.2, 0.99, 3000)
        direction = surface.section_rates(z, t)[1]
        assert np.degrees(np.abs(np.angle(direction[:, 1:] / direction[:, :-1]))).max() < 0.1


def test_trailing_edges_never_change_places():
    """A sharp station between a round one and a blunt one: the gap stays between its neighbours' gaps."""
    profiles = {"ring": CircleProfile(), "sharp": NacaProfile("0012", 0.0), "blunt": NacaProfile("4430", 0.05)}
    for names in (["ring", "sharp", "blunt", "ring"], ["blunt", "sharp", "ring", "blunt"]):
        surface = loft_surface(blade(stations([0, 1, 2, 5], [1, 1, 1, 1], names), profiles))
        z = np.linspace(0, 5, 501)
        gap = surface.section(z, np.ones_like(z)) - surface.section(z, -np.ones_like(z))
        assert gap.imag.min() > -1e-12
        assert gap.imag.max() < 0.05 + 1e-12


def test_nose_is_smooth_everywhere_along_the_span():
    surface = loft_surface(demonstration())
    z = np.linspace(*surface.z_ends, 301)
    pressure, suction = (surface.section_rates(z, t)[1] for t in (-1e-12, 1e-12))
    assert np.abs(np.angle(suction / pressure)).max() < 1e-8


def test_tangents_are_the_derivatives_of_the_points():
    surface = loft_surface(demonstration(hand="counter-clockwise"))
    rng = np.random.default_rng(1)
    z, t, e = rng.uniform(0.1, 23.9, 500), rng.uniform(-0.98, 0.98, 500), 1e-6
    by_t, by_z = surface.tangents(z, t)
    np.testing.assert_allclose(by_t, (surface.points(z, t + e) - surface.points(z, t - e)) / (2 * e), atol=1e-5)
    np.testing.assert_allclose(by_z, (surface.points(z + e, t) - surface.points(z - e, t)) / (2 * e), atol=1e-5)


def test_counter_clockwise_is_the_mirror_image():
    here, there = (loft_surface(demonstration(hand=hand)) for hand in ("clockwise", "counter-clockwise"))
    z = np.linspace(0, 24, 31)[:, None]
    np.testing.assert_array_equal(here.points(z, T) * [1, -1, 1], there.points(z, T))


def test_signs_of_twist_prebend_and_sweep():
    table = stations(
        [0, 1], [1.0, 1.0], ["n", "n"], twist_degrees=10.0, pitch_axis=0.25, prebend=[0.0, 0.2], sweep=[0.0, 0.1]
    )
    surface = loft_surface(blade(table, {"n": NacaProfile("0012")}))
    nose = surface.points([0.0, 1.0], 0.0)
    # positive twist turns the leading edge away from the suction side, which is +x; prebend is +x, sweep +y
    np.testing.assert_allclose(nose[0], [-0.25 * np.sin(np.radians(10)), -0.25 * np.cos(np.radians(10)), 0.0])
    np.testing.assert_allclose(nose[1] - nose[0], [0.2, 0.1, 1.0], atol=1e-12)
    assert surface.points(0.0, 0.5)[0] > surface.points(0.0, -0.5)[0]


@pytest.mark.parametrize("ratio", [0.3, 0.5, 0.8])
def test_thickness_ratio_sets_the_blend_of_a_blank_station(ratio):
    table = stations([0, 1, 2], [1.0, 1.0, 1.0], ["ring", None, "n"], ratio=[np.nan, ratio, np.nan])
    surface = loft_surface(blade(table, {"ring": CircleProfile(), "n": NacaProfile("0018")}))
    section = surface.section(1.0, np.linspace(0, 1, 4001))
    assert 2.0 * section.imag.max() == pytest.approx(ratio, abs=1e-5)


def test_thickness_ratio_scales_a_named_station():
    table = stations([0, 1], [1.0, 1.0], ["n", "n"], ratio=[0.24, np.nan])
    surface = loft_surface(blade(table, {"n": NacaProfile("0012")}))
    x = np.linspace(-0.49, 0.49, 200)
    t = np.linspace(0, 1, 8001)
    thin, thick = (surface.section(z, t) for z in (1.0, 0.0))
    ratio = np.interp(x, thick.real, thick.imag) / np.interp(x, thin.real, thin.imag)
    assert 2.0 * thick.imag.max() == pytest.approx(0.24, abs=1e-6)
    np.testing.assert_allclose(ratio, ratio.mean(), rtol=2e-5)


def test_planform_is_the_shape_preserving_interpolant():
    """Against scipy's own implementation of Fritsch and Carlson's method."""
    definition = demonstration()
    surface = loft_surface(definition)
    z = np.linspace(0, 24, 101)
    table = definition.stations
    np.testing.assert_allclose(surface.chord(z), PchipInterpolator(table.z, table.chord)(z), rtol=1e-14)


def test_a_million_scattered_points_take_well_under_two_seconds():
    surface = loft_surface(demonstration())
    rng = np.random.default_rng(0)
    z, t = rng.uniform(0, 24, 1_000_000), rng.uniform(-1, 1, 1_000_000)
    best = np.inf
    for _ in range(3):
        start = time.perf_counter()
        points = surface.points(z, t)
        best = min(best, time.perf_counter() - start)
    assert points.shape == (1_000_000, 3)
    assert best < 2.0
