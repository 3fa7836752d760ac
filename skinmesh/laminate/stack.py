"""A stack: the plies of an element in order, from its +e3 face."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from hashlib import sha256
from math import degrees

from skinmesh.laminate.material import Material


@dataclass(frozen=True)
class Layer:
    """One layer of a stack.

    Attributes
    ----------
    ply : str
        Name of the ply in the schedule.
    material : Material
    thickness : float, m
    angle : float, rad
        From e1 towards e2 of the element that carries it.
    """

    ply: str
    material: Material
    thickness: float
    angle: float

    @property
    def angle_degrees(self) -> float:
        """Angle in degrees, free of the noise of the conversion."""
        return round(degrees(self.angle), 9) + 0.0


@dataclass(frozen=True)
class Stack:
    """The layers of an element from the +e3 face inwards.

    Attributes
    ----------
    layers : tuple of Layer
        Never empty.
    """

    layers: tuple[Layer, ...]

    @cached_property
    def thickness(self) -> float:
        """Total thickness, m."""
        return sum(layer.thickness for layer in self.layers)

    @cached_property
    def areal_mass(self) -> float:
        """Mass per area, kg/m²."""
        return sum(layer.thickness * layer.material.density for layer in self.layers)

    @cached_property
    def content_name(self) -> str:
        """Eight hexadecimal digits that depend on the content alone, so that they survive a rebuild."""
        text = "|".join(
            f"{layer.ply};{layer.material.name};{layer.thickness:.9g};{layer.angle_degrees:.6g}"
            for layer in self.layers
        )
        return sha256(text.encode()).hexdigest()[:8]
