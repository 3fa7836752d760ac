"""Shear flows by the displacement method: the section's warping as the unknown.

The axial displacement w of the section's nodes makes the energy of the walls least; one sparse system of equations
holds all sections. Trefftz, Zeitschrift für angewandte Mathematik und Mechanik 15 (1935), for the shear centre from the
warping of torsion; Kollbrunner & Basler, Torsion in Structures, 1969, for both methods side by side (from memory).
Nothing here knows of cells: they are closed because their walls share nodes.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import splu

from skinmesh.beam.sections import SectionProperties, section_properties, unit_shear_rates
from skinmesh.beam.walls import Walls, WallTerms, sum_walls

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


def properties_by_warping(z: Floats, walls: Walls, *, is_mirrored: bool) -> SectionProperties:
    """Section properties by the displacement method.

    Parameters
    ----------
    z : (m,) float array, m
        Of the sections.
    walls : Walls
    is_mirrored : bool

    Returns
    -------
    SectionProperties
    """
    terms, m = sum_walls(walls), walls.n_sections
    warp, n_parts, n_cells = _solve_warping(walls, terms)
    # strain of each wall between its nodes, (w, 4), and the shear flow that it makes, for unit u
    gap = warp[walls.nodes[:, 1]] - warp[walls.nodes[:, 0]] + terms.drift
    flow = gap / terms.slack[:, None]
    energy = (gap[:, :, None] * flow[:, None, :]).reshape(-1, 16)
    sums = np.stack([np.bincount(walls.section, weights=column, minlength=m) for column in energy.T], axis=-1)
    stiffness = terms.held + sums.reshape(m, 4, 4)
    return section_properties(
        z,
        terms,
        stiffness,
        shear_centre=_shear_centre(walls, terms, stiffness, flow, warp[:, 3]),
        n_cells=n_cells,
        n_parts=n_parts,
        is_mirrored=is_mirrored,
    )


def _solve_warping(walls: Walls, terms: WallTerms) -> tuple[Floats, Ints, Ints]:
    """(k, 4) axial displacement of every node for unit u; parts and cells of each section."""
    k, m = len(walls.node_section), walls.n_sections
    start, end = walls.nodes.T
    spring = 1.0 / terms.slack
    rows = np.concatenate([start, end, start, end])
    columns = np.concatenate([start, end, end, start])
    matrix = coo_matrix((np.concatenate([spring, spring, -spring, -spring]), (rows, columns)), shape=(k, k))
    n_all, part = connected_components(matrix, directed=False)
    _, first = np.unique(part, return_index=True)
    n_parts = np.bincount(walls.node_section[first], minlength=m)
    n_nodes = np.bincount(walls.node_section, minlength=m)
    n_walls = np.bincount(walls.section, minlength=m)
    pull = spring[:, None] * terms.drift
    load = np.zeros((k, 4))
    np.add.at(load, start, pull)
    np.subtract.at(load, end, pull)
    # one node of each part stands still
    free = np.ones(k, dtype=bool)
    free[first] = False
    warp = np.zeros((k, 4))
    if free.any():
        held = matrix.tocsc()[free][:, free]
        warp[free] = splu(held, permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True}).solve(load[free])
    assert n_all == len(first)
    return warp, n_parts, n_walls - n_nodes + n_parts


def _shear_centre(walls: Walls, terms: WallTerms, stiffness: Floats, flow: Floats, warp: Floats) -> Floats:
    """(m, 2) shear centre from the origin of the terms.

    A shear flow without twist does no work on the strains of torsion. So its moment is minus the integral of the
    growth of axial force × the warping of unit twist.
    """
    rates = unit_shear_rates(stiffness)[walls.section]
    growth = terms.axial @ rates
    growth += terms.axial_by_flow[..., None] * (flow[:, None] @ rates)
    # bridges are rigid: along them the warping follows the twist alone
    low = warp[walls.nodes[:, 0]] - terms.bridges[:, 0]
    high = warp[walls.nodes[:, 1]] + terms.bridges[:, 1]
    # along the wall it follows the length: exact in a straight wall
    way = walls.ends[:, 1] - walls.ends[:, 0]
    length = np.maximum(np.sum(way**2, axis=1), np.finfo(float).tiny)
    share = np.einsum("wpd,wd->wp", walls.place - walls.ends[:, :1], way) / length[:, None]
    along = low[:, None] + share * (high - low)[:, None]
    work = -np.einsum("wpf,wp->wf", growth, along)
    moment = np.stack(
        [np.bincount(walls.section, weights=column, minlength=walls.n_sections) for column in work.T], axis=1
    )
    return np.stack([moment[:, 1], -moment[:, 0]], axis=1)
