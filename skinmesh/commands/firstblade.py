"""The text of a first blade file round a station table: everything that the table does not say is invented."""

from __future__ import annotations

import json
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import StationTable

Floats = NDArray[np.float64]

ROUND_MIDDLE, CAP_MIDDLE = 0.5, 0.34  # fraction of the chord at which the cap's middle lies: on a round root, beyond
STRAIGHT = 0.02  # of the value; stations on the line between their neighbours are left out of a list
ROUGHLY_STRAIGHT = 0.15
LINE = 118  # characters of a line of the file
SKIN = 0.0012  # thickness of one of the two skins over the local chord


@dataclass(frozen=True)
class FirstProfile:
    """A profile that the table names: a file, a NACA code, or else a circle."""

    name: str
    file: str | None = None
    naca: str | None = None

    @property
    def is_round(self) -> bool:
        """Whether it is a circle."""
        return self.file is None and self.naca is None

    def line(self) -> str:
        """Its line in the blade file."""
        if self.file is not None:
            return f"  {_word(self.name)}: {{file: {_word(self.file)}}}"
        if self.naca is not None:
            return f'  {_word(self.name)}: {{naca: "{self.naca}"}}'
        return f"  {_word(self.name)}: {{circle: true}}"


def blade_text(table: Path, stations: StationTable, profiles: Sequence[FirstProfile]) -> str:
    """Write a commented blade file whose lengths follow the chord.

    Parameters
    ----------
    table : Path
    stations : StationTable
    profiles : sequence of FirstProfile

    Returns
    -------
    str
    """
    z, chord = stations.z, stations.chord
    widest = float(chord.max())
    fabric = float(f"{min(0.0004 * widest, SKIN * float(chord.min())):.2g}")
    skin_count = np.maximum(SKIN * chord / fabric, 1.0)
    part = _Along(z)
    return _TEMPLATE.format(
        stem=table.stem,
        title=_word(f"{table.stem}: planform of {table.name}, layup invented"),
        table=_word(table.name),
        profiles="\n".join(profile.line() for profile in profiles),
        middle=part.list_of(_cap_middle(stations, profiles), indent=15),
        cap=part.list_of(0.2 * chord, indent=6),
        web_span=part.span(0.06, 0.88),
        leading=part.list_of(0.05 * chord, indent=4),
        trailing=part.list_of(0.10 * chord, indent=4),
        gelcoat=_round(0.0002 * widest),
        fabric=_round(fabric),
        pack=_round(0.0008 * widest),
        ud=_round(0.0004 * widest),
        core=part.list_of(0.005 * chord, within=ROUGHLY_STRAIGHT, indent=5),
        skin_count=part.list_of(skin_count, within=ROUGHLY_STRAIGHT, indent=5),
        root_count=part.counts((0, 4), (0.04, 4), (0.18, 0)),
        root_span=part.span(0, 0.18),
        cap_count=part.counts((0.02, 8), (0.12, 20), (0.35, 20), (0.94, 2)),
        cap_span=part.span(0.02, 0.94),
        core_span=part.span(0.12, 0.7),
        size=_round(widest / 18),
        close_gap=_round(0.006 * widest),
    )


def _cap_middle(stations: StationTable, profiles: Sequence[FirstProfile]) -> Floats:
    """Fraction of the chord at which the cap's middle lies, straight from the last round station to the next named."""
    is_round = {profile.name: profile.is_round for profile in profiles}
    named = [i for i, name in enumerate(stations.profile) if name is not None]
    values = [ROUND_MIDDLE if is_round[str(stations.profile[i])] else CAP_MIDDLE for i in named]
    return np.asarray(np.interp(stations.z, stations.z[named], values))


@dataclass(frozen=True, eq=False)
class _Along:
    """Writes quantities along a span."""

    z: Floats

    def at(self, share: float) -> float:
        """z at a share of the span."""
        return float(self.z[0] + share * (self.z[-1] - self.z[0]))

    def span(self, start: float, stop: float) -> str:
        """Ends [z, z] by shares of the span, kept inside it."""
        ends = [float(_digits(self.at(share), 4)) for share in (start, stop)]
        low, high = float(self.z[0]), float(self.z[-1])
        return f"[{', '.join(f'{min(max(end, low), high):.10g}' for end in ends)}]"

    def counts(self, *pairs: tuple[float, int]) -> str:
        """A list of [z, count] by shares of the span."""
        return f"[{', '.join(f'[{_digits(self.at(share), 4)}, {count}]' for share, count in pairs)}]"

    def list_of(self, values: Floats, *, within: float = STRAIGHT, indent: int) -> str:
        """A list of [z, value] without the stations that lie on the line between their neighbours, in short lines."""
        pairs = [f"[{self.z[i]:.6g}, {_round(float(values[i]))}]" for i in _bends(self.z, values, within)]
        lines = [""]
        for k, pair in enumerate(pairs):
            text = pair + ("," if k + 1 < len(pairs) else "")
            # the first line stands behind the name of its field
            room = LINE - indent - (20 if len(lines) == 1 else 1)
            if lines[-1] and len(lines[-1]) + len(text) + 1 > room:
                lines.append("")
            lines[-1] += f" {text}" if lines[-1] else text
        return "[" + ("\n" + " " * (indent + 2)).join(lines) + "]"


