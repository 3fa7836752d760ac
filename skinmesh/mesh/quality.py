"""Quality of quadrilaterals and triangles by the metrics of the Verdict library.

Formulas from Stimpson, Ernst, Knupp, Pébay & Thompson, The Verdict Geometric Quality Library, SAND2007-1751, sections 4
(triangles) and 5 (quadrilaterals), from memory, and checked against the library itself. In the report the printed
ranges of skew and warpage of a quadrilateral have changed places; the formulas are right.

All functions take the corners alone, ``(m, 4, 3)`` or ``(m, 3, 3)`` float arrays in m, counter-clockwise, and return an
``(m,)`` float array. An element that has collapsed gives infinity where a length or an area divides.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]


def corner_points(mesh: ShellMesh) -> Floats:
    """Corners of every element.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m, 4, 3) or (m, 3, 3) float array, m
    """
    corners: Floats = mesh.points[mesh.cells[:, : mesh.n_sides]]
    return corners


def aspect_ratio(corners: Floats) -> Floats:
    """Longest edge × perimeter over four areas (quadrilateral) or 4√3 areas (triangle): 1 for the regular shape.

    Examples
    --------
    >>> bool(aspect_ratio(np.array([[[0, 0, 0], [4, 0, 0], [4, 1, 0], [0, 1, 0]]], dtype=float)) == 2.5)
    True
    """
    lengths = _lengths(_edges(corners))
    factor = 4.0 if corners.shape[1] == 4 else 4.0 * np.sqrt(3.0)
    return _ratio(lengths.max(axis=1) * lengths.sum(axis=1), factor * _area(corners))


def smallest_angle(corners: Floats) -> Floats:
    """Smallest corner angle, rad."""
    smallest: Floats = corner_angles(corners).min(axis=1)
    return smallest


def largest_angle(corners: Floats) -> Floats:
    """Largest corner angle, rad: over π where a corner of a quadrilateral turns back."""
    largest: Floats = corner_angles(corners).max(axis=1)
    if corners.shape[1] == 3:
        return largest
    return np.where(_corner_jacobians(corners).min(axis=1) < 0, 2 * np.pi - largest, largest)


def corner_angles(corners: Floats) -> Floats:
    """(m, 4) or (m, 3) angles between the two edges at each corner, rad, in [0, π]."""
    edges = _edges(corners)
    before = -np.roll(edges, 1, axis=1)
    across = np.linalg.norm(np.cross(edges, before), axis=2)
    angles: Floats = np.arctan2(across, np.einsum("mid,mid->mi", edges, before))
    return angles


def scaled_jacobian(corners: Floats) -> Floats:
    """Least corner Jacobian over the product of its edges: 1 for a rectangle and an equilateral triangle.

    Not positive where a quadrilateral's corner turns back. A triangle has no direction of its own, and is never
    negative.
    """
    edges = _edges(corners)
    lengths = _lengths(edges)
    products = lengths * np.roll(lengths, 1, axis=1)
    if corners.shape[1] == 3:
        return _quotient(2.0 / np.sqrt(3.0) * 2.0 * _area(corners), products.max(axis=1))
    least: Floats = _quotient(_corner_jacobians(corners), products).min(axis=1)
    return least


def skew(corners: Floats) -> Floats:
    """Cosine between the principal axes of a quadrilateral: 0 for a rectangle; ``(m, 4, 3)`` corners only."""
    first, second = _principal_axes(corners)
    cosine = _quotient(np.einsum("md,md->m", first, second), _lengths(first) * _lengths(second))
    return np.abs(cosine)


def warpage(corners: Floats) -> Floats:
    """Cube of the worst cosine between normals at opposite corners: 1 where a quadrilateral is flat, less where not.

    ``(m, 4, 3)`` corners only.
    """
    normals = _corner_normals(corners)
    lengths = _lengths(normals)
    unit = normals / np.where(lengths > 0, lengths, 1.0)[..., None]
    cubes: Floats = np.einsum("mid,mid->mi", unit[:, :2], unit[:, 2:]).min(axis=1) ** 3
    return cubes


def taper(corners: Floats) -> Floats:
    """Cross derivative over the shorter principal axis: 0 for a parallelogram; ``(m, 4, 3)`` corners only."""
    first, second = _principal_axes(corners)
    cross = corners[:, 0] - corners[:, 1] + corners[:, 2] - corners[:, 3]
    return _ratio(_lengths(cross), np.minimum(_lengths(first), _lengths(second)))


def _edges(corners: Floats) -> Floats:
    """Edge i from corner i to the next."""
    edges: Floats = np.roll(corners, -1, axis=1) - corners
    return edges


def _lengths(vectors: Floats) -> Floats:
    lengths: Floats = np.linalg.norm(vectors, axis=-1)
    return lengths


def _principal_axes(corners: Floats) -> tuple[Floats, Floats]:
    edges = _edges(corners)
    return edges[:, 0] - edges[:, 2], edges[:, 1] - edges[:, 3]


def _corner_normals(corners: Floats) -> Floats:
    edges = _edges(corners)
    normals: Floats = np.cross(np.roll(edges, 1, axis=1), edges)
    return normals


def _corner_jacobians(corners: Floats) -> Floats:
    """Corner normals along the normal in the middle of the quadrilateral."""
    centre = np.cross(*_principal_axes(corners))
    length = _lengths(centre)
    centre /= np.where(length > 0, length, 1.0)[:, None]
    jacobians: Floats = np.einsum("mid,md->mi", _corner_normals(corners), centre)
    return jacobians


def _area(corners: Floats) -> Floats:
    """Verdict's area: a quarter of the sum of the corner Jacobians."""
    if corners.shape[1] == 3:
        half: Floats = _lengths(np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])) / 2.0
        return half
    quarter: Floats = _corner_jacobians(corners).sum(axis=1) / 4.0
    return quarter


def _ratio(above: Floats, below: Floats) -> Floats:
    """Quotient of lengths or areas, infinity over nothing."""
    ratio: Floats = np.divide(above, below, out=np.full(above.shape, np.inf), where=below > 0)
    return ratio


def _quotient(above: Floats, below: Floats) -> Floats:
    """Quotient of something that is itself nothing where the divisor is."""
    quotient: Floats = np.divide(above, below, out=np.zeros(above.shape), where=below > 0)
    return quotient
