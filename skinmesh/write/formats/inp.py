"""Keyword deck for CalculiX and readers of its format: second-order layered shells that run as they are."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from math import ceil, degrees
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skinmesh.laminate.stack import Layer
from skinmesh.mesh.inner_face import node_normals
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import CAUTION
from skinmesh.write.deck_text import (
    ascii_text,
    deck_layers,
    element_groups,
    exact,
    number_lines,
    rows_text,
    safe_names,
    set_names,
    split_labels,
)
from skinmesh.write.ply_directions import SharedDirections, share_directions
from skinmesh.write.registry import register_format

BLADE_AXIS = "BLADE_AXIS"
"""Name of the orientation whose first axis is the pitch axis."""

GRAVITY = 9.81
_MARGIN = 1.1
_MATRIX_BYTES = 0.25e6


@dataclass(frozen=True, eq=False)
class Section:
    """One section card: elements of one stack, one offset and one set of ply directions.

    Attributes
    ----------
    name : str
        Of its element set.
    elements : int array
    stack : int
    offset : float
    bunch : int
        Of the directions of its plies, −1 where the blade's axis serves all.
    is_along_z : bool
        Whether its 0° plies follow the blade's axis.
    """

    name: str
    elements: NDArray[np.int64]
    stack: int
    offset: float
    bunch: int
    is_along_z: bool


@dataclass(frozen=True)
class Allowance:
    """What the solver sets aside for the nodes of the layered solid, and what it will need.

    Attributes
    ----------
    needed, given : int
        Nodes; the solver stops with 'increase nk_' where it needs more than it was given.
    copies : tuple of int
        Further copies of each section card that make up the difference.
    memory : float, bytes
        Rough upper estimate of the solver's memory.
    """

    needed: int
    given: int
    copies: tuple[int, ...]
    memory: float


def write_inp(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as a keyword deck.

    The elements are of second order whatever the mesh's order, because only those take layers in the solver. Layers
    are listed from the negative-normal face; equal neighbours are merged. The root is clamped, and one step with the
    blade's weight prints mass and reactions.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path

    Raises
    ------
    OSError
        The file cannot be written.
    """
    with path.open("w", encoding="ascii", newline="\n") as file:
        file.writelines(_deck(mesh))


def plan_sections(mesh: ShellMesh, directions: SharedDirections) -> tuple[Section, ...]:
    """Group the elements into section cards.

    Parameters
    ----------
    mesh : ShellMesh
    directions : SharedDirections

    Returns
    -------
    tuple of Section
        By stack, then by offset and direction.
    """
    layered = np.flatnonzero(mesh.stack >= 0)
    offset, offset_index = np.unique(mesh.offset[layered], return_inverse=True)
    key = np.column_stack(
        [mesh.stack[layered], offset_index.ravel(), directions.is_along_z[layered], directions.bunch[layered]]
    ).reshape(-1, 4)
    kinds, label = np.unique(key, axis=0, return_inverse=True)
    members = split_labels(label.ravel(), len(kinds))
    return tuple(
        Section(f"SECTION_{k + 1}", layered[indices], int(kind[0]), float(offset[kind[1]]), int(kind[3]), bool(kind[2]))
        for k, (kind, indices) in enumerate(zip(kinds, members, strict=True))
    )


def node_allowance(mesh: ShellMesh, sections: tuple[Section, ...], layers: list[tuple[Layer, ...]]) -> Allowance:
    """Weigh the solver's fixed allowance for nodes against the need, and repeat cheap section cards to raise it.

    Each mean normal of a node costs 3 + 3 L nodes, L the largest number of layers in the model; each element with l
    layers brings 64 + 20 l, and every copy of a section card 20 l for each element of it again. Memory is at most
    about 16 L Σ (28 + 20 l) bytes for the layers and, measured at some 10 000 elements, 0.25 MB an element for the
    matrices. Found by experiment with CalculiX 2.20 and in its published source.

    Parameters
    ----------
    mesh : ShellMesh
    sections : tuple of Section
    layers : list of tuple of Layer
        Merged layers of each stack.

    Returns
    -------
    Allowance
    """
    n_layers = np.array([len(layers[section.stack]) for section in sections])
    n_elements = np.array([len(section.elements) for section in sections])
    most = int(n_layers.max())
    needed = len(node_normals(mesh).node) * (3 + 3 * most) + len(mesh.points)
    given = int(np.sum(n_elements * (64 + 20 * n_layers)))
    gain = 20 * n_layers * n_elements
    copies = np.zeros(len(sections), dtype=np.int64)
    missing = ceil(_MARGIN * needed) - given
    if missing > 0:
        # One more copy of every card adds sum(gain); the largest cards first, so that few lines are added.
        rounds, rest = divmod(missing, int(gain.sum()))
        copies += rounds
        by_gain = np.argsort(-gain, kind="stable")
        enough = int(np.searchsorted(np.cumsum(gain[by_gain]), rest)) + 1
        copies[by_gain[:enough]] += 1
    in_layers = 16.0 * most * float(np.sum(n_elements * (28 + 20 * n_layers)) + np.sum(copies * gain))
    memory = in_layers + _MATRIX_BYTES * float(np.sum(n_elements))
    return Allowance(needed, given, tuple(copies.tolist()), memory)