def _bends(z: Floats, values: Floats, within: float) -> list[int]:
    """Stations at which a quantity bends, and its ends: what lies between is straight within a share of its value."""
    keep = {0, len(z) - 1}
    stretches = [(0, len(z) - 1)]
    while stretches:
        first, last = stretches.pop()
        between = np.arange(first + 1, last)
        if len(between) == 0:
            continue
        line = np.interp(z[between], z[[first, last]], values[[first, last]])
        error = np.abs(values[between] - line) / values[between]
        if error.max() > within:
            worst = int(between[np.argmax(error)])
            keep.add(worst)
            stretches += [(first, worst), (worst, last)]
    return sorted(keep)


def _round(value: float) -> str:
    return _digits(value, 2)


def _digits(value: float, n: int) -> str:
    """A number with n digits, without an exponent where that is short."""
    return f"{float(f'{value:.{n}g}'):.10g}"


def _word(text: str) -> str:
    """A text as YAML takes it, in quotes where it needs them."""
    is_plain = re.fullmatch(r"[A-Za-z][\w.+/-]*( [\w.+/-]+)*", text) and text.lower() not in ("true", "false", "null")
    return text if is_plain else json.dumps(text, ensure_ascii=False)


_TEMPLATE = """\
# {stem}: a first blade file round your own station table.
#
#     skinmesh build {stem}.yaml
#
# Planform and profiles are yours. Everything marked "invented" is a placeholder whose lengths follow your chord, so
# that the blade builds at once: replace it by your own. It is no design.
# Units: m, kg, s, Pa; angles in degrees. Where a comment says "along", a value may be one number, a list of [z, value]
# pairs (straight between, ends held), or the name of a column of the station table.

title: {title}
hand: clockwise                    # rotor seen from upwind; or counter-clockwise: the mirror image, laminate included
planform: {table}

# --- Profiles: the names that your table uses -------------------------------------------------------------------------
# {{circle: true}}, a NACA 4-digit section {{naca: "4424", trailing_gap: 0.008}}, or a coordinate file {{file: x.dat}}.

profiles:
{profiles}

# --- Materials of one ply: invented, replace by your own --------------------------------------------------------------
# 1 along the fibre (or the fabric's main direction), 2 across. Isotropic: {{E, nu, density}}.

materials:
  glass UD:    {{E1: 40.0e9, E2: 11.0e9, G12: 3.8e9, nu12: 0.28, density: 1900, source: invented}}
  glass triax: {{E1: 27.0e9, E2: 13.5e9, G12: 7.5e9, nu12: 0.44, density: 1880, source: invented}}   # 0 / 45 / -45
  glass biax:  {{E1: 22.0e9, E2: 22.0e9, G12: 4.0e9, nu12: 0.14, density: 1850, source: invented}}   # 0 / 90 woven
  foam:        {{E: 0.06e9, nu: 0.3, density: 90, source: invented}}
  gelcoat:     {{E: 3.4e9, nu: 0.36, density: 1200, source: invented}}

# --- Layout: invented, replace by your own ----------------------------------------------------------------------------
# From leading to trailing edge each side of the skin has: leading strip, leading panel, main cap, trailing panel,
# trailing strip. Between the sides: trailing base (where the trailing edge is blunt), fore web, aft web.

layout:
  caps:
    main cap:                      # on both sides; say sides: suction for one
      # A place is {{chord: fraction}}, {{from_axis: metres aft of the pitch axis}} or {{arc: metres from the nose}}.
      centre: {{chord: {middle}}}
      width: {cap}
  webs:
    fore web: {{foot: {{cap: main cap, across: 0.25}}, span: {web_span}}}
    aft web:  {{foot: {{cap: main cap, across: 0.75}}, span: {web_span}}}
  leading strip:                   # arc length on each side of the leading edge (along)
    width: {leading}
  trailing strip:
    width: {trailing}

# --- Plies, from the mould face inwards (on webs from the fore face aft): invented, replace by your own ---------------
# covers: regions by name ("main cap" both sides, "suction main cap" one), or the groups skin, suction, pressure,
# panels, caps, strips, webs, all. thickness (of one layer) and count may vary along. span: the whole blade if not said.

plies:
  - {{ply: gelcoat, material: gelcoat, thickness: {gelcoat}, covers: [skin]}}
  - {{ply: outer skin, material: glass biax, thickness: {fabric}, angle: 45, covers: [skin],
     count: {skin_count}}}
  - {{ply: root build-up, material: glass triax, thickness: {pack}, angle: 0, covers: [skin], span: {root_span},
     count: {root_count}}}
  - {{ply: cap, material: glass UD, thickness: {ud}, angle: 0, covers: [main cap], span: {cap_span},
     count: {cap_count}}}
  - {{ply: panel core, material: foam, covers: [leading panel, trailing panel], span: {core_span},
     thickness: {core}}}
  - {{ply: inner skin, material: glass biax, thickness: {fabric}, angle: 45, covers: [skin],
     count: {skin_count}}}
  - {{ply: web fore face, material: glass biax, thickness: {fabric}, angle: 45, covers: [webs],
     count: {skin_count}}}
  - {{ply: web core, material: foam, covers: [webs],
     thickness: {core}}}
  - {{ply: web aft face, material: glass biax, thickness: {fabric}, angle: 45, covers: [webs],
     count: {skin_count}}}

# --- Mesh -------------------------------------------------------------------------------------------------------------

mesh:
  size: {size}                      # target edge length (along)
  across: {{main cap: 4}}            # least number of elements across a region
  order: 2                         # 1: corners only; 2: with mid-side nodes on the surface
  shape: quad                      # or triangle
  close_gap: {close_gap}                # a trailing-edge gap thinner than this is closed: both sides share their nodes
"""
