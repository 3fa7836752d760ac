"""A small blade as files on disk, for tests that change it."""

from __future__ import annotations

from pathlib import Path

BLADE = """\
title: test blade, invented
hand: clockwise
planform: table.csv
profiles:
  ring: {circle: true}
  thick: {file: thick.dat}
  thin: {naca: "4418", trailing_gap: 0.004}
materials:
  glass: {E1: 41.0e9, E2: 11.4e9, G12: 3.9e9, nu12: 0.28, density: 1920, source: invented}
  foam: {E: 0.05e9, nu: 0.3, density: 80}
layout:
  caps:
    main cap: {centre: {from_axis: 0.0}, width: [[0, 0.4], [10, 0.1]]}
  webs:
    fore web: {foot: {cap: main cap, across: 0.2}, span: [1.0, 9.0]}
    aft web:
      foot: {suction: {chord: 0.6}, pressure: {arc: 0.7}}
  leading strip: {width: 0.1}
  trailing strip: {width: 0.1}
plies:
  - {ply: skin, material: glass, thickness: 0.9e-3, angle: 45, covers: [skin]}
  - {ply: cap, material: glass, thickness: 1e-3, count: 10, covers: [main cap], span: [0.4, 9.5], step: {root: 0.1}}
  - ply: core
    material: foam
    thickness: 0.01
    covers: [leading panel, suction trailing panel]
  - {ply: web, material: glass, thickness: [[0, 2e-3], [10, 1e-3]], covers: [webs]}
mesh:
  size: 0.12
  across: {main cap: 6}
  order: 2
  close_gap: 0.004
"""

TABLE = """\
# an invented table
z_m, chord_m, twist_deg, pitch_axis, profile, thickness_ratio
0.0, 1.0, 12, 0.5, ring,
1.0, 1.0, 12, 0.5, ring,
3.0, 1.6, 8, 0.36, thick,
6.0, 1.2, 3, 0.32, , 0.24
9.0, 0.8, 1, 0.3, thin,
10.0, 0.5, 0, 0.3, thin,
"""

# a blunt outline by a formula, in units of 100, rounded to five digits; 21 points
_HALF = [(100, 1.5), (95, 3), (85, 6), (70, 10), (55, 14), (40, 17.5), (30, 18.5), (20, 17.5), (10, 13.5), (3, 8)]
PROFILE = "\n".join(
    ["thick outline, invented", *(f"{x} {y}" for x, y in _HALF), "0 0", *(f"{x} {-y}" for x, y in _HALF[::-1]), ""]
)


def write_blade(folder: Path, *, blade: str = BLADE, table: str | None = TABLE, profile: str | None = PROFILE) -> Path:
    """Write the three files and return the blade file's path."""
    path = folder / "blade.yaml"
    path.write_text(blade, encoding="utf-8")
    for name, text in (("table.csv", table), ("thick.dat", profile)):
        if text is not None:
            (folder / name).write_text(text, encoding="utf-8")
    return path


def replaced(text: str, old: str, new: str) -> str:
    """Replace something that is there exactly once."""
    assert text.count(old) == 1, (old, text.count(old))
    return text.replace(old, new)
