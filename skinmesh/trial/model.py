"""The model that the solver will see: the keyword deck's nodes and elements, the mesh files' plies and axes."""

from __future__ import annotations

from dataclasses import dataclass, replace
from hashlib import sha256
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.reading import BuiltMesh, read_built_mesh
from skinmesh.errors import InputError, Problem
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.write.deck_text import set_names

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

CLAMP, HOLD = "1,6", "1,3"
"""Degrees of freedom held at the root: in the deck as it was built, and in the trial.

Where a layered shell's rotations are held too, CalculiX 2.20 prints wrong reactions: on a tube under a transverse tip
load exact ones along x and 1.27 times the load along y, with right displacements. With every node of the root's ring
held in place the blade is clamped as a beam is, only its walls may turn there; reactions are then exact, and the tip of
that tube moves 0.02 % more.
"""

NEAR = 1e-6
"""Of the span: nodes of the deck and of the VTU farther apart belong to different meshes."""


@dataclass(frozen=True, eq=False)
class TrialModel:
    """A built model, ready for steps of our own.

    Attributes
    ----------
    built : BuiltMesh
        As the files have it.
    mesh : ShellMesh
        Always of second order, as in the deck.
    head : str
        The deck up to its first step: nodes, elements, sets, materials, sections, the root held.
    root : str
        Name of the node set that is held.
    sha256 : str
        Of the deck.
    """

    built: BuiltMesh
    mesh: ShellMesh
    head: str
    root: str
    sha256: str

    @property
    def span(self) -> float:
        """Length along z, m."""
        z = self.mesh.points[:, 2]
        return float(z.max() - z.min())

    @property
    def row_ends(self) -> tuple[Floats, Floats]:
        """Level, and mean z of the nodes, of the ends of the element rows, root first."""
        mesh, corners = self.mesh, slice(self.mesh.n_corners)
        level = np.round(mesh.row[corners], 9)
        # along the leading edge: small rows of a closing trailing edge go no farther than its base
        on_nose = (mesh.sheet[corners] == 0) & (mesh.seam[corners] == float(mesh.report.seams.index("leading edge")))
        levels = np.unique(level[on_nose])
        place = np.clip(np.searchsorted(levels, level), 0, len(levels) - 1)
        on_level = levels[place] == level
        count = np.bincount(place[on_level], minlength=len(levels))
        return levels, np.bincount(place[on_level], weights=mesh.points[corners, 2][on_level]) / count


def read_model(directory: Path) -> TrialModel:
    """Read a built mesh and its keyword deck.

    Parameters
    ----------
    directory : Path

    Returns
    -------
    TrialModel

    Raises
    ------
    InputError
        A file is missing or cannot be read, the deck has no plies or no clamped root, or it is of another mesh.
    """
    built = read_built_mesh(directory)
    path = built.file("inp")
    try:
        data = path.read_bytes()
    except OSError as error:
        text = f"cannot be read: {error.strerror}; build the mesh again, with inp among the formats"
        raise InputError([Problem(path.name, 0, "", text)]) from error
    text = data.decode("ascii", errors="replace").replace("\r\n", "\n")
    n_bare = int(np.count_nonzero(built.mesh.stack < 0))
    if n_bare:
        told = f"{n_bare} elements carry no ply; a trial needs a laminate everywhere"
        raise InputError([Problem(path.name, 0, "", told)])
    head, _, steps = text.partition("\n*STEP")
    if not steps:
        raise InputError([Problem(path.name, 0, "", "has no step; build the mesh again")])
    node_number, points = _nodes(path.name, head)
    element_number, cells = _elements(path.name, head)
    if len(np.unique(node_number)) != len(node_number) or not np.all(np.isin(cells, node_number)):
        raise InputError([Problem(path.name, 0, "", "its elements and nodes do not fit; build the mesh again")])
    by_number = np.argsort(node_number, kind="stable")
    cells = by_number[np.searchsorted(node_number[by_number], cells)]
    mesh = _joined(path.name, built.mesh, node_number, points, element_number, cells)
    root = set_names(built.mesh)[0]["root"]
    before, clamp, after = f"{head}\n".partition(f"*BOUNDARY\n{root},{CLAMP}\n")
    if not clamp:
        raise InputError([Problem(path.name, 0, "*BOUNDARY", "the root is not clamped; build the mesh again")])
    held = f"{before}*BOUNDARY\n{root},{HOLD}\n{after}"
    return TrialModel(built, mesh, held, root, sha256(data).hexdigest())


def _joined(
    file: str, mesh: ShellMesh, node_number: Ints, points: Floats, element_number: Ints, cells: Ints
) -> ShellMesh:
    """The mesh of the VTU on the nodes of the deck."""
    other = Problem(file, 0, "", "and the VTU are of different meshes; build the mesh again")
    n_corners = mesh.n_corners
    if (
        cells.shape != mesh.cells.shape
        or not np.array_equal(element_number, mesh.element_number)
        or not np.array_equal(node_number[:n_corners], mesh.node_number[:n_corners])
        or not np.array_equal(cells[:, : mesh.n_sides], mesh.cells[:, : mesh.n_sides])
    ):
        raise InputError([other])
    near = NEAR * float(np.ptp(points[:, 2]))
    shared = slice(len(mesh.points) if mesh.order == 2 else n_corners)
    if mesh.order == 2 and len(points) != len(mesh.points):
        raise InputError([other])
    if np.abs(points[shared] - mesh.points[shared]).max() > near:
        raise InputError([other])
    corners = cells[:, : mesh.n_sides]
    values = {}
    for name in ("sheet", "row", "seam"):
        own = getattr(mesh, name)[:n_corners].astype(float)
        whole = np.zeros(len(points))
        whole[:n_corners] = own
        ends = own[corners], own[np.roll(corners, -1, axis=1)]
        whole[cells[:, mesh.n_sides :]] = np.maximum(*ends) if name == "sheet" else 0.5 * (ends[0] + ends[1])
        values[name] = whole
    return replace(
        mesh,
        order=2,
        points=points,
        cells=cells,
        node_number=node_number,
        sheet=values["sheet"].astype(np.int64),
        row=values["row"],
        seam=values["seam"],
        node_sets={},
    )


def _nodes(file: str, head: str) -> tuple[Ints, Floats]:
    table = _numbers(file, head, "*NODE,NSET=ALL\n", 4)
    return table[:, 0].astype(np.int64), table[:, 1:]


def _elements(file: str, head: str) -> tuple[Ints, Ints]:
    mark = "*ELEMENT,TYPE=S8R" if "*ELEMENT,TYPE=S8R" in head else "*ELEMENT,TYPE=S6"
    table = _numbers(file, head, f"{mark},ELSET=ALL\n", 9 if mark.endswith("S8R") else 7).astype(np.int64)
    return table[:, 0], table[:, 1:]


def _numbers(file: str, head: str, mark: str, n_columns: int) -> Floats:
    """The table of numbers under a keyword line."""
    _, found, rest = head.partition(mark)
    if not found:
        raise InputError([Problem(file, 0, mark.strip(), "is missing; build the mesh again")])
    block = rest.partition("*")[0]
    try:
        values = np.array(block.replace("\n", ",").rstrip(",").split(","), dtype=float)
        table = values.reshape(-1, n_columns)
    except ValueError as error:
        raise InputError([Problem(file, 0, mark.strip(), "is not as we write it; build the mesh again")]) from error
    if not np.all(np.isfinite(table)):
        raise InputError([Problem(file, 0, mark.strip(), "holds something that is no number; build the mesh again")])
    return table
