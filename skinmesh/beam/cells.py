"""Shear flows by the force method: closed cells after Bredt and Batho, the shear centre from flows without twist.

Bredt, Zeitschrift des VDI 40 (1896), one cell; Batho, Engineering 100 (1915), several; Megson, Aircraft Structures, ch.
on the torsion and shear of multi-cell beams; Bauchau & Craig, Structural Analysis, 2009, ch. 8 (from memory). A cell's
twist is the sum of shear flow / shear stiffness round it over twice its area; all cells twist alike. Open walls keep
the torsional stiffness of their own laminate.

The cells come from the graph of the section: a spanning tree of its walls, and one cell for every wall beyond it. Any
such set of cells gives the same stiffness as the cells that the eye sees.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.sections import SectionProperties, section_properties, unit_shear_rates
from skinmesh.beam.walls import Walls, WallTerms, sum_walls

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Cells:
    """The graph of sections with the same walls.

    Attributes
    ----------
    cycles : (c, w) float array
        1 where a cell passes a wall from start to end, −1 where it passes it backwards.
    flows : (w, w) float array
        Start flows in the walls of the tree that carry off unit flows arriving at each wall's end; no flow begins in
        the walls beyond the tree.
    n_parts : int
    """

    cycles: Floats
    flows: Floats
    n_parts: int


def find_cells(ends: Ints) -> Cells:
    """Find cells from the walls' node labels.

    Parameters
    ----------
    ends : (w, 2) int array
        Labels of start and end node of each wall.

    Returns
    -------
    Cells

    Examples
    --------
    Two cells side by side, and a loose flange:

    >>> cells = find_cells(np.array([[0, 1], [1, 2], [2, 3], [3, 0], [0, 2], [2, 4]]))
    >>> len(cells.cycles), cells.n_parts
    (2, 1)
    """
    labels, number = np.unique(ends, return_inverse=True)
    number = number.reshape(-1, 2)
    part = np.arange(len(labels))
    in_tree = np.zeros(len(ends), dtype=bool)
    for wall, (a, b) in enumerate(number):
        if part[a] != part[b]:
            part[part == part[a]] = part[b]
            in_tree[wall] = True
    arrives = np.zeros((len(labels), len(ends)))
    arrives[number[:, 1], np.arange(len(ends))] = 1.0
    balance = arrives.copy()
    np.subtract.at(balance, (number[:, 0], np.arange(len(ends))), 1.0)
    # what leaves the tree's nodes must come through the tree: one node of each part follows from the others
    through_tree = np.linalg.pinv(balance[:, in_tree])
    beyond = ~in_tree
    cycles = np.zeros((int(beyond.sum()), len(ends)))
    cycles[:, beyond] = np.eye(len(cycles))
    cycles[:, in_tree] = np.round(-(through_tree @ balance[:, beyond]).T)
    flows = np.zeros((len(ends), len(ends)))
    flows[in_tree] = -through_tree @ arrives
    return Cells(cycles, flows, len(np.unique(part)))


def properties_by_cells(
    z: Floats, walls: Walls, *, node_label: Ints, within: Floats, is_mirrored: bool
) -> SectionProperties:
    """Section properties by the force method.

    Parameters
    ----------
    z : (m,) float array, m
        Of the sections.
    walls : Walls
        Sorted by section, then by strip.
    node_label : (k,) int array
        Label of every node within its section; the same parts of the blade have the same labels everywhere.
    within : (p, p) float array
        Matrix of the running integral: row i sums shares of the samples up to sample i.
    is_mirrored : bool

    Returns
    -------
    SectionProperties
    """
    terms = sum_walls(walls)
    m = walls.n_sections
    stiffness, centre = terms.held.copy(), np.zeros((m, 2))
    n_cells, n_parts = np.zeros(m, dtype=np.int64), np.zeros(m, dtype=np.int64)
    labels = node_label[walls.nodes]
    for sections, of_walls in _alike(walls, labels):
        cells = find_cells(labels[of_walls[0]])
        n_cells[sections], n_parts[sections] = len(cells.cycles), cells.n_parts
        flow_per_strain = _cell_flows(cells, terms, of_walls)
        drift = np.einsum("cw,gwk->gck", cells.cycles, terms.drift[of_walls])
        stiffness[sections] += np.swapaxes(drift, 1, 2) @ flow_per_strain
        centre[sections] = _shear_centre(cells, terms, of_walls, stiffness[sections], flow_per_strain, within)
    return section_properties(
        z, terms, stiffness, shear_centre=centre, n_cells=n_cells, n_parts=n_parts, is_mirrored=is_mirrored
    )


def _alike(walls: Walls, labels: Ints) -> list[tuple[Ints, Ints]]:
    """Sections with the same graph, and (sections, w) their walls."""
    n_strips = int(walls.strip.max(initial=-1)) + 1
    shape = np.full((walls.n_sections, n_strips, 2), -1)
    shape[walls.section, walls.strip] = labels
    index = np.full((walls.n_sections, n_strips), -1)
    index[walls.section, walls.strip] = np.arange(len(walls.section))
    _, kind = np.unique(shape.reshape(walls.n_sections, -1), axis=0, return_inverse=True)
    kind = kind.ravel()
    groups = [np.flatnonzero(kind == k) for k in range(int(kind.max(initial=-1)) + 1)]
    found = [(group, index[group][:, index[group[0]] >= 0]) for group in groups]
    return [(group, own) for group, own in found if own.shape[1]]


def _cell_flows(cells: Cells, terms: WallTerms, of_walls: Ints) -> Floats:
    """(g, c, 4) shear flow round each cell for unit u."""
    slack = np.einsum("cw,gw,dw->gcd", cells.cycles, terms.slack[of_walls], cells.cycles)
    drift = np.einsum("cw,gwk->gck", cells.cycles, terms.drift[of_walls])
    return np.asarray(np.linalg.solve(slack, drift))


def _shear_centre(
    cells: Cells, terms: WallTerms, of_walls: Ints, stiffness: Floats, flow_per_strain: Floats, within: Floats
) -> Floats:
    """(g, 2) place where unit forces make the moments that their flows without twist have."""
    rates = unit_shear_rates(stiffness)
    # growth of the axial force along the blade: of the strain itself, and of the shear flow that it is coupled to
    growth = terms.axial[of_walls] @ rates[:, None]
    flow_rates = np.einsum("cw,gcf->gwf", cells.cycles, flow_per_strain @ rates)
    growth += terms.axial_by_flow[of_walls][..., None] * flow_rates[:, :, None]
    gained = -np.einsum("pq,gwqf->gwpf", within, growth)
    at_end = -growth.sum(axis=2)
    start = np.einsum("vw,gwf->gvf", cells.flows, at_end)
    slack = np.einsum("cw,gw,dw->gcd", cells.cycles, terms.slack[of_walls], cells.cycles)
    gap = start * terms.slack[of_walls][..., None]
    gap += np.einsum("gwpf,gwp->gwf", gained, terms.slack_steps[of_walls])
    closing = np.linalg.solve(slack, -np.einsum("cw,gwf->gcf", cells.cycles, gap))
    start += np.einsum("cw,gcf->gwf", cells.cycles, closing)
    sweep = terms.sweep_steps[of_walls]
    moment = np.einsum("gwf,gw->gf", start, sweep.sum(axis=2) + terms.bridges[of_walls].sum(axis=2))
    moment += np.einsum("gwpf,gwp->gf", gained, sweep)
    moment += np.einsum("gwf,gw->gf", at_end, terms.bridges[of_walls][..., 1])
    return np.stack([moment[:, 1], -moment[:, 0]], axis=1)
