"""Composite Gauss rules along a wall, with the polynomials through their points."""

from __future__ import annotations

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def gauss_points(n: int) -> tuple[Floats, Floats]:
    """Places and weights of the Gauss–Legendre rule on [−1, 1].

    Parameters
    ----------
    n : int

    Returns
    -------
    two (n,) float arrays
    """
    place, weight = legendre.leggauss(n)
    return np.asarray(place), np.asarray(weight)


def value_matrix(x: Floats, at: Floats) -> Floats:
    """Matrix that turns values at x into the values of their polynomial at other places.

    Parameters
    ----------
    x : (n,) float array
    at : (k,) float array

    Returns
    -------
    (k, n) float array

    Examples
    --------
    >>> x = np.array([-0.5, 0.0, 0.5])
    >>> (value_matrix(x, np.array([2.0])) @ x**2).round(12)
    array([4.])
    """
    return np.asarray(legendre.legvander(at, len(x) - 1) @ np.linalg.inv(legendre.legvander(x, len(x) - 1)))


def rate_matrix(x: Floats) -> Floats:
    """Matrix that turns values at x into the derivatives of their polynomial there.

    Parameters
    ----------
    x : (n,) float array

    Returns
    -------
    (n, n) float array
    """
    derivatives = legendre.legval(x, legendre.legder(np.eye(len(x)))).T
    return np.asarray(derivatives @ np.linalg.inv(legendre.legvander(x, len(x) - 1)))


def running_integral(n_pieces: int, n_gauss: int) -> Floats:
    """Matrix of the integral from the start to each sample of a composite rule.

    Parameters
    ----------
    n_pieces, n_gauss : int
        Pieces, and Gauss points in each.

    Returns
    -------
    (p, p) float array
        Acts on the samples' shares of the whole integral: values × weights.

    Examples
    --------
    >>> x, weight = gauss_points(2)
    >>> bool(np.allclose(running_integral(1, 2) @ weight, x + 1.0))
    True
    """
    x, weight = gauss_points(n_gauss)
    antiderivatives = legendre.legval(x, legendre.legint(np.eye(n_gauss), lbnd=-1.0)).T
    inside = antiderivatives @ np.linalg.inv(legendre.legvander(x, n_gauss - 1)) / weight
    piece = np.arange(n_pieces * n_gauss) // n_gauss
    running = (piece[:, None] > piece).astype(float)
    running[piece[:, None] == piece] = np.tile(inside, (n_pieces, 1, 1)).ravel()
    return running
