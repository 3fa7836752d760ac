"""Bulk data, read back field by field."""

from __future__ import annotations

import re
from collections import defaultdict
from dataclasses import replace
from math import radians

import numpy as np
import pytest
from sample_meshes import BALSA, GLASS_UD, box_with_web, sandwich, tube
from solver_runs import twisted_tube

from skinmesh.laminate.stack import Layer
from skinmesh.mesh.shellmesh import NO_STACK
from skinmesh.write.deck_text import element_groups
from skinmesh.write.formats.bdf import write_bdf
from skinmesh.write.registry import FORMATS

CARD = {("quad", 1): "CQUAD4", ("quad", 2): "CQUAD8", ("triangle", 1): "CTRIA3", ("triangle", 2): "CTRIA6"}


def real(text: str) -> float:
    assert "." in text, f"{text!r} is no real number in bulk data"
    return float(re.sub(r"(?<=[0-9.])([+-])", r"e\1", text.strip()))


def bulk_cards(text: str) -> dict[str, list[list[str]]]:
    """Fields of every card, without card name and continuation marks."""
    cards: dict[str, list[list[str]]] = defaultdict(list)
    lines = [line for line in text.split("BEGIN BULK\n")[1].splitlines() if not line.startswith("$")]
    assert lines.pop() == "ENDDATA"
    card: list[str] = []
    mark = ""
    for line in lines:
        assert len(line) <= 80
        head = line[:8].strip()
        width = 16 if "*" in head else 8
        fields = [line[k : k + width].strip() for k in range(8, 72, width)]
        if head.startswith(("*", "+")):
            assert head == mark or (head == "+" and not mark)
            card += fields
        else:
            card = fields
            cards[head.rstrip("*")].append(card)
        mark = line[72:].strip()
    return cards


def case_sets(text: str) -> dict[str, list[int]]:
    """Members of the SET cards by the deck name in the comment above."""
    result: dict[str, list[int]] = {}
    case = text.split("BEGIN BULK\n")[0]
    for name, body in re.findall(r"\$ (?:node|element) set (\S+): [^\n]*\nSET \d+ = ((?:[^\n]*,\n)*[^\n]*)\n", case):
        members: list[int] = []
        for part in body.replace("\n", " ").split(","):
            first, _, last = part.partition("THRU")
            members += range(int(first), int(last or first) + 1)
        result[name] = members
    assert all(len(line) <= 72 for line in case.splitlines())
    return result


def text_of(mesh, tmp_path) -> str:
    path = tmp_path / "deck.bdf"
    write_bdf(mesh, path)
    return path.read_text(encoding="ascii")


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_e1_of_every_element_comes_back_from_the_text(tmp_path, shape, order):
    mesh = twisted_tube(64, 120, layers=sandwich(), shape=shape, order=order)
    cards = bulk_cards(text_of(mesh, tmp_path))
    node = {int(card[0]): np.array([real(field) for field in card[2:5]]) for card in cards["GRID"]}
    angle_field = {"CQUAD4": 6, "CTRIA3": 5, "CQUAD8": 14, "CTRIA6": 8}[CARD[shape, order]]
    n_sides = 4 if shape == "quad" else 3
    worst = 0.0
    for card, e1 in zip(cards[CARD[shape, order]], mesh.e1, strict=True):
        corner = [node[int(number)] for number in card[2 : 2 + n_sides]]
        across = corner[3] - corner[1] if n_sides == 4 else corner[2] - corner[1]
        normal = np.cross(corner[2] - corner[0], across)
        normal = normal / np.linalg.norm(normal)
        side = corner[1] - corner[0]
        side = side - side @ normal * normal
        side /= np.linalg.norm(side)
        theta = radians(real(card[angle_field]))
        found = np.cos(theta) * side + np.sin(theta) * np.cross(normal, side)
        # The deck's plane is that of the corners; e1 of a curved element leans out of it and is compared within it.
        flat = e1 - e1 @ normal * normal
        assert np.linalg.norm(flat) > 0.999
        worst = max(worst, np.degrees(np.arccos(min(1.0, found @ flat / np.linalg.norm(flat)))))
    assert worst < 0.01


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_nodes_elements_sets_and_offsets_come_back(tmp_path, shape, order):
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich()[:2], shape=shape, order=order)
    mesh = replace(mesh, node_number=mesh.node_number * 3 + 10, element_number=mesh.element_number * 2 + 7)
    text = text_of(mesh, tmp_path)
    cards = bulk_cards(text)
    numbers = mesh.node_number[: mesh.n_nodes]
    assert [int(card[0]) for card in cards["GRID"]] == numbers.tolist()
    found = np.array([[real(field) for field in card[2:5]] for card in cards["GRID"]])
    assert found == pytest.approx(mesh.nodes, abs=1e-12)
    elements = cards[CARD[shape, order]]
    n_nodes = mesh.connectivity.shape[1]
    assert [int(card[0]) for card in elements] == mesh.element_number.tolist()
    assert [int(card[1]) for card in elements] == (mesh.stack + 1).tolist()
    assert np.array_equal([[int(f) for f in card[2 : 2 + n_nodes]] for card in elements], numbers[mesh.connectivity])
    place = {3: 6, 4: 7, 6: 9, 8: 15}[n_nodes]
    offset = np.array([real(card[place]) if card[place] else 0.0 for card in elements])
    assert offset == pytest.approx(np.where(mesh.region == 2, 0.0, -0.0045))
    sets = case_sets(text)
    for name in mesh.node_sets:
        assert sets[name.upper().replace(" ", "_")] == mesh.node_number[mesh.node_set(name)].tolist()
    for name, members in element_groups(mesh).items():
        assert sets[name.upper().replace(" ", "_")] == mesh.element_number[members].tolist()
    clamped = [int(field) for card in cards["SPC1"] for field in card[2:] if field]
    assert clamped == mesh.node_number[mesh.node_set("root")].tolist()
    assert {tuple(card[:2]) for card in cards["SPC1"]} == {("1", "123456")}


