"""A second way from table, profiles and schedule to mass and stiffness, for tests: it shares no code with skinmesh.

Blade file, table and profiles are read with the standard library and PyYAML; sections are dense polylines; everything
is summed by Gauss quadrature between the exact ends of stations, widths and plies. Nothing is meshed, and no ply end is
moved to a row. It reads good files only and says little about bad ones.

Definitions: each profile has its leading edge at the point farthest from the middle of its trailing edge; a side is
parametrised by its share of arc length; points of equal share are interpolated along z by Fritsch–Carlson cubics
(SIAM J. Numer. Anal. 17, 1980), and so are chord, twist, pitch axis, prebend and sweep. A point η towards the trailing
edge and ξ towards the suction side of the pitch axis, in a section of twist θ, lies at
y + i x = sweep + i prebend + (η + i ξ) exp(i θ).
"""

from __future__ import annotations

import csv
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
import yaml
from independent_laminate import Fabric
from independent_profiles import (
    N_TAU,
    PRESSURE,
    SIDES,
    SUCTION,
    naca_points,
    read_profile_points,
    station_shapes,
    unit_sides,
)
from scipy.interpolate import PchipInterpolator

TAU = 0.5 * (1.0 - np.cos(np.linspace(0.0, np.pi, N_TAU)))
GAUSS_X, GAUSS_W = np.polynomial.legendre.leggauss(4)
DEFAULT_CLOSE_GAP = 0.002


class _Yaml12(yaml.SafeLoader):
    """PyYAML's safe loader with the numbers of YAML 1.2."""


_Yaml12.add_implicit_resolver(
    "tag:yaml.org,2002:float", re.compile(r"^[-+]?(\d+\.?\d*|\.\d+)[eE][-+]?\d+$"), list("-+0123456789.")
)


# ------------------------------------------------------------------------------------------------ the blade


Along = Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True)
class Ply:
    """One line of the schedule."""

    name: str
    fabric: Fabric
    thickness: Along
    count: Along
    angle: float
    covers: tuple[str, ...]
    span: tuple[float, float]
    step: tuple[float, float]
    breaks: tuple[float, ...]

    def layers(self, z: np.ndarray, low: float, high: float) -> np.ndarray:
        """Number of layers at z on a part that spans low … high."""
        low, high = max(low, self.span[0]), min(high, self.span[1])
        count = self.count(z)
        n = np.zeros_like(z)
        for j in range(1, int(count.max(initial=0.0) + 0.5) + 1):
            n += (count >= j - 0.5) & (z >= low + (j - 1) * self.step[0]) & (z <= high - (j - 1) * self.step[1])
        return n

    def ends(self, low: float, high: float) -> list[float]:
        """Every z at which the number of layers, or their thickness, may change its formula."""
        low, high = max(low, self.span[0]), min(high, self.span[1])
        out = [*self.breaks, low, high]
        grid = np.unique([b for b in (low, *self.breaks, high) if low <= b <= high])
        count = self.count(grid)
        for j in range(1, int(count.max(initial=0.0) + 0.5) + 1):
            out += [low + (j - 1) * self.step[0], high - (j - 1) * self.step[1]]
            excess = count - (j - 0.5)
            for k in np.flatnonzero(excess[:-1] * excess[1:] < 0):
                out.append(grid[k] + (grid[k + 1] - grid[k]) * excess[k] / (excess[k] - excess[k + 1]))
        return out


