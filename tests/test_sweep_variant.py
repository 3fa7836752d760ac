"""One variant: what is measured is what a build of its own says; records and tables."""

from __future__ import annotations

import csv
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pyarrow.parquet
import pytest
from sweep_files import write_sweep, write_tiny_blade

from skinmesh.beam.table import beam_table
from skinmesh.check.run import check_directory
from skinmesh.definition.read import load_blade
from skinmesh.errors import OutputError
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import solid_mass
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.sweep.metrics import metric_columns
from skinmesh.sweep.plan import Change, SweepPlan
from skinmesh.sweep.read import load_sweep
from skinmesh.sweep.records import open_records, variant_key
from skinmesh.sweep.table import csv_text, result_table, write_parquet
from skinmesh.sweep.texts import blade_texts, make_change, variant_blade
from skinmesh.sweep.variant import Outcome, build_base, run_variant
from skinmesh.write.files import write


@pytest.fixture(scope="module")
def plan(tmp_path_factory: pytest.TempPathFactory) -> SweepPlan:
    return load_sweep(write_sweep(tmp_path_factory.mktemp("sweep")))


@pytest.fixture(scope="module")
def base(plan: SweepPlan) -> ShellMesh:
    mesh = build_base(blade_texts(plan.base))
    assert isinstance(mesh, ShellMesh)
    return mesh


def test_a_variant_has_the_base_numbers_and_the_figures_of_a_build_of_its_own(
    plan: SweepPlan, base: ShellMesh, tmp_path: Path
) -> None:
    variant = variant_blade(plan.base, plan.changes, plan.variants[3].values)
    order = replace(plan.order, checks=True, formats=("bdf",))
    done = run_variant(blade_texts(variant), base, order, "")
    assert (done.status, done.reason, done.metrics["numbering"]) == ("ok", "", "kept")
    assert set(done.metrics) == {column.name for column in metric_columns(order)}
    # the same blade, changed by hand
    path = write_tiny_blade(tmp_path, ("count: 4", "count: 6"))
    table = (tmp_path / "tiny.csv").read_text().replace("0.8,", f"{0.8:g},").replace("0.6,  2", f"{0.6 * 1.04:g}, 2")
    (tmp_path / "tiny.csv").write_text(table.replace("4.0, 0.4", f"4.0, {0.4 * 1.04:g}"))
    blade = load_blade(path)
    mesh = build_mesh(blade, keep=base)
    write(mesh, tmp_path / "mesh", formats=["vtu", "bdf"])
    beam = beam_table(blade, mesh, z=np.array(order.sections)).exact
    metrics = done.metrics
    assert metrics["nodes"] == base.n_nodes == mesh.n_nodes
    assert metrics["solid_mass_kg"] == pytest.approx(solid_mass(mesh), rel=1e-11)
    for k, z in enumerate(("1", "3")):
        assert metrics[f"EI_small_z{z}_N_m2"] == pytest.approx(beam.principal[k, 0], rel=1e-11)
        assert metrics[f"EI_large_z{z}_N_m2"] == pytest.approx(beam.principal[k, 1], rel=1e-11)
        assert metrics[f"GJ_z{z}_N_m2"] == pytest.approx(beam.torsion[k], rel=1e-11)
    counts = check_directory(tmp_path / "mesh").counts
    said = [metrics[f"checks_{word}"] for word in ("passed", "warned", "failed", "not_made")]
    assert said == [counts[word] for word in ("pass", "warn", "fail", "not made")]
    # the mesh that is kept lies with its inputs, in the wanted format only
    assert {name.rpartition("tiny.")[2] for name in done.files} == {"bdf", "stacks.csv", "summary.json", "yaml", "csv"}
    kept = done.files["tiny.bdf"].decode().splitlines()
    made = (tmp_path / "mesh" / "tiny.bdf").read_text().splitlines()
    assert [line for line in kept if line[0] != "$"] == [line for line in made if line[0] != "$"]
    summary = json.loads(done.files["tiny.summary.json"])
    assert summary["solid_mass_kg"] == pytest.approx(metrics["solid_mass_kg"], rel=1e-9)


