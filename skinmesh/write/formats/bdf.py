"""Bulk data: layered shells with a material angle an element, and a case that runs the blade's weight.

Named sets are case-control ``SET`` cards, each with its name in a comment above it: the form that every solver and
preprocessor of this format reads, and whose numbers result requests take.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from textwrap import wrap

import numpy as np
from numpy.typing import NDArray

from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer
from skinmesh.mesh.inner_face import middle_height
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import CAUTION
from skinmesh.write.deck_text import (
    ascii_text,
    deck_layers,
    element_groups,
    rows_text,
    set_names,
)
from skinmesh.write.registry import register_format

GRAVITY = 9.81
FIRST_NODE_SET = 1001
FIRST_ELEMENT_SET = 2001
_LINE = 72


def write_bdf(mesh: ShellMesh, path: Path) -> None:
    """Write a mesh as bulk data.

    Element angles turn the side from the first corner to the second, about the element's own normal, into e1. Layers
    are listed from the negative-normal face; equal neighbours are merged. ZOFFS carries the laminate's middle.

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


def material_angles(mesh: ShellMesh) -> NDArray[np.float64]:
    """Angle from the side between the first two corners to e1, about the element's own normal.

    The normal is that of the corners: of the diagonals of a quadrilateral, of the plane of a triangle.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    (m,) float array, degrees
        In [−180, 180].
    """
    corners = np.moveaxis(mesh.points[mesh.cells[:, : mesh.n_sides]], 1, 0)
    side = corners[1] - corners[0]
    other = corners[2] - corners[0]
    normal = np.cross(other, corners[3] - corners[1]) if mesh.n_sides == 4 else np.cross(side, other)
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    flat = side - np.einsum("ij,ij->i", side, normal)[:, None] * normal
    forward = np.einsum("ij,ij->i", mesh.e1, flat)
    left = np.einsum("ij,ij->i", mesh.e1, np.cross(normal, flat))
    angles: NDArray[np.float64] = np.degrees(np.arctan2(left, forward))
    return angles


def real_field(value: float) -> str:
    """A real number in eight characters, as near as eight characters come.

    Examples
    --------
    >>> real_field(-0.0123456789), real_field(30.0), real_field(-0.00012345678), real_field(0.0)
    ('-.012346', '30.0', '-1.235-4', '0.0')
    """
    return _nearest_text(value, 8)


def long_field(value: float) -> str:
    """A real number in sixteen characters.

    Examples
    --------
    >>> long_field(41.0e9), long_field(0.00085), long_field(1.0 / 3e6)
    ('41000000000.0', '0.00085', '3.333333333333-7')
    """
    return _nearest_text(value, 16)


def _nearest_text(value: float, width: int) -> str:
    """The nearest of all ways to write a value in a field; a plain one before one with an exponent, then the short."""
    candidates = []
    for digits in range(1, width):
        plain = f"{value:.{digits}f}"
        candidates += [(False, plain), (False, plain.replace("0.", ".", 1) if abs(value) < 1.0 else plain)]
        mantissa, exponent = f"{value:.{digits}e}".split("e")
        candidates.append((True, f"{mantissa}{int(exponent):+d}"))
    fitting = [(abs(_value(text) - value), has, -("0." in text), len(text), text) for has, text in candidates]
    return min(entry for entry in fitting if entry[3] <= width)[4]


def _value(text: str) -> float:
    """Value of a field whose exponent has no letter."""
    cut = max(text.rfind("+"), text.rfind("-"))
    return float(text) if cut <= 0 else float(f"{text[:cut]}e{text[cut:]}")


def _deck(mesh: ShellMesh) -> Iterator[str]:
    layers = deck_layers(mesh)
    yield from _case(mesh)
    yield "BEGIN BULK\nPARAM   POST    -1\nPARAM   GRDPNT  0\n"
    yield from _nodes(mesh)
    yield from _elements(mesh)
    if mesh.stacks:
        yield from _properties(mesh, layers)
    if "root" in mesh.node_sets:
        yield "$ The root is clamped.\n"
        yield _clamp(mesh.node_number[mesh.node_set("root")])
    if mesh.stacks:
        yield "$ The blade's weight, flapwise.\n"
        yield f"GRAV    {2:8d}{0:8d}{real_field(GRAVITY):>8}{'-1.0':>8}{'0.0':>8}{'0.0':>8}\n"
    yield "ENDDATA\n"


