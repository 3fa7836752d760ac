"""Colours: the same for the same part of every blade, apart for colour-blind eyes, and readable in print.

Panels are pale, so that caps, strips and webs stand out of them. The tones began as those of Okabe and Ito, "Color
Universal Design" (2008), from memory, and were then moved by a search until any two of the fourteen regions' tones, and
any two of the materials', differ by at least 10 by CIEDE2000 for full colour sight and for each kind of colour
blindness. ``examples/pictures/colour_sight.py`` draws and measures it.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import SIDE_NAMES
from skinmesh.mesh.shellmesh import Region

Floats = NDArray[np.float64]

INK = "#222222"
QUIET = "#767676"
BARE = "#e4e4e4"
AXIS_COLOURS = ("#d55e00", "#0072b2", "#222222")
"""Of e1, e2 and e3."""

MATERIAL_TONES = ("#5f6f8f", "#e8d9a0", "#a2afa0", "#c4936a", "#dcdcd6", "#6b4f3a", "#b2cce2", "#3d3d3d")
"""Fills of the plies in a cut, none of them that of a region."""

_EDGES = {
    ("strip", "leading"): "#086fb7",
    ("strip", "trailing"): "#289b6a",
    ("panel", "leading"): "#d2e7f9",
    ("panel", "middle"): "#f7eebb",
    ("panel", "trailing"): "#9cd3be",
}
_CAPS = ("#d46114", "#e29812", "#a44906", "#faca62")
_WEBS = ("#c574ad", "#8b4972", "#d0a9cc", "#602e4d")
_OTHER = ("#969696", "#bdbdbd", "#7a7a7a", "#d5d5d5")
_SCALE = ("#f4efdc", "#cfdcc6", "#93c0bd", "#549cb0", "#2c7299", "#1c4a79", "#101f4b")


def part_name(region: Region) -> str:
    """Name of a region without its side, as both sides share it.

    >>> part_name(Region("suction main cap", 1, "cap"))
    'main cap'
    """
    return region.name.removeprefix(f"{SIDE_NAMES.get(region.side, '')} ")


def part_colours(regions: Sequence[Region]) -> dict[str, str]:
    """Colour of each part, both sides together, as ``#rrggbb``.

    Parameters
    ----------
    regions : sequence of Region

    Returns
    -------
    dict of str to str
        In the order of the regions.

    Examples
    --------
    >>> part_colours([Region("pressure main cap", -1, "cap"), Region("suction main cap", 1, "cap")])
    {'main cap': '#d46114'}
    """
    colours: dict[str, str] = {}
    taken: dict[str, int] = {}
    for region in regions:
        name = part_name(region)
        if name in colours:
            continue
        fixed = _EDGES.get((region.kind, name.partition(" ")[0]))
        if fixed is not None and fixed not in colours.values():
            colours[name] = fixed
            continue
        tones = {"cap": _CAPS, "web": _WEBS}.get(region.kind, _OTHER)
        count = taken.get(region.kind, 0)
        colours[name] = tones[count % len(tones)]
        taken[region.kind] = count + 1
    return colours


def rgb(colours: Sequence[str]) -> Floats:
    """(n, 3) float array, 0 to 1, of colours written ``#rrggbb``.

    >>> rgb(["#ff0080"]).round(3).tolist()
    [[1.0, 0.0, 0.502]]
    """
    return np.array([[int(text[k : k + 2], 16) for k in (1, 3, 5)] for text in colours]) / 255.0


def scale_colours(n_steps: int) -> Floats:
    """(n_steps, 3) float array: steps of one scale from pale (least) to dark (most).

    >>> scale_colours(3).shape
    (3, 3)
    """
    anchors = rgb(_SCALE)
    places = np.linspace(0.0, len(anchors) - 1.0, n_steps)
    return np.column_stack([np.interp(places, np.arange(len(anchors)), channel) for channel in anchors.T])
