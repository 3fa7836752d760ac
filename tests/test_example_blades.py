"""The example blades stay believable, by an integration and beam theory that share no code with skinmesh.

The bounds are engineering judgement, not published values: a 24 m glass blade of some two tonnes, a 6 m tidal blade of
some 300 kg. Geometric scaling of the published blades of far larger machines (frequency as one over length) puts the
first flap mode of a 24 m blade near 1.7 Hz and the first edge mode near 2.8 Hz.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
import pytest
from independent_blade import IndependentBlade, Sections
from independent_profiles import SIDES, largest_thickness, read_profile_points, unit_sides
from independent_sums import Beam, beam, deflection, frequencies, layers_at, strains, totals

ROOT = Path(__file__).parents[1]
MARRAM = ROOT / "examples" / "marram-24" / "marram-24.yaml"
TIDAL = ROOT / "examples" / "tidal-6" / "tidal-6.yaml"
ROTOR = ROOT / "tests" / "published" / "research-rotor" / "research-rotor.yaml"
ALL = [pytest.param(path, id=path.stem) for path in (MARRAM, TIDAL, ROTOR)]


@cache
def blade_of(path: Path) -> IndependentBlade:
    return IndependentBlade(path)


@cache
def beam_of(path: Path) -> Beam:
    return beam(blade_of(path))


def middles(b: Beam) -> np.ndarray:
    return 0.5 * (b.nodes[1:] + b.nodes[:-1])


def test_marram_is_a_believable_blade() -> None:
    blade, b = blade_of(MARRAM), beam_of(MARRAM)
    assert 1600 < totals(blade).mass < 2600
    (flap, flap_share), (edge, edge_share) = frequencies(b, 2)
    assert 1.2 < flap < 2.0
    assert flap_share > 0.8
    assert 2.2 < edge < 3.6
    assert edge_share < 0.4
    # a gust of 54 m/s at a force coefficient of 1.3: 2.4 kPa on the chord
    load = 2400.0 * blade.planform(middles(b))[:, 0]
    u, curvature = deflection(b, np.column_stack([load, np.zeros_like(load)]))
    assert 1.5 < u[-1, 0] < 3.2
    cap = max(strains(b, curvature, f"{side} main cap").max() for side in SIDES)
    assert 0.002 < cap < 0.005


def test_tidal_is_a_believable_blade() -> None:
    blade, b = blade_of(TIDAL), beam_of(TIDAL)
    assert 200 < totals(blade).mass < 450
    assert 10 < frequencies(b, 1)[0][0] < 30
    # thrust that grows with the radius: 91 kN in all, 346 kN m at the root
    load = 4000.0 * (middles(b) + 0.8)
    u, curvature = deflection(b, np.column_stack([load, np.zeros_like(load)]))
    assert 0.1 < u[-1, 0] < 0.3
    cap = max(strains(b, curvature, f"{side} main cap", blade.mirror).max() for side in SIDES)
    assert 0.001 < cap < 0.004


@pytest.mark.parametrize("path", ALL)
def test_no_wall_is_bare(path: Path) -> None:
    blade, b = blade_of(path), beam_of(path)
    sections = Sections(blade, middles(b))
    open_edge = sections.trailing_gap >= blade.close_gap
    for i, z in enumerate(middles(b)):
        webs = {w for w in blade.webs if blade.part_span(w)[0] <= z <= blade.part_span(w)[1]}
        base = {"trailing base"} if open_edge[i] else set()
        sides = {f"{side} {name}" for side in SIDES for name in blade.region_names[side]}
        assert set(b.walls[i]) == sides | webs | base


@pytest.mark.parametrize("path", ALL)
def test_regions_fit_side_by_side_on_every_section(path: Path) -> None:
    blade = blade_of(path)
    sections = Sections(blade, np.linspace(blade.low, blade.high, 121))
    for side in SIDES:
        bounds = sections.bounds(side)
        assert np.min(np.diff(bounds, axis=1) / bounds[:, -1:]) > 0.012  # the least spacing of seams is 0.01


@pytest.mark.parametrize(("path", "limit"), [(MARRAM, 0.09), (TIDAL, 0.17), (ROTOR, 0.09)])
def test_laminate_is_thin_against_the_radius_of_the_surface(path: Path, limit: float) -> None:
    blade = blade_of(path)
    z = np.linspace(blade.low, blade.high, 61)
    sections = Sections(blade, z)
    for side in SIDES:
        bounds = sections.bounds(side)
        for i, at in enumerate(z):
            arc = np.linspace(0.0, sections.arc[side][i, -1], 241)
            place = np.interp(arc, sections.arc[side][i], sections.flat[side][i])
            tangent = np.diff(place)
            curvature = np.abs(np.angle(tangent[1:] / tangent[:-1])) / (arc[1] - arc[0])
            for k, name in enumerate(blade.region_names[side]):
                here = (arc[1:-1] >= bounds[i, k]) & (arc[1:-1] <= bounds[i, k + 1])
                depth = sum(layer[1] for layer in layers_at(blade, f"{side} {name}", float(at)))
                assert depth * curvature[here].max() < (0.5 if name.endswith("strip") else limit), (name, at)


@pytest.mark.parametrize("path", sorted((ROOT / "geometry").glob("*.dat")), ids=lambda p: p.stem)
def test_invented_profiles_are_smooth_and_as_thick_as_their_name_says(path: Path) -> None:
    text = path.read_text()
    assert "invented" in text.splitlines()[0]
    loop = read_profile_points(path)
    assert len(loop) == 151
    assert np.all(np.diff(loop.real[:76]) < 0)
    assert np.all(np.diff(loop.real[75:]) > 0)
    sides = unit_sides(loop)
    assert largest_thickness(sides) == pytest.approx(int(path.stem[-2:]) / 100, abs=2e-4)
    # in φ of x = (1 − cos φ)/2 the ordinate is smooth round the nose: its fourth differences vanish as (π/75)⁴
    assert np.max(np.abs(np.diff(loop.imag, 4))) < 5.0 * (np.pi / 75) ** 4


def test_both_public_orderings_are_there() -> None:
    second_words = [p.read_text().splitlines()[2].split()[1] for p in (ROOT / "geometry").glob("*.dat")]
    assert {float(w) > 1.5 for w in second_words} == {True, False}


def test_s809_is_as_thick_as_published() -> None:
    """21 % (NREL/SR-440-6918, quoted from memory)."""
    sides = unit_sides(read_profile_points(ROTOR.parent / "s809.dat"))
    assert largest_thickness(sides) == pytest.approx(0.21, abs=2e-4)
