"""Element axes: e3 from the element's own geometry, e1 the pitch axis laid on it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

VANISHING = 1e-6  # of the pitch axis's projection: beneath it the y axis takes its place


def element_axes(points: Floats, connectivity: Ints) -> tuple[Floats, Floats, Floats]:
    """Element axes at the parametric centre.

    Parameters
    ----------
    points : (n, 3) float array, m
    connectivity : (m, k) int array
        3 or 6 nodes a triangle, 4 or 8 a quadrilateral, counter-clockwise about e3.

    Returns
    -------
    e1, e2, e3 : (m, 3) float array

    Examples
    --------
    >>> square = np.array([[0.0, 0, 0], [0, 1, 0], [0, 1, 1], [0, 0, 1]])
    >>> e1, e2, e3 = element_axes(square, np.array([[0, 1, 2, 3]]))
    >>> e1[0], e3[0]
    (array([0., 0., 1.]), array([1., 0., 0.]))
    """
    x = points[connectivity]
    k = connectivity.shape[1]
    if k == 3:
        along, up = x[:, 1] - x[:, 0], x[:, 2] - x[:, 0]
    elif k == 4:
        along, up = x[:, 1] + x[:, 2] - x[:, 0] - x[:, 3], x[:, 2] + x[:, 3] - x[:, 0] - x[:, 1]
    elif k == 6:
        # derivatives of the quadratic shape functions at the centroid
        along = (x[:, 1] - x[:, 0]) / 3.0 + (x[:, 4] - x[:, 5]) * (4.0 / 3.0)
        up = (x[:, 2] - x[:, 0]) / 3.0 + (x[:, 4] - x[:, 3]) * (4.0 / 3.0)
    else:
        # those of the 8-node quadrilateral: the corners' share vanishes at the centre
        along, up = x[:, 5] - x[:, 7], x[:, 6] - x[:, 4]
    e3 = _unit(np.cross(along, up))
    e1 = _on_plane(np.array([0.0, 0.0, 1.0]), e3)
    lost = np.linalg.norm(e1, axis=1) < VANISHING
    e1[lost] = _on_plane(np.array([0.0, 1.0, 0.0]), e3[lost])
    e1 = _unit(e1)
    return e1, np.cross(e3, e1), e3


def _on_plane(direction: Floats, normal: Floats) -> Floats:
    return np.asarray(direction - (normal @ direction)[:, None] * normal)


def _unit(vectors: Floats) -> Floats:
    return np.asarray(vectors / np.linalg.norm(vectors, axis=1, keepdims=True))
