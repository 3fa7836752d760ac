"""Lamination theory against tensor algebra and a second program; laminate codes against a reader of their own."""

from __future__ import annotations

import re
from itertools import groupby
from math import cos, radians, sin

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from sample_meshes import BALSA, GLASS_UD, sandwich

from skinmesh.laminate.code import laminate_codes
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.laminate.theory import (
    engineering_constants,
    laminate_stiffness,
    mass_moments,
    reduced_stiffness,
    stiffness_invariants,
    tabulate_layers,
    turned_stiffness,
)

angles = st.sampled_from([-60.0, -45.0, -30.0, 0.0, 12.5, 30.0, 45.0, 60.0, 90.0])
layers = st.builds(
    lambda material, thickness, angle: Layer("ply", material, thickness, radians(angle)),
    st.sampled_from([GLASS_UD, BALSA]),
    st.sampled_from([0.0004, 0.001, 0.0125]),
    angles,
)
stacks = st.builds(lambda found: Stack(tuple(found)), st.lists(layers, min_size=1, max_size=9))


def of_angles(*degrees: float, material: Material = GLASS_UD, thickness: float = 0.001) -> Stack:
    return Stack(tuple(Layer("ply", material, thickness, radians(angle)) for angle in degrees))


@given(angle=st.floats(-7, 7))
def test_a_turned_ply_obeys_the_tensor_law(angle: float) -> None:
    """C'_ijkl = a_ip a_jq a_kr a_ls C_pqrs, without any of the engineer's shortcuts."""
    q = reduced_stiffness([GLASS_UD])[0]
    voigt = np.array([[0, 2], [2, 1]])
    tensor = q[voigt[:, :, None, None], voigt[None, None, :, :]]
    turn = np.array([[cos(angle), -sin(angle)], [sin(angle), cos(angle)]])
    turned = np.einsum("ip,jq,kr,ls,pqrs->ijkl", turn, turn, turn, turn, tensor)
    pairs = [(0, 0), (1, 1), (0, 1)]
    expected = [[turned[i, j, k, m] for k, m in pairs] for i, j in pairs]
    assert_allclose(turned_stiffness(q, angle), expected, rtol=1e-9, atol=1e-6 * q[0, 0])


def test_invariants_do_not_change_when_the_ply_turns() -> None:
    q = reduced_stiffness([GLASS_UD, BALSA])
    turned = turned_stiffness(q[:, None], np.linspace(-3, 3, 17))
    traces = turned[..., 0, 0] + turned[..., 1, 1] + 2 * turned[..., 0, 1]
    shears = turned[..., 2, 2] - turned[..., 0, 1]
    u = stiffness_invariants(q)
    assert_allclose(traces, np.broadcast_to(2 * (u[:, :1] + u[:, 3:4]), traces.shape))
    assert_allclose(shears, np.broadcast_to(u[:, 4:] - u[:, 3:4], shears.shape))


@given(found=st.lists(stacks, min_size=1, max_size=4))
def test_many_stacks_at_once_are_as_one_by_one(found: list[Stack]) -> None:
    """Each stack on its own, by a plain loop over its plies from the +e3 face."""
    stiffness, moments = laminate_stiffness(found), mass_moments(found)
    for k, stack in enumerate(found):
        face = stack.thickness / 2
        A, B, D, mass = np.zeros((3, 3)), np.zeros((3, 3)), np.zeros((3, 3)), np.zeros(3)
        for layer in stack.layers:
            top, bottom = face, face - layer.thickness
            q = turned_stiffness(reduced_stiffness([layer.material])[0], layer.angle)
            A, B, D = A + q * (top - bottom), B + q * (top**2 - bottom**2) / 2, D + q * (top**3 - bottom**3) / 3
            powers = np.array([top - bottom, (top**2 - bottom**2) / 2, (top**3 - bottom**3) / 3])
            mass = mass + layer.material.density * powers
            face = bottom
        h, size = stack.thickness, np.abs(A).max()
        assert stiffness.thickness[k] == pytest.approx(h)
        assert_allclose(stiffness.A[k], A, rtol=1e-12, atol=1e-12 * size)
        assert_allclose(stiffness.B[k], B, atol=1e-11 * size * h)
        assert_allclose(stiffness.D[k], D, rtol=1e-10, atol=1e-11 * size * h**2)
        assert_allclose(moments[k], mass, rtol=1e-10, atol=1e-11 * mass[0] * h)


