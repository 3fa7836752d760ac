"""A quantity given along the span."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from skinmesh.frozen import freeze_array


@dataclass(frozen=True, eq=False)
class Spanwise:
    """A piecewise linear function of z, its end values held beyond its ends.

    Attributes
    ----------
    z : (k,) float array, m
        Strictly increasing, k ≥ 1.
    value : (k,) float array

    Examples
    --------
    >>> width = Spanwise([0.0, 5.0, 22.5], [0.42, 0.42, 0.12])
    >>> width([-1.0, 13.75, 30.0])
    array([0.42, 0.27, 0.12])
    """

    z: NDArray[np.float64]
    value: NDArray[np.float64]

    def __post_init__(self) -> None:
        freeze_array(self, "z", shape=(None,))
        freeze_array(self, "value", shape=(len(self.z),))
        if len(self.z) == 0 or np.any(np.diff(self.z) <= 0):
            raise ValueError("Spanwise.z must be strictly increasing and not empty")

    def __call__(self, z: ArrayLike) -> NDArray[np.float64]:
        """Value at z, of the shape of z."""
        return np.asarray(np.interp(np.asarray(z, dtype=np.float64), self.z, self.value), dtype=np.float64)

    @property
    def is_constant(self) -> bool:
        """Whether the value is the same everywhere."""
        return bool(np.all(self.value == self.value[0]))


def constant(value: float) -> Spanwise:
    """Make a quantity that is the same all along the span."""
    return Spanwise(np.zeros(1), np.full(1, float(value)))
