"""Both examples and the research rotor, in both orders: joints, normals, frames, cover, files."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from topology import consistent_orientation, outward_share, stray_free_edges

import skinmesh
from skinmesh.check.run import check_directory
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh

ROOT = Path(__file__).parents[1]
BLADES = {
    "Marram 24": ROOT / "examples/marram-24/marram-24.yaml",
    "Tidal 6": ROOT / "examples/tidal-6/tidal-6.yaml",
    "research rotor": ROOT / "tests/published/research-rotor/research-rotor.yaml",
}


@pytest.fixture(scope="module", params=[(name, order) for name in BLADES for order in (1, 2)], ids=str)
def mesh(request) -> ShellMesh:
    name, order = request.param
    definition = skinmesh.load(BLADES[name])
    return skinmesh.build(replace(definition, mesh=replace(definition.mesh, order=order)))


def test_all_elements_are_quadrilaterals_tied_to_their_neighbours(mesh):
    assert mesh.cells.shape[1] == 8
    assert stray_free_edges(mesh) == 0
    assert consistent_orientation(mesh)
    assert outward_share(mesh) == 1.0


def test_frames_are_orthonormal_and_right_handed(mesh):
    frame = np.stack([mesh.e1, mesh.e2, mesh.e3], axis=1)
    assert np.abs(frame @ frame.transpose(0, 2, 1) - np.eye(3)).max() < 1e-9
    assert np.abs(np.linalg.det(frame) - 1.0).max() < 1e-9


def test_every_element_has_plies_and_no_laminate_folds(mesh):
    assert np.all(mesh.stack >= 0)
    assert "folded laminate" not in mesh.element_sets


def test_areas_of_the_regions_are_that_of_the_skin(mesh):
    areas = element_areas(mesh)
    assert np.bincount(mesh.region, weights=areas).sum() == pytest.approx(areas.sum(), rel=1e-9)


def test_written_files_pass_every_check(mesh, tmp_path):
    """Among them the ply directions of every element, recomputed from the text of each deck, within 0.01°."""
    skinmesh.write(mesh, tmp_path)
    report = check_directory(tmp_path)
    assert report.counts["fail"] == 0
    assert not report.has_failed
    assert sum("ply directions off by" in str(finding) for finding in report.findings) == 2


def test_a_second_build_writes_the_same_bytes(tmp_path):
    for folder in ("a", "b"):
        skinmesh.write(skinmesh.build(skinmesh.load(BLADES["Tidal 6"])), tmp_path / folder)
    written = [
        {f.relative_to(tmp_path / folder): f.read_bytes() for f in (tmp_path / folder).rglob("*") if f.is_file()}
        for folder in ("a", "b")
    ]
    assert len(written[0]) > 20
    assert written[0].keys() == written[1].keys()
    assert [name for name, content in written[0].items() if content != written[1][name]] == []