def _notes(mesh: ShellMesh) -> list[str]:
    n_bare = int(np.count_nonzero(mesh.stack < 0))
    notes = [
        f"{len(mesh.cells)} elements, {mesh.n_nodes} nodes, {len(mesh.stacks)} stacks.",
        "Units: m, kg, s, N, Pa. z runs along the pitch axis, root to tip.",
        *CAUTION,
        "Named sets are SET cards; the name stands in the comment above.",
    ]
    if not mesh.stacks:
        notes += [
            "The blade file has no plies: no properties and no materials.",
            "The property number of an element is the number of its region.",
            *(f"region {k + 1}: {ascii_text(region.name)}" for k, region in enumerate(mesh.regions)),
        ]
    else:
        notes += [
            "Layers of a PCOMP run from the negative-normal face upwards; neighbours of one material and angle "
            "are merged.",
            "THETA turns side G1-G2, laid into the plane of the corners, about the element's normal into the 0-degree "
            "direction. ZOFFS is the height of the laminate's middle over the nodes.",
        ]
        if n_bare:
            notes.append(f"{n_bare} elements carry no ply: property {len(mesh.stacks) + 1}, not defined here.")
    return notes


def _case(mesh: ShellMesh) -> Iterator[str]:
    yield "".join(f"$ {line}\n" for note in _notes(mesh) for line in wrap(note, _LINE - 2))
    yield f"SOL 101\nCEND\nTITLE = {ascii_text(mesh.title)[:60] or 'BLADE'}\nECHO = NONE\n"
    node_names, element_names = set_names(mesh)
    sets = [("node", name, node_names[name], mesh.node_number[mesh.node_set(name)]) for name in mesh.node_sets]
    numbers = {name: FIRST_NODE_SET + k for k, (_, name, _, _) in enumerate(sets)}
    for k, (kind, name, deck_name, members) in enumerate(sets):
        yield _set_card(FIRST_NODE_SET + k, f"{kind} set {deck_name}: {ascii_text(name)}", members)
    for k, (name, elements) in enumerate(element_groups(mesh).items()):
        note = f"element set {element_names[name]}: {ascii_text(name)}"
        yield _set_card(FIRST_ELEMENT_SET + k, note, mesh.element_number[elements])
    if "root" in mesh.node_sets:
        yield f"SPC = 1\nSPCFORCES(PRINT) = {numbers['root']}\n"
    if mesh.stacks:
        yield "LOAD = 2\n"
    if "tip" in mesh.node_sets:
        yield f"DISPLACEMENT(PRINT) = {numbers['tip']}\n"


def _set_card(number: int, note: str, members: NDArray[np.int64]) -> str:
    if not len(members):
        return ""
    ordered = np.sort(members)
    breaks = np.flatnonzero(np.diff(ordered) != 1)
    firsts, lasts = ordered[np.r_[0, breaks + 1]].tolist(), ordered[np.r_[breaks, len(ordered) - 1]].tolist()
    runs = [f"{a} THRU {b}" if b > a else str(a) for a, b in zip(firsts, lasts, strict=True)]
    # Three runs of eight-digit numbers fill a case-control line; the first line also holds the set's number.
    lines = [runs[0], *(", ".join(runs[k : k + 3]) for k in range(1, len(runs), 3))]
    return f"$ {note}\nSET {number} = " + ",\n".join(lines) + "\n"


def _nodes(mesh: ShellMesh) -> Iterator[str]:
    whole = len(str(int(np.abs(mesh.nodes).max(initial=1.0) + 1.0)))
    field = f"%16.{16 - 2 - whole}f"
    numbers = mesh.node_number[: mesh.n_nodes]
    row = f"GRID*   %16d{'':16}{field}{field}*%-7d\n*%-7d{field}\n"
    x, y, z = (mesh.nodes + 0.0).T
    yield from rows_text(row, [numbers, x, y, numbers, numbers, z])


