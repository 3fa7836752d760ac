"""Runs of CalculiX on decks of ours, and an independent reader of the keyword deck."""

from __future__ import annotations

import shutil
import subprocess
from collections import defaultdict
from dataclasses import dataclass, field, replace
from math import cos, pi, sin
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from sample_meshes import _element_axes, tube

from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.formats.inp import write_inp

needs_ccx = pytest.mark.skipif(shutil.which("ccx") is None, reason="CalculiX (ccx) is not installed")

STEEL = Material("steel", 210e9, 210e9, 210e9, 0.3, 0.3, 0.3, *[210e9 / 2.6] * 3, 7850.0, True, "handbook values")


def twisted_tube(
    n_around: int, n_along: int, *, layers: tuple[Layer, ...], order: int = 2, shape: str = "quad", **more
):
    """An elliptic, tapered, twisted tube: no element is flat and none faces along an axis."""
    length = 10.0
    mesh = tube(n_around, n_along, radius=1.0, length=length, layers=layers, order=order, shape=shape, **more)
    x, y, z = mesh.points.T
    share = z / length
    chord, twist = 1.0 - 0.8 * share**1.2, 0.4 * (1.0 - share) ** 2
    x, y = 0.35 * chord * x, chord * y
    points = np.column_stack([np.cos(twist) * x + np.sin(twist) * y, np.cos(twist) * y - np.sin(twist) * x, z])
    e1, e2, e3 = _element_axes(points, mesh.cells, order)
    return replace(mesh, points=points, e1=e1, e2=e2, e3=e3)


@dataclass
class KeywordDeck:
    """What a keyword deck says, read line by line without any of the writer's code."""

    nodes: dict[int, NDArray] = field(default_factory=dict)
    elements: dict[int, list[int]] = field(default_factory=dict)
    element_type: str = ""
    node_sets: dict[str, list[int]] = field(default_factory=lambda: defaultdict(list))
    element_sets: dict[str, list[int]] = field(default_factory=lambda: defaultdict(list))
    orientations: dict[str, NDArray] = field(default_factory=dict)
    sections: list[tuple[str, float, list[tuple[float, str, str]]]] = field(default_factory=list)
    elastic: dict[str, list[float]] = field(default_factory=dict)
    density: dict[str, float] = field(default_factory=dict)
    keywords: list[str] = field(default_factory=list)
    comments: list[str] = field(default_factory=list)


def read_keyword_deck(text: str) -> KeywordDeck:
    """Read a deck of the keywords that CalculiX knows."""
    deck = KeywordDeck()
    keyword, options, material = "", {}, ""
    for line in text.splitlines():
        assert len(line) <= 132
        if line.startswith("**"):
            deck.comments.append(line[2:].strip())
            continue
        if line.startswith("*"):
            keyword, *rest = [part.strip() for part in line[1:].split(",")]
            options = dict(part.split("=") if "=" in part else (part, "") for part in rest)
            deck.keywords.append(keyword)
            if keyword == "MATERIAL":
                material = options["NAME"]
            if keyword == "SHELL SECTION":
                assert "COMPOSITE" in options
                deck.sections.append((options["ELSET"], float(options["OFFSET"]), []))
            continue
        fields = [part.strip() for part in line.split(",")]
        filled = [part for part in fields if part]
        if keyword == "NODE":
            assert all(len(part) <= 20 for part in fields)
            deck.nodes[int(fields[0])] = np.array([float(part) for part in fields[1:]])
        elif keyword == "ELEMENT":
            deck.element_type = options["TYPE"]
            deck.elements[int(fields[0])] = [int(part) for part in fields[1:]]
        elif keyword == "NSET":
            deck.node_sets[options["NSET"]] += [int(part) for part in filled]
        elif keyword == "ELSET":
            deck.element_sets[options["ELSET"]] += [int(part) for part in filled]
        elif keyword == "ORIENTATION":
            assert options["SYSTEM"] == "RECTANGULAR"
            deck.orientations[options["NAME"]] = np.array([float(part) for part in fields])
        elif keyword == "ELASTIC":
            assert options["TYPE"] == "ENGINEERING CONSTANTS"
            deck.elastic.setdefault(material, []).extend(float(part) for part in filled)
        elif keyword == "DENSITY":
            deck.density[material] = float(fields[0])
        elif keyword == "SHELL SECTION":
            deck.sections[-1][2].append((float(fields[0]), fields[2], fields[3]))
    return deck


@dataclass(frozen=True)
class SolverRun:
    """What CalculiX printed."""

    log: str
    dat: str

    def block(self, title: str, which: int = 0) -> NDArray:
        """The table under a title of the .dat file, counted from the first of that title."""
        after = self.dat.split(title)[which + 1].splitlines()[2:]
        rows = []
        for line in after:
            if not line.strip():
                break
            rows.append([float(part) for part in line.split()])
        return np.array(rows)

    @property
    def mass(self) -> float:
        return float(self.block("total mass for set ALL")[0, 0])

    @property
    def frequencies(self) -> NDArray:
        """Natural frequencies in Hz, of a frequency step."""
        table = self.dat.split("E I G E N V A L U E   O U T P U T", 1)[1].split("P A R T I C I P A T I O N")[0]
        rows = [line.split() for line in table.splitlines()]
        return np.array([float(row[3]) for row in rows if len(row) == 5 and row[0].isdigit()])

    def displacements(self, name: str, step: int = 0) -> NDArray:
        """(n, 4) node number and displacement."""
        return self.block(f"displacements (vx,vy,vz) for set {name}", step)


