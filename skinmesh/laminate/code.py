"""The laminate code of a stack in plain text, in the manner of ASTM D6507.

The rules below follow the practice of ASTM D6507, Standard Practice for Fiber Reinforcement Orientation Codes for
Composite Materials, from memory; where plain text cannot show what print shows, the way chosen here is said.

* Plies stand in square brackets, the first ply laid first (here: from the +e3 face), parted by slashes.
* An angle is that of the fibre, in degrees, over −90 and up to 90: a ply at 135° reads ``-45``.
* A subscript follows an underscore. ``45_3`` is three adjacent plies at 45°.
* Two adjacent single plies at +θ and −θ read ``±θ``; at −θ and +θ ``∓θ``.
* A repeated group stands in round brackets with its count: ``(0/90)_3``. Where the group is the whole list, the count
  stands on the square brackets: ``[0/90]_3``, ``[0]_8``.
* A symmetric laminate lists its first half and carries ``_S``: ``[0/90]_S``, ``[0/90]_2S``. Where the number of plies
  is odd, the list ends on the middle ply, which print overlines and this text writes ``bar()``: ``[0/bar(90)]_S`` is
  0, 90, 0.
* A hybrid laminate carries the letter of the material in the subscript, behind the count: ``[45_A/0_12B]``. The letters
  are explained by a legend and mean the same in all stacks of a mesh. A material that occurs in several ply thicknesses
  has a number behind its letter: ``A1``, ``A2``. The letters S and T are left out, for they have other meanings in a
  code.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby

from skinmesh.laminate.stack import Layer, Stack

LETTERS = "ABCDEFGHIJKLMNOPQRUVWXYZ"


@dataclass(frozen=True)
class _Run:
    """Adjacent equal plies."""

    angle: str
    letter: str
    count: int


@dataclass(frozen=True)
class _Pair:
    """A ply at one sign of an angle and one at the other."""

    angle: str
    letter: str
    sign: str


@dataclass(frozen=True)
class _Group:
    """A list of items that occurs several times in a row."""

    items: tuple[_Item, ...]
    count: int


_Item = _Run | _Pair | _Group


@dataclass(frozen=True)
class LaminateCodes:
    """The codes of several stacks with one legend.

    Attributes
    ----------
    codes : tuple of str
        One for each stack.
    letters : tuple of tuple of str
        Letter of each layer of each stack.
    legend : mapping of str to str
        Meaning of each letter: material and ply thickness.
    """

    codes: tuple[str, ...]
    letters: tuple[tuple[str, ...], ...]
    legend: Mapping[str, str]


def laminate_codes(stacks: Sequence[Stack]) -> LaminateCodes:
    """Write the laminate code of each stack.

    Parameters
    ----------
    stacks : sequence of Stack

    Returns
    -------
    LaminateCodes

    Examples
    --------
    >>> from math import radians
    >>> from skinmesh.laminate.material import Material
    >>> glass = Material("glass", 41e9, 11e9, 11e9, 0.28, 0.28, 0.4, 4e9, 4e9, 4e9, 1920.0)
    >>> foam = Material("foam", 5e7, 5e7, 5e7, 0.3, 0.3, 0.3, 2e7, 2e7, 2e7, 60.0)
    >>> face = tuple(Layer("face", glass, 1e-3, radians(angle)) for angle in (45, -45, 0))
    >>> sandwich = Stack((*face, Layer("core", foam, 0.02, 0.0), *reversed(face)))
    >>> written = laminate_codes([Stack(face), sandwich])
    >>> written.codes
    ('[±45/0]', '[±45_A/0_A/bar(0_B)]_S')
    >>> dict(written.legend)
    {'A': 'glass, 1 mm', 'B': 'foam, 20 mm'}
    """
    letter_of, legend = _assign_letters(stacks)
    letters = tuple(tuple(letter_of[_kind(layer)] for layer in stack.layers) for stack in stacks)
    codes = tuple(_stack_code(stack, own) for stack, own in zip(stacks, letters, strict=True))
    return LaminateCodes(codes=codes, letters=letters, legend=legend)


def _kind(layer: Layer) -> tuple[str, str]:
    """What one letter stands for: material and thickness (in mm, as it is written)."""
    return layer.material.name, f"{layer.thickness * 1e3:.9g}"


def _assign_letters(stacks: Sequence[Stack]) -> tuple[dict[tuple[str, str], str], dict[str, str]]:
    """Letters in order of appearance, and what they mean."""
    kinds = dict.fromkeys(_kind(layer) for stack in stacks for layer in stack.layers)
    thicknesses: dict[str, list[str]] = {}
    for material, thickness in kinds:
        thicknesses.setdefault(material, []).append(thickness)
    letter_of: dict[tuple[str, str], str] = {}
    for number, (material, found) in enumerate(thicknesses.items()):
        for k, thickness in enumerate(found, start=1):
            letter_of[material, thickness] = _letters(number) + (str(k) if len(found) > 1 else "")
    return letter_of, {letter: f"{material}, {mm} mm" for (material, mm), letter in letter_of.items()}


def _letters(number: int) -> str:
    """The number-th of A, B, … Z, AA, AB, …"""
    first, last = divmod(number, len(LETTERS))
    return (_letters(first - 1) if first else "") + LETTERS[last]


def _stack_code(stack: Stack, letters: tuple[str, ...]) -> str:
    is_hybrid = len(set(letters)) > 1
    plies = [
        (_fibre_angle(layer.angle_degrees), letter if is_hybrid else "")
        for layer, letter in zip(stack.layers, letters, strict=True)
    ]
    is_symmetric = plies == plies[::-1] and len(set(plies)) > 1
    half, middle = plies, ""
    if is_symmetric:
        half = plies[: len(plies) // 2]
        if len(plies) % 2:
            angle, letter = plies[len(plies) // 2]
            middle = f"bar({_item_text(_Run(angle, letter, 1))})"
    items = _fold(_pair(_runs(half)))
    count = 1
    if len(items) == 1 and not middle:
        items, count = _unwrapped(items[0])
    texts = [_item_text(item) for item in items] + ([middle] if middle else [])
    subscript = (str(count) if count > 1 else "") + ("S" if is_symmetric else "")
    return f"[{'/'.join(texts)}]" + (f"_{subscript}" if subscript else "")


def _fibre_angle(degrees: float) -> str:
    """Angle of a fibre over −90 and up to 90 degrees, as it is written."""
    turned = round(90.0 - (90.0 - degrees) % 180.0, 6) + 0.0
    return f"{turned if turned > -90.0 else 90.0:.8g}"


def _opposite(angle: str) -> str:
    return angle[1:] if angle.startswith("-") else f"-{angle}"


def _runs(plies: Sequence[tuple[str, str]]) -> tuple[_Item, ...]:
    return tuple(_Run(*ply, count=len(list(same))) for ply, same in groupby(plies))


def _pair(items: tuple[_Item, ...]) -> tuple[_Item, ...]:
    """Join neighbours of opposite angle into ± and ∓."""
    paired: list[_Item] = []
    for item in items:
        last = paired[-1] if paired else None
        if (
            isinstance(item, _Run)
            and isinstance(last, _Run)
            and (last.count, item.count) == (1, 1)
            and last.letter == item.letter
            and item.angle == _opposite(last.angle)
        ):
            sign = "∓" if last.angle.startswith("-") else "±"
            paired[-1] = _Pair(item.angle.removeprefix("-"), item.letter, sign)
        else:
            paired.append(item)
    return tuple(paired)


def _fold(items: tuple[_Item, ...]) -> tuple[_Item, ...]:
    """Replace repeated lists by groups, at each place the one that leaves the fewest items."""
    folded: list[_Item] = []
    at = 0
    while at < len(items):
        size, count = _best_repeat(items, at)
        if count > 1:
            folded.append(_Group(_fold(items[at : at + size]), count))
        else:
            folded.append(items[at])
        at += size * count
    return tuple(folded)


def _best_repeat(items: tuple[_Item, ...], at: int) -> tuple[int, int]:
    """Length of the list and number of times that saves most from this place on; the shorter list where they tie."""
    best = (1, 1)
    for size in range(1, (len(items) - at) // 2 + 1):
        pattern = items[at : at + size]
        count = 1
        while items[at + count * size : at + (count + 1) * size] == pattern:
            count += 1
        if size * (count - 1) > best[0] * (best[1] - 1):
            best = (size, count)
    return best


def _unwrapped(item: _Item) -> tuple[tuple[_Item, ...], int]:
    """The only item of a list, its count taken out to stand on the square brackets."""
    if isinstance(item, _Group):
        return item.items, item.count
    if isinstance(item, _Run):
        return (_Run(item.angle, item.letter, 1),), item.count
    return (item,), 1


def _item_text(item: _Item) -> str:
    if isinstance(item, _Group):
        return f"({'/'.join(_item_text(each) for each in item.items)})_{item.count}"
    if isinstance(item, _Pair):
        return f"{item.sign}{item.angle}" + (f"_{item.letter}" if item.letter else "")
    subscript = (str(item.count) if item.count > 1 else "") + item.letter
    return item.angle + (f"_{subscript}" if subscript else "")
