"""The blade file's fields: one model for the reader and for the JSON Schema that editors use.

Every field may be None here, also a required one: the reader sets a refused value to None and goes on, so that the
mistakes in what is left are found too.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from itertools import pairwise
from typing import Annotated, Any, Literal, cast

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, PlainValidator, WithJsonSchema
from pydantic.json_schema import GenerateJsonSchema, JsonSchemaValue

from skinmesh.definition.problems import number_hint, shown

AlongValue = float | list[tuple[float, float]] | str
NOT_YET = "is not available in this version"
_INFINITE = float("inf")


def _read_along(value: object) -> AlongValue:
    if isinstance(value, bool) or not isinstance(value, int | float | str | list):
        raise ValueError(f"must be a number, a list of [z, value] pairs or a column of the table, got {shown(value)}")
    if isinstance(value, str):
        # a text that begins like a number is a number gone wrong, not the name of a column
        if re.match(r"[-+.]?\d", value):
            raise ValueError(f"{shown(value)} is not a number{number_hint(value)}")
        return value
    if not isinstance(value, list):
        return _finite(value)
    if not value:
        raise ValueError("the list of [z, value] pairs is empty")
    if all(isinstance(item, int | float) and not isinstance(item, bool) for item in value):
        raise ValueError(
            f"must be a list of [z, value] pairs, such as [[0, 0.4], [5, 0.4], [22, 0.1]], got {shown(value)}"
        )
    pairs = [_pair(item, k) for k, item in enumerate(value, start=1)]
    for k, (before, after) in enumerate(pairwise(pairs), start=2):
        if after[0] <= before[0]:
            raise ValueError(
                f"z must increase from pair to pair, but pair {k} has z = {after[0]:g} after {before[0]:g}"
            )
    return pairs


def _pair(item: object, number: int) -> tuple[float, float]:
    if not isinstance(item, list) or len(item) != 2:
        raise ValueError(f"pair {number} must be [z, value], got {shown(item)}")
    for part in item:
        if isinstance(part, bool) or not isinstance(part, int | float):
            hint = number_hint(part) if isinstance(part, str) else ""
            raise ValueError(f"pair {number}: {shown(part)} is not a number{hint}")
    return _finite(item[0], f"pair {number}: "), _finite(item[1], f"pair {number}: ")


def _finite(value: float, place: str = "") -> float:
    if not abs(value) < _INFINITE:
        raise ValueError(f"{place}must be a finite number, got {shown(value)}")
    return float(value)


Along = Annotated[
    AlongValue,
    PlainValidator(_read_along),
    WithJsonSchema(
        {
            "description": "A number, a list of [z, value] pairs, or the name of a column of the station table.",
            "anyOf": [
                {"type": "number"},
                {
                    "type": "array",
                    "minItems": 1,
                    "items": {"type": "array", "items": {"type": "number"}, "minItems": 2, "maxItems": 2},
                },
                {"type": "string"},
            ],
        }
    ),
]


def _true_itself(value: object) -> object:
    # True == 1 in Python, but 1 is not true in a blade file
    if value is not True:
        raise ValueError(f"must be true, got {shown(value)}")
    return value


def _no_truth(value: object) -> object:
    if isinstance(value, bool):
        raise ValueError(f"must be 1 or 2, got {shown(value)}")
    return value


Sides = Literal["suction", "pressure", "both"]
Span = Annotated[list[float], Field(min_length=2, max_length=2)]
Modulus = Annotated[float, Field(gt=0)]


class Part(BaseModel):
    """A group of fields that knows no others."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, allow_inf_nan=False)


class ProfileFields(Part):
    """A profile: exactly one of circle, naca and file."""

    model_config = ConfigDict(
        json_schema_extra={"oneOf": [{"required": ["circle"]}, {"required": ["naca"]}, {"required": ["file"]}]}
    )
    circle: Annotated[Literal[True], BeforeValidator(_true_itself)] | None = Field(
        None, description="A circle whose diameter is the chord."
    )
    naca: str | None = Field(None, description='The four digits of a NACA 4-digit profile, in quotes: "4424".')
    trailing_gap: float | None = Field(
        None,
        ge=0,
        lt=0.3,
        description="With naca: gap at the trailing edge as a fraction of the chord, opened linearly from the nose.",
    )
    file: str | None = Field(
        None,
        description="A plain coordinate file, looked up beside the blade file and among the package's own profiles.",
    )


