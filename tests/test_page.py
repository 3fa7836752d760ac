"""The page holds what the mesh holds: arrays bit by bit, lengths against closed forms, names as text."""

from __future__ import annotations

import json
import os
import re
from base64 import b64decode, b64encode
from dataclasses import replace
from hashlib import sha256
from html import unescape
from pathlib import Path
from zlib import decompress

import numpy as np
import pytest
from blades import demonstration, tube
from click.testing import CliRunner
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import array_shapes, arrays
from sample_meshes import HOSTILE, numbered_box

import skinmesh
from skinmesh.check.reading import read_built_mesh
from skinmesh.commands.page_command import page
from skinmesh.errors import InputError
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.page import document
from skinmesh.page.document import SCRIPTS, embedded_json
from skinmesh.page.gather import gather_arrays, gather_words
from skinmesh.page.packing import pack_arrays
from skinmesh.page.plies import ply_table
from skinmesh.page.spanwise import beam_along, shape_along
from skinmesh.page.write import write_page
from skinmesh.show.develop import develop
from skinmesh.show.palette import MATERIAL_TONES, part_colours

TITLE = "</script><script>window.ran = 1</script><img src=x onerror='window.ran = 2'>{{MESH}}"


def unpacked(text: str, contents: dict) -> dict[str, np.ndarray]:
    """Undo the packing without a look at how it was done, but for its description."""
    raw = decompress(b64decode(text))
    found = {}
    for name, entry in contents.items():
        kind = np.dtype(entry["type"]).newbyteorder("<")
        count = int(np.prod(entry["shape"]))
        part = raw[entry["start"] : entry["start"] + count * kind.itemsize]
        planes = np.frombuffer(part, dtype=np.uint8).reshape(kind.itemsize, count)
        values = np.frombuffer(planes.T.tobytes(), dtype=kind).reshape(entry["shape"])
        found[name] = np.cumsum(values, axis=0, dtype=kind) if entry["delta"] else values
    return found


@given(
    st.sampled_from([np.float32, np.int32, np.int16, np.uint16, np.uint8]).flatmap(
        lambda kind: arrays(kind, array_shapes(max_dims=2, max_side=9))
    )
)
def test_packed_arrays_come_back_bit_by_bit(array: np.ndarray) -> None:
    packed = pack_arrays({"before": np.arange(7, dtype=np.int32), "array": array})
    back = unpacked(packed.text, json.loads(json.dumps(packed.contents)))
    assert back["array"].tobytes() == array.tobytes()
    np.testing.assert_array_equal(back["before"], np.arange(7))


@given(st.text() | st.sampled_from(["</script>", "<!--", "]]>", "\u2028", "{{MESH}}"]))
def test_embedded_names_come_back_and_can_end_no_element(name: str) -> None:
    text = embedded_json({name: [name]})
    assert json.loads(text) == {name: [name]}
    assert not set("<>&\u2028\u2029") & set(text)


def flat_areas(mesh: ShellMesh) -> np.ndarray:
    z, s = mesh.points[mesh.cells[:, : mesh.n_sides], 2], develop(mesh).arc
    return 0.5 * np.abs((z * np.roll(s, -1, axis=1) - np.roll(z, -1, axis=1) * s).sum(axis=1))


@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
def test_the_developed_skin_has_the_areas_of_the_blade(hand: str) -> None:
    mesh = skinmesh.build(replace(demonstration(), hand=hand))
    flat, true = flat_areas(mesh), element_areas(mesh)
    for k, region in enumerate(mesh.regions):
        chosen = mesh.region == k
        # z stands for the length along the skin: a slope of 1 in 10 makes 0.5 % of it, and the base slants more.
        limit = {"web": 1e-3, "base": 0.03}.get(region.kind, 0.005)
        assert flat[chosen].sum() == pytest.approx(true[chosen].sum(), rel=limit), region.name


