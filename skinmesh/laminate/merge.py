"""Neighbouring layers that no solver can tell apart, taken as one."""

from __future__ import annotations

from dataclasses import replace
from itertools import groupby

from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack


def merge_equal_layers(stack: Stack) -> tuple[Layer, ...]:
    """The layers of a stack from the +e3 face, neighbours of one material and one angle merged.

    A solver's work grows with the number of layers, and its answer does not change. The angle of an isotropic layer
    has no meaning and becomes 0. A merged layer carries the name of its first ply.

    Parameters
    ----------
    stack : Stack

    Returns
    -------
    tuple of Layer

    Examples
    --------
    >>> glass = Material("glass", 40e9, 10e9, 10e9, 0.3, 0.3, 0.4, 4e9, 4e9, 3e9, 1900.0)
    >>> stack = Stack((Layer("a", glass, 1e-3, 0.0), Layer("b", glass, 2e-3, 0.0), Layer("c", glass, 1e-3, 0.5)))
    >>> [(layer.ply, round(layer.thickness, 6)) for layer in merge_equal_layers(stack)]
    [('a', 0.003), ('c', 0.001)]
    """
    merged = []
    for (_, angle), group in groupby(stack.layers, key=_material_and_angle):
        layers = tuple(group)
        merged.append(replace(layers[0], thickness=sum(layer.thickness for layer in layers), angle=angle))
    return tuple(merged)


def _material_and_angle(layer: Layer) -> tuple[Material, float]:
    return layer.material, 0.0 if layer.material.is_isotropic else layer.angle