def _deck(mesh: ShellMesh) -> Iterator[str]:
    layers = deck_layers(mesh)
    yield from _heading(mesh, layers)
    yield from _nodes_and_elements(mesh)
    yield from _sets(mesh)
    if mesh.stacks:
        yield from _materials(mesh, layers)
        yield from _sections(mesh, layers)
    if "root" in mesh.node_sets:
        yield f"**\n** The root is clamped.\n*BOUNDARY\n{set_names(mesh)[0]['root']},1,6\n"
        if mesh.stacks and np.all(mesh.stack >= 0):
            yield from _weight_step(mesh)


def _heading(mesh: ShellMesh, layers: list[tuple[Layer, ...]]) -> Iterator[str]:
    n_bare = int(np.count_nonzero(mesh.stack < 0))
    notes = [
        f"{len(mesh.cells)} elements, {len(mesh.points)} nodes, {len(mesh.stacks)} stacks. Units: m, kg, s, N, Pa.",
        "z runs along the pitch axis from root to tip.",
        *CAUTION,
    ]
    if mesh.order == 1:
        notes.append(
            "Order 1 was asked for; mid nodes were added on the surface: only second-order shells take layers."
        )
    if layers:
        notes += [
            "Layers of a section are listed from the negative-normal face to the outward face. Neighbouring layers of",
            "one material and angle are merged. OFFSET=0.5 puts the nodes on the outward face of the laminate.",
            "Transverse shear of soft cores is stiffer in this solver than core-shear theory has it.",
        ]
    if layers and mesh.n_sides == 3:
        notes.append(
            "This solver prints a mass (EMAS) of zero for layered triangles, though it gives them their weight."
        )
    if not mesh.stacks:
        notes.append("The blade file has no plies: elements and sets only, without sections, material or step.")
    elif n_bare:
        notes.append(
            f"{n_bare} elements carry no ply: they have no section, and the deck has no step. Set WITHOUT_PLIES."
        )
    yield f"*HEADING\nBlade: {ascii_text(mesh.title)[:63]}\n"  # a title may begin with a star
    yield "".join(f"** {note}\n" for note in notes)


def _nodes_and_elements(mesh: ShellMesh) -> Iterator[str]:
    yield "**\n*NODE,NSET=ALL\n"
    yield from rows_text("%d,%.14g,%.14g,%.14g\n", [mesh.node_number, *exact(mesh.points).T])
    n_nodes = mesh.cells.shape[1]
    yield f"*ELEMENT,TYPE={'S8R' if n_nodes == 8 else 'S6'},ELSET=ALL\n"
    yield from rows_text(
        ",".join(["%d"] * (n_nodes + 1)) + "\n", [mesh.element_number, *mesh.node_number[mesh.cells].T]
    )


def _sets(mesh: ShellMesh) -> Iterator[str]:
    node_names, element_names = set_names(mesh)
    for name, nodes in mesh.node_sets.items():
        if len(nodes):
            yield f"** node set '{ascii_text(name)}'\n*NSET,NSET={node_names[name]}\n"
            yield number_lines(mesh.node_number[nodes])
    for name, elements in element_groups(mesh).items():
        yield f"** elements '{ascii_text(name)}'\n*ELSET,ELSET={element_names[name]}\n"
        yield number_lines(mesh.element_number[elements])


def _materials(mesh: ShellMesh, layers: list[tuple[Layer, ...]]) -> Iterator[str]:
    names = _material_names(mesh)
    used = {layer.material for stack in layers for layer in stack}
    for material in sorted(used, key=lambda each: names[each.name]):
        yield (
            f"**\n** material '{ascii_text(material.name)}', source: {ascii_text(material.source) or 'not given'}\n"
            f"*MATERIAL,NAME={names[material.name]}\n*ELASTIC,TYPE=ENGINEERING CONSTANTS\n"
            f"{material.E1:.10g},{material.E2:.10g},{material.E3:.10g},{material.nu12:.10g},{material.nu13:.10g},"
            f"{material.nu23:.10g},{material.G12:.10g},{material.G13:.10g},\n{material.G23:.10g},\n"
            f"*DENSITY\n{material.density:.10g}\n"
        )


