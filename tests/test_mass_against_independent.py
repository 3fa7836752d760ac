"""Mass, centre and region areas of the mesh against the integration that knows neither mesh nor skinmesh."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from independent_blade import IndependentBlade
from independent_sums import totals

from skinmesh.definition.read import load_blade
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.measure import element_areas, element_centres

ROOT = Path(__file__).parents[1]
BLADES = (
    ROOT / "examples" / "marram-24" / "marram-24.yaml",
    ROOT / "examples" / "tidal-6" / "tidal-6.yaml",
    ROOT / "tests" / "published" / "research-rotor" / "research-rotor.yaml",
)


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("path", BLADES, ids=lambda p: p.stem)
def test_mesh_weighs_what_table_and_schedule_say(path: Path, order: int) -> None:
    wanted = totals(IndependentBlade(path))
    blade = load_blade(path)
    mesh = build_mesh(replace(blade, mesh=replace(blade.mesh, order=order)))
    area = element_areas(mesh)
    mass = area * np.array([stack.areal_mass for stack in mesh.stacks])[mesh.stack]
    assert mass.sum() == pytest.approx(wanted.mass, rel=2e-3)
    centre = mass @ element_centres(mesh) / mass.sum()
    span = np.ptp(mesh.points[:, 2])
    assert centre == pytest.approx(wanted.centre, abs=2e-3 * span)
    # the trailing gap closes over two element rows instead of at once, and flat elements cut corners at first order
    bound = {1: 6e-3, 2: 2e-3}[order]
    for i, region in enumerate(mesh.regions):
        if region.name != "trailing base":
            found = area[mesh.region == i].sum()
            assert found == pytest.approx(
                wanted.areas[region.name], rel=1e-2 if region.name.endswith("trailing strip") else bound
            ), region.name
    skin = sum(area[mesh.region == i].sum() for i, r in enumerate(mesh.regions) if r.name in wanted.region_mass)
    assert skin == pytest.approx(sum(wanted.areas.values()), rel={1: 2e-3, 2: 1e-3}[order])
