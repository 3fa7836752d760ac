"""A tiny blade and a sweep of twelve variants on disk, one of them poisoned."""

from __future__ import annotations

from pathlib import Path

from blade_files import replaced

BLADE = """\
title: tiny blade, invented
planform: tiny.csv
profiles:
  ring: {circle: true}
  thin: {naca: "0018", trailing_gap: 0}
materials:
  glass: {E1: 41.0e9, E2: 11.4e9, G12: 3.9e9, nu12: 0.28, density: 1920, source: invented}
layout:
  caps:
    main cap: {centre: {from_axis: 0.0}, width: [[0, 0.3], [4, 0.1]]}
  webs:
    web: {foot: {cap: main cap, across: 0.5}, span: [1.0, 3.5]}
plies:
  - {ply: skin, material: glass, thickness: 2e-3, angle: 45, covers: [skin, web]}
  - {ply: cap, material: glass, thickness: 1e-3, count: 4, covers: [main cap], span: [0.2, 3.8]}
mesh: {size: 0.25, turning: 30}
"""
TABLE = """\
# an invented table
z_m, chord_m, twist_deg, pitch_axis, profile
0.0, 0.6, 10, 0.5, ring
0.5, 0.6, 10, 0.5, ring
1.5, 0.8,  6, 0.4, thin
3.0, 0.6,  2, 0.4, thin
4.0, 0.4,  0, 0.4, thin
"""
SWEEP = """\
title: Twelve tiny blades
blade: tiny.yaml
changes:
  outer chord: {column: chord_m, factor: cases, span: [3, 4], ramp: 1.5}
  layers: {field: plies.cap.count, set: cases}
  size: {field: mesh.size, set: cases}
cases: twelve-cases.csv
sections: [1, 3]
checks: false
"""
POISONED, COARSER = 7, 12
CASES = "name, outer chord, layers, size\n" + "".join(
    f"case {k}, {1 + 0.01 * k:g}, {-1 if k == POISONED else 2 + k}, {0.3 if k == COARSER else ''}\n"
    for k in range(1, 13)
)


def write_tiny_blade(folder: Path, *changes: tuple[str, str]) -> Path:
    """Write the blade, with some of its text replaced, and return its path."""
    text = BLADE
    for old, new in changes:
        text = replaced(text, old, new)
    (folder / "tiny.csv").write_text(TABLE, encoding="utf-8")
    (folder / "tiny.yaml").write_text(text, encoding="utf-8")
    return folder / "tiny.yaml"


def write_sweep(folder: Path, text: str = SWEEP, *, cases: str | None = CASES) -> Path:
    """Write blade, table of cases and sweep file, and return the sweep file's path."""
    write_tiny_blade(folder)
    if cases is not None:
        (folder / "twelve-cases.csv").write_text(cases, encoding="utf-8")
    (folder / "twelve.yaml").write_text(text, encoding="utf-8")
    return folder / "twelve.yaml"
