"""Draw old_results.png: a solver's results for one mesh, shown on the mesh of a changed blade by node number alone.

Builds the demonstration blade coarsely, lets CalculiX (ccx) bend it under its own weight, makes the chord of the
outboard third 7 % wider in the station table, builds again with the numbers kept, and draws the old displacements on
both meshes. There is no mapping step: what the solver printed for a node number is what the node of that number gets.

Usage: python examples/pictures/old_results.py [FILE.png]
"""

from __future__ import annotations

import csv
import shutil
import subprocess
import sys
import tempfile
from dataclasses import replace
from pathlib import Path

import numpy as np

import skinmesh
from skinmesh.check.reading import read_built_mesh
from skinmesh.definition.spanwise import constant
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.outline import border_edges, cut_at
from skinmesh.show.page import MARGIN, WIDTH, Page
from skinmesh.show.paint import round_levels
from skinmesh.show.palette import INK, QUIET, scale_colours
from skinmesh.show.render import Camera, Frame, frame_of, render, shaded

REPOSITORY = Path(__file__).parents[2]
SIZE = 0.3
OUTBOARD, WIDER = 16.0, 1.07
LARGER = 5.0
"""Displacements are drawn this many times larger."""
SECTION = 18.0
VIEW = Camera((0.25, 1.0, 0.0))
CAUTION = "An aid only: to be verified by a qualified engineer under IEC 61400-5, DNV-ST-0376 and local codes."


def with_wider_chord(table: str) -> str:
    """The station table with its outboard chords multiplied."""
    lines = [line for line in table.splitlines() if line.strip() and not line.startswith("#")]
    rows = list(csv.reader(lines, skipinitialspace=True))
    z, chord = (rows[0].index(name) for name in ("z_m", "chord_m"))
    for row in rows[1:]:
        if float(row[z]) >= OUTBOARD:
            row[chord] = f"{WIDER * float(row[chord]):.5f}"
    return "".join(",".join(row) + "\n" for row in rows)


def built(blade_file: Path, folder: Path, keep: ShellMesh | None = None) -> ShellMesh:
    """Build a blade coarsely, write it, and read it back from its files."""
    blade = skinmesh.load(blade_file)
    blade = replace(blade, mesh=replace(blade.mesh, size=constant(SIZE)))
    skinmesh.write(skinmesh.build(blade, keep=keep), folder, formats=["vtu", "inp"])
    return read_built_mesh(folder).mesh


def solved(deck: Path) -> dict[int, tuple[float, ...]]:
    """Displacement by node number, m, under the deck's own load: the blade's weight, flapwise."""
    text = deck.read_text(encoding="utf-8").replace("*NODE PRINT,NSET=TIP", "*NODE PRINT,NSET=ALL")
    (deck.parent / "solve.inp").write_text(text, encoding="utf-8")
    subprocess.run(["ccx", "-i", "solve"], cwd=deck.parent, check=True, stdout=subprocess.DEVNULL)
    table = (deck.parent / "solve.dat").read_text().split("displacements (vx,vy,vz) for set ALL")[1]
    rows = [line.split() for line in table.splitlines()[1:]]
    return {int(row[0]): tuple(map(float, row[1:])) for row in rows if len(row) == 4}


def draw(old: ShellMesh, new: ShellMesh, results: dict[int, tuple[float, ...]], path: Path) -> None:
    """Both blades, bent and coloured by the old displacements, and one section of each."""
    levels = round_levels(0.0, 1e3 * max(float(np.linalg.norm(move)) for move in results.values()))
    colours = scale_colours(len(levels) - 1)
    page = Page(1010)
    page.text(MARGIN, 38, "Old results on a new mesh, by node number", size=24, weight="bold")
    page.text(
        MARGIN,
        72,
        f"{new.title}  ·  displacements under its own weight, mm, drawn {LARGER:g} times larger",
        colour=QUIET,
    )
    page.steps(MARGIN, 108, 640, levels=levels, colours=colours)
    top = 160
    names = (
        "The mesh that was solved",
        f"The same numbers after chord +{100 * (WIDER - 1):.0f} % from z = {OUTBOARD:g} m on: nothing was solved again",
    )
    for name, mesh in zip(names, (old, new), strict=True):
        moves = np.array([results[number] for number in mesh.node_number])
        page.text(MARGIN, top + 12, name, weight="bold")
        top += 50 + whole(page, mesh, moves, levels, colours, top + 34)
    sections(page, old, new, results, top + 20)
    page.text(MARGIN, page.height - 22, CAUTION, size=14, colour=QUIET)
    page.save(path)


