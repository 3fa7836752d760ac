"""Area, mass, stiffness, deflection and frequencies of an independent blade, by quadrature and beam elements."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from independent_blade import GAUSS_W, GAUSS_X, IndependentBlade, Sections
from independent_laminate import axial_stiffness
from independent_profiles import PRESSURE, SIDES, SUCTION
from scipy.linalg import eigh

FINITE_STEP = 1e-5  # m along z, for the slope of web feet


@dataclass(frozen=True)
class Totals:
    """What a blade adds up to.

    Attributes
    ----------
    areas : dict of region to m²
        On the outer surface; webs from foot to foot.
    ply_mass : dict of ply to kg
    region_mass : dict of region to kg
    centre : (3,) float array, m
        Of mass, x, y, z.
    """

    areas: dict[str, float]
    ply_mass: dict[str, float]
    region_mass: dict[str, float]
    centre: np.ndarray

    @property
    def mass(self) -> float:
        """kg."""
        return sum(self.ply_mass.values())

    @property
    def skin_area(self) -> float:
        """Both sides without the trailing base, m²."""
        return sum(a for r, a in self.areas.items() if r.startswith((SUCTION, PRESSURE)))


def area_rates(blade: IndependentBlade, z: np.ndarray) -> dict[str, np.ndarray]:
    """Area and first moments of area per length along z, (4, m) for each region: area, x, y, z moments."""
    sections = Sections(blade, z)
    out: dict[str, np.ndarray] = {}
    for side in SIDES:
        place, slope = sections.place[side], sections.slope[side]
        step = np.diff(place, axis=1)
        mid, mid_slope = 0.5 * (place[:, 1:] + place[:, :-1]), 0.5 * (slope[:, 1:] + slope[:, :-1])
        # |∂r/∂t × ∂r/∂z| with r = (Im w, Re w, z)
        area = np.hypot(np.abs(step), (np.conj(step) * mid_slope).imag)
        sums = [np.hstack([np.zeros((len(z), 1)), np.cumsum(area * f, axis=1)]) for f in (1.0, mid.imag, mid.real)]
        edges = sections.bounds(side)
        at_edges = [np.column_stack([sections.at_arc(side, a, s) for a in edges.T]) for s in sums]
        for k, name in enumerate(blade.region_names[side]):
            parts = [e[:, k + 1] - e[:, k] for e in at_edges]
            out[f"{side} {name}"] = np.array([*parts, parts[0] * z])
    is_open = sections.trailing_gap >= blade.close_gap
    ends = [sections.place[s][:, -1] for s in SIDES], [sections.slope[s][:, -1] for s in SIDES]
    out["trailing base"] = np.where(is_open, _ruled(*ends[0], *ends[1], z), 0.0)
    for web in blade.webs:
        low, high = blade.part_span(web)
        here = np.clip(z, low + FINITE_STEP, high - FINITE_STEP)
        feet = [Sections(blade, here + d) for d in (-FINITE_STEP, 0.0, FINITE_STEP)]
        p, s = ([f.web_foot(web, side) for f in feet] for side in SIDES)
        rates = _ruled(p[1], s[1], (p[2] - p[0]) / (2 * FINITE_STEP), (s[2] - s[0]) / (2 * FINITE_STEP), z)
        out[web] = np.where((z >= low) & (z <= high), rates, 0.0)
    for rates in out.values():
        rates[2] *= blade.mirror
    return out


def _ruled(a: np.ndarray, b: np.ndarray, a_slope: np.ndarray, b_slope: np.ndarray, z: np.ndarray) -> np.ndarray:
    """Area and first moments per length along z of the straight lines from a to b."""
    total = np.zeros((4, len(z)))
    for x, weight in zip(0.5 + 0.5 * GAUSS_X, 0.5 * GAUSS_W, strict=True):
        point, slope = (1 - x) * a + x * b, (1 - x) * a_slope + x * b_slope
        area = weight * np.hypot(np.abs(b - a), (np.conj(b - a) * slope).imag)
        total += area * np.array([np.ones_like(z), point.imag, point.real, z])
    return total


@cache
def _quadrature(blade: IndependentBlade) -> tuple[np.ndarray, np.ndarray, dict[str, np.ndarray]]:
    half = 0.5 * np.diff(blade.breaks)[:, None]
    z = (blade.breaks[:-1, None] + half * (1 + GAUSS_X)).ravel()
    return z, (half * GAUSS_W).ravel(), area_rates(blade, z)


def totals(blade: IndependentBlade) -> Totals:
    """Areas, masses and the centre of mass of a blade."""
    z, weight, rates = _quadrature(blade)
    areas = {region: float(r[0] @ weight) for region, r in rates.items()}
    ply_mass, region_mass, moment = {}, dict.fromkeys(rates, 0.0), np.zeros(3)
    for ply in blade.plies:
        ply_mass.setdefault(ply.name, 0.0)
        for region in blade.covered(ply):
            per_area = ply.layers(z, *blade.part_span(region)) * ply.thickness(z) * ply.fabric.density
            mass, *moments = rates[region] @ (weight * per_area)
            ply_mass[ply.name] += float(mass)
            region_mass[region] += float(mass)
            moment += moments
    mass = sum(ply_mass.values())
    return Totals(areas, ply_mass, region_mass, moment / mass if mass else moment)


def layers_at(blade: IndependentBlade, region: str, z: float) -> list[tuple]:
    """(fabric, thickness, angle) of a region at z from its outer face."""
    at = np.array([z])
    out = []
    for ply in blade.plies:
        if region in blade.covered(ply):
            n = float(ply.layers(at, *blade.part_span(region))[0])
            if n:
                out.append((ply.fabric, n * float(ply.thickness(at)[0]), ply.angle))
    return out


# ------------------------------------------------------------------------------------------------------ beam


@dataclass(frozen=True)
class Beam:
    """Beam properties at the middles of n elements along z.

    Attributes
    ----------
    nodes : (n + 1,) float array, m
    EA : (n,) float array, N
    EI : (n, 2, 2) float array, N m²
        ∫E (x − x₀)², ∫E (x − x₀)(y − y₀), ∫E (y − y₀)²: [0, 0] bends in x (flap), [1, 1] in y (edge).
    centre : (n, 2) float array, m
        x₀, y₀ where an axial force does not bend.
    mass : (n,) float array, kg/m
    walls : list of dict of region to (k,) complex array, m
        Points y + i x of the middle of the walls.
    """

    nodes: np.ndarray
    EA: np.ndarray
    EI: np.ndarray
    centre: np.ndarray
    mass: np.ndarray
    walls: list[dict[str, np.ndarray]]


def beam(blade: IndependentBlade, n: int = 60) -> Beam:
    """Thin-wall beam properties: every wall a line at the depth where its axial stiffness acts."""
    nodes = np.linspace(blade.low, blade.high, n + 1)
    z = 0.5 * (nodes[1:] + nodes[:-1])
    sections = Sections(blade, z)
    rates = area_rates(blade, z)
    EA, EI, centre, mass, walls = np.zeros(n), np.zeros((n, 2, 2)), np.zeros((n, 2)), np.zeros(n), []
    for i, at in enumerate(z):
        lines = _wall_lines(blade, sections, i)
        moments = np.zeros(6)
        walls.append({})
        for region, line in lines.items():
            layers = layers_at(blade, region, at)
            if not layers or len(line) < 2:
                continue
            stiffness, depth = axial_stiffness(layers)
            line = line + depth * _inward(line) if region not in blade.webs else line
            walls[-1][region] = line
            ds, mid = np.abs(np.diff(line)), 0.5 * (line[1:] + line[:-1])
            x, y = mid.imag, mid.real * blade.mirror
            moments += stiffness * np.array([ds.sum(), ds @ x, ds @ y, ds @ x**2, ds @ (x * y), ds @ y**2])
            mass[i] += rates[region][0, i] * sum(t * fabric.density for fabric, t, _ in layers)
        E, Ex, Ey, Exx, Exy, Eyy = moments
        EA[i], centre[i] = E, (Ex / E, Ey / E)
        EI[i] = [[Exx - Ex**2 / E, Exy - Ex * Ey / E], [Exy - Ex * Ey / E, Eyy - Ey**2 / E]]
    return Beam(nodes, EA, EI, centre, mass, walls)


def _wall_lines(blade: IndependentBlade, sections: Sections, i: int) -> dict[str, np.ndarray]:
    """Outer lines y + i x of all regions of section i, the inside on the left going forward."""
    lines = {}
    for side in SIDES:
        arc, place = sections.arc[side][i], sections.place[side][i]
        edges = sections.bounds(side)[i]
        for k, name in enumerate(blade.region_names[side]):
            a, b = edges[k], edges[k + 1]
            s = np.concatenate([[a], arc[(arc > a) & (arc < b)], [b]])
            line = np.interp(s, arc, place.real) + 1j * np.interp(s, arc, place.imag)
            lines[f"{side} {name}"] = line if side == PRESSURE else line[::-1]
    if sections.trailing_gap[i] >= blade.close_gap:
        lines["trailing base"] = np.array([sections.place[s][i, -1] for s in SIDES])
    for web in blade.webs:
        low, high = blade.part_span(web)
        if low <= sections.z[i] <= high:
            feet = [sections.web_foot(web, s)[i] for s in SIDES]
            lines[web] = feet[0] + (feet[1] - feet[0]) * np.linspace(0.0, 1.0, 41)
    return lines


def _inward(line: np.ndarray) -> np.ndarray:
    """Unit normals to the left of a polyline, at its points."""
    tangent = np.gradient(line)
    return 1j * tangent / np.abs(tangent)


def deflection(b: Beam, load: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Deflection of a clamped beam.

    Parameters
    ----------
    b : Beam
    load : (n, 2) float array, N/m
        In x and y on each element.

    Returns
    -------
    (n + 1, 2) float array, m
        In x and y at the nodes.
    (n, 2) float array, 1/m
        Curvature at the middles: strain = −κx (x − x₀) − κy (y − y₀).
    """
    h = np.diff(b.nodes)
    shear = np.vstack([np.cumsum((load * h[:, None])[::-1], axis=0)[::-1], np.zeros((1, 2))])
    moment_at = np.zeros((len(h) + 1, 2))
    for i in range(len(h) - 1, -1, -1):
        moment_at[i] = moment_at[i + 1] + shear[i + 1] * h[i] + load[i] * h[i] ** 2 / 2
    moment = (moment_at[1:] + moment_at[:-1]) / 2 - load * (h**2 / 12)[:, None]  # mean over the element
    curvature = np.linalg.solve(b.EI, moment[:, :, None])[:, :, 0]
    slope = np.vstack([np.zeros((1, 2)), np.cumsum(curvature * h[:, None], axis=0)])
    middle = slope[:-1] + 0.5 * curvature * h[:, None]
    return np.vstack([np.zeros((1, 2)), np.cumsum(middle * h[:, None], axis=0)]), curvature