def test_arcs_on_a_tube_are_those_of_its_polygon() -> None:
    mesh = skinmesh.build(tube(radius=0.5))
    arc = develop(mesh).arc
    ring = np.unique(mesh.points[: mesh.n_corners, :2].round(9), axis=0)
    polygon = len(ring) * 2 * 0.5 * np.sin(np.pi / len(ring))
    assert arc.max() - arc.min() == pytest.approx(polygon, rel=2e-3)
    np.testing.assert_array_equal(np.sign(arc.sum(axis=1)), mesh.side)


def test_shape_along_the_span_is_that_of_the_stations() -> None:
    blade = demonstration()
    shape = shape_along(skinmesh.build(blade))
    table = blade.stations
    # A cambered profile keeps its own axes: its foremost node stands a few tenths of a degree off them.
    for name, wanted, within in (("chord", table.chord, 0.02), ("twist", np.degrees(table.twist), 0.5)):
        measured = np.interp(table.z[3:], shape["z"], shape[name])
        np.testing.assert_allclose(measured, wanted[3:], atol=within)
    mirrored = shape_along(skinmesh.build(replace(blade, hand="counter-clockwise")))
    np.testing.assert_allclose(mirrored["twist"], shape["twist"], atol=1e-4)


def test_mass_along_the_span_adds_up_to_the_mass() -> None:
    mesh = skinmesh.build(demonstration())
    along = beam_along(mesh)
    mass = float((element_areas(mesh) * mesh.areal_mass).sum())
    assert np.trapezoid(along["mass"], along["z"]) == pytest.approx(mass, rel=0.02)
    assert len(along["z"]) == along["rows"] == len(along["GJ"])