class MaterialFields(Part):
    """A material of one ply: isotropic {E, nu, density}, or orthotropic {E1, E2, G12, nu12, density}."""

    model_config = ConfigDict(
        json_schema_extra={"oneOf": [{"required": ["E", "nu"]}, {"required": ["E1", "E2", "G12", "nu12"]}]}
    )
    E: Modulus | None = Field(None, description="Young's modulus of an isotropic material, Pa.")
    nu: float | None = Field(None, description="Poisson's ratio of an isotropic material.")
    E1: Modulus | None = Field(None, description="Modulus along the fibre, Pa.")
    E2: Modulus | None = Field(None, description="Modulus across the fibre, Pa.")
    G12: Modulus | None = Field(None, description="Shear modulus in the plane of the ply, Pa.")
    nu12: float | None = Field(None, description="Poisson's ratio: contraction along 2 for a pull along 1.")
    E3: Modulus | None = Field(None, description="Modulus through the thickness, Pa; E2 where not given.")
    nu13: float | None = Field(None, description="Poisson's ratio; nu12 where not given.")
    nu23: float | None = Field(
        None,
        description="Poisson's ratio; where not given 0.3, or half of what a stable material allows if that is less.",
    )
    G13: Modulus | None = Field(None, description="Shear modulus, Pa; G12 where not given.")
    G23: Modulus | None = Field(None, description="Shear modulus, Pa; E2 / (2 (1 + nu23)) where not given.")
    density: float | None = Field(gt=0, description="kg/m³.")
    source: str = Field("", description="Where the values come from.")


class PlaceFields(Part):
    """A place on a section: exactly one of from_axis, chord, arc, and cap with across."""

    from_axis: Along | None = Field(
        None, description="Metres towards the trailing edge from the pitch axis, along the chord line (along)."
    )
    chord: Along | None = Field(None, description="Fraction of the chord from the leading edge (along).")
    arc: Along | None = Field(None, description="Metres along the skin from the leading edge (along).")
    cap: str | None = Field(None, description="A cap; goes with across.")
    across: Along | None = Field(None, description="Fraction of the cap's width from its fore edge (along).")


class FootFields(PlaceFields):
    """A web's foot: one place for both sides, or one for suction and one for pressure."""

    suction: PlaceFields | None = Field(None, description="The place on the suction side; goes with pressure.")
    pressure: PlaceFields | None = Field(None, description="The place on the pressure side; goes with suction.")


class CapFields(Part):
    """A spar cap."""

    centre: PlaceFields | None = Field(description="Where the middle of the cap lies.")
    width: Along | None = Field(description="Width along the skin, m (along).")
    sides: Sides | None = Field(None, description="The side that carries the cap; both where not given.")
    plane_twist: float | None = Field(
        None, description="Degrees. from_axis is measured along the chord line of a section of this twist."
    )


class WebFields(Part):
    """A shear web."""

    foot: FootFields | None = Field(description="Where the web meets the skin.")
    span: Span | None = Field(None, description="Ends of the web [z, z], m; the whole blade where not given.")
    plane_twist: float | None = Field(
        None, description="Degrees. from_axis is measured along the chord line of a section of this twist."
    )


class StripFields(Part):
    """A strip along an edge."""

    width: Along | None = Field(description="Arc length on each side of the edge, m (along).")


class LayoutFields(Part):
    """What lies where on a section."""

    caps: dict[str, CapFields] | None = Field(None, description="Spar caps by name.")
    webs: dict[str, WebFields] | None = Field(None, description="Shear webs by name.")
    leading_strip: StripFields | None = Field(
        None, alias="leading strip", description="A strip on each side of the leading edge."
    )
    trailing_strip: StripFields | None = Field(
        None, alias="trailing strip", description="A strip on each side of the trailing edge."
    )


class StepFields(Part):
    """How the ends of a counted ply are staggered."""

    root: float | None = Field(None, ge=0, description="Each further layer starts this much later, m.")
    tip: float | None = Field(None, ge=0, description="Each further layer stops this much earlier, m.")