def strains(b: Beam, curvature: np.ndarray, region: str, mirror: float = 1.0) -> np.ndarray:
    """(n,) largest |axial strain| in a region's wall, 0 where it is not."""
    out = np.zeros(len(b.EA))
    for i, lines in enumerate(b.walls):
        if region in lines:
            x, y = lines[region].imag - b.centre[i, 0], lines[region].real * mirror - b.centre[i, 1]
            out[i] = np.max(np.abs(curvature[i, 0] * x + curvature[i, 1] * y))
    return out


def frequencies(b: Beam, n_modes: int = 4) -> list[tuple[float, float]]:
    """First natural frequencies of the clamped beam, Hz, and the share of flap (x) motion at the tip."""
    n = len(b.EA)
    K, M = np.zeros((4 * n + 4, 4 * n + 4)), np.zeros((4 * n + 4, 4 * n + 4))
    for i, h in enumerate(np.diff(b.nodes)):
        k = (
            np.array(
                [
                    [12, 6 * h, -12, 6 * h],
                    [6 * h, 4 * h**2, -6 * h, 2 * h**2],
                    [-12, -6 * h, 12, -6 * h],
                    [6 * h, 2 * h**2, -6 * h, 4 * h**2],
                ]
            )
            / h**3
        )
        m = (
            h
            / 420
            * np.array(
                [
                    [156, 22 * h, 54, -13 * h],
                    [22 * h, 4 * h**2, 13 * h, -3 * h**2],
                    [54, 13 * h, 156, -22 * h],
                    [-13 * h, -3 * h**2, -22 * h, 4 * h**2],
                ]
            )
        )
        for p in range(2):
            dof_p = 4 * i + np.array([2 * p, 2 * p + 1, 2 * p + 4, 2 * p + 5])
            M[np.ix_(dof_p, dof_p)] += b.mass[i] * m
            for q in range(2):
                dof_q = 4 * i + np.array([2 * q, 2 * q + 1, 2 * q + 4, 2 * q + 5])
                K[np.ix_(dof_p, dof_q)] += b.EI[i, p, q] * k
    value, vector = eigh(K[4:, 4:], M[4:, 4:], subset_by_index=[0, n_modes - 1])
    flap, edge = np.abs(vector[-4]), np.abs(vector[-2])
    return [(float(f), float(s)) for f, s in zip(np.sqrt(value) / (2 * np.pi), flap / (flap + edge), strict=True)]
