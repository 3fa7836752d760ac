"""Steps of the trial's deck, and what the solver prints for them."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.trial.loads import NodalForces
from skinmesh.write.deck_text import number_lines, rows_text

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

RING_SET = "TRIAL_RINGS"
MARKER = f"displacements (vx,vy,vz) for set {RING_SET}"
"""Words over each table of displacements in what the solver prints: one a step, or one a mode."""
_NUMBER_GLUED = re.compile(r"(?<=\d)-(?=\d+\.)")


@dataclass(frozen=True, eq=False)
class Printed:
    """What the solver printed.

    Attributes
    ----------
    displacement : (s, k, 3) float array, m
        Of the rings' nodes in every static step.
    reaction : (s, h, 3) float array, N
        At the root's nodes in every static step; loads on these nodes themselves are left out by the solver.
    mode : (q, k, 3) float array
        Of the rings' nodes in every mode.
    frequency : (q,) float array, Hz
    mass : float, kg
    """

    displacement: Floats
    reaction: Floats
    mode: Floats
    frequency: Floats
    mass: float


def steps_text(
    mesh: ShellMesh,
    ring_nodes: Ints,
    *,
    root: str,
    loads: Sequence[NodalForces],
    acceleration: Sequence[float],
    n_modes: int,
) -> str:
    """Steps of a deck: one a load, the weight, the natural modes. No field goes into a result file.

    Parameters
    ----------
    mesh : ShellMesh
    ring_nodes : (k,) int array
        Whose displacements are wanted.
    root : str
        Name of the node set that is held.
    loads : sequence of NodalForces
    acceleration : (3,) sequence of float, m/s²
    n_modes : int

    Returns
    -------
    str
    """
    size = float(np.linalg.norm(acceleration))
    direction = ",".join(f"{part / size:.12g}" for part in acceleration)
    printed = f"*NODE PRINT,NSET={root}\nRF\n*NODE PRINT,NSET={RING_SET}\nU\n"
    parts = [f"** Steps of the trial run.\n*NSET,NSET={RING_SET}\n", number_lines(mesh.node_number[ring_nodes])]
    for load in loads:
        parts += ["*STEP\n*STATIC\n*CLOAD,OP=NEW\n", *_force_lines(mesh, load), printed, "*END STEP\n"]
    # the mass is printed once: a request holds on for the steps behind it
    parts += [
        f"*STEP\n*STATIC\n*CLOAD,OP=NEW\n*DLOAD\nALL,GRAV,{size:.12g},{direction}\n{printed}"
        "*EL PRINT,ELSET=ALL,TOTALS=ONLY\nEMAS\n*END STEP\n",
        f"*STEP\n*FREQUENCY\n{n_modes}\n*NODE PRINT,NSET={RING_SET}\nU\n*END STEP\n",
    ]
    return "".join(parts)


def read_printed(text: str, ring_numbers: Ints, root_numbers: Ints, *, n_static: int, n_modes: int) -> Printed:
    """Read what the solver printed for the steps of :func:`steps_text`.

    Parameters
    ----------
    text : str
        The .dat file.
    ring_numbers : (k,) int array
        Solver numbers in the wanted order; one may stand there more than once.
    root_numbers : (h,) int array
    n_static, n_modes : int

    Returns
    -------
    Printed

    Raises
    ------
    ValueError
        A table is missing, or holds something that is no number.
    """
    moved = np.array([_by_number(block, ring_numbers) for block in _tables(text, MARKER)])
    if len(moved) != n_static + n_modes:
        raise ValueError(f"the solver printed {len(moved)} tables of displacements, wanted {n_static + n_modes}")
    reactions = [_by_number(block, root_numbers) for block in _tables(text, "forces (fx,fy,fz) for set ")]
    masses = _tables(text, "total mass for set ALL")
    if len(reactions) < n_static or not masses:
        raise ValueError("the solver printed no reactions or no mass")
    heading = text.partition("E I G E N V A L U E   O U T P U T")[2].partition("P A R T I C I P A T I O N")[0]
    listed = [line.split() for line in heading.splitlines() if re.match(r"\s*\d+\s+[-\d.]", line)]
    frequency = np.array([float(row[3]) for row in listed])
    if len(frequency) < n_modes:
        raise ValueError(f"the solver printed {len(frequency)} frequencies, wanted {n_modes}")
    printed = Printed(
        displacement=moved[:n_static],
        reaction=np.array(reactions[:n_static]),
        mode=moved[n_static:],
        frequency=frequency[:n_modes],
        mass=float(_rows(masses[0], 1)[0, 0]),
    )
    if not all(np.all(np.isfinite(array)) for array in (moved, printed.reaction, printed.frequency)):
        raise ValueError("the solver printed something that is no number")
    return printed


def _force_lines(mesh: ShellMesh, load: NodalForces) -> list[str]:
    which, axis = np.nonzero(load.force)
    return list(rows_text("%d,%d,%.12g\n", [mesh.node_number[load.node[which]], axis + 1, load.force[which, axis]]))


def _tables(text: str, marker: str) -> list[str]:
    """Lines of numbers under every line that has the marker: a blank line, the table, a blank line."""
    parts = text.split(marker)[1:]
    return [part.partition("\n")[2].lstrip("\n").lstrip(" ").partition("\n\n")[0] for part in parts]


def _rows(table: str, n_columns: int) -> Floats:
    # a solver's wide numbers may touch each other
    values = np.array(_NUMBER_GLUED.sub(" -", table).split(), dtype=float)
    return np.asarray(values.reshape(-1, n_columns))


def _by_number(table: str, wanted: Ints) -> Floats:
    rows = _rows(table, 4)
    numbers = rows[:, 0].astype(np.int64)
    order = np.argsort(numbers, kind="stable")
    at = np.minimum(np.searchsorted(numbers[order], wanted), len(order) - 1)
    if not np.array_equal(numbers[order][at], wanted):
        raise ValueError("the solver left out nodes of the rings")
    return np.asarray(rows[order][at, 1:])
