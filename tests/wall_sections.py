"""Sections of straight walls for tests, and both solvers on them."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from skinmesh.beam.cells import properties_by_cells
from skinmesh.beam.quadrature import gauss_points, running_integral
from skinmesh.beam.sections import SectionProperties
from skinmesh.beam.walls import Walls, condense_laminates
from skinmesh.beam.warping import properties_by_warping
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.laminate.theory import laminate_stiffness, mass_moments

N_GAUSS = 4


def isotropic(E: float = 70e9, nu: float = 0.3, density: float = 2700.0) -> Material:
    G = E / (2 * (1 + nu))
    return Material("metal", E, E, E, nu, nu, nu, G, G, G, density, is_isotropic=True)


def plate(thickness: float, material: Material | None = None) -> Stack:
    return Stack((Layer("plate", material or isotropic(), thickness, 0.0),))


def straight_walls(nodes: Sequence[tuple[float, float]], joins: Sequence[tuple[int, int]], stacks: Sequence[Stack]):
    """One section of straight walls about their middle lines, e3 to the right of the way from start to end."""
    places, pairs = np.array(nodes, dtype=float), np.array(joins)
    x, weight = gauss_points(N_GAUSS)
    start, end = places[pairs[:, 0]], places[pairs[:, 1]]
    share = 0.5 * (1.0 + x)[None, :, None]
    place = start[:, None] * (1 - share) + end[:, None] * share
    step = 0.5 * weight[None, :, None] * (end - start)[:, None]
    unit = (end - start) / np.linalg.norm(end - start, axis=1, keepdims=True)
    normal = np.repeat(np.stack([unit[:, 1], -unit[:, 0]], axis=1)[:, None], N_GAUSS, axis=1)
    stiffness = laminate_stiffness(stacks)
    return Walls(
        n_sections=1,
        section=np.zeros(len(pairs), dtype=int),
        strip=np.arange(len(pairs)),
        nodes=pairs,
        node_section=np.zeros(len(places), dtype=int),
        node_place=places,
        ends=np.stack([start, end], axis=1),
        place=place,
        step=step,
        normal=normal,
        cosine=np.ones((len(pairs), N_GAUSS)),
        laminates=condense_laminates(stiffness.A, stiffness.B, stiffness.D, mass_moments(stacks)),
    )


def both_methods(walls: Walls) -> tuple[SectionProperties, SectionProperties]:
    """The same walls by cells and by warping."""
    z = np.zeros(walls.n_sections)
    labels = np.arange(len(walls.node_section))
    within = running_integral(1, walls.place.shape[1])
    return (
        properties_by_cells(z, walls, node_label=labels, within=within, is_mirrored=False),
        properties_by_warping(z, walls, is_mirrored=False),
    )
