"""The yardstick itself, held to handbook formulas of mensuration and beams."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from independent_blade import IndependentBlade, Sections
from independent_laminate import Fabric, axial_stiffness
from independent_profiles import naca_points, unit_sides
from independent_sums import area_rates, beam, deflection, frequencies, strains, totals
from scipy.special import ellipe

STEEL = "{E: 200.0e9, nu: 0.3, density: 7800}"
R, L, T = 0.5, 10.0, 0.004


def blade(folder: Path, table: str, *, profiles: str = "c: {circle: true}", layout: str = "{}", plies: str = "[]",
          hand: str = "clockwise", close_gap: float = 0.002) -> IndependentBlade:  # fmt: skip
    (folder / "t.csv").write_text(table)
    (folder / "b.yaml").write_text(
        f"title: test\nhand: {hand}\nplanform: t.csv\nprofiles:\n  {profiles}\n"
        f"materials:\n  steel: {STEEL}\nlayout: {layout}\nplies: {plies}\nmesh: {{size: 0.1, close_gap: {close_gap}}}\n"
    )
    return IndependentBlade(folder / "b.yaml")


HEAD = "z_m,chord_m,twist_deg,pitch_axis,profile,thickness_ratio,prebend_m,sweep_m\n"
TUBE = HEAD + "0,1,0,0.5,c,,0,0\n5,1,0,0.5,c,,0,0\n10,1,0,0.5,c,,0,0\n"
SKIN = f"[{{ply: skin, material: steel, thickness: {T}, covers: [skin]}}]"


def test_tube_has_the_area_mass_and_centre_of_a_cylinder(tmp_path: Path) -> None:
    found = totals(blade(tmp_path, TUBE, plies=SKIN))
    assert found.skin_area == pytest.approx(2 * np.pi * R * L, rel=2e-6)
    assert found.areas["trailing base"] == 0.0
    assert found.mass == pytest.approx(2 * np.pi * R * L * T * 7800, rel=2e-6)
    assert found.centre == pytest.approx([0, 0, L / 2], abs=1e-6)


def test_cone_has_the_lateral_area_of_a_frustum(tmp_path: Path) -> None:
    cone = HEAD + "0,2.0,0,0.5,c,,0,0\n4,1.2,0,0.5,c,,0,0\n7,0.6,0,0.5,c,,0,0\n"
    found = totals(blade(tmp_path, cone, plies=SKIN))
    slant = np.hypot(7.0, 0.7)
    assert found.skin_area == pytest.approx(np.pi * (1.0 + 0.3) * slant, rel=2e-6)
    # ∫ z dA of a frustum: radius falls linearly
    z_mean = 7.0 * (1.0 + 2 * 0.3) / (3 * 1.3)
    assert found.centre[2] == pytest.approx(z_mean, rel=1e-6)


def test_elliptic_prism_has_the_perimeter_of_an_ellipse(tmp_path: Path) -> None:
    table = HEAD + "0,1,0,0.5,c,0.5,0,0\n10,1,0,0.5,c,0.5,0,0\n"
    found = totals(blade(tmp_path, table))
    assert found.skin_area == pytest.approx(4 * 0.5 * ellipe(1 - 0.25) * 10, rel=5e-6)


def test_twisted_elliptic_prism_against_a_double_integral_of_its_formula(tmp_path: Path) -> None:
    table = HEAD + "".join(f"{z},1,{6 * z},0.5,c,0.5,0,0\n" for z in range(11))
    found = totals(blade(tmp_path, table))
    rate = np.deg2rad(6.0)
    phi = np.linspace(0, 2 * np.pi, 4001)[:-1]
    w, dw = 0.5 * np.cos(phi) + 0.25j * np.sin(phi), -0.5 * np.sin(phi) + 0.25j * np.cos(phi)
    per_length = np.mean(np.hypot(np.abs(dw), (np.conj(dw) * 1j * rate * w).imag)) * 2 * np.pi
    assert found.skin_area == pytest.approx(per_length * 10, rel=5e-6)


@pytest.mark.parametrize(("column", "centre"), [("prebend", [1.0, 0.0]), ("sweep", [0.0, 1.0])])
def test_oblique_tube_has_the_perimeter_of_its_stretched_ellipse(
    tmp_path: Path, column: str, centre: list[float]
) -> None:
    # r = (R cos φ + k z, R sin φ, z): |r_φ × r_z| = R √(1 + k² sin² φ)
    offset = (lambda z: f"{0.2 * z},0") if column == "prebend" else (lambda z: f"0,{0.2 * z}")
    table = HEAD + "".join(f"{z},1,0,0.5,c,,{offset(z)}\n" for z in (0, 5, 10))
    found = totals(blade(tmp_path, table, plies=SKIN))
    assert found.skin_area == pytest.approx(L * 4 * R * ellipe(-(0.2**2)), rel=3e-6)
    assert found.centre[:2] == pytest.approx(centre, abs=1e-6)


def test_counter_clockwise_mirrors_the_centre(tmp_path: Path) -> None:
    table = HEAD + "0,1,10,0.3,c,0.5,0.1,0.2\n10,0.6,0,0.3,c,0.4,0.4,0.3\n"
    a = totals(blade(tmp_path, table, plies=SKIN))
    b = totals(blade(tmp_path, table, plies=SKIN, hand="counter-clockwise"))
    assert b.centre == pytest.approx(a.centre * [1, -1, 1])
    assert abs(a.centre[1]) > 0.1


LAYOUT = """
  caps:
    cap: {centre: {from_axis: 0.1}, width: [[0, 0.4], [10, 0.2]]}
  webs:
    web: {foot: {from_axis: 0.1}, span: [2, 9]}
  leading strip: {width: 0.05}
  trailing strip: {width: 0.08}
