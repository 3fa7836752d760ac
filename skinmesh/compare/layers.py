"""What changed between two stacks of layers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby

from skinmesh.laminate.stack import Layer
from skinmesh.wording import counted

LAYERS, THICKNESS, ANGLE, MATERIAL, ORDER = "layers", "thickness", "angle", "material", "order"

_MOST = 4
"""Changes of one stack that are told."""


@dataclass(frozen=True)
class LayerChange:
    """What changed of one ply in a stack.

    Attributes
    ----------
    ply : str
        Empty where the order of all layers changed and nothing else.
    aspect : str
        LAYERS, THICKNESS, ANGLE, MATERIAL or ORDER.
    before, after : str
        Number of layers; thickness of a layer in mm; angle in degrees; material. Several with a stroke between.
    """

    ply: str
    aspect: str
    before: str
    after: str


def layer_changes(before: Sequence[Layer], after: Sequence[Layer]) -> tuple[LayerChange, ...]:
    """Find which plies of a stack came, went or changed.

    Parameters
    ----------
    before, after : sequence of Layer
        From the +e3 face inwards.

    Returns
    -------
    tuple of LayerChange
        Empty where nothing changed.

    Examples
    --------
    >>> from skinmesh.laminate.material import Material
    >>> glass = Material("glass", 41e9, 11e9, 11e9, 0.28, 0.28, 0.3, 4e9, 4e9, 4e9, 1900.0)
    >>> skin, cap = Layer("skin", glass, 0.001, 0.0), Layer("cap", glass, 0.002, 0.0)
    >>> layer_changes([skin, cap, cap], [skin, cap])
    (LayerChange(ply='cap', aspect='layers', before='2', after='1'),)
    >>> layer_changes([skin], [Layer("skin", glass, 0.0012, 0.0)])
    (LayerChange(ply='skin', aspect='thickness', before='1', after='1.2'),)
    """
    found: list[LayerChange] = []
    for ply in dict.fromkeys(layer.ply for layer in (*before, *after)):
        found += _of_ply(ply, *([layer for layer in layers if layer.ply == ply] for layers in (before, after)))
    if not found and [layer.ply for layer in before] != [layer.ply for layer in after]:
        found.append(LayerChange("", ORDER, "", ""))
    return tuple(found)


def _of_ply(ply: str, before: Sequence[Layer], after: Sequence[Layer]) -> list[LayerChange]:
    found = [] if len(before) == len(after) else [LayerChange(ply, LAYERS, str(len(before)), str(len(after)))]
    if not before or not after:
        return found
    for aspect, values in (
        (THICKNESS, [[f"{1e3 * layer.thickness:.9g}" for layer in layers] for layers in (before, after)]),
        (ANGLE, [[f"{layer.angle_degrees:.9g}" for layer in layers] for layers in (before, after)]),
        (MATERIAL, [[layer.material.name for layer in layers] for layers in (before, after)]),
    ):
        first, second = ("/".join(value for value, _ in groupby(entries)) for entries in values)
        if first != second:
            found.append(LayerChange(ply, aspect, first, second))
    return found


def change_words(groups: Sequence[Sequence[LayerChange]]) -> str:
    """One phrase for changes of the same plies and aspects on many stacks.

    Parameters
    ----------
    groups : sequence of sequence of LayerChange
        Each of the same plies and aspects in the same order.

    Returns
    -------
    str

    Examples
    --------
    >>> change_words([[LayerChange("cap", "layers", "8", "6")], [LayerChange("cap", "layers", "7", "6")]])
    'cap: 1 to 2 layers fewer'
    >>> change_words([[LayerChange("core", "thickness", "8", "10")]])
    'core: 8 to 10 mm'
    """
    words = [_words([group[k] for group in groups]) for k in range(len(groups[0]))]
    more = len(words) - _MOST
    return "; ".join(words) if more <= 0 else "; ".join([*words[:_MOST], f"and {more} more"])


def _words(changes: Sequence[LayerChange]) -> str:
    ply, aspect = changes[0].ply, changes[0].aspect
    pairs = list(dict.fromkeys((change.before, change.after) for change in changes))
    if aspect == ORDER:
        return "another order of plies"
    if aspect == LAYERS:
        return f"{ply}: {_layer_words([(int(before), int(after)) for before, after in pairs])}"
    unit = {THICKNESS: " mm", ANGLE: "°", MATERIAL: ""}[aspect]
    if len(pairs) == 1:
        return f"{ply}: {pairs[0][0]} to {pairs[0][1]}{unit}"
    return f"{ply}: {aspect}, {len(pairs)} different changes such as {pairs[0][0]} to {pairs[0][1]}{unit}"


def _layer_words(pairs: Sequence[tuple[int, int]]) -> str:
    if len(pairs) == 1 and all(pairs[0]):
        return f"{pairs[0][0]} to {counted(pairs[0][1], 'layer')}"
    sizes = sorted({abs(after - before) for before, after in pairs})
    amount = counted(sizes[0], "layer") if len(sizes) == 1 else f"{sizes[0]} to {counted(sizes[-1], 'layer')}"
    if not any(before for before, _ in pairs):
        return f"new here, {amount}"
    if not any(after for _, after in pairs):
        return f"gone here, {amount}"
    if all(after > before for before, after in pairs):
        return f"{amount} more"
    if all(after < before for before, after in pairs):
        return f"{amount} fewer"
    return f"{amount} more or fewer"
