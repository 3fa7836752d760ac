"""The blade as the user defined it: types only, every value in SI units and radians."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.spanwise import Spanwise
from skinmesh.frozen import freeze_array
from skinmesh.laminate.material import Material

SUCTION = 1
PRESSURE = -1
SIDE_NAMES: Mapping[int, str] = {SUCTION: "suction", PRESSURE: "pressure"}
CLOCKWISE = "clockwise"
COUNTER_CLOCKWISE = "counter-clockwise"
NO_RATIO = np.nan


@dataclass(frozen=True, eq=False)
class StationTable:
    """The station table, root first.

    Attributes
    ----------
    z, chord, prebend, sweep : (k,) float array, m
    twist : (k,) float array, rad
    pitch_axis : (k,) float array
        Fraction of the chord from the leading edge.
    thickness_ratio : (k,) float array
        Wanted maximum thickness / chord, NaN where none was given.
    profile : tuple of str or None
        Profile of each station, None where it is blended from its neighbours.
    """

    z: NDArray[np.float64]
    chord: NDArray[np.float64]
    twist: NDArray[np.float64]
    pitch_axis: NDArray[np.float64]
    thickness_ratio: NDArray[np.float64]
    prebend: NDArray[np.float64]
    sweep: NDArray[np.float64]
    profile: tuple[str | None, ...]

    def __post_init__(self) -> None:
        n = len(self.profile)
        for field in ("z", "chord", "twist", "pitch_axis", "thickness_ratio", "prebend", "sweep"):
            freeze_array(self, field, shape=(n,))


@dataclass(frozen=True)
class CircleProfile:
    """A circle whose diameter is the chord."""


@dataclass(frozen=True)
class NacaProfile:
    """A NACA 4-digit profile.

    Attributes
    ----------
    code : str
        The four digits.
    trailing_gap : float or None
        Gap at the trailing edge as a fraction of the chord, opened linearly from the leading edge; None leaves
        the published formula as it is (a gap of 0.0021 × thickness in per cent).
    """

    code: str
    trailing_gap: float | None = None


@dataclass(frozen=True, eq=False)
class FileProfile:
    """A profile from a coordinate file.

    Attributes
    ----------
    file : str
    points : (n, 2) float array
        In the file's own unit: one loop from the trailing edge over the suction side (+y) to the leading edge and
        back over the pressure side to the trailing edge, no point twice in a row.
    """

    file: str
    points: NDArray[np.float64]

    def __post_init__(self) -> None:
        freeze_array(self, "points", shape=(None, 2))


Profile = CircleProfile | NacaProfile | FileProfile


@dataclass(frozen=True, eq=False)
class FromAxis:
    """Metres towards the trailing edge from the pitch axis, along the chord line."""

    value: Spanwise


@dataclass(frozen=True, eq=False)
class ChordFraction:
    """Fraction of the chord from the leading edge."""

    value: Spanwise


@dataclass(frozen=True, eq=False)
class ArcLength:
    """Metres along the skin from the leading edge."""

    value: Spanwise


@dataclass(frozen=True, eq=False)
class AcrossCap:
    """Fraction of a cap's width from its fore edge."""

    cap: str
    across: Spanwise


Place = FromAxis | ChordFraction | ArcLength | AcrossCap


@dataclass(frozen=True, eq=False)
class CapRule:
    """A spar cap.

    Attributes
    ----------
    name : str
    centre : Place
        Never AcrossCap.
    width : Spanwise, m
        Along the skin.
    sides : tuple of int
        SUCTION, PRESSURE or both.
    plane_twist : float or None, rad
        Where given, FromAxis is measured along the chord line of a section of this twist.
    """

    name: str
    centre: Place
    width: Spanwise
    sides: tuple[int, ...]
    plane_twist: float | None = None


