"""Names of regions and groups: what a layout makes, and what a cover's name stands for."""

from __future__ import annotations

from dataclasses import dataclass

from skinmesh.definition.blade import SIDE_NAMES, Layout

TRAILING_BASE = "trailing base"
GROUPS = ("skin", "suction", "pressure", "panels", "caps", "strips", "webs", "all")


@dataclass(frozen=True)
class RegionName:
    """A region that a layout makes.

    Attributes
    ----------
    full : str
        'suction main cap', 'trailing base', 'fore web'.
    plain : str
        Without its side.
    side : int
        1 suction, −1 pressure, 0 web or base.
    kind : str
        'strip', 'panel', 'cap', 'web' or 'base'.
    """

    full: str
    plain: str
    side: int
    kind: str


def region_names(layout: Layout) -> tuple[RegionName, ...]:
    """List the regions of a layout, each side from leading to trailing edge, then base and webs.

    Caps come in the order of the blade file; where they lie on the section is not known here.

    Parameters
    ----------
    layout : Layout

    Returns
    -------
    tuple of RegionName
    """
    names: list[RegionName] = []
    for side, prefix in SIDE_NAMES.items():
        for plain, kind in _of_side(layout, side):
            names.append(RegionName(f"{prefix} {plain}", plain, side, kind))
    names.append(RegionName(TRAILING_BASE, TRAILING_BASE, 0, "base"))
    names.extend(RegionName(web.name, web.name, 0, "web") for web in layout.webs)
    return tuple(names)


def resolve_cover(name: str, layout: Layout) -> frozenset[str]:
    """Full names of the regions that a name in ``covers`` stands for.

    Parameters
    ----------
    name : str
        A region with or without its side, or a group: skin (both sides and the trailing base), suction, pressure,
        panels, caps, strips, webs, all.
    layout : Layout

    Returns
    -------
    frozenset of str
        Empty where the layout has no such region.

    Examples
    --------
    >>> sorted(resolve_cover("panels", Layout()))
    ['pressure panel', 'suction panel']
    """
    regions = region_names(layout)
    groups = {
        "skin": lambda region: region.kind != "web",
        "suction": lambda region: region.side == 1,
        "pressure": lambda region: region.side == -1,
        "panels": lambda region: region.kind == "panel",
        "caps": lambda region: region.kind == "cap",
        "strips": lambda region: region.kind == "strip",
        "webs": lambda region: region.kind == "web",
        "all": lambda region: True,  # noqa: ARG005
    }
    if name in groups:
        return frozenset(region.full for region in regions if groups[name](region))
    return frozenset(region.full for region in regions if name in (region.full, region.plain))


def _of_side(layout: Layout, side: int) -> list[tuple[str, str]]:
    caps = [cap.name for cap in layout.caps if side in cap.sides]
    names: list[tuple[str, str]] = []
    if layout.leading_strip is not None:
        names.append(("leading strip", "strip"))
    if not caps:
        names.append(("panel", "panel"))
    else:
        names.append(("leading panel", "panel"))
        for i, cap in enumerate(caps):
            if i:
                names.append((f"middle panel {i}" if len(caps) > 2 else "middle panel", "panel"))
            names.append((cap, "cap"))
        names.append(("trailing panel", "panel"))
    if layout.trailing_strip is not None:
        names.append(("trailing strip", "strip"))
    return names
