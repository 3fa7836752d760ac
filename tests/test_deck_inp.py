"""The keyword deck, read back line by line, and run as it is."""

from __future__ import annotations

from dataclasses import replace
from math import radians

import numpy as np
import pytest
from sample_meshes import BALSA, GLASS_UD, box_with_web, numbered_box, sandwich, tube
from solver_runs import needs_ccx, read_keyword_deck, run_solver, solve_deck, twisted_tube

from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.shellmesh import NO_STACK
from skinmesh.write.deck_text import deck_layers, element_groups
from skinmesh.write.formats.inp import node_allowance, plan_sections, write_inp
from skinmesh.write.ply_directions import share_directions
from skinmesh.write.registry import FORMATS

ANGLED = (
    Layer("a", GLASS_UD, 0.001, radians(45)),
    Layer("b", GLASS_UD, 0.001, radians(-45)),
    Layer("c", GLASS_UD, 0.001, radians(90)),
    Layer("d", GLASS_UD, 0.001, radians(12.5)),
    Layer("e", BALSA, 0.004, 0.0),
)


def deck_of(mesh, tmp_path):
    path = tmp_path / "deck.inp"
    write_inp(mesh, path)
    return read_keyword_deck(path.read_text(encoding="ascii"))


def centre_frames(deck):
    """Normals at the middle of the deck's elements, straight from its text."""
    corners = np.array([[deck.nodes[node] for node in element] for element in deck.elements.values()])
    x = np.moveaxis(corners, 1, 0)
    if deck.element_type == "S8R":
        normal = np.cross(x[5] - x[7], x[6] - x[4])
    else:
        normal = np.cross(x[1] - x[0] + 4 * (x[4] - x[5]), x[2] - x[0] + 4 * (x[4] - x[3]))
    return normal / np.linalg.norm(normal, axis=1, keepdims=True)


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_every_ply_of_every_element_points_where_it_should(tmp_path, shape, order):
    mesh = twisted_tube(48, 24, layers=ANGLED, shape=shape, order=order, n_bands=2)
    deck = deck_of(mesh, tmp_path)
    normals = centre_frames(deck)
    row = {number: k for k, number in enumerate(deck.elements)}
    seen = np.zeros(len(mesh.cells), dtype=int)
    for name, _, layers in deck.sections:
        elements = np.array([row[number] for number in deck.element_sets[name]])
        seen[elements] += 1
        listed = mesh.stacks[mesh.stack[elements[0]]].layers[::-1]
        assert np.all(mesh.stack[elements] == mesh.stack[elements[0]])
        for (thickness, material, orientation), layer in zip(layers, listed, strict=True):
            assert thickness == pytest.approx(layer.thickness, rel=1e-9)
            assert material == {"glass UD": "GLASS_UD", "balsa": "BALSA"}[layer.material.name]
            first = deck.orientations[orientation][:3]
            n = normals[elements]
            laid = first - (n @ first)[:, None] * n
            laid /= np.linalg.norm(laid, axis=1, keepdims=True)
            wanted = np.cos(layer.angle) * mesh.e1[elements] + np.sin(layer.angle) * mesh.e2[elements]
            if order == 1:
                # e1 lies in the plane of the corners, the deck's element is curved: compare within its plane.
                wanted = wanted - np.einsum("ij,ij->i", wanted, n)[:, None] * n
                wanted /= np.linalg.norm(wanted, axis=1, keepdims=True)
            off = np.degrees(np.linalg.norm(np.cross(laid, wanted), axis=1))
            assert np.all(np.einsum("ij,ij->i", laid, wanted) > 0)
            assert off.max() < 0.01
    assert np.all(seen == 1)


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_nodes_elements_and_sets_come_back(tmp_path, shape, order):
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich()[:2], shape=shape, order=order)
    mesh = replace(
        mesh,
        node_number=mesh.node_number * 3 + 10,
        element_number=mesh.element_number * 2 + 7,
        element_sets={"thick laminate": np.array([0, 5])},
    )
    deck = deck_of(mesh, tmp_path)
    assert deck.element_type == {"quad": "S8R", "triangle": "S6"}[shape]
    assert list(deck.nodes) == mesh.node_number.tolist()
    assert np.array(list(deck.nodes.values())) == pytest.approx(mesh.points, rel=1e-13, abs=1e-15)
    assert list(deck.elements) == mesh.element_number.tolist()
    assert np.array_equal(list(deck.elements.values()), mesh.node_number[mesh.cells])
    for name, nodes in mesh.node_sets.items():
        assert deck.node_sets[name.upper().replace(" ", "_")] == mesh.node_number[nodes].tolist()
    for name, elements in element_groups(mesh).items():
        assert deck.element_sets[name.upper().replace(" ", "_")] == mesh.element_number[elements].tolist()
    assert deck.element_sets["THICK_LAMINATE"] == [9, 19]
    assert any("mid nodes were added" in comment for comment in deck.comments) == (order == 1)
    assert {offset for _, offset, _ in deck.sections} == {0.0, 0.5}
    for name, offset, _ in deck.sections:
        numbers = np.array(deck.element_sets[name])
        assert np.all(mesh.offset[(numbers - 9) // 2] == offset)


def test_materials_have_nine_constants_and_density(tmp_path):
    deck = deck_of(tube(8, 2, layers=sandwich()), tmp_path)
    glass = GLASS_UD
    assert deck.elastic["GLASS_UD"] == [
        *(glass.E1, glass.E2, glass.E3, glass.nu12, glass.nu13, glass.nu23, glass.G12, glass.G13, glass.G23),
    ]
    assert deck.density == {"GLASS_UD": 1920.0, "BALSA": 110.0}


def test_without_plies_there_are_sets_and_no_sections(tmp_path):
    deck = deck_of(tube(8, 2), tmp_path)
    assert set(deck.keywords) == {"HEADING", "NODE", "ELEMENT", "NSET", "ELSET", "BOUNDARY"}
    assert any("no plies" in comment for comment in deck.comments)
    assert len(deck.element_sets["SUCTION_PANEL"]) == 8


def test_bare_elements_are_named_and_stop_no_solver(tmp_path):
    mesh = tube(8, 2, layers=sandwich())
    stack = mesh.stack.copy()
    stack[3] = NO_STACK
    deck = deck_of(replace(mesh, stack=stack), tmp_path)
    assert deck.element_sets["WITHOUT_PLIES"] == [4]
    assert any("1 elements carry no ply" in comment for comment in deck.comments)
    assert "STEP" not in deck.keywords
    assert sum(len(deck.element_sets[name]) for name, _, _ in deck.sections) == 15


def test_same_mesh_same_bytes_and_the_mesh_is_left_alone(tmp_path):
    mesh = twisted_tube(24, 8, layers=ANGLED)
    before = [mesh.points.copy(), mesh.cells.copy(), mesh.e1.copy(), dict(mesh.node_sets)]
    for name in ("one", "two"):
        FORMATS["inp"].write(mesh, tmp_path / name)
    assert (tmp_path / "one").read_bytes() == (tmp_path / "two").read_bytes()
    assert all(np.array_equal(a, b) for a, b in zip(before[:3], [mesh.points, mesh.cells, mesh.e1], strict=True))
    assert before[3] == dict(mesh.node_sets)


def test_section_cards_cover_each_layered_element_once():
    mesh = twisted_tube(24, 12, layers=ANGLED, n_bands=3)
    sections = plan_sections(mesh, share_directions(mesh, deck_layers(mesh)))
    assert sorted(np.concatenate([section.elements for section in sections])) == list(range(len(mesh.cells)))
    assert all(np.all(mesh.stack[section.elements] == section.stack) for section in sections)


@pytest.mark.solver
@needs_ccx
def test_hostile_names_and_strange_numbers_run(tmp_path):
    mesh = numbered_box()
    run = run_solver(mesh, tmp_path)
    assert "WARNING" not in run.log.upper()
    assert "ERROR" not in run.log.upper()
    assert run.mass == pytest.approx(
        3.0 * (2.4 * mesh.stacks[0].areal_mass + 0.4 * mesh.stacks[1].areal_mass), rel=1e-5
    )
    deck = read_keyword_deck((tmp_path / "deck.inp").read_text(encoding="ascii"))
    assert [set(deck.element_sets[name]) for name in ("GURTEL_AUSSEN", "SCRIPT_ALERT_X_SCRIPT", "N_1_2_MORE")] == [
        set(mesh.element_number[mesh.region == k].tolist()) for k in range(3)
    ]


def many_layers(n_layers: int) -> tuple[Layer, ...]:
    return tuple(Layer(f"p{k}", GLASS_UD, 0.0001, radians(10 * (-1) ** k)) for k in range(n_layers))


def uneven(n_layers: int):
    """One element of many layers among 192 of two."""
    mesh = tube(24, 8, layers=many_layers(2))
    stack = np.zeros(len(mesh.cells), dtype=int)
    stack[100] = 1
    return replace(mesh, stacks=(*mesh.stacks, Stack(many_layers(n_layers))), stack=stack)


def test_allowance_is_left_alone_where_it_is_enough():
    mesh = twisted_tube(24, 12, layers=ANGLED, n_bands=3)
    layers = deck_layers(mesh)
    allowance = node_allowance(mesh, plan_sections(mesh, share_directions(mesh, layers)), layers)
    assert allowance.needed < allowance.given
    assert set(allowance.copies) == {0}


@pytest.mark.solver
@needs_ccx
@pytest.mark.parametrize("n_layers", [12, 40, 80])
def test_repeated_cards_cure_a_jump_in_layers(tmp_path, n_layers):
    mesh = uneven(n_layers)
    path = tmp_path / "deck.inp"
    write_inp(mesh, path)
    text = path.read_text()
    assert "section card" in text
    assert "increase nk_" in text
    good = solve_deck(path)
    assert "ERROR" not in good.log.upper()
    assert good.mass > 0

    # The same deck with each card once is what the solver refuses.
    head, *cards = text.split("** stack ")
    once = []
    for card in cards:
        title, *repeats = card.split("*SHELL SECTION")
        tail = repeats[-1].partition("**")[2]
        once.append(title + "*SHELL SECTION" + repeats[0].partition("**")[0] + (f"**{tail}" if tail else ""))
    bare = tmp_path / "bare.inp"
    bare.write_text("** stack ".join([head, *once]))
    assert read_keyword_deck(bare.read_text()).keywords.count("SHELL SECTION") < text.count("*SHELL SECTION")
    assert "increase nk_" in solve_deck(bare).log


@pytest.mark.solver
@needs_ccx
@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("shape", ["quad", "triangle"])
def test_the_deck_runs_as_it_is(tmp_path, shape, order):
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich()[:2], shape=shape, order=order)
    run = run_solver(mesh, tmp_path)
    assert "WARNING" not in run.log.upper()
    assert "ERROR" not in run.log.upper()
    assert run.displacements("TIP")[:, 1].max() < 0
    skin, web = 3.0 * 2.4 * mesh.stacks[0].areal_mass, 3.0 * 0.4 * mesh.stacks[1].areal_mass
    if shape == "quad":
        assert run.mass == pytest.approx(skin + web, rel=1e-5)
        assert run.block("center of gravity for set ALL")[0, 2] == pytest.approx(1.5, rel=1e-5)
    else:
        # CalculiX 2.20 prints no mass of layered triangles. Weight on clamped nodes is left out of the reaction: the
        # root nodes of a row of n elements take 1/6 of its first row, and the solver's own lumping no more than that.
        assert run.mass == 0.0
        weight = run.block("total force (fx,fy,fz) for set ROOT")[0, 0]
        assert 1 - 1 / 30 < weight / (9.81 * (skin + web)) < 1.0
