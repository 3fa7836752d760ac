"""Runs of NASTRAN-95 on bulk data of ours, in an environment of its own that SKINMESH_NASTRAN95 names."""

from __future__ import annotations

import json
import os
import re
import subprocess
from pathlib import Path

import numpy as np
import pytest
from solver_runs import ring_of

from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.formats.bdf import write_bdf

NASTRAN95 = os.environ.get("SKINMESH_NASTRAN95", "")
needs_nastran95 = pytest.mark.skipif(not NASTRAN95, reason="SKINMESH_NASTRAN95 names no Python with nastran95 in it")

SOLVE = """
import json, sys, nastran95
result = nastran95.run(sys.argv[1])
print(json.dumps({
    "completed": result.completed,
    "output": result.output,
}))
"""


def asked(python: str, program: str, path: Path) -> dict:
    """What a program in another environment prints about a file."""
    done = subprocess.run(
        [python, "-c", program, path.name], cwd=path.parent, capture_output=True, text=True, timeout=300
    )
    assert done.returncode == 0, done.stderr
    return json.loads(done.stdout.splitlines()[-1])


def output_of(mesh: ShellMesh, folder: Path, *, case: str, cards: list[str]) -> str:
    """What the solver prints. Only the executive and case control are replaced: this solver's are its own."""
    folder.mkdir(exist_ok=True)
    path = folder / "deck.bdf"
    write_bdf(mesh, path)
    bulk = path.read_text().split("BEGIN BULK\n")[1]
    kept = [line for line in bulk.splitlines() if not line.startswith(("PARAM", "GRAV", "$", "ENDDATA"))]
    lines = [f"ID SKIN,MESH\nAPP DISP\n{case}BEGIN BULK", *kept, "PARAM   AUTOSPC 1", *cards, "ENDDATA"]
    path.write_text("\n".join(lines) + "\n")
    found = asked(NASTRAN95, SOLVE, path)
    assert found["completed"], found["output"][-3000:]
    assert "FATAL" not in found["output"]
    return str(found["output"])


def solved_by_nastran95(mesh: ShellMesh, folder: Path, forces: list[str]) -> dict[int, list[float]]:
    """Displacements under nodal forces."""
    lines = "MAXLINES = 9999999\nECHO = NONE\n"  # or it stops at 20 000
    case = f"SOL 1,0\nTIME 10\nCEND\n{lines}TITLE = TUBE\nSPC = 1\nLOAD = 2\nDISP = ALL\n"
    output = output_of(mesh, folder, case=case, cards=forces)
    rows = re.findall(r"^ +(\d+) +G ((?: +[-+.\dE]+){6})", output, re.MULTILINE)
    assert len(rows) == mesh.n_nodes
    return {int(number): [float(field) for field in fields.split()] for number, fields in rows}


def frequencies_by_nastran95(mesh: ShellMesh, folder: Path, n_modes: int) -> np.ndarray:
    """Lowest natural frequencies, Hz, by the method FEER: of two equal ones it may find one alone."""
    cards = [f"EIGR    7       FEER    0.0             {n_modes:8d}{'':24}+E1", "+E1     MASS"]
    case = "SOL 3,0\nTIME 10\nCEND\nTITLE = TUBE\nSPC = 1\nMETHOD = 7\n"
    output = output_of(mesh, folder, case=case, cards=cards)
    table = output.split("R E A L   E I G E N V A L U E S", 1)[1].split("R E A L   E I G E N V E C T O R", 1)[0]
    rows = [line.split() for line in table.splitlines()]
    return np.array([float(row[4]) for row in rows if len(row) == 7 and row[0].isdigit()][:n_modes])


def strain_and_twist(mesh: ShellMesh, folder: Path, *, axial: float, tangential: float) -> tuple[float, float]:
    """Axial strain and rate of twist between a third and two thirds of the length, from the nodes' own places."""
    length = mesh.points[:, 2].max()
    tip = ring_of(mesh, length)[0]
    forces = []
    for node in tip:
        angle = np.arctan2(mesh.points[node, 1], mesh.points[node, 0])
        force = np.array([-np.sin(angle) * tangential, np.cos(angle) * tangential, axial]) / len(tip)
        size = np.linalg.norm(force)
        direction = "".join(f"{value:8.5f}" for value in force / size)
        forces.append(f"FORCE   {2:8d}{mesh.node_number[node]:8d}{0:8d}{size:8.2f}{direction}")
    moves = solved_by_nastran95(mesh, folder, forces)
    means = []
    for level in (length / 3, 2 * length / 3):
        ring = ring_of(mesh, level)[0]
        at = np.array([moves[int(mesh.node_number[node])] for node in ring])
        x, y = mesh.points[ring, 0], mesh.points[ring, 1]
        means.append((at[:, 2].mean(), np.mean((x * at[:, 1] - y * at[:, 0]) / (x * x + y * y))))
    (low, low_turn), (high, high_turn) = means
    return (high - low) / (length / 3), (high_turn - low_turn) / (length / 3)
