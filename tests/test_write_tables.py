"""The table of stacks and the summary."""

from __future__ import annotations

import csv
import json
from dataclasses import replace
from io import StringIO
from math import radians

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sample_meshes import BALSA, GLASS_UD, box_with_web, sandwich, tube

from skinmesh.definition.blade import MeshRule
from skinmesh.definition.spanwise import Spanwise, constant
from skinmesh.laminate.code import laminate_codes
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.measure import mass_properties, solid_mass
from skinmesh.mesh.shellmesh import BuildReport, ShellMesh
from skinmesh.write.tables import STACK_COLUMNS, stacks_table, summary_table


def box() -> ShellMesh:
    return box_with_web(layers=sandwich(30.0), web_layers=sandwich()[:2])


def rows_of(mesh: ShellMesh) -> list[dict[str, str]]:
    return list(csv.DictReader(StringIO(stacks_table(mesh)), strict=True))


def test_every_ply_of_every_stack_has_its_row() -> None:
    mesh = box()
    rows = rows_of(mesh)
    codes = laminate_codes(mesh.stacks).codes
    expected = [
        (
            str(number),
            stack.content_name,
            str(order),
            layer.ply,
            layer.material.name,
            layer.thickness,
            layer.angle_degrees,
            codes[number - 1],
        )
        for number, stack in enumerate(mesh.stacks, start=1)
        for order, layer in enumerate(stack.layers, start=1)
    ]
    found = [
        (
            row["stack"],
            row["content"],
            row["order"],
            row["ply"],
            row["material"],
            float(row["thickness_m"]),
            float(row["angle_deg"]),
            row["laminate_code"],
        )
        for row in rows
    ]
    assert found == expected
    assert tuple(rows[0]) == STACK_COLUMNS
    legend = laminate_codes(mesh.stacks).legend
    for row in rows:
        assert legend[row["letter"]] == f"{row['material']}, {1000 * float(row['thickness_m']):g} mm"


@pytest.mark.parametrize("name", ["=HYPERLINK(1)", "+1", "-1", "@SUM(1)", "\t=1", "\r=1"])
def test_no_spreadsheet_takes_a_name_for_a_formula(name: str) -> None:
    layer = Layer(name, replace(GLASS_UD, name=name), 0.001, 0.0)
    (row,) = rows_of(tube(8, 2, layers=[layer]))
    assert row["ply"] == row["material"] == f"'{name}".replace("\r", "\n")


@pytest.mark.parametrize("name", ['skin, "outer"', "Gürtel; außen", "<script>", "two\nlines", "a=b", "5-harness"])
def test_awkward_names_come_back_as_they_are(name: str) -> None:
    layer = Layer(name, replace(BALSA, name=name), 0.001, radians(-30))
    (row,) = rows_of(tube(8, 2, layers=[layer]))
    assert row["ply"] == row["material"] == name
    assert row["angle_deg"] == "-30"


def test_summary_numbers() -> None:
    mesh = box()
    found = json.loads(summary_table(mesh))
    mass = mass_properties(mesh)
    assert found["counts"] == {
        "nodes": len(mesh.points),
        "elements": 84,
        "quadrilaterals": 84,
        "triangles": 0,
        "regions": 3,
        "stacks": 2,
        "elements_without_plies": 0,
        "node_sets": 6,
    }
    assert found["area_m2"] == pytest.approx(mass.area, rel=1e-11)
    assert found["mass_kg"] == pytest.approx(mass.mass, rel=1e-11)
    assert found["solid_mass_kg"] == pytest.approx(solid_mass(mesh), rel=1e-11)
    assert_allclose(found["centre_of_mass_m"], mass.centre, rtol=1e-11, atol=1e-11)
    assert_allclose(found["first_moments_kg_m"], mass.first_moments, rtol=1e-11, atol=1e-9)
    assert_allclose(found["inertia_about_origin_kg_m2"], mass.inertia_origin, rtol=1e-11, atol=1e-9)
    assert_allclose(found["inertia_about_centre_kg_m2"], mass.inertia_centre, rtol=1e-11, atol=1e-9)
    assert np.all(np.array(found["inertia_about_centre_kg_m2"])[~np.eye(3, dtype=bool)] == 0)


def test_summary_names_stand_at_the_integers_of_the_files() -> None:
    mesh = box()
    found = json.loads(summary_table(mesh))
    assert [(r["number"], r["name"], r["side"]) for r in found["regions"]] == [
        (k + 1, region.name, region.side) for k, region in enumerate(mesh.regions)
    ]
    assert [(s["number"], s["content"], s["plies"]) for s in found["stacks"]] == [
        (k + 1, stack.content_name, len(stack.layers)) for k, stack in enumerate(mesh.stacks)
    ]
    assert {s["name"]: s["nodes"] for s in found["node_sets"]} == {k: len(v) for k, v in mesh.node_sets.items()}
    assert [r["elements"] for r in found["regions"]] == np.bincount(mesh.region).tolist()
    assert [s["elements"] for s in found["stacks"]] == np.bincount(mesh.stack).tolist()