@pytest.fixture(scope="module")
def hostile(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("hostile")
    skinmesh.write(replace(numbered_box(), title=TITLE), folder, formats=["vtu"])
    return folder


def test_the_page_holds_the_mesh_of_the_folder(hostile: Path) -> None:
    html = write_page(hostile).read_text(encoding="utf-8")
    words = json.loads(re.search(r'id="blade-words">(.*?)</script>', html, re.DOTALL)[1])
    found = unpacked(re.search(r'id="blade-mesh">(.*?)</script>', html, re.DOTALL)[1], words["arrays"])
    built = read_built_mesh(hostile)
    mesh = built.mesh
    np.testing.assert_array_equal(found["number"], mesh.element_number)
    np.testing.assert_array_equal(found["cells"], mesh.cells[:, :4])
    np.testing.assert_array_equal(found["stack"], mesh.stack)
    np.testing.assert_array_equal(found["region"], mesh.region)
    np.testing.assert_array_equal(found["points"], mesh.points[: mesh.n_corners].astype(np.float32))
    np.testing.assert_allclose(found["e1"] / 32767, mesh.e1, atol=2e-5)
    np.testing.assert_allclose(found["e3"] / 32767, mesh.e3, atol=2e-5)
    assert words["title"] == TITLE
    assert [region["name"] for region in words["regions"]] == list(HOSTILE)
    for told, stack in zip(words["stacks"], mesh.stacks, strict=True):
        layers = [
            (words["plies"][ply], words["materials"][material]["name"], thickness, angle)
            for ply, material, thickness, angle in told["layers"]
        ]
        assert layers == [(one.ply, one.material.name, one.thickness, one.angle_degrees) for one in stack.layers]


def test_corner_arcs_can_be_put_together_again(hostile: Path) -> None:
    for mesh in (read_built_mesh(hostile).mesh, skinmesh.build(demonstration())):
        found = gather_arrays(mesh)
        arc = found["node_arc"][found["cells"]].ravel()
        arc[found["other_corner"]] = found["other_arc"]
        np.testing.assert_array_equal(arc.reshape(-1, 4), develop(mesh).arc.astype(np.float32))


def test_only_the_scripts_of_the_page_may_run_and_nothing_may_be_loaded(hostile: Path) -> None:
    html = write_page(hostile).read_text(encoding="utf-8")
    policy = unescape(re.search(r'Content-Security-Policy" content="([^"]*)"', html)[1])
    assert policy.startswith("default-src 'none'; ")
    scripts = re.findall(r"<script>(.*?)</script>", html, re.DOTALL)
    assert len(scripts) == 2
    for script in scripts:
        assert f"'sha256-{b64encode(sha256(script.encode()).digest()).decode()}'" in policy
    assert "unsafe-inline" not in policy.split("style-src")[0]
    assert html.count(TITLE) == 0
    assert not re.search(r"""(?:src|href)=["']?(?:https?:)?//""", html)
    assert "three.js" in html
    assert "Permission is hereby granted" in html


def test_parts_keep_the_colours_of_the_pictures_and_materials_take_none_of_them(tmp_path: Path) -> None:
    skinmesh.write(skinmesh.build(demonstration()), tmp_path, formats=["vtu"])
    built = read_built_mesh(tmp_path)
    words = gather_words(built, findings=[], trial=None)
    colours = part_colours(built.mesh.regions)
    assert {region["part"]: region["colour"] for region in words["regions"]} == colours
    assert not set(MATERIAL_TONES) & set(colours.values())


@pytest.mark.parametrize("hand", ["clockwise", "counter-clockwise"])
def test_the_table_of_plies_adds_up_to_the_mesh(hand: str) -> None:
    mesh = skinmesh.build(replace(demonstration(), hand=hand))
    table = {line["ply"]: line for line in ply_table(mesh)}
    areas = element_areas(mesh)
    assert sum(line["mass"] for line in table.values()) == pytest.approx(float(areas @ mesh.areal_mass), rel=1e-12)
    z = mesh.points[mesh.cells[:, : mesh.n_sides], 2]
    for ply, line in table.items():
        counts = np.array([sum(layer.ply == ply for layer in stack.layers) for stack in mesh.stacks])[mesh.stack]
        assert line["area"] == pytest.approx(float(areas @ counts), rel=1e-12)
        assert line["layers"] == [counts[counts > 0].min(), counts.max()]
        assert line["z"] == [z[counts > 0].min(), z[counts > 0].max()]
        names = {mesh.regions[k].name for k in np.unique(mesh.region[counts > 0])}
        told = {f"{side}{name}" for name in line["regions"] for side in ("", "suction ", "pressure ")}
        assert names <= told
        assert len(line["regions"]) <= len(names)
        angles = {layer.angle_degrees for stack in mesh.stacks for layer in stack.layers if layer.ply == ply}
        assert line["angles"] == sorted(angles)


def test_the_page_keeps_to_the_public_parts_of_its_library() -> None:
    assets = Path(document.__file__).parent / "assets"
    for name in SCRIPTS:
        text = (assets / name).read_text(encoding="utf-8")
        assert not re.search(r"\w\??\._\w", text), name
        assert text.count("\n") < 400, name


def test_checks_are_read_where_fresh_and_made_where_stale(hostile: Path) -> None:
    stored = hostile / "sample.checks.json"
    finding = {"check": "stored", "verdict": "warn", "measured": "m", "limit": "", "source": "", "where": ""}
    stored.write_text(json.dumps({"findings": [finding]}), encoding="utf-8")
    assert '"check": "stored"' in write_page(hostile).read_text(encoding="utf-8")
    vtu = hostile / "sample.vtu"
    later = stored.stat().st_mtime + 10
    os.utime(vtu, (later, later))
    html = write_page(hostile).read_text(encoding="utf-8")
    assert '"check": "stored"' not in html
    assert '"check": "joints"' in html


def test_the_same_mesh_makes_the_same_page(hostile: Path) -> None:
    assert write_page(hostile).read_bytes() == write_page(hostile).read_bytes()


def test_a_mesh_without_plies_has_a_page(tmp_path: Path) -> None:
    skinmesh.write(skinmesh.build(replace(demonstration(), plies=())), tmp_path, formats=["vtu"])
    assert '"stacks": []' in write_page(tmp_path).read_text(encoding="utf-8")


def test_the_command_says_where_the_page_is_and_warns(hostile: Path) -> None:
    result = CliRunner().invoke(page, [str(hostile)], catch_exceptions=False)
    assert result.exit_code == 0
    assert "sample.page.html" in result.output
    assert "qualified engineer" in result.output


def test_a_folder_without_a_mesh_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"holds no file \*\.summary\.json"):
        write_page(tmp_path)
    assert list(tmp_path.iterdir()) == []
