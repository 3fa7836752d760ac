"""The bulk-data deck, read from its text alone, against the VTU and the tables."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.deck import (
    SAME,
    SOURCE,
    DeckError,
    DeckGeometry,
    compare_directions,
    compare_geometry,
    compare_materials,
    find_numbers,
    lines_of_deck,
    sorted_geometry,
)
from skinmesh.check.finding import Finding, listed, span_of, verdict_of
from skinmesh.check.reading import BuiltMesh
from skinmesh.mesh.inner_face import middle_height
from skinmesh.wording import counted
from skinmesh.write.deck_text import deck_layers

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Text = NDArray[np.bytes_]

CHECK = "bulk data"
_FIELD = 8
_WIDTH = 12 * _FIELD
_NODES_OF = {b"CTRIA3": 3, b"CQUAD4": 4, b"CTRIA6": 6, b"CQUAD8": 8}
_HEIGHT_SHARE, _HEIGHT_LEAST = 1e-3, 1e-7
"""What eight characters hold of a small negative number."""


@dataclass(frozen=True, eq=False)
class _Elements:
    number: Ints
    prop: Ints
    nodes: Ints
    theta: Floats
    height: Floats


def check_bulk_deck(built: BuiltMesh, path: Path) -> list[Finding]:
    """Geometry, properties, materials, offsets and material angles of a bulk-data deck.

    Parameters
    ----------
    built : BuiltMesh
    path : Path

    Returns
    -------
    list of Finding
    """
    return lines_of_deck(CHECK, lambda: _compare(built, path.read_bytes()))


def _compare(built: BuiltMesh, data: bytes) -> list[Finding]:
    lines = _lines(data)
    card = _card(lines)
    elements = _elements(lines, card)
    number, points = _nodes(lines, card)
    geometry = sorted_geometry(number, points, elements.number, elements.nodes)
    found = [compare_geometry(CHECK, built, geometry, has_second_order=False)]
    if not built.mesh.stacks:
        return found
    return [*found, *_laminates(built, lines, card, elements), _directions(built, geometry, elements)]


def _lines(data: bytes) -> Text:
    """Every line, as an array of bytes of one width."""
    return np.array(data.split(b"\n"), dtype=f"S{_WIDTH}")


def _card(lines: Text) -> Text:
    """The first field of every line, without blanks."""
    return np.char.rstrip(lines.view(f"S{_FIELD}").reshape(len(lines), -1)[:, 0])


def _part(lines: Text, first: int, width: int = _FIELD) -> Text:
    """The characters of every line from a column on."""
    letters = lines.view("S1").reshape(len(lines), _WIDTH)[:, first : first + width]
    return np.ascontiguousarray(letters).view(f"S{width}").ravel()


def _reals(fields: Text) -> Floats:
    """Real numbers; blanks are nought, and an exponent needs no letter."""
    try:
        return fields.astype(float)
    except ValueError:
        texts, place = np.unique(np.char.strip(fields), return_inverse=True)
        return np.array([_real(text) for text in texts.tolist()])[place.ravel()]


def _real(text: bytes) -> float:
    cut = max(text.rfind(b"+"), text.rfind(b"-"))
    if not text:
        return 0.0
    return float(text) if cut <= 0 or b"e" in text.lower() else float(text[:cut] + b"e" + text[cut:])


def _nodes(lines: Text, card: Text) -> tuple[Ints, Floats]:
    first = np.flatnonzero(card == b"GRID*")
    if not len(first):
        raise DeckError("it has no GRID* cards")
    head, tail = lines[first], lines[first + 1]
    x, y, z = _reals(_part(head, 40, 16)), _reals(_part(head, 56, 16)), _reals(_part(tail, 8, 16))
    return _part(head, 8, 16).astype(np.int64), np.column_stack([x, y, z])


def _elements(lines: Text, card: Text) -> _Elements:
    kinds = [kind for kind in _NODES_OF if np.any(card == kind)]
    if len(kinds) != 1:
        raise DeckError(f"it has elements of {len(kinds)} kinds")
    k = _NODES_OF[kinds[0]]
    first = np.flatnonzero(card == kinds[0])
    # The card's fields in a row: a line holds eight after its name, and the next line goes on.
    fields = [_part(lines[first], _FIELD * (1 + j)) for j in range(8)]
    if k > 4:
        fields += [_part(lines[first + 1], _FIELD * (1 + j)) for j in range(8)]
    whole = [field.astype(np.int64) for field in fields[: 2 + k]]
    # CQUAD8 has four thicknesses of its corners between its nodes and its angle.
    at = 2 + k + (4 if k == 8 else 0)
    return _Elements(whole[0], whole[1], np.column_stack(whole[2:]), _reals(fields[at]), _reals(fields[at + 1]))


def _long_cards(lines: Text, card: Text, name: bytes) -> list[list[str]]:
    """Fields of every card of sixteen-character fields: the first line and those that go on."""
    cards = []
    for start in np.flatnonzero(card == name).tolist():
        stop = start + 1
        while stop < len(card) and card[stop].startswith(b"*"):
            stop += 1
        cards.append(
            [
                field.decode("ascii", "replace").strip()
                for line in lines[start:stop]
                for field in (line[8:24], line[24:40], line[40:56], line[56:72])
            ]
        )
    return cards


def _laminates(built: BuiltMesh, lines: Text, card: Text, elements: _Elements) -> list[Finding]:
    mesh = built.mesh
    wanted = deck_layers(mesh)
    constants = {
        int(fields[0]): [_real(value.encode()) for value in fields[1:8]]
        for fields in _long_cards(lines, card, b"MAT8*")
    }
    layups: dict[int, list[tuple[int, float, float]]] = {}
    for fields in _long_cards(lines, card, b"PCOMP*"):
        plies = [fields[k : k + 4] for k in range(8, len(fields), 4)]
        layups[int(fields[0])] = [
            (int(material), _real(thickness.encode()), _real(angle.encode()))
            for material, thickness, angle, _ in plies
            if material
        ]
    wanted_constants: dict[str, tuple[float, ...]] = {}
    have_constants: dict[str, list[float]] = {}
    wrong_stacks = np.zeros(len(mesh.stacks) + 1, dtype=bool)
    for k, layers in enumerate(wanted):
        have = layups.get(k + 1, [])
        if len(have) != len(layers):
            wrong_stacks[k] = True
            continue
        for (number, thickness, angle), layer in zip(have, layers, strict=True):
            material = layer.material
            values = (material.E1, material.E2, material.nu12, material.G12, material.G13, material.G23)
            wanted_constants[material.name] = (*values, material.density)
            have_values = constants.get(number, [])
            # A layer that names another material than the layers before it spoils the material's line.
            if have_constants.setdefault(material.name, have_values) != have_values:
                have_constants[material.name] = []
            wrong_stacks[k] |= abs(thickness - layer.thickness) > SAME * layer.thickness
            wrong_stacks[k] |= abs(angle - layer.angle_degrees) > SAME
    at = find_numbers(np.sort(elements.number), mesh.element_number)
    own = np.argsort(elements.number, kind="stable")[np.maximum(at, 0)]
    is_layered = mesh.stack >= 0
    height = middle_height(mesh)
    wrong_prop = is_layered & (elements.prop[own] != mesh.stack + 1)
    wrong_height = is_layered & (
        np.abs(elements.height[own] - height) > np.maximum(_HEIGHT_SHARE * np.abs(height), _HEIGHT_LEAST)
    )
    beyond = np.flatnonzero(wrong_prop | wrong_height | wrong_stacks[mesh.stack])
    names = listed(f"PCOMP {k + 1}" for k in np.flatnonzero(wrong_stacks))
    sections = Finding(
        CHECK,
        f"{np.count_nonzero(wrong_stacks)} of {len(mesh.stacks)} properties have other plies than the tables; "
        f"{counted(int(np.count_nonzero(wrong_prop)), 'element')} with another property, "
        f"{np.count_nonzero(wrong_height)} with another offset",
        f"fail {SAME:g} of the value, {_HEIGHT_SHARE:g} of ZOFFS",
        SOURCE,
        verdict_of(fails=len(beyond) or wrong_stacks.any()),
        "; ".join(text for text in (names, span_of(mesh, beyond)) if text),
        beyond,
    )
    return [sections, compare_materials(CHECK, have_constants, wanted_constants)]


def _directions(built: BuiltMesh, geometry: DeckGeometry, elements: _Elements) -> Finding:
    """Side G1-G2 turned by THETA about the normal of the corners, against e1 laid into the same plane."""
    mesh = built.mesh
    theta = np.radians(elements.theta[np.argsort(elements.number, kind="stable")])
    x = np.moveaxis(geometry.points[geometry.positions()[:, : mesh.n_sides]], 1, 0)
    side = x[1] - x[0]
    normal = np.cross(x[2] - x[0], x[3] - x[1]) if mesh.n_sides == 4 else np.cross(side, x[2] - x[0])
    normal /= np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-300)
    side = side - np.einsum("ei,ei->e", side, normal)[:, None] * normal
    side /= np.maximum(np.linalg.norm(side, axis=1, keepdims=True), 1e-300)
    turned = np.cos(theta)[:, None] * side + np.sin(theta)[:, None] * np.cross(normal, side)
    at = find_numbers(geometry.element_number, mesh.element_number)
    own = np.flatnonzero((at >= 0) & (mesh.stack >= 0))
    return compare_directions(CHECK, mesh, own, have=turned[at[own]], wanted=mesh.e1[own], normal=normal[at[own]])