def run_solver(mesh: ShellMesh, folder: Path, *, step: str | None = None, drop_clamp: bool = False) -> SolverRun:
    """Write the deck of a mesh, put another step in the place of its own where one is given, and solve it."""
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / "deck.inp"
    write_inp(mesh, path)
    if step is not None:
        text = path.read_text()
        head = text.split("*BOUNDARY" if drop_clamp else "*STEP")[0]
        path.write_text(head + step)
    return solve_deck(path)


def solve_deck(path: Path) -> SolverRun:
    """Run CalculiX on a deck."""
    done = subprocess.run(["ccx", path.stem], cwd=path.parent, capture_output=True, text=True, timeout=300)
    dat = path.with_suffix(".dat")
    return SolverRun(done.stdout + done.stderr, dat.read_text() if dat.exists() else "")


def ring_of(mesh: ShellMesh, level: float) -> tuple[NDArray, NDArray]:
    """Corner and mid nodes of the ring at one z."""
    on_ring = np.flatnonzero(np.abs(mesh.points[:, 2] - level) < 1e-9)
    return on_ring[on_ring < mesh.n_corners], on_ring[on_ring >= mesh.n_corners]


def ring_loads(mesh: ShellMesh, level: float, *, axial: float = 0.0, tangential: float = 0.0) -> str:
    """CLOAD lines: a total axial force and a total tangential force (Σ of sizes), spread as an even line load."""
    corners, middles = ring_of(mesh, level)
    lines = ["*CLOAD"]
    for nodes, share in ((corners, 1 / 3), (middles, 2 / 3)):
        for node in nodes:
            angle = np.arctan2(mesh.points[node, 1], mesh.points[node, 0])
            size = share / len(nodes)
            force = (-sin(angle) * tangential * size, cos(angle) * tangential * size, axial * size)
            lines += [
                f"{mesh.node_number[node]},{axis + 1},{value:.12g}" for axis, value in enumerate(force) if value != 0.0
            ]
    return "\n".join(lines) + "\n"


def all_moves(run: SolverRun, mesh: ShellMesh, step: int = 0) -> NDArray:
    """(n, 3) displacement of every node in one of the steps, of a run that printed those of ALL."""
    table = run.displacements("ALL", step)
    by_number = np.argsort(mesh.node_number)
    moves = np.full((len(mesh.points), 3), np.nan)
    moves[by_number[np.searchsorted(mesh.node_number[by_number], table[:, 0].astype(int))]] = table[:, 1:]
    assert np.all(np.isfinite(moves))
    return moves


def tube_strain_and_twist(mesh: ShellMesh, folder: Path, *, radius: float, axial: float, tangential: float):
    """Axial strain and rate of twist of a tube about z between a third and two thirds of its length."""
    length = mesh.points[:, 2].max()
    step = "*STEP\n*STATIC\n" + ring_loads(mesh, length, axial=axial, tangential=tangential)
    step += "*NODE PRINT,NSET=ALL\nU\n*END STEP\n"
    moves = all_moves(run_solver(mesh, folder, step=step), mesh)
    means = []
    for level in (length / 3, 2 * length / 3):
        corners, _ = ring_of(mesh, level)
        assert len(corners) >= 8
        angle = np.arctan2(mesh.points[corners, 1], mesh.points[corners, 0])
        turned = np.mean(-np.sin(angle) * moves[corners, 0] + np.cos(angle) * moves[corners, 1]) / radius
        means.append((moves[corners, 2].mean(), turned))
    (low, low_turn), (high, high_turn) = means
    return (high - low) / (length / 3), (high_turn - low_turn) / (length / 3)


def reduced_stiffness(layer: Layer) -> NDArray:
    """(3, 3) plane stress in element axes (Jones, Mechanics of Composite Materials, from memory)."""
    material = layer.material
    nu21 = material.nu12 * material.E2 / material.E1
    share = 1.0 - material.nu12 * nu21
    q11, q22, q12, q66 = (
        material.E1 / share,
        material.E2 / share,
        material.nu12 * material.E2 / share,
        material.G12,
    )
    own = np.array([[q11, q12, 0], [q12, q22, 0], [0, 0, q66]])
    c, s = cos(layer.angle), sin(layer.angle)
    strain_turn = np.array([[c * c, s * s, c * s], [s * s, c * c, -c * s], [-2 * c * s, 2 * c * s, c * c - s * s]])
    return strain_turn.T @ own @ strain_turn


def thin_tube_stiffness(layers: tuple[Layer, ...], radius: float) -> NDArray:
    """(2, 2) stiffness against axial strain and rate of twist, with no hoop force; twist positive about +e1."""
    a = sum(reduced_stiffness(layer) * layer.thickness for layer in layers)
    extension = a[0, 0] - a[0, 1] ** 2 / a[1, 1]
    coupling = a[0, 2] - a[0, 1] * a[1, 2] / a[1, 1]
    shear = a[2, 2] - a[1, 2] ** 2 / a[1, 1]
    # e2 = e3 × e1 runs against the turn about +z, so that the shear strain of a positive twist is −radius.
    return 2 * pi * radius * np.array([[extension, -radius * coupling], [-radius * coupling, radius**2 * shear]])
