"""The beam table of whole blades: the two roads against each other, and what must not change when a blade is turned."""

from __future__ import annotations

import csv
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from io import StringIO
from pathlib import Path

import numpy as np
import pytest
from blades import FOAM, GLASS, blade, demonstration, rule, skin_ply, stations, tube
from click.testing import CliRunner

import skinmesh
from skinmesh.beam.csvtext import beam_csv
from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import element_row_middles, mesh_sections
from skinmesh.beam.table import BeamTable, beam_difference, beam_table
from skinmesh.commands.beam_command import beam
from skinmesh.definition.blade import COUNTER_CLOCKWISE, BladeDefinition, NacaProfile, PlyRule
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.errors import InputError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import solid_mass
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.page import Page
from skinmesh.skin.plyspans import ply_ends
from skinmesh.skin.skinmap import SkinMap
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface

REPOSITORY = Path(__file__).parents[1]
LOADED = {
    "Marram 24": REPOSITORY / "examples/marram-24/marram-24.yaml",
    "Tidal 6": REPOSITORY / "examples/tidal-6/tidal-6.yaml",
    "research rotor": REPOSITORY / "tests/published/research-rotor/research-rotor.yaml",
}
CENTRES = ("mass_centre", "tension_centre", "shear_centre")


def same_laminates(made: BladeDefinition) -> BladeDefinition:
    """The blade with its tapered ply held at one thickness, since the mesh lays a taper in bands."""
    return replace(
        made,
        plies=tuple(replace(ply, thickness=constant(float(ply.thickness.value.mean()))) for ply in made.plies),
    )


@cache
def built(name: str) -> tuple[BladeDefinition, ShellMesh, BeamTable]:
    made = same_laminates(demonstration()) if name == "demonstration" else skinmesh.load(LOADED[name])
    mesh = build_mesh(made)
    return made, mesh, beam_table(made, mesh)


def unrolled(made: BladeDefinition) -> SkinMap:
    return unroll_skin(made, loft_surface(made))[0]


@pytest.mark.parametrize("name", ["demonstration", *LOADED])
def test_two_roads_agree_within_one_per_cent(name: str) -> None:
    """But for element rows whose very middle is the end of a ply: there the moved end decides, not the mesh."""
    made, _, table = built(name)
    ends = np.array([z for z, _ in ply_ends(made)])
    is_clear = np.abs(table.z[:, None] - ends).min(axis=1) > 1e-6
    assert np.mean(is_clear) > 0.95
    difference = beam_difference(table)
    for values in (difference.mass, difference.axial, difference.torsion, difference.principal, difference.inertia):
        assert np.abs(values[is_clear]).max() < 0.01
        assert np.median(np.abs(values)) < 0.002
    for values in (difference.mass_centre, difference.tension_centre, difference.shear_centre):
        assert values[is_clear].max() < 0.01
    assert np.array_equal(table.exact.n_cells, table.mesh.n_cells)
    assert np.all(table.exact.n_parts == 1)
    stretched = table.exact.principal[:, 1] > 1.1 * table.exact.principal[:, 0]
    assert np.degrees(np.abs(difference.structural_twist[is_clear & stretched])).max() < 0.5


@pytest.mark.parametrize("name", ["demonstration", *LOADED])
def test_totals_agree_with_each_other_and_with_the_mesh(name: str) -> None:
    """The exact schedule against the mesh, whose ply ends were moved; and slices of the mesh against its own solids."""
    _, mesh, table = built(name)
    exact, sliced = table.exact_totals, table.mesh_totals
    assert sliced.mass == pytest.approx(solid_mass(mesh), rel=1e-3)
    assert exact.mass == pytest.approx(sliced.mass, rel=5e-3)
    span = table.z[-1] - table.z[0]
    assert np.abs(exact.centre - sliced.centre).max() < 2e-3 * span
    assert np.diag(exact.inertia_origin) == pytest.approx(np.diag(sliced.inertia_origin), rel=1e-2)
    assert exact.first_moments == pytest.approx(exact.mass * exact.centre)


