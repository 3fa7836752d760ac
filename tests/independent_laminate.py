"""Plane-stress stiffness of plies for the independent integration; shares no code with skinmesh."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np


@dataclass(frozen=True)
class Fabric:
    """A ply material: moduli in Pa, density in kg/m³."""

    name: str
    E1: float
    E2: float
    G12: float
    nu12: float
    density: float

    @classmethod
    def read(cls, name: str, values: Mapping[str, Any]) -> Fabric:
        """Take a material of a blade file."""
        if "E" in values:
            E, nu = float(values["E"]), float(values["nu"])
            return cls(name, E, E, E / (2 * (1 + nu)), nu, float(values["density"]))
        return cls(name, *(float(values[k]) for k in ("E1", "E2", "G12", "nu12", "density")))

    def stiffness(self, angle: float) -> np.ndarray:
        """(3, 3) plane-stress stiffness along e1, e2, by turning the compliance tensor (2 × 2 × 2 × 2)."""
        S = np.zeros((2, 2, 2, 2))
        S[0, 0, 0, 0], S[1, 1, 1, 1] = 1 / self.E1, 1 / self.E2
        S[0, 0, 1, 1] = S[1, 1, 0, 0] = -self.nu12 / self.E1
        S[0, 1, 0, 1] = S[0, 1, 1, 0] = S[1, 0, 0, 1] = S[1, 0, 1, 0] = 1 / (4 * self.G12)
        c, s = np.cos(angle), np.sin(angle)
        R = np.array([[c, -s], [s, c]])
        T = np.einsum("ia,jb,kc,ld,abcd->ijkl", R, R, R, R, S)
        pairs = ((0, 0), (1, 1), (0, 1))
        factor = (1.0, 1.0, 2.0)
        compliance = [[factor[i] * factor[j] * T[p + q] for j, q in enumerate(pairs)] for i, p in enumerate(pairs)]
        return np.linalg.inv(np.array(compliance))


def axial_stiffness(layers: list[tuple[Fabric, float, float]]) -> tuple[float, float]:
    """Axial stiffness per width of a wall that is free to contract across, and the depth at which it acts.

    Parameters
    ----------
    layers : list of (fabric, thickness in m, angle in rad), from the outer face

    Returns
    -------
    float, N/m
        A11 − A12² / A22: no force across the axis, and no shear.
    float, m
        Depth below the outer face of the middle of Q11.
    """
    A, moment, depth = np.zeros((3, 3)), 0.0, 0.0
    for fabric, thickness, angle in layers:
        Q = fabric.stiffness(angle)
        A += Q * thickness
        moment += Q[0, 0] * thickness * (depth + 0.5 * thickness)
        depth += thickness
    return float(A[0, 0] - A[0, 1] ** 2 / A[1, 1]), float(moment / A[0, 0])
