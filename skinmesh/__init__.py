"""Layered shell meshes of rotor blades from a station table and a ply schedule.

>>> import skinmesh
>>> blade = skinmesh.load("marram-24.yaml")  # doctest: +SKIP
>>> mesh = skinmesh.build(blade)  # doctest: +SKIP
>>> skinmesh.write(mesh, "out", formats=["vtu", "inp"])  # doctest: +SKIP
"""

from skinmesh.definition.blade import BladeDefinition
from skinmesh.definition.read import load_blade as load
from skinmesh.errors import InputError, LayoutChanged, MeshError, MissingExtra, OutputError, Problem, SkinmeshError
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.build import build_mesh as build
from skinmesh.mesh.carry import MeshMap, map_meshes
from skinmesh.mesh.shellmesh import Region, ShellMesh
from skinmesh.version import __version__
from skinmesh.write.files import WrittenFile, write

__all__ = [
    "BladeDefinition",
    "InputError",
    "Layer",
    "LayoutChanged",
    "Material",
    "MeshError",
    "MeshMap",
    "MissingExtra",
    "OutputError",
    "Problem",
    "Region",
    "ShellMesh",
    "SkinmeshError",
    "Stack",
    "WrittenFile",
    "__version__",
    "build",
    "load",
    "map_meshes",
    "write",
]