@pytest.mark.parametrize(
    ("change", "value", "numbering", "note"),
    [
        (Change("a", "set", ("mesh", "shape")), "triangle", "fresh", "mesh.shape is now triangle"),
        (Change("a", "set", ("profiles", "thin")), {"naca": "0018", "trailing_gap": 0.05}, "fresh", "trailing"),
        (Change("a", "factor", column="twist_deg"), 0.5, "kept", ""),
    ],
)
def test_numbers_stay_where_the_layout_allows(
    plan: SweepPlan, base: ShellMesh, change: Change, value: object, numbering: str, note: str
) -> None:
    done = run_variant(blade_texts(make_change(plan.base, change, value)), base, plan.order, "")
    assert done.metrics["numbering"] == numbering, done.reason
    assert note in done.metrics["numbering_note"]
    assert (numbering == "kept") == (done.metrics["numbering_note"] == "")


def test_a_poisoned_variant_says_why_in_one_line(plan: SweepPlan, base: ShellMesh) -> None:
    done = run_variant(blade_texts(variant_blade(plan.base, plan.changes, {"layers": -1})), base, plan.order, "")
    assert (done.status, done.is_final) == ("failed", True)
    assert done.reason == "plies[1].count: must lie between 0 and 1000, got -1"
    bad = make_change(plan.base, Change("a", "set", column="profile", span=(3.0, 4.0)), "thick")
    done = run_variant(blade_texts(bad), base, plan.order, "")
    assert "tiny.csv, line 6, row 4 (z_m = 3), profile: no profile 'thick' in the blade file" in done.reason


def test_a_result_is_named_by_everything_it_depends_on(plan: SweepPlan) -> None:
    texts, order = blade_texts(plan.base), plan.order
    wider = blade_texts(make_change(plan.base, plan.changes[0], 1.01))
    keys = [
        variant_key(texts, texts, order),
        variant_key(wider, texts, order),
        variant_key(texts, wider, order),
        variant_key(texts, None, order),
        variant_key(texts, texts, replace(order, sections=(1.0,))),
        variant_key(texts, texts, replace(order, formats=("vtu",))),
    ]
    assert len(set(keys)) == len(keys)
    assert keys[0] == variant_key(blade_texts(plan.base), blade_texts(plan.base), replace(order))


def test_records_hold_what_was_put_in_and_a_torn_one_is_none(tmp_path: Path) -> None:
    outcome = Outcome("ok", seconds=1.5, metrics={"mass_kg": 0.1, "warning_texts": "é | 'x'", "beam_note": None})
    with open_records(tmp_path / "a") as records:
        assert records.read("k") is None
        records.add("k", replace(outcome, files={"d/x.vtu": b"\0\1"}), about={"variant": 1})
        assert records.read("k") == outcome
        assert (records.mesh_folder("k") / "d" / "x.vtu").read_bytes() == b"\0\1"
        path = tmp_path / "a" / "records" / "k.json"
        path.write_text(path.read_text()[:-20])
        assert records.read("k") is None
        with pytest.raises(OutputError, match="another sweep is at work"), open_records(tmp_path / "a"):
            pass
    with open_records(tmp_path / "a") as records:
        assert records.read("k") is None


def test_csv_and_parquet_hold_the_same_cells_of_the_right_types(plan: SweepPlan, tmp_path: Path) -> None:
    changed = replace(plan.variants[1], name="=cmd", values={"outer chord": 1.5})
    metrics = {"nodes": 7, "mass_kg": 0.1, "numbering": "kept"}
    results = [
        (plan.variants[0], "k1", Outcome("ok", seconds=2.0, metrics=metrics)),
        (changed, "k2", Outcome("failed", "why, so", metrics={})),
    ]
    table = result_table(plan, results)
    (header, *body) = csv.reader(csv_text(table).splitlines())
    write_parquet(table, tmp_path / "t.parquet")
    read = pyarrow.parquet.read_table(tmp_path / "t.parquet")
    assert read.column_names == header
    assert len(header) == len(set(header))
    types = {name: str(kind) for name, kind in zip(read.schema.names, read.schema.types, strict=True)}
    assert [types[name] for name in ("variant", "nodes", "layers")] == ["int64"] * 3
    assert [types[name] for name in ("mass_kg", "seconds", "outer chord")] == ["double"] * 3
    assert [types[name] for name in ("status", "reason", "failed_checks")[:2]] == ["string"] * 2
    for row, cells in zip(read.to_pylist(), body, strict=True):
        for name, text in zip(header, cells, strict=True):
            value = row[name]
            assert text.removeprefix("'") == ("" if value is None else str(value))
    assert body[1][header.index("name")] == "'=cmd"
    assert [row["layers"] for row in table.rows] == [3, None]