def _elements(mesh: ShellMesh) -> Iterator[str]:
    n_nodes = mesh.connectivity.shape[1]
    card, row = {
        3: ("CTRIA3", "%8d" * 5 + "%8.3f%s\n"),
        4: ("CQUAD4", "%8d" * 6 + "%8.3f%s\n"),
        6: ("CTRIA6", "%8d" * 8 + "\n+       %8.3f%s\n"),
        8: ("CQUAD8", "%8d" * 8 + "\n+       %8d%8d" + " " * 32 + "%8.3f%s\n"),
    }[n_nodes]
    bare = len(mesh.stacks) + 1 if mesh.stacks else mesh.region + 1
    prop = np.where(mesh.stack >= 0, mesh.stack + 1, bare)
    heights, height = np.unique(middle_height(mesh), return_inverse=True)
    texts = [f"{real_field(value):>8}" if value else "" for value in heights.tolist()]
    offsets = np.array(texts, dtype=object)[height.ravel()]
    nodes = mesh.node_number[mesh.connectivity].T
    yield from rows_text(f"{card:<8}" + row, [mesh.element_number, prop, *nodes, material_angles(mesh), offsets])


def _properties(mesh: ShellMesh, layers: list[tuple[Layer, ...]]) -> Iterator[str]:
    materials = sorted({layer.material for stack in layers for layer in stack}, key=lambda each: each.name)
    number = {material: k + 1 for k, material in enumerate(materials)}
    for material in materials:
        yield f"$ material: {ascii_text(material.name)}\n$ source: {ascii_text(material.source) or 'not given'}\n"
        yield _long_card("MAT8", _material_fields(material, number[material]), mark=f"*M{number[material]}")
    for k, (stack, listed) in enumerate(zip(mesh.stacks, layers, strict=True)):
        fields = [str(k + 1), *[""] * 7]
        for layer in listed:
            turned = round(np.degrees(layer.angle), 9) + 0.0
            fields += [str(number[layer.material]), long_field(layer.thickness), long_field(turned), "YES"]
        yield f"$ stack {k + 1}, content {stack.content_name}, thickness {stack.thickness:.6g} m\n"
        yield _long_card("PCOMP", fields, mark=f"*P{k + 1}")


def _material_fields(material: Material, number: int) -> list[str]:
    values = (
        material.E1,
        material.E2,
        material.nu12,
        material.G12,
        material.G13,
        material.G23,
        material.density,
    )
    return [str(number), *(long_field(value) for value in values)]


def _long_card(card: str, fields: list[str], *, mark: str) -> str:
    """A card of sixteen-character fields; each line carries a mark of its own that the next line repeats."""
    fields = fields + [""] * (-len(fields) % 8)
    lines = [fields[k : k + 4] for k in range(0, len(fields), 4)]
    marks = [f"{mark}{_letters(k)}" for k in range(len(lines) - 1)]
    heads, tails = [f"{card}*", *marks], [*marks, ""]
    return "".join(
        f"{head:<8}{''.join(f'{field:>16}' for field in line)}{tail}".rstrip() + "\n"
        for head, line, tail in zip(heads, lines, tails, strict=True)
    )


def _letters(number: int) -> str:
    """Two or more letters that tell the lines of a card apart."""
    high, low = divmod(number, 26)
    return (_letters(high - 26) if high >= 26 else chr(65 + high)) + chr(65 + low)


def _clamp(numbers: NDArray[np.int64]) -> str:
    rows = [numbers[k : k + 6].tolist() for k in range(0, len(numbers), 6)]
    return "".join("SPC1    " + "".join(f"{number:8d}" for number in (1, 123456, *row)) + "\n" for row in rows)


register_format("bdf", summary="bulk data with PCOMP, MAT8 and a material angle an element", write=write_bdf)
