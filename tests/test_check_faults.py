"""Deliberate faults in a built mesh: each is caught by the check meant for it, and by no other."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Mapping
from dataclasses import replace
from functools import cache
from pathlib import Path

import blades
import numpy as np
import pytest

from skinmesh.check.finding import FAIL, NOT_MADE, PASS, WARN
from skinmesh.check.run import check_directory
from skinmesh.check.spantable import element_rows
from skinmesh.definition.spanwise import constant
from skinmesh.laminate.stack import Stack
from skinmesh.mesh.build import build_mesh
from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.write.files import write

RANK = {NOT_MADE: -1, PASS: 0, WARN: 1, FAIL: 2}
FORMATS = ("vtu", "inp", "bdf")
FLIP = [0, 3, 2, 1, 7, 6, 5, 4]


@cache
def sound() -> ShellMesh:
    rule = blades.rule(0.24, across={"main cap": 6}, close_gap=0.012)
    return build_mesh(blades.demonstration(mesh=rule))


def verdicts(directory: Path) -> dict[str, str]:
    """Worst verdict of every check."""
    worst: dict[str, str] = {}
    for finding in check_directory(directory).findings:
        if RANK[finding.verdict] >= RANK[worst.get(finding.check, NOT_MADE)]:
            worst[finding.check] = finding.verdict
    return worst


@pytest.fixture(scope="module")
def sound_verdicts(tmp_path_factory: pytest.TempPathFactory) -> Mapping[str, str]:
    directory = tmp_path_factory.mktemp("sound")
    write(sound(), directory, formats=FORMATS)
    return verdicts(directory)


def caught(directory: Path, before: Mapping[str, str]) -> dict[str, str]:
    """Checks whose verdict is not that of the sound mesh."""
    after = verdicts(directory)
    assert after.keys() == before.keys()
    return {check: verdict for check, verdict in after.items() if verdict != before[check]}


def region_elements(mesh: ShellMesh, name: str) -> np.ndarray:
    number = [region.name for region in mesh.regions].index(name)
    return np.flatnonzero(mesh.region == number)


def middle_row(mesh: ShellMesh, name: str, z: float) -> np.ndarray:
    """Elements of a region on the element row that holds z."""
    row, ends = element_rows(mesh)
    wanted = np.searchsorted(ends, z, side="right") - 1
    own = region_elements(mesh, name)
    return own[row[own] == wanted]


def with_plies(mesh: ShellMesh, elements: np.ndarray, change: Callable[[Stack], Stack]) -> ShellMesh:
    """Give some elements changed stacks."""
    stacks, stack = list(mesh.stacks), mesh.stack.copy()
    for old in np.unique(mesh.stack[elements]):
        stacks.append(change(mesh.stacks[old]))
        stack[elements[mesh.stack[elements] == old]] = len(stacks) - 1
    return replace(mesh, stacks=tuple(stacks), stack=stack)


def without(ply: str) -> Callable[[Stack], Stack]:
    return lambda stack: Stack(tuple(layer for layer in stack.layers if layer.ply != ply))


def thicker(factor: float) -> Callable[[Stack], Stack]:
    def change(stack: Stack) -> Stack:
        return Stack(tuple(replace(layer, thickness=factor * layer.thickness) for layer in stack.layers))

    return change


def flipped_element() -> ShellMesh:
    mesh = sound()
    cells = mesh.cells.copy()
    chosen = middle_row(mesh, "suction trailing panel", 9.5)[2]
    cells[chosen] = cells[chosen][FLIP]
    return replace(mesh, cells=cells)


def flipped_with_its_axes() -> ShellMesh:
    mesh = flipped_element()
    chosen = middle_row(mesh, "suction trailing panel", 9.5)[2]
    e2, e3 = mesh.e2.copy(), mesh.e3.copy()
    e2[chosen], e3[chosen] = -e2[chosen], -e3[chosen]
    return replace(mesh, e2=e2, e3=e3)


def blade_inside_out() -> ShellMesh:
    mesh = sound()
    skin = np.array([region.kind != "web" for region in mesh.regions])[mesh.region]
    cells, e2, e3 = mesh.cells.copy(), mesh.e2.copy(), mesh.e3.copy()
    cells[skin] = cells[skin][:, FLIP]
    e2[skin], e3[skin] = -e2[skin], -e3[skin]
    return replace(mesh, cells=cells, e2=e2, e3=e3)


def web_that_faces_aft() -> ShellMesh:
    mesh = sound()
    own = region_elements(mesh, "fore web")
    cells, e2, e3 = mesh.cells.copy(), mesh.e2.copy(), mesh.e3.copy()
    cells[own] = cells[own][:, FLIP]
    e2[own], e3[own] = -e2[own], -e3[own]
    return replace(mesh, cells=cells, e2=e2, e3=e3)


def untied_web_foot() -> ShellMesh:
    """One corner node at the foot of a web is doubled: skin and web no longer share it."""
    mesh = sound()
    foot = mesh.node_sets["fore web suction foot"]
    foot = foot[foot < mesh.n_corners]
    node = foot[len(foot) // 2]
    new = mesh.n_corners
    cells = np.where(mesh.cells >= new, mesh.cells + 1, mesh.cells)
    web = region_elements(mesh, "fore web")
    cells[web] = np.where(cells[web] == node, new, cells[web])

    def insert(array: np.ndarray) -> np.ndarray:
        return np.insert(array, new, array[node], axis=0)

    return replace(
        mesh,
        points=insert(mesh.points),
        n_corners=new + 1,
        cells=cells,
        sheet=insert(mesh.sheet),
        row=insert(mesh.row),
        seam=insert(mesh.seam),
        node_sets={name: np.where(own >= new, own + 1, own) for name, own in mesh.node_sets.items()},
        node_number=np.arange(1, len(mesh.points) + 2),
    )


def torn_edge() -> ShellMesh:
    """Two elements that share the corners of an edge and not its mid node."""
    mesh = sound()
    chosen = middle_row(mesh, "pressure leading panel", 12.0)[1]
    cells = mesh.cells.copy()
    old = cells[chosen, 5]
    cells[chosen, 5] = len(mesh.points)

    def append(array: np.ndarray) -> np.ndarray:
        return np.concatenate([array, array[old : old + 1]])

    return replace(
        mesh,
        points=append(mesh.points),
        cells=cells,
        sheet=append(mesh.sheet),
        row=append(mesh.row),
        seam=append(mesh.seam),
        node_number=np.arange(1, len(mesh.points) + 2),
    )


def hole_in_the_skin() -> ShellMesh:
    mesh = sound()
    kept = np.delete(np.arange(len(mesh.cells)), middle_row(mesh, "suction trailing panel", 9.5)[2])
    arrays = ("cells", "region", "stack", "offset", "e1", "e2", "e3", "element_number")
    return replace(mesh, **{name: getattr(mesh, name)[kept] for name in arrays})


def reversed_stack() -> ShellMesh:
    mesh = sound()
    stacks = list(mesh.stacks)
    number = mesh.stack[middle_row(mesh, "suction main cap", 12.0)[0]]
    stacks[number] = Stack(stacks[number].layers[::-1])
    return replace(mesh, stacks=tuple(stacks))


def every_stack_reversed() -> ShellMesh:
    mesh = sound()
    return replace(mesh, stacks=tuple(Stack(stack.layers[::-1]) for stack in mesh.stacks))


def wrong_offset_sign() -> ShellMesh:
    return replace(sound(), offset=-sound().offset)


def offset_forgotten() -> ShellMesh:
    return replace(sound(), offset=0.0 * sound().offset)


def rotated_e1() -> ShellMesh:
    mesh = sound()
    chosen = middle_row(mesh, "suction main cap", 9.5)
    turn = np.radians(2.0)
    e1, e2 = mesh.e1.copy(), mesh.e2.copy()
    e1[chosen] = np.cos(turn) * mesh.e1[chosen] + np.sin(turn) * mesh.e2[chosen]
    e2[chosen] = np.cos(turn) * mesh.e2[chosen] - np.sin(turn) * mesh.e1[chosen]
    return replace(mesh, e1=e1, e2=e2)


def left_handed_axes() -> ShellMesh:
    mesh = sound()
    e2 = mesh.e2.copy()
    e2[77] = -e2[77]
    return replace(mesh, e2=e2)


def bare_element() -> ShellMesh:
    stack = sound().stack.copy()
    stack[middle_row(sound(), "suction leading panel", 9.5)[1]] = NO_STACK
    return replace(sound(), stack=stack)


def missing_ply() -> ShellMesh:
    return with_plies(sound(), middle_row(sound(), "suction leading panel", 9.5), without("inner skin"))


def missing_ply_on_one_element() -> ShellMesh:
    return with_plies(sound(), middle_row(sound(), "suction leading panel", 9.5)[1:2], without("inner skin"))


def doubled_ply() -> ShellMesh:
    """The inner skin lies on the inner face and once more on the outer one."""
    return with_plies(
        sound(),
        middle_row(sound(), "suction leading panel", 9.5),
        lambda stack: Stack((stack.layers[-1], *stack.layers)),
    )


def thicker_than_the_nose() -> ShellMesh:
    mesh = sound()
    strips = np.concatenate([region_elements(mesh, f"{side} leading strip") for side in ("suction", "pressure")])
    z = mesh.points[mesh.cells[strips, :4], 2].min(axis=1)
    return with_plies(mesh, strips[z > 22.0], thicker(8.0))


def overlap_at_the_trailing_edge() -> ShellMesh:
    mesh = sound()
    panels = np.concatenate([region_elements(mesh, f"{side} trailing panel") for side in ("suction", "pressure")])
    z = mesh.points[mesh.cells[panels, :4], 2].min(axis=1)
    return with_plies(mesh, panels[z > 18.2], thicker(9.0))


def sliver() -> ShellMesh:
    """A node in the middle of a web is moved almost onto its neighbour."""
    mesh = sound()
    chosen = middle_row(mesh, "fore web", 12.0)
    element = chosen[len(chosen) // 2]
    node, neighbour = mesh.cells[element, 2], mesh.cells[element, 1]
    points = mesh.points.copy()
    points[node] += 0.95 * (points[neighbour] - points[node])
    around = np.flatnonzero(np.any(mesh.cells[:, :4] == node, axis=1))
    corners = mesh.cells[around, :4]
    points[mesh.cells[around, 4:]] = 0.5 * (points[corners] + points[np.roll(corners, -1, axis=1)])
    e1, e2, e3 = element_axes(points, mesh.cells)
    return replace(mesh, points=points, e1=e1, e2=e2, e3=e3)


FAULTS = {
    flipped_element: {"normals": FAIL},
    flipped_with_its_axes: {"normals": FAIL},
    # The laminate then really lies outside of the skin, where it folds at the edges of the trailing base.
    blade_inside_out: {"normals": FAIL, "inner face": FAIL},
    web_that_faces_aft: {"normals": FAIL},
    untied_web_foot: {"joints": FAIL},
    torn_edge: {"joints": FAIL},
    hole_in_the_skin: {"joints": FAIL},
    reversed_stack: {"ply order": FAIL},
    every_stack_reversed: {"ply order": FAIL},
    wrong_offset_sign: {"offset": FAIL},
    offset_forgotten: {"offset": FAIL},
    rotated_e1: {"axes": FAIL},
    left_handed_axes: {"axes": FAIL},
    bare_element: {"coverage": FAIL},
    missing_ply: {"missing plies": FAIL},
    missing_ply_on_one_element: {"stacks across regions": FAIL},
    doubled_ply: {"doubled plies": FAIL},
    thicker_than_the_nose: {"inner face": FAIL},
    overlap_at_the_trailing_edge: {"trailing-edge overlap": FAIL},
    sliver: {"element quality": FAIL},
}


def test_the_sound_mesh_fails_nowhere(sound_verdicts: Mapping[str, str]) -> None:
    assert FAIL not in sound_verdicts.values()
    judged = {check for check, verdict in sound_verdicts.items() if verdict in (PASS, WARN)}
    assert judged == sound_verdicts.keys() - {"inputs"}
    for checks in FAULTS.values():
        assert sound_verdicts.keys() >= checks.keys()


@pytest.mark.parametrize("fault", FAULTS, ids=lambda fault: fault.__name__)
def test_a_fault_is_caught_by_its_own_check_alone(
    tmp_path: Path, sound_verdicts: Mapping[str, str], fault: Callable[[], ShellMesh]
) -> None:
    write(fault(), tmp_path, formats=FORMATS)
    assert caught(tmp_path, sound_verdicts) == FAULTS[fault]


def edit_keyword_node(text: str) -> str:
    """One digit of one coordinate."""
    head, mark, tail = text.partition("*NODE,NSET=ALL\n")
    lines = tail.split("\n", 101)
    number, x, y, z = lines[100].split(",")
    lines[100] = f"{number},{x},{float(y) + 1e-6:.14g},{z}"
    return head + mark + "\n".join(lines)


def swap_element_nodes(text: str) -> str:
    head, mark, tail = text.partition("*ELEMENT,TYPE=S8R,ELSET=ALL\n")
    first, rest = tail.split("\n", 1)
    number, a, b, *others = first.split(",")
    return head + mark + ",".join([number, b, a, *others]) + "\n" + rest


def edit_pcomp_thickness(text: str) -> str:
    at = text.index("PCOMP*")
    line = text.index("\n", text.index("\n", at) + 1) + 1
    return text[: line + 24] + f"{'0.00123':>16}" + text[line + 40 :]


def edit_theta(text: str) -> str:
    lines = text.split("\n")
    at = next(i for i, line in enumerate(lines) if line.startswith("CQUAD8")) + 1
    lines[at] = lines[at][:56] + f"{float(lines[at][56:64]) + 0.02:8.3f}" + lines[at][64:]
    return "\n".join(lines)


def edit_zoffs(text: str) -> str:
    """The sign of one offset."""
    lines = text.split("\n")
    at = next(i for i, line in enumerate(lines) if line.startswith("CQUAD8")) + 1
    assert lines[at][64:72].strip().startswith("-")
    lines[at] = lines[at][:64] + f"{lines[at][64:72].strip()[1:]:>8}" + lines[at][72:]
    return "\n".join(lines)


def edit_bulk_node(text: str) -> str:
    lines = text.split("\n")
    at = next(i for i, line in enumerate(lines) if line.startswith("GRID*")) + 400
    assert lines[at].startswith("GRID*")
    lines[at] = lines[at][:40] + f"{float(lines[at][40:56]) + 1e-6:16.10f}" + lines[at][56:]
    return "\n".join(lines)


def edit_msh_node(data: bytes) -> bytes:
    """The last bits of a coordinate, a binary number that occurs once."""
    mesh = sound()
    values = mesh.nodes[:, 0]
    found = next(k for k in range(1000, len(values)) if data.count(values[k].tobytes()) == 1)
    return data.replace(values[found].tobytes(), (values[found] + 1e-6).tobytes())


def swap_msh_nodes(data: bytes) -> bytes:
    """An element's second and fourth node, each a number of eight bytes behind the element's own."""
    mesh = sound()
    numbers = mesh.node_number[mesh.connectivity[1000]]
    old = np.array([mesh.element_number[1000], *numbers]).tobytes()
    new = np.array([mesh.element_number[1000], *numbers[FLIP]]).tobytes()
    assert data.count(old) == 1
    return data.replace(old, new)


def edit_summary_mass(text: str) -> str:
    summary = json.loads(text)
    summary["mass_kg"] *= 1.001
    return json.dumps(summary)


def edit_table_thickness(text: str) -> str:
    lines = text.split("\n")
    fields = lines[3].split(",")
    fields[5] = "0.0011"
    lines[3] = ",".join(fields)
    return "\n".join(lines)


EDITS = {
    "node of the keyword deck": ("inp", edit_keyword_node, "keyword deck"),
    "nodes of an element": ("inp", swap_element_nodes, "keyword deck"),
    "thickness of a section": ("inp", lambda text: text.replace("\n0.001,,", "\n0.0011,,", 1), "keyword deck"),
    "material of a layer": ("inp", lambda text: text.replace(",,FOAM,", ",,GLASS_UD,", 1), "keyword deck"),
    "offset of a section": (
        "inp",
        lambda text: text.replace("COMPOSITE,OFFSET=0.5", "COMPOSITE,OFFSET=-0.5", 1),
        "keyword deck",
    ),
    "direction of plies": (
        "inp",
        lambda text: re.sub(r"(NAME=BLADE_AXIS.*\n)0,0,1,", r"\g<1>0,0.01,1,", text),
        "keyword deck",
    ),
    "modulus of a material": ("inp", lambda text: text.replace("CONSTANTS\n", "CONSTANTS\n1", 1), "keyword deck"),
    "density of a material": ("inp", lambda text: text.replace("*DENSITY\n1920", "*DENSITY\n1921", 1), "keyword deck"),
    "member of a set": ("inp", lambda text: text.replace("NSET=TIP\n", "NSET=TIP\n1,\n", 1), "keyword deck"),
    "a letter among numbers": ("inp", lambda text: text.replace("\n5,", "\nS,", 1), "keyword deck"),
    "a deck cut short": ("inp", lambda text: text[: len(text) // 3], "keyword deck"),
    "node of the bulk data": ("bdf", edit_bulk_node, "bulk data"),
    "thickness of a PCOMP": ("bdf", edit_pcomp_thickness, "bulk data"),
    "offset of an element": ("bdf", edit_zoffs, "bulk data"),
    "material angle": ("bdf", edit_theta, "bulk data"),
    "density in MAT8": ("bdf", lambda text: text.replace("1920.0", "1921.0", 1), "bulk data"),
    "bulk data cut short": ("bdf", lambda text: text[: len(text) // 2], "bulk data"),
    "a word of the MSH file": (
        "msh",
        lambda data: data.replace(b"suction main cap", b"suction main cup", 1),
        "MSH file",
    ),
    "an MSH file cut short": ("msh", lambda data: data[: len(data) // 2], "MSH file"),
    "node of the MSH file": ("msh", edit_msh_node, "MSH file"),
    "nodes of an element of the MSH file": ("msh", swap_msh_nodes, "MSH file"),
    "mass in the summary": ("summary.json", edit_summary_mass, "mass"),
    # The decks are held against the table: that both differ from it points at the table.
    "thickness in the table": ("stacks.csv", edit_table_thickness, "files agree, keyword deck, bulk data"),
    "count in the summary": (
        "summary.json",
        lambda text: text.replace('"elements_without_plies": 0', '"elements_without_plies": 7'),
        "files agree",
    ),
}


@pytest.fixture(scope="module")
def sound_files(tmp_path_factory: pytest.TempPathFactory) -> Mapping[str, bytes]:
    directory = tmp_path_factory.mktemp("files")
    write(sound(), directory, formats=(*FORMATS, "msh"))
    return {path.name: path.read_bytes() for path in directory.iterdir()}


@pytest.mark.parametrize("edit", EDITS)
def test_a_hand_edited_file_is_noticed(
    tmp_path: Path, sound_files: Mapping[str, bytes], sound_verdicts: Mapping[str, str], edit: str
) -> None:
    ending, change, check = EDITS[edit]
    for name, data in sound_files.items():
        if not name.endswith(".msh") or ending == "msh":
            (tmp_path / name).write_bytes(data)
    path = tmp_path / f"{sound().stem}.{ending}"
    before = path.read_bytes()
    is_text = ending != "msh"
    after = change(before.decode()).encode() if is_text else change(before)
    assert after != before
    path.write_bytes(after)
    known = sound_verdicts if is_text else {**sound_verdicts, "MSH file": PASS}
    assert caught(tmp_path, known) == dict.fromkeys(check.split(", "), FAIL)


def test_caps_that_all_end_at_one_place_are_named(tmp_path: Path) -> None:
    blade = blades.demonstration(mesh=blades.rule(0.24, across={"main cap": 6}, close_gap=0.012))
    blunt = tuple(
        replace(ply, span=(0.4, 15.0), step_root=0.0, step_tip=0.0, count=constant(20)) if ply.name == "cap" else ply
        for ply in blade.plies
    )
    write(build_mesh(replace(blade, plies=blunt)), tmp_path, formats=("vtu",))
    lines = [finding for finding in check_directory(tmp_path).findings if finding.check == "ply drops"]
    drops = lines[0].details["drops"]
    at_end = [drop for drop in drops if drop["region"] == "suction main cap" and drop["layers_ended"] == 20]
    assert len(at_end) == 1
    assert at_end[0]["z_m"] == pytest.approx(15.0, abs=0.3)
    assert lines[0].verdict == WARN
    assert "20 layers at once" in lines[0].measured


def with_middle_offsets(mesh: ShellMesh) -> ShellMesh:
    """Offsets of a reference surface whose nodes lie at half of the mean thickness round them."""
    cells, thickness = mesh.cells, mesh.thickness
    uses = np.bincount(cells.ravel(), minlength=len(mesh.points))
    sums = np.bincount(cells.ravel(), weights=np.repeat(thickness, cells.shape[1]), minlength=len(mesh.points))
    depth = (0.5 * sums / np.maximum(uses, 1))[cells].mean(axis=1)
    is_web = np.array([region.kind == "web" for region in mesh.regions])[mesh.region]
    return replace(mesh, surface="mid", offset=np.where(is_web, 0.0, 0.5 - depth / thickness))


@pytest.mark.parametrize(("factor", "share", "verdict"), [(1, 0.25, PASS), (0, 0.5, FAIL), (-1, 0.75, FAIL)])
def test_offsets_of_a_middle_surface_keep_outer_faces_flush(
    tmp_path: Path, factor: int, share: float, verdict: str
) -> None:
    mesh = with_middle_offsets(sound())
    write(replace(mesh, offset=factor * mesh.offset), tmp_path, formats=("vtu",))
    (line,) = [finding for finding in check_directory(tmp_path).findings if finding.check == "offset"]
    assert line.verdict == verdict
    # Nodes at the foot of a web are as deep as skin and web together are thick in the mean: not quite the rule's case.
    assert line.details["share"] == pytest.approx(share, abs=0.08)
