"""What a sweep is: changes, variants, and what is asked of each."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from skinmesh.definition.problems import FieldPath

SET, FACTOR, ADD = "set", "factor", "add"
GRID, TOGETHER, ONE_BY_ONE, CASES = "grid", "together", "one by one", "cases"


@dataclass(frozen=True)
class Change:
    """One named change.

    Attributes
    ----------
    name : str
    kind : str
        SET, FACTOR or ADD.
    field : tuple of str or int, optional
        Path in the blade file's values; None where a column is changed.
    column : str, optional
        Header of the station table.
    span : (float, float), optional, m
        Where it is changed; everywhere where not given.
    ramp : float, m
        Outside the span the change goes down to nothing over this length.
    """

    name: str
    kind: str
    field: FieldPath | None = None
    column: str | None = None
    span: tuple[float, float] | None = None
    ramp: float = 0.0

    @property
    def is_of_mesh_rule(self) -> bool:
        """Whether it changes what is asked of the mesh, for which a kept mesh has no ear."""
        return self.field is not None and self.field[0] == "mesh"


@dataclass(frozen=True)
class Variant:
    """One blade of the sweep.

    Attributes
    ----------
    number : int
        One-based place in the table.
    name : str
        From the table of cases, else empty.
    values : mapping of str to value
        Of every change that is made, by its name.
    """

    number: int
    name: str
    values: Mapping[str, Any]


@dataclass(frozen=True)
class Order:
    """What is asked of every variant.

    Attributes
    ----------
    sections : tuple of float, m
        Where stiffnesses are listed.
    keep, checks, trial : bool
    formats : tuple of str
        In which the mesh is kept; none where empty.
    """

    sections: tuple[float, ...]
    keep: bool = True
    checks: bool = True
    trial: bool = False
    formats: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class BladeTexts:
    """A blade as the texts of its files, without any folder: what a worker elsewhere needs.

    Attributes
    ----------
    stem : str
        Of the blade file.
    files : mapping of str to str
        Text by file name, the blade file's first, the station table's second.
    """

    stem: str
    files: Mapping[str, str]

    @property
    def blade_file(self) -> str:
        """Name of the blade file."""
        return next(iter(self.files))


@dataclass(frozen=True, eq=False)
class BaseBlade:
    """The base blade as plain values, with everything that a variant's texts are made of.

    Attributes
    ----------
    title, stem : str
    file : str
        As the sweep file names it.
    data : dict
        The blade file's values, files named without folders.
    table : str
        Text of the station table.
    profiles : mapping of str to str
        Texts of the profile files by name.
    lines : mapping of str to int
        Line of every field.
    span : (float, float), m
    """

    title: str
    stem: str
    file: str
    data: dict[str, Any]
    table: str
    profiles: Mapping[str, str]
    lines: Mapping[str, int]
    span: tuple[float, float]


@dataclass(frozen=True, eq=False)
class SweepPlan:
    """A sweep, read and checked.

    Attributes
    ----------
    title, stem : str
    base : BaseBlade
    changes : tuple of Change
    combine : str
        GRID, TOGETHER, ONE_BY_ONE or CASES.
    variants : tuple of Variant
    order : Order
    """

    title: str
    stem: str
    base: BaseBlade
    changes: tuple[Change, ...]
    combine: str
    variants: tuple[Variant, ...]
    order: Order
