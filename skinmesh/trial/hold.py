"""Sections that keep their form: constraints without stiffness or mass of their own, for a second run of the model.

Every node of a section follows the section's rigid motion in the section's own plane,

    u_x = u_x(A) − θz (y − y_A) + θy (z − z_A),    u_y = u_y(A) + θz (x − x_A) − θx (z − z_A),

with θz from a second node B of it. The last terms are small: the middle of an inclined laminate lies beside the plane
of its nodes, and the tilts θx and θy are those of three nodes. Across the plane every node is free: sections shift,
turn, tilt and warp, but they do not ovalise, and no wall bends within the plane. Corner and mid nodes are held alike,
on the ends of the element rows and half-way between.

So the wall's strain round the section is held too, Poisson's contraction with it, which makes a wall stiffer: an
isotropic one by 1 / (1 − ν²) in tension. Theory that such a run is set beside has walls that are held alike.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.trial.rings import solver_places
from skinmesh.write.deck_text import rows_text

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

_SAME_LEVEL = 1e-8


def held_sections(mesh: ShellMesh, levels: Floats) -> list[Ints]:
    """Nodes of the sections that keep their form, section after section.

    Parameters
    ----------
    mesh : ShellMesh
        Of second order.
    levels : (r,) float array
        Rows of the ends of the element rows, increasing; the first is the root, whose nodes are held anyway.

    Returns
    -------
    list of int arrays
        Indices into the mesh's nodes. Nodes of a closing trailing edge that lie between these sections are in none.
    """
    wanted = np.sort(np.concatenate([levels[1:], 0.5 * (levels[1:] + levels[:-1])]))
    place = np.clip(np.searchsorted(wanted, mesh.row - _SAME_LEVEL), 0, len(wanted) - 1)
    node = np.flatnonzero(np.abs(wanted[place] - mesh.row) < _SAME_LEVEL)
    node = node[np.argsort(place[node], kind="stable")]
    return np.split(node, np.flatnonzero(np.diff(place[node])) + 1)


def hold_text(mesh: ShellMesh, levels: Floats) -> str:
    """Constraints of a keyword deck that make sections keep their form.

    Parameters
    ----------
    mesh : ShellMesh
        Of second order.
    levels : (r,) float array
        As for :func:`held_sections`.

    Returns
    -------
    str
        One card, to stand before the first step.
    """
    places = solver_places(mesh)
    parts = ["** Sections keep their form: displacements in their planes are those of rigid bodies.\n*EQUATION\n"]
    for nodes in held_sections(mesh, levels):
        parts += _section_lines(mesh.node_number[nodes], places[nodes])
    return "".join(parts)


def _section_lines(number: Ints, place: Floats) -> list[str]:
    """Equations of one section; the first term of each is the displacement that the others determine.

    A and B are the outermost nodes along the longer side of the section, ``along``; C is the farthest from the line
    through both. The section's plane tilts as their three do.
    """
    along = int(np.argmax(np.ptp(place[:, :2], axis=0)))
    across = 1 - along
    a, b = int(np.argmin(place[:, along])), int(np.argmax(place[:, along]))
    arm = place - place[a]
    c = int(np.argmax(np.abs(arm[:, along] * arm[b, across] - arm[:, across] * arm[b, along])))
    # slopes of u_z from its differences B − A and C − A
    slope = np.linalg.inv(arm[[b, c], :2])
    share = arm / arm[b, along]
    others = np.setdiff1d(np.arange(len(number)), [a, b])
    # along, which binds B as well
    which = np.append(others, b)
    turn = share[which, across]
    tilt = arm[which, 2, None] * slope[along] + turn[:, None] * arm[b, 2] * slope[across]
    columns = [number[which], turn, -turn, *tilt.T, -tilt.sum(axis=1)]
    u, v = along + 1, across + 1
    A, B, C = number[[a, b, c]]
    lines = rows_text(
        f"7\n%d,{u},1.,{A},{u},-1.,{B},{v},%.12g,{A},{v},%.12g\n{B},3,%.12g,{C},3,%.12g,{A},3,%.12g\n", columns
    )
    # across
    turn = -share[others, along]
    tilt = (arm[others, 2, None] + turn[:, None] * arm[b, 2]) * slope[across]
    columns = [number[others], -1.0 - turn, turn, *tilt.T, -tilt.sum(axis=1)]
    more = rows_text(f"6\n%d,{v},1.,{A},{v},%.12g,{B},{v},%.12g,{B},3,%.12g\n{C},3,%.12g,{A},3,%.12g\n", columns)
    return [*lines, *more]
