"""The elements in which a blunt trailing edge closes to a sharp one."""

from __future__ import annotations

import numpy as np

from skinmesh.mesh.plane import PlaneMesh
from skinmesh.skin.skinmap import SKIN, SkinMap

# A triangle with two element edges on each side, cut into three quadrilaterals round its centroid C:
#
#         J            line 4 (apex)       P, p: pressure, S, s: suction trailing edge, M: middle of the base
#        / \
#       s   p          line 2              share of the base from the suction edge: S 0, M and C ½, P 1
#      / \C/ \
#     S---M---P        line 0
#
_LINE = {"S": 0.0, "M": 0.0, "P": 0.0, "s": 2.0, "p": 2.0, "C": 4.0 / 3.0, "J": 4.0}
_SHARE = {"S": 0.0, "s": 0.0, "M": 0.5, "C": 0.5, "P": 1.0, "p": 1.0, "J": 1.0}
_QUADS = ("SMCs", "MPpC", "sCpJ")


def closing_elements(skin: SkinMap, *, shape: str) -> PlaneMesh:
    """Make the three quadrilaterals, or six triangles, of every closing; gmsh has nothing to decide there.

    Parameters
    ----------
    skin : SkinMap
    shape : str
        'quad' or 'triangle'.

    Returns
    -------
    PlaneMesh
    """
    elements = [
        element
        for base in skin.bases
        for is_tip, wanted in ((True, base.tip_apex), (False, base.root_apex))
        if wanted
        for element in _closing(skin, base.last_row if is_tip else base.first_row, is_tip=is_tip, shape=shape)
    ]
    n_nodes = 8 if shape == "quad" else 6
    nodes = np.array(elements, dtype=float).reshape(-1, n_nodes, 2)
    n = len(nodes)
    return PlaneMesh(nodes[..., 0], nodes[..., 1], np.full(n, SKIN), np.full(n, skin.base_strip))


def _closing(skin: SkinMap, row: int, *, is_tip: bool, shape: str) -> list[list[tuple[float, float]]]:
    """(level, seam) of the nodes of each element of one closing."""
    start = 2.0 * float(skin.levels.row_starts[row])
    sense = 1.0 if is_tip else -1.0
    first = float(skin.n_seams - 1)
    elements = []
    for quad in _QUADS:
        ring = quad if is_tip else quad[::-1]  # mirrored along the span: turned round again
        for polygon in [ring] if shape == "quad" else [ring[:3], ring[0] + ring[2:]]:
            edges = zip(polygon, polygon[1:] + polygon[:1], strict=True)
            corners = [(start + sense * _LINE[name], first + _SHARE[name]) for name in polygon]
            elements.append(corners + [(start + sense * line, first + share) for line, share in map(_middle, edges)])
    return elements


def _middle(edge: tuple[str, str]) -> tuple[float, float]:
    """Line and share of the middle of an edge; at the apex both trailing edges meet, whatever the share."""
    a, b = edge
    share = _SHARE[b] if a == "J" else _SHARE[a] if b == "J" else 0.5 * (_SHARE[a] + _SHARE[b])
    return 0.5 * (_LINE[a] + _LINE[b]), share
