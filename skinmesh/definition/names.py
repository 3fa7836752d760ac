"""Names of the regions of a blade, and what a name in the blade file stands for."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from skinmesh.definition.blade import PRESSURE, SIDE_NAMES, SUCTION, Layout

STRIP, PANEL, CAP, WEB, BASE = "strip", "panel", "cap", "web", "base"
TRAILING_BASE = "trailing base"


@dataclass(frozen=True)
class RegionName:
    """A region.

    Attributes
    ----------
    side : int
        SUCTION, PRESSURE, or 0 for the trailing base and webs.
    name : str
        Without its side.
    kind : str
        'strip', 'panel', 'cap', 'web' or 'base'.
    """

    side: int
    name: str
    kind: str

    @property
    def full(self) -> str:
        """Name with its side: 'suction main cap'; 'fore web'."""
        return f"{SIDE_NAMES[self.side]} {self.name}" if self.side else self.name


GROUPS: Mapping[str, Callable[[RegionName], bool]] = {
    "skin": lambda region: region.kind != WEB,
    "suction": lambda region: region.side == SUCTION,
    "pressure": lambda region: region.side == PRESSURE,
    "panels": lambda region: region.kind == PANEL,
    "caps": lambda region: region.kind == CAP,
    "strips": lambda region: region.kind == STRIP,
    "webs": lambda region: region.kind == WEB,
    "all": lambda _region: True,
}
_RESERVED = re.compile(
    r"leading strip|trailing strip|leading panel|trailing panel|middle panel( \d+)?|panel( \d+)?|trailing base"
    r"|leading edge|trailing edge|root|tip|station \d+|((suction|pressure) .*)|" + "|".join(GROUPS),
    re.IGNORECASE,
)


def region_names(layout: Layout) -> tuple[RegionName, ...]:
    """Names of all regions that a layout makes.

    A side with one cap has a leading and a trailing panel, a side with two also a ``middle panel``, one with more has
    ``middle panel 1``, ``middle panel 2`` … from fore to aft; a side without a cap has one ``panel``.

    Parameters
    ----------
    layout : Layout

    Returns
    -------
    tuple of RegionName
        Suction side, pressure side, each from the leading to the trailing edge with the caps in the order of the
        blade file (where they lie is known only on the surface); then the trailing base and the webs. The trailing
        base is always named; a sharp trailing edge leaves it without area.

    Examples
    --------
    >>> [region.full for region in region_names(Layout())]
    ['suction panel', 'pressure panel', 'trailing base']
    """
    sides = [RegionName(side, *region) for side in (SUCTION, PRESSURE) for region in _side_regions(layout, side)]
    webs = [RegionName(0, web.name, WEB) for web in layout.webs]
    return (*sides, RegionName(0, TRAILING_BASE, BASE), *webs)


def _side_regions(layout: Layout, side: int) -> list[tuple[str, str]]:
    caps = [cap.name for cap in layout.caps if side in cap.sides]
    regions = [("leading strip", STRIP)] if layout.leading_strip is not None else []
    regions.append(("leading panel" if caps else "panel", PANEL))
    for k, cap in enumerate(caps, start=1):
        regions.append((cap, CAP))
        if k == len(caps):
            regions.append(("trailing panel", PANEL))
        else:
            regions.append((f"middle panel {k}" if len(caps) > 2 else "middle panel", PANEL))
    if layout.trailing_strip is not None:
        regions.append(("trailing strip", STRIP))
    return regions


def resolve_cover(name: str, layout: Layout) -> frozenset[str]:
    """Full names of the regions that a name in the blade file stands for.

    Parameters
    ----------
    name : str
        A region with its side in front or, for both sides, without; or a group: skin (with the trailing base),
        suction, pressure, panels, caps, strips, webs, all.
    layout : Layout

    Returns
    -------
    frozenset of str
        Empty for a group that has no region in this layout.

    Raises
    ------
    KeyError
        The layout has no such region.

    Examples
    --------
    >>> sorted(resolve_cover("panel", Layout()))
    ['pressure panel', 'suction panel']
    """
    regions = region_names(layout)
    belongs = GROUPS.get(name) or (lambda region: name in (region.name, region.full))
    found = frozenset(region.full for region in regions if belongs(region))
    if not found and name not in GROUPS:
        raise KeyError(name)
    return found


def cover_names(layout: Layout) -> list[str]:
    """Every name that ``covers`` may take, for messages: regions without their side first, then the groups.

    Parameters
    ----------
    layout : Layout

    Returns
    -------
    list of str
    """
    regions = region_names(layout)
    plain = dict.fromkeys(region.name for region in regions)
    return [*plain, *GROUPS, *(region.full for region in regions if region.side)]


def is_reserved(name: str) -> bool:
    """Whether a cap or a web may not take a name because it means something else.

    Examples
    --------
    >>> is_reserved("Skin"), is_reserved("suction cap"), is_reserved("main cap")
    (True, True, False)
    """
    return _RESERVED.fullmatch(name) is not None