def test_properties_and_materials_come_back(tmp_path):
    mesh = tube(8, 4, layers=sandwich(), n_bands=2)
    cards = bulk_cards(text_of(mesh, tmp_path))
    assert len(cards["PCOMP"]) == 2
    names = {1: BALSA, 2: GLASS_UD}
    for card in cards["MAT8"]:
        material = names[int(card[0])]
        values = (material.E1, material.E2, material.nu12, material.G12, material.G13, material.G23, material.density)
        assert [real(field) for field in card[1:8]] == list(values)
    for card, stack in zip(cards["PCOMP"], mesh.stacks, strict=True):
        assert card[1:8] == [""] * 7
        plies = [card[k : k + 4] for k in range(8, len(card), 4) if card[k]]
        for (material, thickness, angle, output), layer in zip(plies, stack.layers[::-1], strict=True):
            assert names[int(material)] == layer.material
            assert real(thickness) == pytest.approx(layer.thickness, rel=1e-12)
            assert real(angle) == pytest.approx(layer.angle_degrees, abs=1e-9)
            assert output == "YES"


def test_continuation_marks_are_all_different(tmp_path):
    layers = tuple(Layer(f"p{k}", GLASS_UD, 1e-4, radians(k)) for k in range(80))
    mesh = tube(8, 4, layers=layers, n_bands=4, order=1)
    marks = [line[72:].strip() for line in text_of(mesh, tmp_path).split("BEGIN BULK\n")[1].splitlines()]
    marks = [mark for mark in marks if mark]
    assert len(marks) == len(set(marks)) > 200
    assert all(len(mark) <= 8 for mark in marks)


def test_without_plies(tmp_path):
    text = text_of(tube(8, 2), tmp_path)
    cards = bulk_cards(text)
    assert set(cards) == {"PARAM", "GRID", "CQUAD8", "SPC1"}
    assert "has no plies" in text
    assert {card[1] for card in cards["CQUAD8"]} == {"1", "2"}
    assert "$ region 2: pressure panel" in text


def test_bare_elements_are_named(tmp_path):
    mesh = tube(8, 2, layers=sandwich(), order=1)
    stack = mesh.stack.copy()
    stack[3] = NO_STACK
    text = text_of(replace(mesh, stack=stack), tmp_path)
    assert bulk_cards(text)["CQUAD4"][3][1] == "2"
    assert "1 elements carry no ply" in text
    assert case_sets(text)["WITHOUT_PLIES"] == [4]


def test_same_mesh_same_bytes(tmp_path):
    mesh = twisted_tube(24, 8, layers=sandwich(), order=1)
    for name in ("one", "two"):
        FORMATS["bdf"].write(mesh, tmp_path / name)
    assert (tmp_path / "one").read_bytes() == (tmp_path / "two").read_bytes()


def test_large_blades_keep_ten_digits(tmp_path):
    mesh = tube(8, 4, layers=sandwich(), radius=3.0, length=120.0)
    cards = bulk_cards(text_of(mesh, tmp_path))
    found = np.array([[real(field) for field in card[2:5]] for card in cards["GRID"]])
    assert found == pytest.approx(mesh.nodes, abs=1e-11)