def test_agreement_improves_with_the_mesh() -> None:
    made = same_laminates(demonstration())
    skin = unrolled(made)
    z = np.linspace(4.0, 20.0, 9)
    exact = exact_sections(made, skin, z)
    errors = []
    for size in (0.4, 0.2, 0.1):
        sized = replace(made, mesh=replace(made.mesh, size=constant(size), across={}, turning=1.2, chord_error=0.1))
        cut = mesh_sections(build_mesh(sized), z)
        errors.append(np.abs(cut.torsion / exact.torsion - 1.0).mean())
    assert errors[0] > 2 * errors[1] > 4 * errors[2]


def test_tapered_ply_is_exact_on_one_road_and_in_bands_on_the_other() -> None:
    """Bands are within 4 % of the ply itself; the table shows what they cost."""
    made = demonstration()
    table = beam_table(made, build_mesh(made), z=np.linspace(0.2, 1.0, 5))
    largest = np.abs(beam_difference(table).mass).max()
    assert 1e-3 < largest < 0.04
    ply = PlyRule("taper", GLASS, Spanwise([0.0, 3.0], [0.02, 0.005]), constant(1), 0.0, ("skin",))
    ring = tube(plies=[ply])
    z = np.array([0.2, 1.5, 2.7])
    thickness = 0.02 - 0.005 * z
    area = np.pi * (0.5**2 - (0.5 - thickness) ** 2)
    assert exact_sections(ring, unrolled(ring), z).axial == pytest.approx(GLASS.E1 * area, rel=1e-5)


@pytest.mark.parametrize("road", ["exact", "mesh"])
def test_mirrored_blade(road: str) -> None:
    """The mirror image in y: lengths and stiffnesses stay, y turns, and so does the coupling of twist."""
    there = _sections(demonstration(hand=COUNTER_CLOCKWISE), road)
    here = _sections(demonstration(), road)
    flip = np.array([1.0, -1.0])
    for name in ("mass", "axial", "torsion", "principal", "structural_twist"):
        assert np.allclose(getattr(there, name), getattr(here, name), rtol=1e-6, atol=1e-6, equal_nan=True)
    for name in CENTRES:
        assert np.allclose(getattr(there, name), flip * getattr(here, name), atol=1e-6)
    for name in ("bending", "inertia"):
        assert np.allclose(getattr(there, name), np.outer(flip, flip) * getattr(here, name), rtol=1e-6, atol=1e-3)
    # u = (ε, κx, κy, θ') of the mirror image: κy and θ' turn
    signs = np.array([1.0, 1.0, -1.0, -1.0])
    scale = np.sqrt(np.einsum("mii->mi", here.stiffness))
    relative = (there.stiffness - np.outer(signs, signs) * here.stiffness) / (scale[:, :, None] * scale[:, None, :])
    assert np.abs(relative).max() < 1e-6
    assert np.abs(here.stiffness[:, 0, 3]).max() > 0.0


@pytest.mark.parametrize("road", ["exact", "mesh"])
def test_turned_blade(road: str) -> None:
    """All twists larger by an angle: every section is turned by −angle about z."""
    angle = np.radians(23.0)
    made = replace(demonstration(), stations=_straight(demonstration()))
    turned = replace(made, stations=replace(made.stations, twist=made.stations.twist + angle))
    here, there = _sections(made, road), _sections(turned, road)
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    for name in ("mass", "axial", "torsion", "principal"):
        assert np.allclose(getattr(there, name), getattr(here, name), rtol=1e-6)
    for name in CENTRES:
        assert np.allclose(getattr(there, name), getattr(here, name) @ turn.T, atol=1e-6)
    assert np.allclose(there.bending, turn @ here.bending @ turn.T, rtol=1e-6, atol=1e-6 * here.bending.max())
    change = (there.structural_twist - here.structural_twist - angle + np.pi / 2) % np.pi - np.pi / 2
    assert np.nanmax(np.abs(change)) < 1e-5


@pytest.mark.parametrize("road", ["exact", "mesh"])
def test_blade_of_twice_the_size(road: str) -> None:
    small = blade(*_foil(1.0), plies=[skin_ply(0.004, 30.0)], mesh=rule(0.1, close_gap=0.004))
    large = blade(*_foil(2.0), plies=[skin_ply(0.008, 30.0)], mesh=rule(0.2, close_gap=0.008))
    here, there = _sections(small, road, z=[0.7, 1.9]), _sections(large, road, z=[1.4, 3.8])
    powers = {"mass": 2, "axial": 2, "principal": 4, "torsion": 4, "inertia": 4, **dict.fromkeys(CENTRES, 1)}
    for name, power in powers.items():
        assert np.allclose(getattr(there, name), 2.0**power * getattr(here, name), rtol=1e-6, atol=1e-9)


