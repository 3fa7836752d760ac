"""Mass, centre and moments of the whole blade from mass moments along it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.beam.exact import exact_sections
from skinmesh.beam.schedule import strip_spans
from skinmesh.beam.sections import SectionProperties
from skinmesh.definition.blade import BladeDefinition
from skinmesh.frozen import freeze_array
from skinmesh.skin.plyspans import ply_ends
from skinmesh.skin.skinmap import SkinMap

Floats = NDArray[np.float64]

N_GAUSS = 2  # sections between two places at which something begins or ends
LONGEST = 1.0 / 60.0  # of the span, between two such places
SAME = 1e-9  # of the span


@dataclass(frozen=True, eq=False)
class BladeTotals:
    """Mass moments of the whole blade, laminates at their own depth.

    Attributes
    ----------
    mass : float, kg
    centre : (3,) float array, m
    first_moments : (3,) float array, kg m
        Mass × centre: the static moments about the blade's origin.
    inertia_origin : (3, 3) float array, kg m²
        Inertia tensor about the blade's origin: products of inertia carry the minus sign.
    """

    mass: float
    centre: Floats
    first_moments: Floats
    inertia_origin: Floats

    def __post_init__(self) -> None:
        for name in ("centre", "first_moments"):
            freeze_array(self, name, shape=(3,))
        freeze_array(self, "inertia_origin", shape=(3, 3))


def sum_along(sections: SectionProperties, length: Floats, *, spread: Floats) -> BladeTotals:
    """Add up slices of the blade.

    Parameters
    ----------
    sections : SectionProperties
    length : (m,) float array, m
        Of the slice that each section stands for.
    spread : (m,) float array, m²
        Mean square of the distance from the section along the slice: length² / 12 of a middle, 0 of a Gauss point.

    Returns
    -------
    BladeTotals
    """
    mass = sections.mass * length
    place = np.column_stack([np.nan_to_num(sections.mass_centre), sections.z])
    first = mass @ place
    second = (place * mass[:, None]).T @ place
    second[:2, :2] += np.einsum("mij,m->ij", sections.inertia, length)
    second[2, 2] += mass @ spread
    total = float(mass.sum())
    return BladeTotals(
        mass=total,
        centre=first / total if total > 0.0 else np.zeros(3),
        first_moments=first,
        inertia_origin=np.trace(second) * np.eye(3) - second,
    )


def exact_totals(blade: BladeDefinition, skin: SkinMap) -> BladeTotals:
    """Totals of the exact sections, integrated piecewise between all places at which something begins or ends.

    Parameters
    ----------
    blade : BladeDefinition
    skin : SkinMap

    Returns
    -------
    BladeTotals
    """
    low, high = float(skin.rows.z[0]), float(skin.rows.z[-1])
    span = high - low
    ends = [z for z, _ in ply_ends(blade)]
    n_even = int(np.ceil(1.0 / LONGEST))
    # a web's plies end with it
    webs = [z for pair in strip_spans(skin) for z in pair]
    breaks = np.sort(np.concatenate([skin.rows.z, ends, webs, np.linspace(low, high, n_even + 1)]))
    breaks = breaks[np.concatenate([[True], np.diff(breaks) > SAME * span])]
    x, weight = np.polynomial.legendre.leggauss(N_GAUSS)
    half = 0.5 * np.diff(breaks)[:, None]
    z = (breaks[:-1, None] + half * (1.0 + x)).ravel()
    return sum_along(exact_sections(blade, skin, z), (half * weight).ravel(), spread=np.zeros(len(z)))
