"""Areas, mass, centre of mass and inertia of a shell mesh."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.frozen import freeze_array
from skinmesh.laminate.theory import mass_moments, tabulate_layers
from skinmesh.mesh.inner_face import middle_height, node_normals, shape_functions
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]

_BLOCK = 1 << 16
"""Elements worked on at once, so that a million of them need no gigabytes."""


@dataclass(frozen=True, eq=False)
class MassProperties:
    """Area and mass of a whole mesh and of its parts.

    The laminate is a sheet of its areal mass on the reference surface's area, laid at its own mass centre along the
    surface's normal.

    Attributes
    ----------
    area : float, m²
        Of all elements, on the reference surface.
    mass : float, kg
    centre : (3,) float array, m
        Centre of mass; zero where there is no mass.
    first_moments : (3,) float array, kg m
        Mass × centre.
    inertia_origin, inertia_centre : (3, 3) float array, kg m²
        Inertia tensor about the blade's origin and about the centre of mass: products of inertia carry the minus sign.
    region_area : mapping of str to float, m²
    region_mass : mapping of str to float, kg
    material_mass : mapping of str to float, kg
        Every material of the mesh, 0 where it is not used.
    stack_area : (s,) float array, m²
        Of the elements that carry each stack.
    """

    area: float
    mass: float
    centre: Floats
    first_moments: Floats
    inertia_origin: Floats
    inertia_centre: Floats
    region_area: Mapping[str, float]
    region_mass: Mapping[str, float]
    material_mass: Mapping[str, float]
    stack_area: Floats

    def __post_init__(self) -> None:
        for name in ("centre", "first_moments"):
            freeze_array(self, name, shape=(3,))
        for name in ("inertia_origin", "inertia_centre"):
            freeze_array(self, name, shape=(3, 3))
        freeze_array(self, "stack_area", shape=(None,))


def element_areas(mesh: ShellMesh) -> Floats:
    """Area of every element on the reference surface, of the order that the mesh has.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m,) float array, m²

    Notes
    -----
    Gauss rules of 3 × 3 points (degree 5 in each direction) and 7 points (degree 5): exact for flat elements, and
    better than 1e-6 on an eighth of a circle.
    """
    areas = np.empty(len(mesh.cells))
    for block, _, area, _ in _surface_samples(mesh):
        areas[block] = area.sum(axis=1)
    return areas


def element_centres(mesh: ShellMesh) -> Floats:
    """Point in the middle of every element, on the reference surface.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m, 3) float array, m
    """
    n_nodes = mesh.cells.shape[1]
    middle = np.array([[0.0, 0.0]]) if n_nodes == 8 else np.array([[1.0, 1.0]]) / 3.0
    values, _, _ = shape_functions(n_nodes, middle)
    return np.concatenate(
        [np.zeros((0, 3)), *(np.matmul(values, nodes)[:, 0] for _, nodes in _blocks_of_nodes(mesh, mesh.order))]
    )


def element_masses(mesh: ShellMesh) -> Floats:
    """Mass of every element: area on the reference surface × areal mass.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m,) float array, kg
    """
    return element_areas(mesh) * mesh.areal_mass


def mass_properties(mesh: ShellMesh) -> MassProperties:
    """Mass, centre and inertia of the mesh, of each region and of each material.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    MassProperties
    """
    moments = np.vstack([mass_moments(mesh.stacks), np.zeros(3)])[mesh.stack]
    areal_mass = moments[:, 0]
    centre_height = np.divide(moments[:, 1], areal_mass, out=np.zeros(len(moments)), where=areal_mass > 0)
    # What each laminate adds about its own mass centre, across the surface.
    spread = moments[:, 2] - centre_height * moments[:, 1]
    height = centre_height + middle_height(mesh)
    areas = np.empty(len(mesh.cells))
    first, second = np.zeros(3), np.zeros((3, 3))
    for block, place, area, normal in _surface_samples(mesh):
        areas[block] = area.sum(axis=1)
        at = (place + height[block, None, None] * normal).reshape(-1, 3)
        mass = (area * areal_mass[block, None]).ravel()
        across = (area * spread[block, None]).ravel()
        first += mass @ at
        second += (at * mass[:, None]).T @ at
        second += (normal.reshape(-1, 3) * across[:, None]).T @ normal.reshape(-1, 3)
    masses = areas * areal_mass
    has_stack = mesh.stack >= 0
    stack_area: Floats = np.bincount(
        mesh.stack[has_stack], weights=areas[has_stack], minlength=len(mesh.stacks)
    ).astype(float)
    total = float(masses.sum())
    centre = first / total if total > 0 else np.zeros(3)
    return MassProperties(
        area=float(areas.sum()),
        mass=total,
        centre=centre,
        first_moments=first,
        inertia_origin=_inertia(second),
        inertia_centre=_inertia(second - total * np.outer(centre, centre)),
        region_area=_by_region(mesh, areas),
        region_mass=_by_region(mesh, masses),
        material_mass=_by_material(mesh, stack_area),
        stack_area=stack_area,
    )


def solid_mass(mesh: ShellMesh) -> float:
    """Mass that a solver finds which builds the laminate up as solid layers under the reference surface.

    On a curved skin the layers inside the mould surface are shorter than it is: the plain product of area and areal
    mass is too large by about thickness / 2R. Here every layer counts at its own depth, by the determinant of
    Y = x + ζ n with x the second-order element and n the interpolated mean normals of its nodes, a parabola in ζ. On a
    smooth surface that is the area factor 1 − 2 H ζ + K ζ² of Steiner's formula.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    float, kg
    """
    normals = node_normals(mesh)
    places, weights = _gauss_rule(mesh.n_sides)
    values, along_first, along_second = shape_functions(mesh.cells.shape[1], places)
    moments = _moments_about_surface(mesh)
    total = 0.0
    for block, x in _blocks_of_nodes(mesh, 2):
        n = normals.normals[normals.group[block]]
        middle = np.matmul(values, n)
        x_first, x_second = np.matmul(along_first, x), np.matmul(along_second, x)
        n_first, n_second = np.matmul(along_first, n), np.matmul(along_second, n)
        powers = (
            np.cross(x_first, x_second),
            np.cross(n_first, x_second) + np.cross(x_first, n_second),
            np.cross(n_first, n_second),
        )
        for power, vector in enumerate(powers):
            volume = np.einsum("epd,epd,p->e", vector, middle, weights)
            total += float(volume @ moments[block, power])
    return total


def _moments_about_surface(mesh: ShellMesh) -> Floats:
    """(m, 3) integrals of density × ζ⁰, ζ¹, ζ² through the laminate, ζ the height over the reference surface."""
    about_middle = np.vstack([mass_moments(mesh.stacks), np.zeros(3)])[mesh.stack]
    mass, first, second = about_middle.T
    shift = middle_height(mesh)
    return np.column_stack([mass, first + shift * mass, second + 2 * shift * first + shift**2 * mass])


def _surface_samples(mesh: ShellMesh) -> Iterator[tuple[slice, Floats, Floats, Floats]]:
    """Blocks of elements with, at every Gauss point, the place, the share of the area, and the unit normal."""
    points, weights = _gauss_rule(mesh.n_sides)
    values, along_first, along_second = shape_functions(mesh.cells.shape[1], points)
    for block, nodes in _blocks_of_nodes(mesh, mesh.order):
        normal = np.cross(np.matmul(along_first, nodes), np.matmul(along_second, nodes))
        size = np.linalg.norm(normal, axis=2)
        normal /= np.maximum(size, np.finfo(float).tiny)[..., None]
        yield block, np.matmul(values, nodes), size * weights, normal


def _blocks_of_nodes(mesh: ShellMesh, order: int) -> Iterator[tuple[slice, Floats]]:
    """Blocks of elements with the positions of their second-order nodes.

    A first-order element is the second-order one whose mid nodes lie in the middle of its straight edges.
    """
    for start in range(0, len(mesh.cells), _BLOCK):
        block = slice(start, start + _BLOCK)
        if order == 2:
            yield block, mesh.points[mesh.cells[block]]
        else:
            corners = mesh.points[mesh.cells[block, : mesh.n_sides]]
            yield block, np.concatenate([corners, (corners + np.roll(corners, -1, axis=1)) / 2], axis=1)


def _gauss_rule(n_sides: int) -> tuple[Floats, Floats]:
    """Places and weights in the unit element.

    Quadrilaterals: product of 3-point Gauss–Legendre rules. Triangles: Radon's 7-point rule of degree 5 (Zienkiewicz &
    Taylor, The Finite Element Method, vol. 1, table of triangle rules, from memory).
    """
    if n_sides == 4:
        place, weight = np.polynomial.legendre.leggauss(3)
        first, second = np.meshgrid(place, place, indexing="ij")
        return np.column_stack([first.ravel(), second.ravel()]), np.outer(weight, weight).ravel()
    root = np.sqrt(15.0)
    near, far = (6.0 - root) / 21.0, (6.0 + root) / 21.0
    places = [[1 / 3, 1 / 3]]
    for share in (near, far):
        places += [[share, share], [1 - 2 * share, share], [share, 1 - 2 * share]]
    weights = np.repeat([0.225, (155.0 - root) / 1200.0, (155.0 + root) / 1200.0], [1, 3, 3]) / 2.0
    return np.array(places), weights


def _inertia(second: Floats) -> Floats:
    """Inertia tensor from the second moments ∫ x xᵀ dm."""
    inertia: Floats = np.trace(second) * np.eye(3) - (second + second.T) / 2
    return inertia


def _by_region(mesh: ShellMesh, values: Floats) -> dict[str, float]:
    sums = np.bincount(mesh.region, weights=values, minlength=len(mesh.regions))
    return {region.name: float(total) for region, total in zip(mesh.regions, sums, strict=True)}


def _by_material(mesh: ShellMesh, stack_area: Floats) -> dict[str, float]:
    table = tabulate_layers(mesh.stacks)
    layer_mass = stack_area[table.stack] * table.thickness * table.density
    sums = np.bincount(table.material, weights=layer_mass, minlength=len(table.materials))
    found = {material.name: float(total) for material, total in zip(table.materials, sums, strict=True)}
    return dict.fromkeys(mesh.materials, 0.0) | found
