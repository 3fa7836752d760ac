"""Beam properties of a three-cell section beside those of the package ``sectionproperties``.

That program, which nobody here wrote, solves warping and shear of the solid section with plane finite elements. It
wants an environment of its own: the variable SKINMESH_SECTIONPROPERTIES names the Python that has it.
"""

from __future__ import annotations

import json
import os
import subprocess
from dataclasses import replace

import numpy as np
import pytest
from blades import blade, foot, rule, stations

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import mesh_sections
from skinmesh.definition.blade import ChordFraction, Layout, NacaProfile, PlyRule, WebRule
from skinmesh.definition.spanwise import constant
from skinmesh.laminate.material import Material
from skinmesh.mesh.build import build_mesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface

pytestmark = pytest.mark.reader

PYTHON = os.environ.get("SKINMESH_SECTIONPROPERTIES", "")
needs_package = pytest.mark.skipif(
    not PYTHON, reason="SKINMESH_SECTIONPROPERTIES names no Python with sectionproperties in it"
)

E, NU, DENSITY = 70e9, 0.3, 2700.0
METAL = Material("metal", E, E, E, NU, NU, NU, *(E / (2 + 2 * NU),) * 3, DENSITY, is_isotropic=True)
SKIN, WEB = 1.2e-3, 1.8e-3

SOLVE = """
import json, sys
from shapely import LineString, Polygon, set_precision
from sectionproperties.analysis import Section
from sectionproperties.pre import Geometry, Material
task = json.loads(sys.stdin.read())
metal = Material("metal", task["E"], task["nu"], 1.0, task["density"], "grey")
outer = Polygon(task["outline"])
assert outer.is_valid
solid = outer.difference(outer.buffer(-task["skin"], join_style="mitre"))
for line in task["webs"]:
    solid = solid.union(LineString(line).buffer(task["web"] / 2, cap_style="flat").intersection(outer))
# vertices that all but coincide would make elements without area
geometry = Geometry(set_precision(solid, 1e-6), metal)
geometry.create_mesh(task["largest"])
section = Section(geometry)
section.calculate_geometric_properties()
section.calculate_warping_properties()
eixx, eiyy, eixy = section.get_eic()
print(json.dumps({
    "mass": section.get_mass(), "EA": section.get_ea(), "centre": section.get_c(), "elements": len(section.elements),
    "EI": [[eiyy, eixy], [eixy, eixx]], "EJ": section.get_ej(), "shear centre": section.get_sc_t(),
}))
"""


def three_cells():
    """A straight blade of one section: a blunt profile with two webs, all of one metal."""
    table = stations([0.0, 3.0], [1.0, 1.0], ["foil", "foil"], pitch_axis=0.3, twist_degrees=7.0)
    layout = Layout(
        webs=(
            WebRule("fore web", foot(ChordFraction(constant(0.2))), (0.0, 3.0)),
            WebRule("aft web", foot(ChordFraction(constant(0.55))), (0.0, 3.0)),
        ),
        trailing_strip=constant(0.05),
    )
    plies = (
        PlyRule("skin", METAL, constant(SKIN), constant(1), 0.0, ("skin",)),
        PlyRule("web", METAL, constant(WEB), constant(1), 0.0, ("webs",)),
    )
    shape = {"foil": NacaProfile("4424", 0.03)}
    made = blade(table, shape, layout=layout, plies=plies, mesh=rule(0.04, close_gap=0.002))
    return replace(made, materials={"metal": METAL})


@needs_package
def test_three_cells_against_plane_elements() -> None:
    made = three_cells()
    surface = loft_surface(made)
    skin, _ = unroll_skin(made, surface)
    z = np.array([1.43])
    share = np.linspace(0.0, 1.0, 600)
    t = np.concatenate([share[::-1], -share[1:]])
    outline = surface.points(np.full_like(t, z[0]), t)[:, :2]
    level = int(np.argmin(np.abs(skin.levels.z - z[0])))
    webs = [
        surface.points(z, skin.seams.t[level, [web.pressure_seam, web.suction_seam]])[:, :2].tolist()
        for web in skin.webs
    ]
    task = {"E": E, "nu": NU, "density": DENSITY, "skin": SKIN, "web": WEB, "webs": webs, "largest": 1.0e-6}
    solved = json.loads(
        subprocess.run(
            [PYTHON, "-c", SOLVE],
            input=json.dumps(task | {"outline": outline.tolist()}),
            capture_output=True,
            text=True,
            check=True,
        ).stdout
    )
    # the package gives E J
    torsion = solved["EJ"] / (2 * (1 + NU))
    mesh = build_mesh(made)
    for road in (exact_sections(made, skin, z), mesh_sections(mesh, z)):
        assert road.n_cells[0] == 3
        # a web counts from mould face to mould face, and so twice inside the skin: 0.3 % of mass
        assert road.mass[0] == pytest.approx(solved["mass"], rel=0.005)
        assert road.axial[0] == pytest.approx(solved["EA"], rel=0.005)
        assert road.tension_centre[0] == pytest.approx(solved["centre"], abs=0.001)
        assert np.allclose(road.bending[0], solved["EI"], rtol=0.01, atol=0.0)
        assert road.torsion[0] == pytest.approx(torsion, rel=0.01)
        # after Trefftz: without the lateral contraction of bending, as thin-wall theory has it
        assert road.shear_centre[0] == pytest.approx(solved["shear centre"], abs=0.001)