class PlyFields(Part):
    """One line of the ply schedule."""

    ply: str | None = Field(description="Name of the ply.")
    material: str | None = Field(description="Name of its material.")
    thickness: Along | None = Field(description="Thickness of one layer, m (along).")
    covers: Annotated[list[str], Field(min_length=1)] | None = Field(
        description="Regions with or without their side, or the groups skin, suction, pressure, panels, caps, strips,"
        " webs, all."
    )
    count: Along | None = Field(None, description="Number of layers (along); 1 where not given.")
    angle: float | None = Field(
        None,
        ge=-360,
        le=360,
        description="Degrees from e1, the pitch axis laid on the element, towards e2; 0 where not given.",
    )
    span: Span | None = Field(None, description="Ends of the ply [z, z], m; the whole blade where not given.")
    step: StepFields | None = Field(None, description="Stagger of the layers' ends.")


class MeshFields(Part):
    """What is asked of the mesh."""

    size: Along | None = Field(
        None, description="Target edge length, m (along); the longest chord / 18 where not given."
    )
    across: dict[str, Annotated[int, Field(ge=1, le=1000)]] | None = Field(
        None, description="Least number of elements across a region, by the names that covers takes."
    )
    order: Annotated[Literal[1, 2], BeforeValidator(_no_truth)] | None = Field(
        None, description="1: corner nodes only; 2 (default): with mid-side nodes."
    )
    shape: Literal["quad", "triangle"] | None = Field(None, description="Shape of the elements; quad where not given.")
    surface: Literal["outer", "mid"] | None = Field(
        None, description="Where the nodes lie: on the mould face, or in the middle of the laminate."
    )
    close_gap: float | None = Field(
        None, ge=0, description="A trailing-edge gap thinner than this is closed, m; 0.002 where not given."
    )
    cut_at_ply_ends: bool | None = Field(None, description="Whether every ply end becomes an element row.")
    chord_error: float | None = Field(
        None,
        gt=0,
        le=0.1,
        description="Largest distance of an element's straight edge from the section, as a share of the chord; 0.002"
        " where not given.",
    )
    turning: float | None = Field(
        None,
        gt=0,
        le=90,
        description="Largest turning of the section within an element, degrees; 22.5 where not given.",
    )
    least_spacing: Along | None = Field(
        None, description="Least distance of two seams, m (along); a hundredth of the side's arc where not given."
    )


class BladeFields(Part):
    """A blade file of skinmesh."""

    title: str | None = Field(None, description="What the blade is, in a few words.")
    hand: Literal["clockwise", "counter-clockwise"] | None = Field(
        None, description="Sense of rotation seen from upwind; clockwise where not given."
    )
    planform: str | None = Field(description="The station table (CSV), looked up beside the blade file.")
    profiles: dict[str, ProfileFields] | None = Field(description="Profiles by the names that the table uses.")
    materials: dict[str, MaterialFields] | None = Field(None, description="Materials by name.")
    layout: LayoutFields | None = Field(None, description="Caps, webs and edge strips.")
    plies: list[PlyFields] | None = Field(
        None, description="The ply schedule, from the mould face inwards; on webs from the fore face aft."
    )
    mesh: MeshFields | None = Field(None, description="Size, order and shape of the elements.")


class _EditorSchema(GenerateJsonSchema):
    """JSON Schema of what a user writes: no field is null, and no default is nothing."""

    def nullable_schema(self, schema: Any) -> JsonSchemaValue:
        return self.generate_inner(schema["schema"])

    def default_schema(self, schema: Any) -> JsonSchemaValue:
        return self.generate_inner(schema["schema"])

    def get_title_from_name(self, name: str) -> str:
        return name.replace("_", " ")


def json_schema() -> dict[str, Any]:
    """JSON Schema of the blade file, for editors.

    Returns
    -------
    dict

    Examples
    --------
    >>> json_schema()["required"]
    ['planform', 'profiles']
    """
    own: Mapping[str, Any] = BladeFields.model_json_schema(by_alias=True, schema_generator=_EditorSchema)
    return {"$schema": _EditorSchema.schema_dialect, **cast(dict[str, Any], own), "title": "skinmesh blade file"}