@dataclass(frozen=True, eq=False)
class WebRule:
    """A shear web.

    Attributes
    ----------
    name : str
    feet : mapping of side to Place
        Foot on the suction and on the pressure side.
    span : (float, float), m
        Ends of the web.
    plane_twist : float or None, rad
        As for CapRule.
    """

    name: str
    feet: Mapping[int, Place]
    span: tuple[float, float]
    plane_twist: float | None = None


@dataclass(frozen=True, eq=False)
class Layout:
    """Caps, webs and edge strips, in the order of the blade file.

    Attributes
    ----------
    caps : tuple of CapRule
    webs : tuple of WebRule
    leading_strip, trailing_strip : Spanwise or None, m
        Arc length on each side of the edge; None where there is no such strip.
    """

    caps: tuple[CapRule, ...] = ()
    webs: tuple[WebRule, ...] = ()
    leading_strip: Spanwise | None = None
    trailing_strip: Spanwise | None = None


@dataclass(frozen=True, eq=False)
class PlyRule:
    """One line of the ply schedule.

    Attributes
    ----------
    name : str
    material : Material
    thickness : Spanwise, m
        Of one layer.
    count : Spanwise
        Number of layers.
    angle : float, rad
        As the user wrote it, for a clockwise blade.
    covers : tuple of str
        Names of regions and groups.
    span : (float, float) or None, m
        None for the whole blade (a web's own span on a web).
    step_root, step_tip : float, m
        Each further layer starts and stops so much later and earlier.
    """

    name: str
    material: Material
    thickness: Spanwise
    count: Spanwise
    angle: float
    covers: tuple[str, ...]
    span: tuple[float, float] | None = None
    step_root: float = 0.0
    step_tip: float = 0.0


@dataclass(frozen=True, eq=False)
class MeshRule:
    """What the user asks of the mesh.

    Attributes
    ----------
    size : Spanwise, m
        Target edge length.
    across : mapping of str to int
        Least elements across a region, by name with or without its side.
    order : int
        1 or 2.
    shape : str
        'quad' or 'triangle'.
    surface : str
        'outer', the mould face, or 'mid', the middle of the laminate.
    close_gap : float, m
        A trailing-edge gap thinner than this is closed.
    cut_at_ply_ends : bool
        Whether every ply end becomes a row of its own.
    chord_error : float
        Largest distance of an element's straight edge from the section, as a share of the local chord.
    turning : float, rad
        Largest turning of the section within one element.
    least_spacing : Spanwise or None, m
        Least distance of two seams; None for one hundredth of the side's arc length.
    """

    size: Spanwise
    across: Mapping[str, int]
    order: int = 2
    shape: str = "quad"
    surface: str = "outer"
    close_gap: float = 0.002
    cut_at_ply_ends: bool = False
    chord_error: float = 0.002
    turning: float = np.pi / 8
    least_spacing: Spanwise | None = None


@dataclass(frozen=True)
class Source:
    """An input file and the SHA-256 of its bytes."""

    file: str
    sha256: str


@dataclass(frozen=True, eq=False)
class BladeDefinition:
    """A whole blade, checked.

    Attributes
    ----------
    title : str
    stem : str
        The blade file's name without folder and suffix.
    hand : str
        CLOCKWISE or COUNTER_CLOCKWISE.
    stations : StationTable
    profiles : mapping of str to Profile
    materials : mapping of str to Material
    layout : Layout
    plies : tuple of PlyRule
        Empty where the blade file has no schedule.
    mesh : MeshRule
    sources : tuple of Source
        The blade file first.
    lines : mapping of str to int
        Line of every field of the blade file, for later messages: ``plies[3].span`` → 52.
    """

    title: str
    stem: str
    hand: str
    stations: StationTable
    profiles: Mapping[str, Profile]
    materials: Mapping[str, Material]
    layout: Layout
    plies: tuple[PlyRule, ...]
    mesh: MeshRule
    sources: tuple[Source, ...] = ()
    lines: Mapping[str, int] | None = None
