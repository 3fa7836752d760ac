"""The blade as a beam, in the variants that are set beside the solver."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import mesh_sections
from skinmesh.beam.sections import SectionProperties
from skinmesh.definition.read import load_blade
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface
from skinmesh.trial.loads import wall_stiffness
from skinmesh.trial.model import TrialModel
from skinmesh.trial.theory import BeamBays, beam_bays

Floats = NDArray[np.float64]

EXACT, MESH = "exact sections", "mesh"
PLAIN, COUPLED, SHEARED, ALL = "plain", "coupled", "sheared", "all"
LEAST_BAYS = 200


@dataclass(frozen=True, eq=False)
class BeamSide:
    """Beams of one blade.

    Attributes
    ----------
    road : str
        EXACT or MESH: where the sections of the beam table come from.
    note : str
        Why, in words.
    sections : SectionProperties
        One a row of elements.
    plain : BeamBays
        Euler–Bernoulli on the beam table: what the solver is set beside.
    variants : mapping of str to BeamBays
        The same with one thing more each, to tell differences apart: MESH on sections of the mesh, COUPLED with the
        couplings of each section, SHEARED with shear strains; ALL with all of them.
    """

    road: str
    note: str
    sections: SectionProperties
    plain: BeamBays
    variants: Mapping[str, BeamBays]

    @property
    def tip_shear_centre(self) -> Floats:
        """(2,) float array, m: of the last row of elements."""
        return np.asarray(self.sections.shear_centre[-1])


def find_blade_file(model: TrialModel) -> Path | None:
    """The blade file of a mesh, by its name and the SHA-256 of its bytes.

    It is looked for in the working folder, beside the mesh's folder, and in it.

    Parameters
    ----------
    model : TrialModel

    Returns
    -------
    Path or None
    """
    sources = model.mesh.sources
    if not sources:
        return None
    directory = model.built.directory.resolve()
    for folder in (Path(), directory.parent, directory):
        path = folder / Path(sources[0].file).name
        if path.is_file() and sha256(path.read_bytes()).hexdigest() == sources[0].sha256:
            return path
    return None


def make_beams(model: TrialModel, blade_file: Path | None) -> BeamSide:
    """Make the beams of a model.

    Parameters
    ----------
    model : TrialModel
    blade_file : Path or None
        For the exact sections; without it those of the mesh are taken.

    Returns
    -------
    BeamSide

    Raises
    ------
    InputError
        The blade file has mistakes.
    ValueError
        A section carries nothing.
    """
    _, z = model.row_ends
    middle = 0.5 * (z[1:] + z[:-1])
    of_mesh = mesh_sections(model.mesh, middle)
    sections, road = of_mesh, MESH
    note = "the blade file was not found; its sections are those of the mesh's own elements (give it with --blade)"
    if blade_file is not None:
        blade = load_blade(blade_file)
        skin, _ = unroll_skin(blade, loft_surface(blade))
        sections, road = exact_sections(blade, skin, middle), EXACT
        note = f"thin-wall laminate theory on the exact sections of {blade_file.name}"
        if blade.sources[0].sha256 != model.mesh.sources[0].sha256:
            note += ", which has changed since the mesh was built"
    shear = row_shear_stiffness(model.mesh, z)
    n_parts = -(-LEAST_BAYS // len(middle))
    part = np.repeat(np.arange(len(middle)), n_parts)
    share = np.arange(len(middle) * n_parts + 1) / n_parts
    edges = np.interp(share, np.arange(len(z)), z)
    return BeamSide(
        road=road,
        note=note,
        sections=sections,
        plain=beam_bays(edges, sections.take(part)),
        variants={
            MESH: beam_bays(edges, of_mesh.take(part)),
            COUPLED: beam_bays(edges, sections.take(part), is_coupled=True),
            SHEARED: beam_bays(edges, sections.take(part), shear=shear[part]),
            ALL: beam_bays(edges, of_mesh.take(part), shear=shear[part], is_coupled=True),
        },
    )


def row_shear_stiffness(mesh: ShellMesh, z: Floats) -> Floats:
    """Stiffness of each row of elements against transverse shear, were its sections rigid in their plane.

    That is an upper bound: in a real section the shear flow follows from equilibrium. Shear deflections from it are at
    least what they are said to be.

    Parameters
    ----------
    mesh : ShellMesh
    z : (r + 1,) float array, m
        Ends of the rows.

    Returns
    -------
    (r, 2, 2) float array, N
    """
    middle = mesh.points[mesh.cells[:, : mesh.n_sides], 2].mean(axis=1)
    row = np.clip(np.searchsorted(z, middle, side="right") - 1, 0, len(z) - 2)
    across = mesh.e2[:, :2]
    walls = (element_areas(mesh) * wall_stiffness(mesh)[1])[:, None, None] * across[:, :, None] * across[:, None, :]
    total = np.zeros((len(z) - 1, 2, 2))
    np.add.at(total, row, walls)
    return total / np.diff(z)[:, None, None]
