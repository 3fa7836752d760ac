"""Both meshes along the span: planform, mass per length, and how wide every region is."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import Akima1DInterpolator

from skinmesh.check.spantable import element_rows
from skinmesh.frozen import freeze_array
from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.planform import Planform, planform
from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Along:
    """One mesh along its span.

    Attributes
    ----------
    planform : Planform
        On the node rings.
    ends : (r + 1,) float array, m
        Ends of the element rows.
    mass : (r,) float array, kg/m
        Mass of each element row over its length; nought without plies.
    widths : mapping of str to (r,) float array, m
        Area of each region on each element row over the row's length: its mean width, a web's mean height.
    stack_area : (s,) float array, m²
        Of the elements that carry each stack.
    """

    planform: Planform
    ends: Floats
    mass: Floats
    widths: dict[str, Floats]
    stack_area: Floats

    def __post_init__(self) -> None:
        freeze_array(self, "ends", shape=(None,))
        freeze_array(self, "mass", shape=(len(self.ends) - 1,))
        freeze_array(self, "stack_area", shape=(None,))

    @property
    def middles(self) -> Floats:
        """(r,) float array, m: middles of the element rows."""
        middles: Floats = 0.5 * (self.ends[1:] + self.ends[:-1])
        return middles

    def means(self, values: NDArray[np.floating | np.bool_], ends: Floats) -> Floats:
        """Means of a quantity, given on the element rows, over other parts of the span; nought beyond the ends.

        Parameters
        ----------
        values : (r,) float array
        ends : (k + 1,) float array, m

        Returns
        -------
        (k,) float array
        """
        total = np.concatenate([[0.0], np.cumsum(values * np.diff(self.ends))])
        means: Floats = np.diff(np.interp(ends, self.ends, total)) / np.maximum(np.diff(ends), 1e-30)
        return means

    def span_of(self, region: str) -> tuple[float, float]:
        """z of the first and last end of the rows that a region is on."""
        rows = np.flatnonzero(self.widths[region])
        return float(self.ends[rows[0]]), float(self.ends[rows[-1] + 1])


def measured_along(mesh: ShellMesh) -> Along:
    """Measure a mesh along its span.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    Along
    """
    row, ends = element_rows(mesh)
    n = len(ends) - 1
    length = np.maximum(np.diff(ends), 1e-30)
    area = element_areas(mesh)
    by_region = np.bincount(mesh.region * n + row, weights=area, minlength=len(mesh.regions) * n).reshape(-1, n)
    mass = np.bincount(row, weights=area * mesh.areal_mass, minlength=n)
    widths = {region.name: own / length for region, own in zip(mesh.regions, by_region, strict=True) if own.any()}
    has_stack = mesh.stack >= 0
    stack_area: Floats = np.bincount(mesh.stack[has_stack], weights=area[has_stack], minlength=len(mesh.stacks)).astype(
        float
    )
    return Along(planform(mesh), ends, mass / length, widths, stack_area)


@dataclass(frozen=True)
class LargestChange:
    """Where a quantity along the span changed most.

    Attributes
    ----------
    z : float, m
    old, new : float
    """

    z: float
    old: float
    new: float

    @property
    def difference(self) -> float:
        """New less old."""
        return self.new - self.old


def largest_change(old_z: Floats, old: Floats, new_z: Floats, new: Floats) -> LargestChange:
    """Find where two curves over the span differ most, at the places of the new one that both have.

    Parameters
    ----------
    old_z, old : (k,) float array
    new_z, new : (n,) float array

    Returns
    -------
    LargestChange

    Examples
    --------
    >>> largest_change(np.array([0.0, 1.0]), np.array([2.0, 2.0]), np.array([0.0, 0.5]), np.array([2.0, 2.5]))
    LargestChange(z=0.5, old=2.0, new=2.5)
    """
    if not len(old_z) or not len(new_z):
        return LargestChange(0.0, 0.0, 0.0)
    shared = (new_z >= old_z[0]) & (new_z <= old_z[-1])
    if np.array_equal(old_z, new_z):
        before = old
    elif len(old_z) < 3:
        before = np.interp(new_z, old_z, old)
    else:
        # smooth, or the bend of a curve between two places of the old one would pass for a change
        before = Akima1DInterpolator(old_z, old)(np.clip(new_z, old_z[0], old_z[-1]))
    if not shared.any():
        return LargestChange(float(new_z[0]), 0.0, float(new[0]))
    k = int(np.argmax(np.where(shared, np.abs(new - before), -1.0)))
    return LargestChange(float(new_z[k]), float(before[k]), float(new[k]))