class IndependentBlade:
    """A blade file read a second time.

    Parameters
    ----------
    path : path of the blade file
    """

    def __init__(self, path: str | Path) -> None:
        path = Path(path)
        self.spec: dict[str, Any] = yaml.load(path.read_text(encoding="utf-8"), Loader=_Yaml12)
        table_path = path.parent / self.spec["planform"]
        lines = [x for x in table_path.read_text(encoding="utf-8").splitlines() if x.split("#")[0].strip()]
        rows = [{k.strip(): (v or "").strip() for k, v in row.items()} for row in csv.DictReader(lines)]
        self.columns = {}
        for name in rows[0]:
            if name != "profile":
                scale = 1e-3 if name.endswith("_mm") else 1.0
                key = name.removesuffix("_mm") + "_m" if name.endswith("_mm") else name
                self.columns[key] = np.array([scale * float(row[name]) if row[name] else np.nan for row in rows])
        self.z = self.columns["z_m"]
        self.low, self.high = float(self.z[0]), float(self.z[-1])
        nothing = np.zeros_like(self.z)
        planform = [
            self.columns["chord_m"],
            np.deg2rad(self.columns["twist_deg"]),
            self.columns["pitch_axis"],
            self.columns.get("prebend_m", nothing),
            self.columns.get("sweep_m", nothing),
        ]
        self.planform = PchipInterpolator(self.z, np.column_stack(planform))
        profiles = {name: unit_sides(self._loop(path.parent, p)) for name, p in self.spec["profiles"].items()}
        ratios = self.columns.get("thickness_ratio", np.full_like(self.z, np.nan))
        shape_z, shapes = station_shapes(self.z, [row["profile"] for row in rows], ratios, profiles)
        self.shape = {s: PchipInterpolator(shape_z, np.hstack([p.real, p.imag])) for s, p in shapes.items()}
        self.mirror = -1.0 if self.spec.get("hand") == "counter-clockwise" else 1.0
        self.close_gap = float(self.spec.get("mesh", {}).get("close_gap", DEFAULT_CLOSE_GAP))
        self.layout = self.spec.get("layout", {})
        self.caps = self.layout.get("caps", {}) or {}
        self.webs = self.layout.get("webs", {}) or {}
        self.fabrics = {name: Fabric.read(name, m) for name, m in self.spec["materials"].items()}
        self.plies = tuple(self._ply(p) for p in self.spec.get("plies", []))

    @staticmethod
    def _loop(folder: Path, profile: Mapping[str, Any]) -> np.ndarray:
        if profile.get("circle"):
            angle = np.linspace(0.0, 2 * np.pi, 721)
            return 0.5 + 0.5 * np.exp(1j * angle)
        if "naca" in profile:
            return naca_points(str(profile["naca"]), profile.get("trailing_gap"))
        return read_profile_points(folder / profile["file"])

    def along(self, value: Any) -> Along:
        """A quantity along the span: a number, pairs, or a column of the table."""
        z, v = self._pairs(value)
        return lambda at: np.interp(at, z, v)

    def _pairs(self, value: Any) -> tuple[np.ndarray, np.ndarray]:
        if isinstance(value, str):
            return self.z, self.columns[value.replace("_mm", "_m")]
        if isinstance(value, list):
            pairs = np.array(value, dtype=float)
            return pairs[:, 0], pairs[:, 1]
        return np.array([0.0]), np.array([float(value)])

    def _ply(self, p: Mapping[str, Any]) -> Ply:
        step = p.get("step", {})
        breaks = [self._pairs(p["thickness"])[0], self._pairs(p.get("count", 1))[0]]
        return Ply(
            p["ply"],
            self.fabrics[p["material"]],
            self.along(p["thickness"]),
            self.along(p.get("count", 1)),
            float(np.deg2rad(float(p.get("angle", 0.0)))),
            tuple(p["covers"]),
            tuple(p.get("span", (self.low, self.high))),
            (float(step.get("root", 0.0)), float(step.get("tip", 0.0))),
            tuple(np.concatenate(breaks)),
        )

    # ---- regions

    @cached_property
    def region_names(self) -> dict[str, list[str]]:
        """Names of the regions of each side from the leading edge aft, without the side."""
        out = {}
        for side in SIDES:
            caps = [c for c, rule in self.caps.items() if self._has(rule, side)]
            n = len(caps)
            names = ["leading strip"] if "leading strip" in self.layout else []
            names += ["leading panel"] if n else ["panel"]
            for k, cap in enumerate(self._caps_fore_to_aft(caps, side)):
                names.append(cap)
                last = k + 1 == n
                names.append("trailing panel" if last else f"middle panel {k + 1}" if n > 2 else "middle panel")
            names += ["trailing strip"] if "trailing strip" in self.layout else []
            out[side] = names
        return out

    @staticmethod
    def _has(rule: Mapping[str, Any], side: str) -> bool:
        sides = rule.get("sides", list(SIDES))
        return side in ([sides] if isinstance(sides, str) else sides)

    def _caps_fore_to_aft(self, caps: list[str], side: str) -> list[str]:
        section = Sections(self, np.array([0.5 * (self.low + self.high)]))
        return sorted(caps, key=lambda c: float(section.cap_edges(c, side)[0][0]))

    def covered(self, ply: Ply) -> list[str]:
        """Full names of the regions and webs that a ply covers."""
        full = [f"{side} {name}" for side in SIDES for name in self.region_names[side]]
        out: list[str] = []
        for item in ply.covers:
            if item in ("skin", "all"):
                out += [*full, "trailing base"]
            if item in ("webs", "all"):
                out += list(self.webs)
            for region in full:
                side, name = region.split(" ", 1)
                in_group = (
                    (item == "panels" and "panel" in name)
                    or (item == "caps" and name in self.caps)
                    or (item == "strips" and name in ("leading strip", "trailing strip"))
                )
                if item in (side, name, region) or in_group:
                    out.append(region)
            if item == "trailing base" or item in self.webs:
                out.append(item)
        return list(dict.fromkeys(out))

    def part_span(self, region: str) -> tuple[float, float]:
        """Ends of a region: a web's own span, or the whole blade."""
        return tuple(self.webs[region]["span"]) if region in self.webs else (self.low, self.high)

    @cached_property
    def breaks(self) -> np.ndarray:
        """Every z between which all integrands are smooth."""
        values = [self.layout.get("leading strip", {}).get("width"), self.layout.get("trailing strip", {}).get("width")]
        for cap in self.caps.values():
            values += [cap["width"], *cap["centre"].values()]
        for web in self.webs.values():
            values += [v for k, v in _feet(web, SUCTION).items() if k != "cap"]
            values += [v for k, v in _feet(web, PRESSURE).items() if k != "cap"]
        out = [self.z, *(self._pairs(v)[0] for v in values if v is not None)]
        out += [np.array(web["span"], dtype=float) for web in self.webs.values()]
        for ply in self.plies:
            for region in self.covered(ply):
                out.append(np.array(ply.ends(*self.part_span(region))))
        z = np.linspace(self.low, self.high, 801)
        excess = Sections(self, z).trailing_gap - self.close_gap
        k = np.flatnonzero(excess[:-1] * excess[1:] < 0)
        out.append(z[k] + (z[k + 1] - z[k]) * excess[k] / (excess[k] - excess[k + 1]))
        every = np.unique(np.round(np.concatenate(out), 9))
        return every[(every >= self.low) & (every <= self.high)]


