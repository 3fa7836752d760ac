"""The blade as a beam, in the variants that are set beside the solver."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from hashlib import sha256
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import splu

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import mesh_sections, mesh_walls
from skinmesh.beam.sections import SectionProperties
from skinmesh.beam.walls import Walls, condense_laminates
from skinmesh.beam.warping import properties_by_warping
from skinmesh.definition.blade import COUNTER_CLOCKWISE
from skinmesh.definition.read import load_blade
from skinmesh.laminate.theory import laminate_stiffness, mass_moments
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface
from skinmesh.trial.model import TrialModel
from skinmesh.trial.theory import BeamBays, beam_bays

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

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
    shear = shear_compliance(mesh_walls(model.mesh, middle))
    edges, part = _bays(z)
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


def held_beams(model: TrialModel) -> BeamSide:
    """Make the beams of a model whose sections keep their form, wall by wall.

    No wall strains round the section: its stiffness is A11 and A66 themselves, where the beam table has them free of
    hoop force, A11 − A12² / A22 (Vlasov, Thin-Walled Elastic Beams, 1961, ch. 1: the assumption of a rigid contour;
    from memory).

    Parameters
    ----------
    model : TrialModel

    Returns
    -------
    BeamSide
        On the sections of the mesh; variants SHEARED, COUPLED and ALL.
    """
    _, z = model.row_ends
    middle = 0.5 * (z[1:] + z[:-1])
    walls = _held_walls(model.mesh, middle)
    sections = properties_by_warping(middle, walls, is_mirrored=model.mesh.hand == COUNTER_CLOCKWISE)
    shear = shear_compliance(walls)
    edges, part = _bays(z)
    own, slack = sections.take(part), shear[part]
    return BeamSide(
        road=MESH,
        note="the sections of the mesh's own elements, their walls kept from straining round the section",
        sections=sections,
        plain=beam_bays(edges, own),
        variants={
            COUPLED: beam_bays(edges, own, is_coupled=True),
            SHEARED: beam_bays(edges, own, shear=slack),
            ALL: beam_bays(edges, own, shear=slack, is_coupled=True),
        },
    )


def _held_walls(mesh: ShellMesh, z: Floats) -> Walls:
    """Walls of cuts through the mesh that do not strain round the section."""
    stiffness = laminate_stiffness(mesh.stacks)
    A, B = stiffness.A.copy(), stiffness.B.copy()
    # a hoop strain that acts on nothing else leaves nothing to take out with it
    A[:, 1, [0, 2]] = A[:, [0, 2], 1] = 0.0
    B[:, 1] = B[:, :, 1] = 0.0
    walls = mesh_walls(mesh, z)
    laminates = condense_laminates(A, B, stiffness.D, mass_moments(mesh.stacks))
    return replace(walls, laminates=laminates.take(mesh.stack[walls.strip]))


def _bays(z: Floats) -> tuple[Floats, Ints]:
    """Ends of bays, enough for smooth modes, and the element row of each."""
    n_rows = len(z) - 1
    n_parts = -(-LEAST_BAYS // n_rows)
    share = np.arange(n_rows * n_parts + 1) / n_parts
    return np.interp(share, np.arange(len(z)), z), np.repeat(np.arange(n_rows), n_parts)


def shear_compliance(walls: Walls) -> Floats:
    """Transverse shear strains of sections under unit forces in the shear centre.

    The shear flow of each force follows from the growth of the axial force along the walls; its energy gives the mean
    strain (Timoshenko & Goodier, Theory of Elasticity; Cowper, Journal of Applied Mechanics 33, 1966, on what a mean
    shear strain may be; from memory). Stretching along a wall is taken as even over each element.

    Parameters
    ----------
    walls : Walls

    Returns
    -------
    (m, 2, 2) float array, 1/N
        Strains along x and y under forces along x and y.
    """
    m, section = walls.n_sections, walls.section
    length = np.linalg.norm(walls.step, axis=2)
    weight = walls.laminates.held[:, 0, 0, None] * length
    slack = length.sum(axis=1) / walls.laminates.shear

    def by_section(values: Floats) -> Floats:
        total = np.zeros((m, *values.shape[1:]))
        np.add.at(total, section, values)
        return total

    centre = by_section(np.einsum("wp,wpd->wd", weight, walls.place)) / by_section(weight.sum(axis=1))[:, None]
    arm = walls.place - centre[section][:, None]
    bending = by_section(np.einsum("wp,wpi,wpj->wij", weight, arm, arm))
    growth = np.einsum("wp,wpi,wij->wj", weight, arm, np.linalg.inv(bending)[section])
    warping = _balanced_warping(walls.nodes, 1.0 / slack, growth)
    flow = (warping[walls.nodes[:, 1]] - warping[walls.nodes[:, 0]]) / slack[:, None]
    return by_section(np.einsum("w,wi,wj->wij", slack, flow, flow))


def _balanced_warping(nodes: Ints, spring: Floats, growth: Floats) -> Floats:
    """(k, 2) warping of the nodes of walls whose flows balance the growth of axial force in them."""
    k, (start, end) = int(nodes.max()) + 1, nodes.T
    values = np.concatenate([spring, spring, -spring, -spring])
    rows, columns = np.concatenate([start, end, start, end]), np.concatenate([start, end, end, start])
    matrix = coo_matrix((values, (rows, columns)), shape=(k, k))
    load = np.zeros((k, 2))
    for side in (start, end):
        np.add.at(load, side, 0.5 * growth)
    # one node of each part stands still
    _, part = connected_components(matrix, directed=False)
    free = np.ones(k, dtype=bool)
    free[np.unique(part, return_index=True)[1]] = False
    warping = np.zeros((k, 2))
    warping[free] = splu(matrix.tocsc()[free][:, free]).solve(load[free])
    return warping
