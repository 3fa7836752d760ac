"""The material of a ply: orthotropic, or isotropic as a special case of it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Material:
    """Elastic constants and density of one ply material.

    Attributes
    ----------
    name : str
    E1, E2, E3 : float, Pa
        Moduli along the fibre, across it, and through the thickness.
    nu12, nu13, nu23 : float
        Poisson's ratios; ``nu12`` is the contraction along 2 for a pull along 1.
    G12, G13, G23 : float, Pa
        Shear moduli.
    density : float, kg/m³
    is_isotropic : bool
        Whether the user gave an isotropic material.
    source : str
        Where the values come from, in the user's words.
    """

    name: str
    E1: float
    E2: float
    E3: float
    nu12: float
    nu13: float
    nu23: float
    G12: float
    G13: float
    G23: float
    density: float
    is_isotropic: bool = False
    source: str = ""