def test_moved_blade() -> None:
    """Sections moved by prebend and sweep: Steiner's theorem and nothing else."""
    made = tube(plies=[skin_ply(0.01, 20.0)])
    moved = replace(made, stations=replace(made.stations, prebend=np.full(2, 0.3), sweep=np.full(2, -0.2)))
    z = [1.3]
    for road in ("exact", "mesh"):
        here, there = _sections(made, road, z=z), _sections(moved, road, z=z)
        shift = np.array([0.3, -0.2])
        for name in CENTRES:
            assert np.allclose(getattr(there, name), getattr(here, name) + shift, atol=1e-7)
        for name in ("axial", "torsion", "principal", "inertia", "mass"):
            assert np.allclose(getattr(there, name), getattr(here, name), rtol=1e-6, atol=1e-6)
        bare = there.stiffness[0, 1:3, 1:3] - there.axial[0] * np.outer(shift, shift)
        assert np.allclose(bare, here.bending[0], rtol=1e-4, atol=1e-4 * here.bending.max())


def test_open_trailing_edge_loses_its_torsional_stiffness() -> None:
    """A blunt profile whose base carries no ply is an open section: Σ 4 D66 s, and its shear centre far outside."""
    sides = PlyRule("sides", GLASS, constant(0.004), constant(1), 0.0, ("suction", "pressure"))
    table, shapes = _foil(1.0)
    open_one = blade(table, shapes, plies=[sides], mesh=rule(0.05, close_gap=0.004))
    closed = blade(table, shapes, plies=[skin_ply(0.004)], mesh=rule(0.05, close_gap=0.004))
    for road in ("exact", "mesh"):
        cut, whole = (_sections(made, road, z=[1.0]) for made in (open_one, closed))
        assert (cut.n_cells[0], whole.n_cells[0]) == (0, 1)
        length = cut.mass[0] / (GLASS.density * 0.004)
        assert cut.torsion[0] == pytest.approx(GLASS.G12 * length * 0.004**3 / 3, rel=1e-3)
        assert whole.torsion[0] > 500 * cut.torsion[0]
        assert cut.shear_centre[0, 1] < cut.tension_centre[0, 1] - 0.5


def test_web_ends_change_the_cells() -> None:
    made, mesh, _ = built("demonstration")
    z = np.array([1.19, 1.2, 1.21, 21.49, 21.5, 21.51, 24.0, 0.0])
    expected = [1, 3, 3, 3, 1, 1, 1, 1]
    assert exact_sections(made, unrolled(made), z).n_cells.tolist() == expected
    assert mesh_sections(mesh, z).n_cells.tolist() == expected


def test_order_and_shape_of_elements_do_not_matter() -> None:
    z = np.linspace(0.5, 23.5, 13)
    made = same_laminates(demonstration())
    reference = mesh_sections(build_mesh(made), z)
    for change, limit in (({"order": 1}, 1e-4), ({"shape": "triangle"}, 2e-3)):
        other = mesh_sections(build_mesh(replace(made, mesh=replace(made.mesh, **change))), z)
        for name in ("mass", "axial", "torsion", "principal"):
            assert np.allclose(getattr(other, name), getattr(reference, name), rtol=limit), name
        assert np.array_equal(other.n_cells, reference.n_cells)


def test_rotary_inertia_is_that_of_the_mass() -> None:
    """Where stiffness and density are one material's, the centres are one and so are the shares of the moments."""
    table = stations([0.0, 2.0], [1.0, 1.0], ["foil", "foil"], pitch_axis=0.3, twist_degrees=20.0)
    made = blade(table, {"foil": NacaProfile("4421", 0.02)}, plies=[skin_ply(0.004)], mesh=rule(0.05, close_gap=0.004))
    road = _sections(made, "exact", z=[1.0])
    assert road.mass_centre[0] == pytest.approx(road.tension_centre[0], abs=1e-6)
    assert road.inertia[0] / GLASS.density == pytest.approx(road.bending[0] / GLASS.E1, rel=1e-3)