def _feet(web: Mapping[str, Any], side: str) -> dict[str, Any]:
    foot = web.get("foot") or web["feet"]
    return dict(foot.get(side, foot))


# ---------------------------------------------------------------------------------------------- sections


class Sections:
    """Sections of a blade at many z, as dense polylines.

    Parameters
    ----------
    blade : IndependentBlade
    z : (m,) float array, m
    """

    def __init__(self, blade: IndependentBlade, z: np.ndarray) -> None:
        self.blade, self.z = blade, z
        chord, twist, pitch, prebend, sweep = blade.planform(z).T
        d_chord, d_twist, d_pitch, d_prebend, d_sweep = blade.planform(z, 1).T
        self.chord, self.twist, self.pitch = chord, twist, pitch
        turn = np.exp(1j * twist)[:, None]
        self.flat, self.place, self.slope, self.arc = {}, {}, {}, {}
        for side, shape in blade.shape.items():
            value, rate = shape(z), shape(z, 1)
            unit = value[:, :N_TAU] + 1j * value[:, N_TAU:] - pitch[:, None]
            unit_rate = rate[:, :N_TAU] + 1j * rate[:, N_TAU:] - d_pitch[:, None]
            flat = chord[:, None] * unit
            flat_rate = d_chord[:, None] * unit + chord[:, None] * unit_rate + 1j * d_twist[:, None] * flat
            self.flat[side] = flat
            self.place[side] = (sweep + 1j * prebend)[:, None] + flat * turn
            self.slope[side] = (d_sweep + 1j * d_prebend)[:, None] + flat_rate * turn
            self.arc[side] = np.concatenate(
                [np.zeros((len(z), 1)), np.cumsum(np.abs(np.diff(flat, axis=1)), axis=1)], axis=1
            )

    @cached_property
    def trailing_gap(self) -> np.ndarray:
        """(m,) distance of the two trailing edges, m."""
        return np.abs(self.flat[SUCTION][:, -1] - self.flat[PRESSURE][:, -1])

    def _arc_of(self, rule: Mapping[str, Any], side: str, plane_twist: float | None) -> np.ndarray:
        blade, arc = self.blade, self.arc[side]
        if "arc" in rule:
            return blade.along(rule["arc"])(self.z)
        if "cap" in rule:
            fore, aft = self.cap_edges(rule["cap"], side)
            return fore + blade.along(rule["across"])(self.z) * (aft - fore)
        if "chord" in rule:
            wanted, turn = (blade.along(rule["chord"])(self.z) - self.pitch) * self.chord, np.zeros_like(self.z)
        else:
            wanted = blade.along(rule["from_axis"])(self.z)
            turn = np.zeros_like(self.z) if plane_twist is None else self.twist - np.deg2rad(plane_twist)
        values = (self.flat[side] * np.exp(1j * turn)[:, None]).real
        below = values < wanted[:, None]
        j = np.clip(N_TAU - 1 - np.argmax(below[:, ::-1], axis=1), 0, N_TAU - 2)
        i = np.arange(len(self.z))
        share = np.clip((wanted - values[i, j]) / (values[i, j + 1] - values[i, j]), 0.0, 1.0)
        found = arc[i, j] + share * (arc[i, j + 1] - arc[i, j])
        return np.where(below.any(axis=1), found, 0.0)

    def cap_edges(self, cap: str, side: str) -> tuple[np.ndarray, np.ndarray]:
        """(m,) arc lengths of a cap's edges from the leading edge, m."""
        rule = self.blade.caps[cap]
        centre = self._arc_of(rule["centre"], side, rule.get("plane_twist"))
        half = 0.5 * self.blade.along(rule["width"])(self.z)
        return centre - half, centre + half

    def bounds(self, side: str) -> np.ndarray:
        """(m, k + 1) arc lengths that bound the regions of a side, m."""
        length = self.arc[side][:, -1]
        out = [np.zeros_like(length)]
        layout, along = self.blade.layout, self.blade.along
        if "leading strip" in layout:
            out.append(along(layout["leading strip"]["width"])(self.z))
        for name in self.blade.region_names[side]:
            if name in self.blade.caps:
                out += list(self.cap_edges(name, side))
        if "trailing strip" in layout:
            out.append(length - along(layout["trailing strip"]["width"])(self.z))
        return np.column_stack([*out, length])

    def at_arc(self, side: str, arc: np.ndarray, values: np.ndarray) -> np.ndarray:
        """Values along a side at one arc length a section."""
        return np.array([np.interp(a, row, v) for a, row, v in zip(arc, self.arc[side], values, strict=True)])

    def web_foot(self, web: str, side: str) -> np.ndarray:
        """(m,) feet as y + i x, m."""
        rule = self.blade.webs[web]
        arc = self._arc_of(_feet(rule, side), side, rule.get("plane_twist"))
        return self.at_arc(side, arc, self.place[side].real) + 1j * self.at_arc(side, arc, self.place[side].imag)