def whole(page: Page, mesh: ShellMesh, moves: np.ndarray, levels: np.ndarray, colours: np.ndarray, top: int) -> int:
    """Draw one bent blade; return its height in pixels."""
    points = mesh.points + LARGER * moves
    corners = mesh.cells[:, : mesh.n_sides]
    size = 1e3 * np.linalg.norm(moves[corners].mean(axis=1), axis=1)
    step = np.clip(np.searchsorted(levels, size, side="right") - 1, 0, len(colours) - 1)
    frame = frame_of(points, VIEW, margin=0.05)
    scale = (WIDTH - 2 * MARGIN) / frame.width
    width, height = WIDTH - 2 * MARGIN, int(np.ceil(frame.height * scale))
    frame = Frame(frame.left, frame.bottom, width / scale, height / scale)
    image = render(
        points[: mesh.n_corners],
        corners,
        colours=shaded(colours[step], mesh.e3, VIEW),
        camera=VIEW,
        frame=frame,
        pixels=(width, height),
        lines=border_edges(mesh, mesh.region),
        line_width=0.8,
    )
    axes = page.axes(MARGIN, top, width, height, extent=frame.extent)
    axes.imshow(image, extent=frame.extent, aspect="auto", interpolation="nearest")
    return height


def sections(page: Page, old: ShellMesh, new: ShellMesh, results: dict[int, tuple[float, ...]], top: int) -> None:
    """One section of both meshes, and the displacements that the nodes of one ring carry over."""
    page.text(
        MARGIN,
        top + 12,
        f"Section at z = {SECTION:g} m: old grey, new blue; arrows: the old displacements of the new nodes",
        weight="bold",
    )
    height = page.height - top - 90
    cuts = [cut_at(mesh, SECTION)[0] for mesh in (old, new)]
    low, high = cuts[1].min(axis=(0, 1)), cuts[1].max(axis=(0, 1))
    pixels = min((WIDTH - 2 * MARGIN) / (1.05 * (high - low)[1]), height / (1.7 * (high - low)[0]))
    x, y = (low + high) / 2 - [0.25 * (high - low)[0], 0.0]
    wide, tall = 0.5 * (WIDTH - 2 * MARGIN) / pixels, 0.5 * height / pixels
    extent = (y - wide, y + wide, x - tall, x + tall)
    axes = page.axes(MARGIN, top + 30, WIDTH - 2 * MARGIN, height, extent=extent)
    for cut, colour in zip(cuts, (QUIET, "#0072b2"), strict=True):
        for start, end in cut:
            axes.plot([start[1], end[1]], [start[0], end[0]], color=colour, linewidth=1.4)
    ring = np.flatnonzero((np.abs(new.points[:, 2] - SECTION) < 0.01) & (new.sheet == 0))
    moves = np.array([results[number] for number in new.node_number[ring]])
    axes.quiver(
        new.points[ring, 1],
        new.points[ring, 0],
        moves[:, 1],
        moves[:, 0],
        angles="xy",
        scale_units="xy",
        scale=np.abs(moves).max() / (0.4 * (high - low)[0]),
        width=0.0008,
        color=INK,
    )


def main(path: Path) -> None:
    """Build, solve, change, build again, draw."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        shutil.copytree(REPOSITORY / "examples/marram-24", folder / "blade")
        blade_file = folder / "blade/marram-24.yaml"
        text = blade_file.read_text(encoding="utf-8")
        blade_file.write_text(text.replace("../../geometry/", f"{REPOSITORY}/geometry/"), encoding="utf-8")
        old = built(blade_file, folder / "old")
        results = solved(folder / "old/marram-24.inp")
        table = folder / "blade/marram-24.csv"
        table.write_text(with_wider_chord(table.read_text(encoding="utf-8")), encoding="utf-8")
        new = built(blade_file, folder / "new", keep=old)
        draw(old, new, results, path)
        print(f"{path}: {len(results)} displacements on {len(new.points)} nodes")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_suffix(".png"))