def test_rows_are_those_of_the_mesh() -> None:
    made, mesh, table = built("demonstration")
    middle, length = element_row_middles(mesh)
    assert np.allclose(length.sum(), 24.0)
    assert np.array_equal(table.z, middle)
    assert len(middle) == len(unrolled(made).levels.corner_z) - 1


def test_csv_holds_the_table() -> None:
    _, _, table = built("Tidal 6")
    text = beam_csv(table)
    lines = [line for line in text.splitlines() if not line.startswith("#")]
    rows = list(csv.DictReader(StringIO("\n".join(lines))))
    assert len(rows) == len(table.z)
    assert float(rows[7]["EA_theory_N"]) == pytest.approx(table.exact.axial[7], rel=1e-8)
    assert float(rows[7]["GJ_mesh_N_m2"]) == pytest.approx(table.mesh.torsion[7], rel=1e-8)
    share = table.mesh.torsion[7] / table.exact.torsion[7] - 1.0
    assert float(rows[7]["GJ_difference_percent"]) == pytest.approx(100 * share, rel=1e-6)
    assert rows[0]["structural_twist_theory_deg"] == ""
    assert "nan" not in text
    assert f"# total mass_kg: theory {table.exact_totals.mass:.7g}, mesh {table.mesh_totals.mass:.7g}" in text
    assert "certifies nothing" in text


def test_places_outside_and_blades_without_plies_are_refused() -> None:
    made, mesh, _ = built("demonstration")
    with pytest.raises(ValueError, match="within the blade"):
        beam_table(made, mesh, z=[24.5])
    bare = demonstration(mesh=rule(0.4, close_gap=0.012))
    bare = replace(bare, plies=())
    with pytest.raises(InputError, match="without a laminate"):
        beam_table(bare, build_mesh(bare))


def test_soft_web_core_adds_no_bending_stiffness_to_speak_of() -> None:
    made = same_laminates(demonstration())
    cored = PlyRule("web core", FOAM, constant(0.02), constant(1), 0.0, ("webs",))
    z = [6.0]
    plain, thick = _sections(made, "exact", z=z), _sections(replace(made, plies=(*made.plies, cored)), "exact", z=z)
    assert thick.principal[0] == pytest.approx(plain.principal[0], rel=2e-3)
    assert thick.mass[0] > plain.mass[0]


@pytest.mark.parametrize("picture", [False, True])
def test_command(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, picture: bool) -> None:
    if picture:
        pytest.importorskip("matplotlib")
        Page(16)
    monkeypatch.chdir(tmp_path)
    arguments = [str(LOADED["Tidal 6"]), "--at", "stations", *(["--picture"] if picture else [])]
    result = CliRunner().invoke(beam, arguments, catch_exceptions=False)
    assert result.exit_code == 0
    assert "certifies nothing" in " ".join(result.output.split())
    written = {path.name for path in tmp_path.iterdir()}
    assert written == {"tidal-6-beam.csv"} | ({"tidal-6-beam.png"} if picture else set())
    rows = [row for row in (tmp_path / "tidal-6-beam.csv").read_text(encoding="utf-8").splitlines() if row[0] != "#"]
    assert len(rows) == 1 + 15
    if picture:
        assert (tmp_path / "tidal-6-beam.png").read_bytes().startswith(b"\x89PNG")


def test_command_names_what_it_cannot_write(tmp_path: Path) -> None:
    with pytest.raises(skinmesh.OutputError, match="folder that exists"):
        CliRunner().invoke(beam, [str(LOADED["Tidal 6"]), "-o", str(tmp_path / "no" / "x.csv")], catch_exceptions=False)


def _sections(made: BladeDefinition, road: str, *, z: list[float] | None = None):
    at = np.linspace(0.3, 23.7, 14) if z is None else np.array(z)
    cut: dict[str, Callable[[], object]] = {
        "exact": lambda: exact_sections(made, unrolled(made), at),
        "mesh": lambda: mesh_sections(build_mesh(made), at),
    }
    return cut[road]()


def _straight(made: BladeDefinition):
    n = len(made.stations.z)
    return replace(made.stations, prebend=np.zeros(n), sweep=np.zeros(n))


def _foil(size: float):
    table = stations([0.0, 2.5 * size], [size, 0.8 * size], ["foil", "foil"], pitch_axis=0.3, twist_degrees=[4.0, 0.0])
    return table, {"foil": NacaProfile("4421", 0.02)}
