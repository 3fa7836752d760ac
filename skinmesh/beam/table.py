"""The beam table: section properties along the span from two independent roads."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.meshcut import element_row_middles, mesh_sections
from skinmesh.beam.sections import SectionProperties
from skinmesh.beam.totals import BladeTotals, exact_totals, sum_along
from skinmesh.definition.blade import BladeDefinition
from skinmesh.errors import InputError, Problem
from skinmesh.frozen import freeze_array
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.skin.unroll import unroll_skin
from skinmesh.surface.loft import loft_surface

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class BeamTable:
    """Section properties along the span, twice.

    Attributes
    ----------
    title, hand : str
    z : (m,) float array, m
    chord, twist : (m,) float array; m, rad
        Of the loft.
    exact : SectionProperties
        Thin-wall laminate theory on the exact sections: loft, seams and ply schedule; shear flows by the force method.
    mesh : SectionProperties
        Sum over the mesh's own elements; shear flows by the displacement method.
    exact_totals, mesh_totals : BladeTotals
        Of the whole blade, whatever z the table has.
    """

    title: str
    hand: str
    z: Floats
    chord: Floats
    twist: Floats
    exact: SectionProperties
    mesh: SectionProperties
    exact_totals: BladeTotals
    mesh_totals: BladeTotals

    def __post_init__(self) -> None:
        for name in ("z", "chord", "twist"):
            freeze_array(self, name, shape=(len(self.z),))


@dataclass(frozen=True, eq=False)
class BeamDifference:
    """Mesh against exact sections.

    Attributes
    ----------
    mass, axial, torsion : (m,) float array
        Share of the exact value.
    principal : (m, 2) float array
    inertia : (m, 2) float array
        Of the rotary inertias in the directions x and y.
    mass_centre, tension_centre, shear_centre : (m,) float array
        Distance as a share of the chord.
    structural_twist : (m,) float array, rad
        NaN where either has no direction.
    """

    mass: Floats
    axial: Floats
    torsion: Floats
    principal: Floats
    inertia: Floats
    mass_centre: Floats
    tension_centre: Floats
    shear_centre: Floats
    structural_twist: Floats


def beam_table(blade: BladeDefinition, mesh: ShellMesh, *, z: ArrayLike | None = None) -> BeamTable:
    """Work out the section properties along a blade from its definition and from its mesh.

    The two roads share the condensed stiffness of a wall (``beam.walls``) and nothing else: the sections come from the
    loft or from the nodes, the laminates from the schedule or from the stacks, the shear flows from cells or from the
    warping.

    Parameters
    ----------
    blade : BladeDefinition
    mesh : ShellMesh
        Built from the blade.
    z : (m,) float array-like, m, optional
        Within the blade; by default the middles of the element rows, where a ply whose end was moved to the nearest
        row lies in both or in neither.

    Returns
    -------
    BeamTable

    Raises
    ------
    InputError
        The layout does not fit on the skin, or the blade has no plies.
    ValueError
        A z outside the blade.
    """
    if not blade.plies:
        file = blade.sources[0].file if blade.sources else blade.stem
        raise InputError(
            [Problem(file, 0, "plies", "the blade has none: without a laminate a section has no stiffness")]
        )
    surface = loft_surface(blade)
    skin, _ = unroll_skin(blade, surface)
    middle, length = element_row_middles(mesh)
    at = middle if z is None else np.atleast_1d(np.asarray(z, dtype=float))
    if np.any((at < surface.z_ends[0]) | (at > surface.z_ends[1])):
        raise ValueError(f"z must lie within the blade: {surface.z_ends[0]} to {surface.z_ends[1]} m")
    rows = mesh_sections(mesh, middle)
    return BeamTable(
        title=blade.title,
        hand=blade.hand,
        z=at,
        chord=surface.chord(at),
        twist=surface.twist(at),
        exact=exact_sections(blade, skin, at),
        mesh=rows if z is None else mesh_sections(mesh, at),
        exact_totals=exact_totals(blade, skin),
        mesh_totals=sum_along(rows, length, spread=length**2 / 12.0),
    )


def beam_difference(table: BeamTable) -> BeamDifference:
    """Difference of the two roads.

    Parameters
    ----------
    table : BeamTable

    Returns
    -------
    BeamDifference
    """
    exact, mesh = table.exact, table.mesh
    turn = mesh.structural_twist - exact.structural_twist
    diagonals = [np.einsum("mii->mi", road.inertia) for road in (exact, mesh)]
    return BeamDifference(
        mass=_share(exact.mass, mesh.mass),
        axial=_share(exact.axial, mesh.axial),
        torsion=_share(exact.torsion, mesh.torsion),
        principal=_share(exact.principal, mesh.principal),
        inertia=_share(diagonals[0], diagonals[1]),
        mass_centre=np.linalg.norm(mesh.mass_centre - exact.mass_centre, axis=1) / table.chord,
        tension_centre=np.linalg.norm(mesh.tension_centre - exact.tension_centre, axis=1) / table.chord,
        shear_centre=np.linalg.norm(mesh.shear_centre - exact.shear_centre, axis=1) / table.chord,
        # a direction comes back after half a turn
        structural_twist=(turn + np.pi / 2) % np.pi - np.pi / 2,
    )


def _share(exact: Floats, mesh: Floats) -> Floats:
    return np.asarray(mesh / np.where(exact != 0.0, exact, np.nan) - 1.0)