@given(stack=stacks)
def test_turning_a_stack_over_changes_the_sign_of_coupling_alone(stack: Stack) -> None:
    over = laminate_stiffness([stack, Stack(stack.layers[::-1])])
    size = np.abs(over.A).max()
    assert_allclose(over.A[1], over.A[0], rtol=1e-10, atol=1e-12 * size)
    assert_allclose(over.B[1], -over.B[0], atol=1e-10 * size * stack.thickness)
    assert_allclose(over.D[1], over.D[0], rtol=1e-8, atol=1e-10 * size * stack.thickness**2)


@given(stack=stacks)
def test_stiffness_is_positive_definite(stack: Stack) -> None:
    found = laminate_stiffness([stack])
    h = stack.thickness
    whole = np.block([[found.A[0] * h**2, found.B[0] * h], [found.B[0] * h, found.D[0]]])
    assert np.linalg.eigvalsh(whole).min() > 0


def test_a_dense_layer_at_the_outer_face_raises_the_mass_centre() -> None:
    heavy_outside = Stack((Layer("face", GLASS_UD, 0.001, 0.0), Layer("core", BALSA, 0.02, 0.0)))
    mass, first, _ = mass_moments([heavy_outside])[0]
    assert mass == pytest.approx(heavy_outside.areal_mass)
    assert first / mass == pytest.approx((1.92 * 0.01 + 2.2 * -0.0005) / 4.12)


def test_no_stacks_at_all() -> None:
    assert tabulate_layers([]).n_stacks == 0
    assert laminate_stiffness([]).A.shape == (0, 3, 3)
    assert laminate_codes([]).codes == ()


@given(stack=stacks)
def test_a_second_program_finds_the_same_stiffness(stack: Stack) -> None:
    """The package 'composites'; its stacks run from the bottom to the top, so ours go in reversed."""
    composites = pytest.importorskip("composites", reason="the second opinion on laminates is not installed")
    upwards = stack.layers[::-1]
    second = composites.laminated_plate(
        stack=[layer.angle_degrees for layer in upwards],
        plyts=[layer.thickness for layer in upwards],
        laminaprops=[(m.E1, m.E2, m.nu12, m.G12, m.G13, m.G23) for m in (layer.material for layer in upwards)],
    )
    own = laminate_stiffness([stack])
    size, h = np.abs(own.A).max(), stack.thickness
    assert_allclose(own.A[0], second.A, rtol=1e-9, atol=1e-10 * size)
    assert_allclose(own.B[0], second.B, rtol=1e-9, atol=1e-10 * size * h)
    assert_allclose(own.D[0], second.D, rtol=1e-9, atol=1e-10 * size * h**2)


def test_constants_of_a_single_ply_are_those_of_its_material() -> None:
    found = engineering_constants(laminate_stiffness([of_angles(0), of_angles(90)]))
    assert_allclose(found.E1, [GLASS_UD.E1, GLASS_UD.E2])
    assert_allclose(found.E2, [GLASS_UD.E2, GLASS_UD.E1])
    assert_allclose(found.G12, GLASS_UD.G12)
    assert_allclose(found.nu12, [GLASS_UD.nu12, GLASS_UD.nu12 * GLASS_UD.E2 / GLASS_UD.E1])


@pytest.mark.parametrize(
    ("degrees", "code"),
    [
        ((0,), "[0]"),
        ((0,) * 8, "[0]_8"),
        ((0, 90, 90, 0), "[0/90]_S"),
        ((0, 90, 0), "[0/bar(90)]_S"),
        ((45, -45, 0), "[±45/0]"),
        ((-45, 45, 0), "[∓45/0]"),
        ((45, -45, -45, 45), "[±45]_S"),
        ((45, -45, 45, -45), "[±45]_2"),
        ((0, 90) * 3, "[0/90]_3"),
        ((0, 90, 0, 90, 90, 0, 90, 0), "[0/90]_2S"),
        ((45, 0, 0, 0, 90), "[45/0_3/90]"),
        ((0, 45, -45, 45, -45, 90), "[0/(±45)_2/90]"),
        ((30, 30, -30, -30), "[30_2/-30_2]"),
        ((135, -90, 180), "[-45/90/0]"),
        ((22.5, -22.5, 7), "[±22.5/7]"),
        ((0, 90, 0, 90, 45, 0, 90, 0, 90, 45), "[(0/90)_2/45]_2"),
    ],
)
def test_codes_of_one_material(degrees: tuple[float, ...], code: str) -> None:
    assert laminate_codes([of_angles(*degrees)]).codes == (code,)