def test_summary_parts_sum_to_the_whole() -> None:
    found = json.loads(summary_table(tube(16, 6, layers=sandwich(), taper=0.5, n_bands=3)))
    for key in ("area_m2", "mass_kg"):
        assert sum(region[key] for region in found["regions"]) == pytest.approx(found[key], rel=1e-10)
    assert sum(stack["area_m2"] for stack in found["stacks"]) == pytest.approx(found["area_m2"], rel=1e-10)
    assert sum(s["area_m2"] * s["areal_mass_kg_m2"] for s in found["stacks"]) == pytest.approx(
        found["mass_kg"], rel=1e-10
    )
    assert sum(material["mass_kg"] for material in found["materials"]) == pytest.approx(found["mass_kg"], rel=1e-10)


def test_summary_carries_the_report_and_where_it_came_from() -> None:
    report = BuildReport(
        warnings=("seams meet at z = 1.2 m: 3 mm",),
        ply_end_move=0.0123456789,
        ply_end_place="cap, layer 3, z = 1.0",
        rows=(("station 00", 0.0), ("station 01", 2.0)),
        seams=("pressure trailing edge", "suction trailing edge"),
        stations=np.array([0.0, 2.0]),
        developed_areas={"suction panel": 1.25},
        ply_areas={"cap": 0.75},
    )
    mesh = replace(box(), report=report, element_sets={"thick laminate": np.array([3, 4])})
    found = json.loads(summary_table(mesh))
    assert found["warnings"] == ["seams meet at z = 1.2 m: 3 mm"]
    assert found["largest_ply_end_move_m"] == 0.0123456789
    assert found["largest_ply_end_move_at"] == "cap, layer 3, z = 1.0"
    assert found["rows"][1] == {"row": 1, "label": "station 01", "z_m": 2.0}
    assert found["seams"][0] == {"seam": 0, "label": "pressure trailing edge"}
    assert [region["developed_area_m2"] for region in found["regions"]] == [1.25, None, None]
    assert found["ply_areas_m2"] == {"cap": 0.75}
    assert found["element_sets"] == [{"name": "thick laminate", "elements": 2}]
    assert found["inputs"] == [{"file": source.file, "sha256": source.sha256} for source in mesh.sources]
    assert set(found["versions"]) >= {"skinmesh", "numpy", "gmsh", "meshio", "python"}
    assert "unknown" not in found["versions"].values()
    assert "qualified engineer" in found["caution"]


def test_summary_has_the_mesh_part_of_the_blade_file_with_its_defaults() -> None:
    given = MeshRule(
        Spanwise([0.0, 5.0], [0.2, 0.1]),
        {"main cap": 6},
        order=1,
        shape="triangle",
        surface="mid",
        close_gap=0.004,
        cut_at_ply_ends=True,
        chord_error=0.001,
        turning=radians(30.0),
        least_spacing=constant(0.01),
    )
    found = json.loads(summary_table(replace(box(), report=BuildReport(mesh_rule=given))))["mesh"]
    assert found == {
        "size": [[0.0, 0.2], [5.0, 0.1]],
        "across": {"main cap": 6},
        "order": 1,
        "shape": "triangle",
        "surface": "mid",
        "close_gap": 0.004,
        "cut_at_ply_ends": True,
        "chord_error": 0.001,
        "turning": 30.0,
        "least_spacing": 0.01,
    }
    assert json.loads(summary_table(box()))["mesh"] is None


def test_a_mesh_without_plies() -> None:
    mesh = tube(8, 2, order=1, shape="triangle")
    assert stacks_table(mesh) == ",".join(STACK_COLUMNS) + "\n"
    found = json.loads(summary_table(mesh))
    assert found["mass_kg"] == found["solid_mass_kg"] == 0
    assert found["stacks"] == found["materials"] == []
    assert found["counts"]["triangles"] == found["counts"]["elements_without_plies"] == len(mesh.cells)
    assert found["counts"]["nodes"] == mesh.n_corners
    assert {s["name"]: s["nodes"] for s in found["node_sets"]}["root"] == 8


def test_the_same_mesh_gives_the_same_text() -> None:
    assert stacks_table(box()) == stacks_table(box())
    assert summary_table(box()) == summary_table(box())
