"""The beam table as comma-separated values."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.sections import SectionProperties
from skinmesh.beam.table import BeamTable, beam_difference
from skinmesh.beam.totals import BladeTotals
from skinmesh.wording import CAUTION

Floats = NDArray[np.float64]

NOTES = (
    *CAUTION,
    "Blade axes: z along the pitch axis, x and y from it. theory: thin-wall laminate theory on the exact sections.",
    "mesh: sum over the mesh's own elements. difference: mesh over theory; of centres the distance over the chord.",
    "EI_small, EI_large: principal bending stiffnesses about the tension centre. structural_twist: direction in which",
    "the larger one resists bending, positive as the twist. EA kept from bending and twisting, EI from twisting, GJ",
    "from both; what couples them stands in the last columns (torque about +z; rates of strain along x and y).",
    "A blank is a value that does not exist: the direction of a round section, the centre of an empty one.",
)


def beam_csv(table: BeamTable) -> str:
    """Write the table: one row a section, and notes and totals before it as lines that begin with ``#``.

    Parameters
    ----------
    table : BeamTable

    Returns
    -------
    str
    """
    columns = dict(_columns(table))
    head = [f"# {' '.join(table.title.split())}", *(f"# {note}" for note in NOTES), *_total_lines(table)]
    values = np.column_stack(list(columns.values())).tolist()
    rows = (",".join("" if value != value else f"{value + 0.0:.9g}" for value in row) for row in values)
    return "\n".join([*head, ",".join(columns), *rows]) + "\n"


def _columns(table: BeamTable) -> Iterator[tuple[str, Floats]]:
    difference = beam_difference(table)
    yield "z_m", table.z
    yield "chord_m", table.chord
    yield "twist_deg", np.degrees(table.twist)
    theory, mesh = (_quantities(road) for road in (table.exact, table.mesh))
    percent = {
        "mass_kg_per_m": difference.mass,
        "mass_centre_y_m": difference.mass_centre,
        "EA_N": difference.axial,
        "tension_centre_y_m": difference.tension_centre,
        "EI_small_N_m2": difference.principal[:, 0],
        "EI_large_N_m2": difference.principal[:, 1],
        "GJ_N_m2": difference.torsion,
        "shear_centre_y_m": difference.shear_centre,
        "rotary_inertia_x_kg_m": difference.inertia[:, 0],
        "rotary_inertia_y_kg_m": difference.inertia[:, 1],
    }
    for name in theory:
        stem, unit = _split(name)
        yield f"{stem}_theory_{unit}", theory[name]
        yield f"{stem}_mesh_{unit}", mesh[name]
        if name in percent:
            yield f"{stem.removesuffix('_y') if 'centre' in stem else stem}_difference_percent", 100.0 * percent[name]
        elif name == "structural_twist_deg":
            yield "structural_twist_difference_deg", np.degrees(difference.structural_twist)
    yield "cells_theory", table.exact.n_cells.astype(float)
    yield "cells_mesh", table.mesh.n_cells.astype(float)


_UNITS = ("kg_per_m", "N_m2", "N_m", "kg_m", "deg", "N", "m")


def _split(name: str) -> tuple[str, str]:
    """Stem and unit of a column's name.

    >>> _split("EI_small_N_m2"), _split("mass_centre_x_m")
    (('EI_small', 'N_m2'), ('mass_centre_x', 'm'))
    """
    unit = next(unit for unit in _UNITS if name.endswith(f"_{unit}"))
    return name.removesuffix(f"_{unit}"), unit


def _quantities(road: SectionProperties) -> dict[str, Floats]:
    extension_twist = road.stiffness[:, 0, 3]
    bend_twist = road.stiffness[:, 1:3, 3] - np.nan_to_num(road.tension_centre) * extension_twist[:, None]
    return {
        "mass_kg_per_m": road.mass,
        "mass_centre_x_m": road.mass_centre[:, 0],
        "mass_centre_y_m": road.mass_centre[:, 1],
        "rotary_inertia_x_kg_m": road.inertia[:, 0, 0],
        "rotary_inertia_y_kg_m": road.inertia[:, 1, 1],
        "rotary_inertia_xy_kg_m": road.inertia[:, 0, 1],
        "EA_N": road.axial,
        "tension_centre_x_m": road.tension_centre[:, 0],
        "tension_centre_y_m": road.tension_centre[:, 1],
        "EI_small_N_m2": road.principal[:, 0],
        "EI_large_N_m2": road.principal[:, 1],
        "structural_twist_deg": np.degrees(road.structural_twist),
        "GJ_N_m2": road.torsion,
        "shear_centre_x_m": road.shear_centre[:, 0],
        "shear_centre_y_m": road.shear_centre[:, 1],
        "extension_twist_N_m": extension_twist,
        "bending_x_twist_N_m2": bend_twist[:, 0],
        "bending_y_twist_N_m2": bend_twist[:, 1],
    }


def _total_lines(table: BeamTable) -> Iterator[str]:
    theory, mesh = _totals(table.exact_totals), _totals(table.mesh_totals)
    for name, value in theory.items():
        yield f"# total {name}: theory {value:.7g}, mesh {mesh[name]:.7g}"


def _totals(totals: BladeTotals) -> dict[str, float]:
    listed = {"mass_kg": totals.mass}
    for k, axis in enumerate("xyz"):
        listed[f"centre_{axis}_m"] = float(totals.centre[k])
        listed[f"static_moment_{axis}_kg_m"] = float(totals.first_moments[k])
    for k, axis in enumerate("xyz"):
        listed[f"inertia_{axis}{axis}_about_origin_kg_m2"] = float(totals.inertia_origin[k, k])
    for a, b in ((0, 1), (0, 2), (1, 2)):
        listed[f"inertia_{'xyz'[a]}{'xyz'[b]}_about_origin_kg_m2"] = float(totals.inertia_origin[a, b])
    return listed
