"""Caps, webs and strips: from the fields of the blade file to the layout."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import radians

from skinmesh.definition.along import ANY, FRACTION, LENGTH, POSITIVE, RATIO, AlongReader
from skinmesh.definition.blade import (
    PRESSURE,
    SIDE_NAMES,
    SUCTION,
    AcrossCap,
    ArcLength,
    CapRule,
    ChordFraction,
    FromAxis,
    Layout,
    Place,
    WebRule,
)
from skinmesh.definition.names import is_reserved
from skinmesh.definition.problems import FieldPath, FieldReport, no_such, shown
from skinmesh.definition.schema import CapFields, LayoutFields, PlaceFields, StripFields, WebFields
from skinmesh.definition.spanwise import Spanwise, constant

SLACK = 1e-9  # m; an end that misses the blade's own by less was meant to meet it
LONGEST_NAME = 60
_PLACES = ("from_axis", "chord", "arc", "cap", "across")
_SIDES: Mapping[str | None, tuple[int, ...]] = {
    None: (SUCTION, PRESSURE),
    "both": (SUCTION, PRESSURE),
    "suction": (SUCTION,),
    "pressure": (PRESSURE,),
}


@dataclass(frozen=True)
class LayoutReader:
    """Makes the layout.

    Attributes
    ----------
    report : FieldReport
    along : AlongReader
    blade_span : (float, float) or None, m
        None where the station table was refused.
    """

    report: FieldReport
    along: AlongReader
    blade_span: tuple[float, float] | None

    def read(self, fields: LayoutFields | None) -> Layout:
        """Make the layout; what was refused is left out or stands in with a harmless value, for names alone."""
        if fields is None:
            return Layout()
        caps, webs = fields.caps or {}, fields.webs or {}
        for part, names in (("caps", caps), ("webs", webs)):
            for name in names:
                self._check_name(name, ("layout", part, name))
        for name in [name for name in webs if name in caps]:
            self.report.add(("layout", "webs", name), "a cap has this name too; give the web another one")
        sides = {name: _SIDES[cap.sides] for name, cap in caps.items()}
        return Layout(
            tuple(self._cap(name, cap) for name, cap in caps.items()),
            tuple(self._web(name, web, sides) for name, web in webs.items()),
            self._strip("leading strip", fields.leading_strip),
            self._strip("trailing strip", fields.trailing_strip),
        )

    def _check_name(self, name: str, path: FieldPath) -> None:
        if is_reserved(name):
            self.report.add(path, f"{shown(name)} has a meaning of its own; choose another name")
        elif len(name) > LONGEST_NAME or name != name.strip():
            self.report.add(path, f"a name may have up to {LONGEST_NAME} characters and no blanks at its ends")
        elif not any(mark.isalnum() for mark in name):
            self.report.add(path, f"a name needs a letter or a digit, got {shown(name)}")

    def _strip(self, name: str, fields: StripFields | None) -> Spanwise | None:
        if fields is None:
            return None
        # a refused width still leaves the strip's name for covers
        return self.along.read(fields.width, ("layout", name, "width"), bounds=POSITIVE) or constant(1.0)

    def _cap(self, name: str, fields: CapFields) -> CapRule:
        path = ("layout", "caps", name)
        centre = self._place(fields.centre, (*path, "centre"), caps=None, sides=())
        width = self.along.read(fields.width, (*path, "width"), bounds=POSITIVE)
        self._check_plane_twist(fields.plane_twist, [centre], path)
        return CapRule(
            name,
            centre or FromAxis(constant(0.0)),
            width or constant(1.0),
            _SIDES[fields.sides],
            None if fields.plane_twist is None else radians(fields.plane_twist),
        )

    def _web(self, name: str, fields: WebFields, caps: Mapping[str, tuple[int, ...]]) -> WebRule:
        path = ("layout", "webs", name)
        feet = self._feet(fields, (*path, "foot"), caps)
        self._check_plane_twist(fields.plane_twist, list(feet.values()), path)
        span = self.span(fields.span, (*path, "span"), what="web")
        return WebRule(
            name,
            {side: place or FromAxis(constant(0.0)) for side, place in feet.items()},
            span or self.blade_span or (0.0, 1.0),
            None if fields.plane_twist is None else radians(fields.plane_twist),
        )

    def _feet(self, fields: WebFields, path: FieldPath, caps: Mapping[str, tuple[int, ...]]) -> dict[int, Place | None]:
        foot = fields.foot
        if foot is None:
            return dict.fromkeys((SUCTION, PRESSURE))
        by_side = {SUCTION: foot.suction, PRESSURE: foot.pressure}
        given = [
            side for side, place in by_side.items() if place is not None or self.report.has((*path, SIDE_NAMES[side]))
        ]
        if not given:
            place = self._place(foot, path, caps=caps, sides=(SUCTION, PRESSURE))
            return dict.fromkeys((SUCTION, PRESSURE), place)
        if self._given(foot, path):
            self.report.add(path, "gives a place for both sides and one for a single side; keep one of them")
        elif len(given) == 1:
            other = SIDE_NAMES[-given[0]]
            self.report.add(path, f"gives the {SIDE_NAMES[given[0]]} side only; give {other} too")
        return {
            side: self._place(place, (*path, SIDE_NAMES[side]), caps=caps, sides=(side,))
            for side, place in by_side.items()
        }

    def _given(self, fields: PlaceFields, path: FieldPath) -> list[str]:
        return [key for key in _PLACES if getattr(fields, key) is not None or self.report.has((*path, key))]

    def _place(
        self,
        fields: PlaceFields | None,
        path: FieldPath,
        *,
        caps: Mapping[str, tuple[int, ...]] | None,
        sides: tuple[int, ...],
    ) -> Place | None:
        """A place on a section; ``caps`` is None for the centre of a cap, which cannot lie on a cap."""
        if fields is None:
            return None
        given = self._given(fields, path)
        choice = "from_axis, chord or arc" if caps is None else "from_axis, chord, arc, or cap with across"
        if caps is None and {"cap", "across"} & set(given):
            self.report.add(path, f"a cap's centre cannot be given by a cap; give {choice}")
            return None
        if given not in (["from_axis"], ["chord"], ["arc"], ["cap", "across"]):
            if given == ["cap"] or given == ["across"]:
                self.report.add(path, f"has {given[0]} without {'across' if given == ['cap'] else 'cap'}; give both")
            elif not given and self.report.has(path):
                pass  # what stood there was refused already
            else:
                got = f"got {', '.join(given)}" if given else "got nothing"
                self.report.add(path, f"must give one place: {choice}; {got}")
            return None
        if given == ["from_axis"]:
            value = self.along.read(fields.from_axis, (*path, "from_axis"), kind=LENGTH, bounds=ANY)
            return FromAxis(value) if value else None
        if given == ["chord"]:
            value = self.along.read(fields.chord, (*path, "chord"), kind=RATIO, bounds=FRACTION)
            return ChordFraction(value) if value else None
        if given == ["arc"]:
            value = self.along.read(fields.arc, (*path, "arc"), kind=LENGTH, bounds=POSITIVE)
            return ArcLength(value) if value else None
        return self._place_on_cap(fields, path, caps or {}, sides)

    def _place_on_cap(
        self, fields: PlaceFields, path: FieldPath, caps: Mapping[str, tuple[int, ...]], sides: tuple[int, ...]
    ) -> AcrossCap | None:
        across = self.along.read(fields.across, (*path, "across"), kind=RATIO, bounds=FRACTION)
        if fields.cap is None:
            return None
        if fields.cap not in caps:
            self.report.add((*path, "cap"), no_such("cap", fields.cap, caps))
            return None
        for side in sides:
            if side not in caps[fields.cap]:
                text = (
                    f"the cap '{fields.cap}' does not lie on the {SIDE_NAMES[side]} side; give a place of its own there"
                )
                self.report.add((*path, "cap"), text)
        return AcrossCap(fields.cap, across) if across else None

    def _check_plane_twist(self, value: float | None, places: list[Place | None], path: FieldPath) -> None:
        if value is None:
            return
        if places and all(place is not None and not isinstance(place, FromAxis) for place in places):
            self.report.add((*path, "plane_twist"), "acts on a place given by from_axis only; leave it out")
        elif abs(value) > 180:
            self.report.add((*path, "plane_twist"), f"must lie between -180 and 180 degrees, got {shown(value)}")

    def span(self, ends: list[float] | None, path: FieldPath, *, what: str) -> tuple[float, float] | None:
        """Check the ends of a web or a ply.

        Parameters
        ----------
        ends : list of float or None
        path : tuple
        what : str
            'web' or 'ply', for messages.

        Returns
        -------
        (float, float) or None
        """
        if ends is None:
            return None
        low, high = ends
        if low >= high:
            self.report.add(path, f"must go from root to tip, [smaller z, larger z], got {shown(ends)}")
            return None
        if self.blade_span is None:
            return low, high
        root, tip = self.blade_span
        if low < root - SLACK or high > tip + SLACK:
            which = f"starts at z = {low:g}, before" if low < root - SLACK else f"ends at z = {high:g}, beyond"
            self.report.add(path, f"the {what} {which} the blade, which runs from z = {root:g} to {tip:g} m")
            return None
        return max(low, root), min(high, tip)