def _material_names(mesh: ShellMesh) -> dict[str, str]:
    return safe_names(sorted({layer.material.name for stack in mesh.stacks for layer in stack.layers}))


def _sections(mesh: ShellMesh, layers: list[tuple[Layer, ...]]) -> Iterator[str]:
    directions = share_directions(mesh, layers)
    sections = plan_sections(mesh, directions)
    allowance = node_allowance(mesh, sections, layers)
    materials = _material_names(mesh)
    n_copies = sum(allowance.copies)
    yield (
        "**\n** Ply directions: the first axis of an orientation is projected onto the element.\n"
        f"** Largest deviation of a ply: {degrees(float(directions.error.max())):.4f} degrees.\n"
        f"** {len(sections)} section cards; nodes of the layered solid: {allowance.needed} needed, "
        f"{allowance.given} allowed by the cards as they are.\n"
    )
    if n_copies:
        yield f"** {n_copies} section cards are repeated to raise that allowance ('increase nk_').\n"
    yield f"** Rough estimate of the solver's memory: {allowance.memory / 1e9:.2f} GB.\n"
    yield f"*ORIENTATION,NAME={BLADE_AXIS},SYSTEM=RECTANGULAR\n0,0,1,1,0,0\n"
    yield from _orientations(directions, sections, layers)
    for section, copies in zip(sections, allowance.copies, strict=True):
        stack = mesh.stacks[section.stack]
        text = [f"*SHELL SECTION,ELSET={section.name},COMPOSITE,OFFSET={section.offset + 0.0:.10g}\n"]
        for layer in layers[section.stack]:
            text.append(
                f"{layer.thickness:.10g},,{materials[layer.material.name]},{_orientation_name(section, layer.angle)}\n"
            )
        yield f"** stack {section.stack + 1}, content {stack.content_name}\n*ELSET,ELSET={section.name}\n"
        yield number_lines(mesh.element_number[section.elements])
        yield "".join(text) * (1 + copies)


def _orientations(
    directions: SharedDirections, sections: tuple[Section, ...], layers: list[tuple[Layer, ...]]
) -> Iterator[str]:
    wanted = dict.fromkeys(
        (name, section.bunch, layer.angle)
        for section in sections
        for layer in layers[section.stack]
        if (name := _orientation_name(section, layer.angle)) != BLADE_AXIS
    )
    for name, bunch, angle in wanted:
        first = directions.vector(bunch, angle)
        # Any second vector spans the plane of the first two axes: only the first one counts on a shell.
        second = np.eye(3)[np.argmin(np.abs(first))]
        numbers = ",".join(f"{number:.10f}" for number in (*first, *second))
        yield f"*ORIENTATION,NAME={name},SYSTEM=RECTANGULAR\n{numbers}\n"


def _orientation_name(section: Section, angle: float) -> str:
    if angle == 0.0 and section.is_along_z:
        return BLADE_AXIS
    turned = degrees(angle)
    size = f"{abs(turned):.6f}".rstrip("0").rstrip(".").replace(".", "_")
    return f"FACING_{section.bunch + 1}_{'M' if turned < 0 else 'P'}{size}"


def _weight_step(mesh: ShellMesh) -> Iterator[str]:
    node_names, _ = set_names(mesh)
    yield (
        "**\n** The blade's weight, flapwise. Printed: mass (EMAS), reactions at the root, displacements of the tip.\n"
        "** Loads on clamped nodes are left out of the reactions.\n"
        f"*STEP\n*STATIC\n*DLOAD\nALL,GRAV,{GRAVITY},-1.,0.,0.\n"
        "** CalculiX 2.20 prints wrong reactions where rotations of layered shells are held (displacements are\n"
        "** right): for reactions, hold 1,3 alone.\n"
        f"*NODE PRINT,NSET={node_names['root']},TOTALS=ONLY\nRF\n"
        "*EL PRINT,ELSET=ALL,TOTALS=ONLY\nEMAS\n"
    )
    if "tip" in mesh.node_sets:
        yield f"*NODE PRINT,NSET={node_names['tip']}\nU\n"
    yield "*END STEP\n"


register_format("inp", summary="keyword deck with layered sections, runs in CalculiX", write=write_inp)
