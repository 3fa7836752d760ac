"""The keyword deck, read from its text alone, against the VTU and the tables."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from io import StringIO
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
    compare_sets,
    find_numbers,
    lines_of_deck,
    sorted_geometry,
)
from skinmesh.check.finding import Finding, listed, span_of, verdict_of
from skinmesh.check.reading import BuiltMesh
from skinmesh.laminate.material import Material
from skinmesh.mesh.frames import element_axes
from skinmesh.wording import counted
from skinmesh.write.deck_text import deck_layers, element_groups, safe_names, set_names

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

CHECK = "keyword deck"
_STARRED = re.compile(r"^\*.*$", re.MULTILINE)
_CONSTANTS = ("E1", "E2", "E3", "nu12", "nu13", "nu23", "G12", "G13", "G23")


@dataclass(frozen=True)
class _Section:
    elements: str
    offset: float
    layers: tuple[tuple[float, str, str], ...]


@dataclass
class _Deck:
    nodes: list[Floats] = field(default_factory=list)
    elements: list[Ints] = field(default_factory=list)
    node_sets: dict[str, Ints] = field(default_factory=dict)
    element_sets: dict[str, Ints] = field(default_factory=dict)
    orientations: dict[str, Floats] = field(default_factory=dict)
    materials: dict[str, list[float]] = field(default_factory=dict)
    sections: list[_Section] = field(default_factory=list)


def check_keyword_deck(built: BuiltMesh, path: Path) -> list[Finding]:
    """Geometry, sets, sections, materials and ply directions of a keyword deck.

    Parameters
    ----------
    built : BuiltMesh
    path : Path

    Returns
    -------
    list of Finding
    """
    return lines_of_deck(CHECK, lambda: _compare(built, _read(path.read_text(encoding="ascii"))))


def _compare(built: BuiltMesh, deck: _Deck) -> list[Finding]:
    geometry = _geometry(deck)
    lines = [compare_geometry(CHECK, built, geometry, has_second_order=True), _sets(built, deck)]
    return [*lines, *_laminates(built, deck, geometry)] if built.mesh.stacks else lines


def _read(text: str) -> _Deck:
    deck = _Deck()
    material = ""
    for keyword, options, data in _blocks(text):
        if keyword == "NODE":
            deck.nodes.append(_table(data))
        elif keyword == "ELEMENT":
            deck.elements.append(_table(data).astype(np.int64))
        elif keyword in ("NSET", "ELSET"):
            sets, numbers = (deck.node_sets, deck.element_sets)[keyword == "ELSET"], _numbers(data)
            name = options[keyword]
            sets[name] = np.concatenate([sets[name], numbers]) if name in sets else numbers
        elif keyword == "ORIENTATION":
            deck.orientations[options["NAME"]] = np.array(_fields(data), dtype=float)
        elif keyword == "MATERIAL":
            material = options["NAME"]
            deck.materials[material] = []
        elif keyword in ("ELASTIC", "DENSITY"):
            deck.materials[material] += [float(value) for value in _fields(data)]
        elif keyword == "SHELL SECTION":
            rows = [[part.strip() for part in line.split(",")] for line in data.splitlines() if line.strip()]
            layers = tuple((float(row[0]), row[2], row[3]) for row in rows)
            deck.sections.append(_Section(options["ELSET"], float(options.get("OFFSET", 0.0)), layers))
    return deck


def _blocks(text: str) -> Iterator[tuple[str, dict[str, str], str]]:
    """Keyword, options and data of every card; comments do not end one."""
    keyword, data, end = "", "", 0
    options: dict[str, str] = {}
    for mark in _STARRED.finditer(text):
        data += text[end : mark.start()]
        end = mark.end() + 1
        if mark[0].startswith("**"):
            continue
        if keyword:
            yield keyword, options, data
        first, *rest = [part.strip() for part in mark[0][1:].split(",")]
        keyword, data = first.upper(), ""
        options = {name.strip().upper(): value.strip() for name, _, value in (part.partition("=") for part in rest)}
    if keyword:
        yield keyword, options, data + text[end:]


def _table(data: str) -> Floats:
    return np.loadtxt(StringIO(data), delimiter=",", ndmin=2)


def _fields(data: str) -> list[str]:
    return [part for part in data.replace("\n", ",").split(",") if part.strip()]


def _numbers(data: str) -> Ints:
    return np.array(_fields(data), dtype=np.int64)


def _geometry(deck: _Deck) -> DeckGeometry:
    if not deck.nodes or not deck.elements:
        raise DeckError("it has no nodes or no elements")
    nodes, elements = np.concatenate(deck.nodes), np.concatenate(deck.elements)
    if nodes.shape[1] != 4 or elements.shape[1] not in (7, 9):
        raise DeckError("nodes or elements have an odd number of fields")
    return sorted_geometry(nodes[:, 0].astype(np.int64), nodes[:, 1:], elements[:, 0], elements[:, 1:])


def _sets(built: BuiltMesh, deck: _Deck) -> Finding:
    mesh = built.mesh
    node_names, element_names = set_names(mesh)
    if mesh.order == 1:
        # The deck has the mid nodes too, which the VTU does not know.
        known = mesh.node_number[: mesh.n_nodes]
        have = {name: numbers[np.isin(numbers, known)] for name, numbers in deck.node_sets.items()}
    else:
        have = deck.node_sets
    wanted = {node_names[name]: mesh.node_number[mesh.node_set(name)] for name in mesh.node_sets}
    groups = {element_names[name]: mesh.element_number[own] for name, own in element_groups(mesh).items()}
    return compare_sets(
        CHECK,
        {f"nodes {k}": v for k, v in have.items()} | {f"elements {k}": v for k, v in deck.element_sets.items()},
        {f"nodes {k}": v for k, v in wanted.items()} | {f"elements {k}": v for k, v in groups.items()},
    )


def _laminates(built: BuiltMesh, deck: _Deck, geometry: DeckGeometry) -> list[Finding]:
    mesh = built.mesh
    wanted = deck_layers(mesh)
    names = safe_names(sorted({layer.material.name for stack in mesh.stacks for layer in stack.layers}))
    by_number = np.argsort(mesh.element_number, kind="stable")
    numbers = mesh.element_number[by_number]
    covered = np.zeros(len(mesh.cells), dtype=np.int64)
    wrong = np.zeros(len(mesh.cells), dtype=bool)
    texts: list[str] = []
    first, angle, of_elements = [], [], []
    for section in dict.fromkeys(deck.sections):
        found = find_numbers(numbers, deck.element_sets.get(section.elements, np.zeros(0, dtype=np.int64)))
        own = by_number[found[found >= 0]]
        covered[own] += 1
        stack = mesh.stack[own]
        layers = wanted[stack[0]] if len(own) and stack[0] >= 0 else ()
        same_plies = len(layers) == len(section.layers) and all(
            abs(have[0] - layer.thickness) <= SAME * layer.thickness and have[1] == names[layer.material.name]
            for have, layer in zip(section.layers, layers, strict=True)
        )
        is_off = (stack != stack[:1]) | (np.abs(mesh.offset[own] - section.offset) > SAME) | (not same_plies)
        if is_off.any():
            wrong[own] |= is_off
            texts.append(section.elements)
        if same_plies:
            # One direction serves every layer of the same orientation and angle.
            for orientation, turned in dict.fromkeys(
                (have[2], layer.angle) for have, layer in zip(section.layers, layers, strict=True)
            ):
                first.append(deck.orientations[orientation][:3])
                angle.append(turned)
                of_elements.append(own)
    wrong |= (covered != 1) & (mesh.stack >= 0)
    beyond = np.flatnonzero(wrong)
    sections = Finding(
        CHECK,
        f"sections of {counted(len(beyond), 'element')} have other plies, thicknesses or offset than the tables",
        f"fail {SAME:g} of the value",
        SOURCE,
        verdict_of(fails=len(beyond)),
        f"{listed(texts, most=3)}; {span_of(mesh, beyond)}" if len(beyond) else "",
        beyond,
    )
    return [sections, _materials(built, deck, names), _directions(built, geometry, first, angle, of_elements)]


def _materials(built: BuiltMesh, deck: _Deck, names: dict[str, str]) -> Finding:
    known: dict[str, Material] = {layer.material.name: layer.material for s in built.mesh.stacks for layer in s.layers}
    return compare_materials(
        CHECK,
        {name: deck.materials.get(deck_name, []) for name, deck_name in names.items()},
        {name: [*(getattr(known[name], constant) for constant in _CONSTANTS), known[name].density] for name in names},
    )


def _directions(
    built: BuiltMesh, geometry: DeckGeometry, first: list[Floats], angle: list[float], of_elements: list[Ints]
) -> Finding:
    """Each orientation's first axis, laid on its elements as a solver does, against e1 turned by the ply's angle."""
    mesh = built.mesh
    in_deck = find_numbers(geometry.element_number, mesh.element_number)
    normal = element_axes(geometry.points, geometry.positions())[2][np.maximum(in_deck, 0)]
    element = np.concatenate(of_elements) if of_elements else np.zeros(0, dtype=np.int64)
    times = [len(own) for own in of_elements]
    vector = np.repeat(np.array(first).reshape(-1, 3), times, axis=0)
    turned = np.repeat(np.array(angle), times)[:, None]
    wanted = np.cos(turned) * mesh.e1[element] + np.sin(turned) * mesh.e2[element]
    return compare_directions(CHECK, mesh, element, have=vector, wanted=wanted, normal=normal[element])