def test_letters_mean_the_same_in_all_stacks() -> None:
    thick = Layer("cap", GLASS_UD, 0.002, 0.0)
    written = laminate_codes([Stack((thick,)), Stack((thick, *sandwich()))])
    assert written.codes == ("[0]", "[0_A1/45_A2/0_A1/0_B/-45_A2]")
    assert written.legend == {"A1": "glass UD, 2 mm", "A2": "glass UD, 1 mm", "B": "balsa, 5 mm"}
    assert written.letters == (("A1",), ("A1", "A2", "A1", "B", "A2"))


def test_more_materials_than_letters() -> None:
    kinds = tuple(
        Layer("ply", Material(f"m{k}", *[1e9] * 3, *[0.3] * 3, *[1e9] * 3, 1e3), 0.001, 0.0) for k in range(27)
    )
    letters = laminate_codes([Stack(kinds)]).letters[0]
    assert len(set(letters)) == 27
    assert letters[0] == "A"
    assert letters[24:] == ("AA", "AB", "AC")
    assert not set("".join(letters)) & set("ST")


def read_code(code: str) -> list[tuple[str, str]]:
    """(angle, letter) of every ply of a code, by a reader that shares nothing with the writer."""
    tokens = re.findall(r"bar|_\w+|[±∓]|-?[\d.]+|[\[\]()/]", code)
    assert "".join(tokens) == code
    at = 0

    def items(closing: str) -> list[tuple[str, str]]:
        nonlocal at
        plies: list[tuple[str, str]] = []
        while tokens[at] != closing:
            if tokens[at] == "/":
                at += 1
            plies += item()
        at += 1
        return plies

    def item() -> list[tuple[str, str]]:
        nonlocal at
        token = tokens[at]
        at += 1
        if token == "bar":
            at += 1
            (ply,) = items(")")
            return [(*ply, "middle")]  # type: ignore[list-item]
        if token == "(":
            plies, (count, letter) = items(")"), subscript()
            assert letter == ""
            return plies * count
        if token in "±∓":
            angle, (count, letter) = tokens[at], pair_subscript()
            assert count == 1
            both = [(angle, letter), (f"-{angle}", letter)]
            return both if token == "±" else both[::-1]
        count, letter = subscript()
        return [(token, letter)] * count

    def pair_subscript() -> tuple[int, str]:
        nonlocal at
        at += 1
        return subscript()

    def subscript() -> tuple[int, str]:
        nonlocal at
        if at == len(tokens) or not tokens[at].startswith("_"):
            return 1, ""
        count, letter = re.fullmatch(r"_(\d*)([A-Z]*\d*)", tokens[at]).groups()
        at += 1
        return int(count or 1), letter

    at = 1
    plies = items("]")
    count, letter = subscript()
    assert at == len(tokens)
    assert letter in ("", "S")
    plies *= count
    if letter != "S":
        return plies
    half = [ply for ply in plies if len(ply) == 2]
    middle = [ply[:2] for ply in plies[len(half) :]]
    return half + middle + half[::-1]


@given(stack=st.one_of(stacks, st.builds(lambda s, k: Stack(s.layers * k + s.layers[::-1]), stacks, st.integers(1, 3))))
def test_a_code_reads_back_to_the_same_plies(stack: Stack) -> None:
    written = laminate_codes([stack])
    letters = written.letters[0] if len(set(written.letters[0])) > 1 else [""] * len(stack.layers)
    plies = [(f"{layer.angle_degrees:g}", letter) for layer, letter in zip(stack.layers, letters, strict=True)]
    assert read_code(written.codes[0]) == plies
    assert len(written.codes[0]) <= len("[]") + sum(len(angle) + len(letter) + len("_/()_2") for angle, letter in plies)


def test_a_long_spar_cap_has_a_short_code() -> None:
    face = [Layer("face", GLASS_UD, 0.0009, radians(45))]
    stack = Stack((*face, *[Layer("cap", GLASS_UD, 0.00085, 0.0)] * 57, *face))
    written = laminate_codes([stack])
    assert written.codes == ("[45_A1/0_28A2/bar(0_A2)]_S",)
    assert [len(list(same)) for _, same in groupby(written.letters[0])] == [1, 57, 1]