"""


def test_regions_of_a_tube(tmp_path: Path) -> None:
    found = totals(blade(tmp_path, TUBE, layout=LAYOUT))
    cap, strip, trailing = 0.3 * L, 0.05 * L, 0.08 * L
    half = np.pi * R * L
    # the centre at η = 0.1 lies at the arc R (π/2 + asin 0.2)
    panel = R * (np.pi / 2 + np.arcsin(0.2)) * L - cap / 2 - strip
    for side in ("suction", "pressure"):
        assert found.areas[f"{side} cap"] == pytest.approx(cap, rel=1e-5)
        assert found.areas[f"{side} leading strip"] == pytest.approx(strip, rel=1e-5)
        assert found.areas[f"{side} trailing strip"] == pytest.approx(trailing, rel=1e-5)
        assert found.areas[f"{side} leading panel"] == pytest.approx(panel, rel=1e-5)
        rest = half - panel - cap - strip - trailing
        assert found.areas[f"{side} trailing panel"] == pytest.approx(rest, rel=1e-5)
    assert found.areas["web"] == pytest.approx(2 * np.sqrt(R**2 - 0.1**2) * 7, rel=1e-6)


def test_plane_twist_keeps_a_web_flat(tmp_path: Path) -> None:
    table = HEAD + "".join(f"{z},1,{20 - 2 * z},0.5,c,0.6,0,0\n" for z in range(11))
    layout = "{webs: {web: {foot: {from_axis: 0.1}, span: [0, 10], plane_twist: 7}}}"
    b = blade(tmp_path, table, layout=layout)
    feet = Sections(b, np.linspace(0, 10, 7))
    for side in ("suction", "pressure"):
        across = (feet.web_foot("web", side) * np.exp(-1j * np.deg2rad(7.0))).real
        assert across == pytest.approx(np.full(7, 0.1), abs=2e-6)


def test_layers_end_where_the_schedule_says(tmp_path: Path) -> None:
    # three layers, each 0.5 m later and 1 m sooner: 7 + 5.5 + 4 m; two layers where the count is over a half and 1.5
    plies = (
        f"[{{ply: stepped, material: steel, thickness: {T}, count: 3, covers: [skin], span: [1, 8],"
        " step: {root: 0.5, tip: 1}},"
        f" {{ply: counted, material: steel, thickness: {T}, count: [[0, 2], [10, 0]], covers: [suction]}},"
        f" {{ply: wedge, material: steel, thickness: [[2, {T}], [6, {3 * T}]], covers: [pressure], span: [2, 6]}}]"
    )
    found = totals(blade(tmp_path, TUBE, plies=plies))
    per_metre = 2 * np.pi * R * T * 7800
    assert found.ply_mass["stepped"] == pytest.approx(per_metre * 16.5, rel=1e-5)
    assert found.ply_mass["counted"] == pytest.approx(per_metre / 2 * (7.5 + 2.5), rel=1e-5)
    assert found.ply_mass["wedge"] == pytest.approx(per_metre / 2 * 2 * 4, rel=1e-5)
    assert sum(found.region_mass.values()) == pytest.approx(found.mass, rel=1e-12)


def test_trailing_base_is_counted_where_it_is_open(tmp_path: Path) -> None:
    # the chord falls from 2 to 1 m, the gap of 1 % with it; it is open down to 15 mm, over the first half
    table = HEAD + "0,2,0,0.3,n,,0,0\n5,1.5,0,0.3,n,,0,0\n10,1,0,0.3,n,,0,0\n"
    b = blade(tmp_path, table, profiles='n: {naca: "0018", trailing_gap: 0.01}', close_gap=0.015)
    # both ends of the base run at 0.7 of 0.1 m/m in the plane of the chord
    middle = 5 * 0.0175
    assert totals(b).areas["trailing base"] == pytest.approx(middle * np.hypot(1, 0.07), rel=1e-4)


def test_quadrature_has_converged(tmp_path: Path) -> None:
    table = HEAD + "0,1.0,12,0.5,c,,0,0\n3,1.3,9,0.4,c,0.5,0,0\n7,0.9,3,0.3,c,0.25,0.05,0\n10,0.4,0,0.3,c,0.2,0.2,0\n"
    b = blade(tmp_path, table, layout=LAYOUT.replace("0.4]", "0.3]"))
    z = np.linspace(0, 10, 4001)
    middle = 0.5 * (z[1:] + z[:-1])
    fine = {name: float(rate[0].sum() * (z[1] - z[0])) for name, rate in area_rates(b, middle).items()}
    found = totals(b).areas
    for name in fine:
        assert found[name] == pytest.approx(fine[name], rel=2e-5, abs=1e-9), name


def test_naca_0012_ordinates() -> None:
    """NACA Report 460 / Abbott & von Doenhoff, appendix III, quoted from memory: per cent of the chord."""
    upper = naca_points("0012", None)[:401][::-1]
    x = np.array([1.25, 5, 10, 30, 60, 90, 100])
    y = np.interp(x / 100, upper.real, upper.imag) * 100
    assert y == pytest.approx([1.894, 3.555, 4.683, 6.002, 4.563, 1.448, 0.126], abs=1.5e-3)


def test_unit_sides_of_a_turned_profile_are_those_of_the_profile() -> None:
    loop = naca_points("0021", None)
    turned = 3.0 * np.exp(0.3j) * loop + (2 - 1j)
    a, b = unit_sides(loop), unit_sides(turned)
    for side in a:
        assert np.max(np.abs(a[side] - b[side])) < 1e-5


def test_beam_of_a_tube(tmp_path: Path) -> None:
    """Cantilever: qL⁴/8EI; first frequency 1.8751² √(EI/μL⁴)/2π (any handbook of vibrations)."""
    b = beam(blade(tmp_path, TUBE, plies=SKIN), 50)
    mean = R - T / 2
    EI, mu = 200e9 * np.pi * mean**3 * T, 7800 * 2 * np.pi * R * T
    assert b.EI[:, 0, 0] == pytest.approx(EI, rel=1e-4)
    assert b.EI[:, 1, 1] == pytest.approx(EI, rel=1e-4)
    assert np.max(np.abs(b.EI[:, 0, 1])) < 1e-6 * EI
    assert pytest.approx(mu, rel=1e-5) == b.mass
    u, k = deflection(b, np.column_stack([np.full(50, 1000.0), np.zeros(50)]))
    assert u[-1, 0] == pytest.approx(1000 * L**4 / (8 * EI), rel=1e-3)
    assert abs(u[-1, 1]) < 1e-6 * u[-1, 0]
    largest = max(strains(b, k, f"{side} panel").max() for side in ("suction", "pressure"))
    assert largest == pytest.approx(1000 * L**2 / (2 * EI) * mean * (1 - 0.01) ** 2, rel=2e-3)
    assert frequencies(b, 1)[0][0] == pytest.approx(1.8751**2 * np.sqrt(EI / (mu * L**4)) / (2 * np.pi), rel=1e-4)


def test_isotropic_wall_and_turned_ply() -> None:
    steel = Fabric.read("steel", {"E": 200e9, "nu": 0.3, "density": 7800})
    assert axial_stiffness([(steel, 0.01, 0.7)]) == pytest.approx((200e9 * 0.01, 0.005))
    # T300/5208 (Tsai & Hahn 1980), quoted from memory: Q11 181.8, Q22 10.35, Q12 2.897, Q66 7.17 GPa; U from them
    ply = Fabric("T300/5208", 181e9, 10.3e9, 7.17e9, 0.28, 1600)
    Q = ply.stiffness(0.0) / 1e9
    assert [Q[0, 0], Q[1, 1], Q[0, 1], Q[2, 2]] == pytest.approx([181.8, 10.35, 2.897, 7.17], rel=1e-3)
    c = np.cos(np.pi / 4)
    Q45 = (Q[0, 0] + Q[1, 1] + 2 * Q[0, 1] + 4 * Q[2, 2]) * c**4
    assert ply.stiffness(np.pi / 4)[0, 0] / 1e9 == pytest.approx(Q45)
    assert np.allclose(ply.stiffness(0.4)[0, 2], -ply.stiffness(-0.4)[0, 2])
