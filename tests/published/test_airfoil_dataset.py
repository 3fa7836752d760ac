"""Three hundred public profiles, read and lofted, or refused.

Source: the coordinate files that the PyPI package AeroSandbox ships (some 2 170 public airfoils, most of them from the
UIUC airfoil coordinates database, in both orderings). The package is no dependency: its folder of files is given by the
environment variable SKINMESH_AIRFOILS.
"""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
import shapely
from blades import blade, rule, stations

from skinmesh.definition.blade import CircleProfile, FileProfile
from skinmesh.definition.coordinates import read_coordinates
from skinmesh.definition.filetext import read_text
from skinmesh.definition.problems import Findings
from skinmesh.mesh.build import build_mesh
from skinmesh.surface.loft import loft_surface
from skinmesh.surface.profile import _without_base, read_unit_shape

N_PROFILES = 300
SEED = 20260

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(
        "SKINMESH_AIRFOILS" not in os.environ, reason="SKINMESH_AIRFOILS does not name the folder of airfoil files"
    ),
]


def chosen_files() -> list[Path]:
    files = sorted(Path(os.environ["SKINMESH_AIRFOILS"]).glob("*.dat"))
    assert len(files) > 2000
    picked = np.random.default_rng(SEED).choice(len(files), N_PROFILES, replace=False)
    return [files[i] for i in sorted(picked)]


def read(file: Path) -> tuple[FileProfile | None, list[str]]:
    findings = Findings()
    source = read_text(file, file.name, findings=findings, kind="profile file", is_strict=False)
    points = None if source is None else read_coordinates(source, findings)
    profile = None if points is None else FileProfile(file.name, points)
    return profile, [problem.text for problem in findings.problems]


def test_three_hundred_profiles_are_read_and_lofted_or_refused():
    refused: dict[str, list[str]] = {}
    in_own_axes = 0
    for file in chosen_files():
        profile, reasons = read(file)
        if profile is None:
            assert len(reasons) == 1
            refused[file.name] = reasons
            continue
        assert reasons == []
        table = stations([0.0, 2.0, 5.0], [1.0, 1.0, 0.5], ["p", "p", "ring"], pitch_axis=0.3)
        surface = loft_surface(blade(table, {"p": profile, "ring": CircleProfile()}))
        # a dense line that passes through every knot of the loft
        t = np.unique(np.concatenate([-surface.knots[0], surface.knots[1], np.linspace(-1, 1, 4001)]))
        section = surface.section(2.0, t)
        if read_unit_shape(profile).scale != 1:  # the file keeps its own axes: its points are known on the section
            in_own_axes += 1
            loop = _without_base(profile.points[:, 0] + 1j * profile.points[:, 1])
            wanted = loop / (0.5 * (loop[0] + loop[-1])).real - 0.3
            line = shapely.linestrings(np.column_stack([section.real, section.imag]))
            distance = shapely.distance(shapely.points(wanted.real, wanted.imag), line)
            assert distance.max() < 1e-6, file.name
        for z in (0.0, 3.5):
            ring = surface.section(z, t)
            assert np.all(np.isfinite(ring)), file.name
    assert in_own_axes > 0.8 * N_PROFILES
    # what is refused is refused for a reason of its own, and rarely
    assert len(refused) < 0.1 * N_PROFILES, refused


@pytest.mark.parametrize("name", ["s809.dat", "naca4412.dat", "clarky.dat", "du84132v.dat"])
def test_well_known_profiles_mesh(name):
    file = Path(os.environ["SKINMESH_AIRFOILS"]) / name
    if not file.exists():
        pytest.skip(f"the folder has no {name}")
    profile, reasons = read(file)
    assert reasons == []
    table = stations([0.0, 2.0, 5.0], [1.0, 1.0, 0.5], ["p", "p", "p"], pitch_axis=0.3)
    mesh = build_mesh(blade(table, {"p": profile}, mesh=rule(0.1)))
    assert len(mesh.cells) > 500
