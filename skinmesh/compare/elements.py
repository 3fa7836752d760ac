"""Elements whose stack, direction or normal is another one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from skinmesh.compare.closest import closest_points
from skinmesh.compare.layers import LAYERS, LayerChange, change_words, layer_changes
from skinmesh.compare.numbering import element_order
from skinmesh.definition.blade import SIDE_NAMES
from skinmesh.frozen import freeze_array
from skinmesh.mesh.measure import element_areas, element_centres
from skinmesh.mesh.shellmesh import Region, ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

BY_NUMBER, BY_NEAREST = "element by element", "each with the nearest of its region"


@dataclass(frozen=True, eq=False)
class Pairs:
    """Which element of the old mesh stands for each of the new one.

    Attributes
    ----------
    way : str
        BY_NUMBER or BY_NEAREST.
    old, new : (k,) int array
        Element indices; new elements of a region that the old mesh lacks are left out.
    """

    way: str
    old: Ints
    new: Ints

    def __post_init__(self) -> None:
        for name in ("old", "new"):
            freeze_array(self, name, shape=(None,), dtype=np.int64)


@dataclass(frozen=True)
class StackChange:
    """Elements that carry another stack than before, all in the same way.

    Attributes
    ----------
    what : str
        Layers that came, went or changed, in words.
    elements : int
    area : float, m²
        On the new mesh.
    mass : float, kg
        What the change of the stack adds on the new mesh's area.
    regions : tuple of str
    z : (float, float), m
        Range of the elements' middles.
    largest_thickness : float, m
        Largest change of thickness, with its sign.
    """

    what: str
    elements: int
    area: float
    mass: float
    regions: tuple[str, ...]
    z: tuple[float, float]
    largest_thickness: float


@dataclass(frozen=True, eq=False)
class ElementChange:
    """What changed on elements that both meshes have.

    Attributes
    ----------
    pairs : Pairs
    stack_changed : (k,) bool array
        Another stack by its content, whatever its number.
    stacks : tuple of StackChange
        The same by what changed, the largest area first.
    turned : (k,) float array, rad
        Angle between the element's e1 before and now.
    tilted : (k,) float array, rad
        Angle between its e3 before and now.
    """

    pairs: Pairs
    stack_changed: NDArray[np.bool_]
    stacks: tuple[StackChange, ...]
    turned: Floats
    tilted: Floats

    def __post_init__(self) -> None:
        n = len(self.pairs.new)
        freeze_array(self, "stack_changed", shape=(n,), dtype=bool)
        for name in ("turned", "tilted"):
            freeze_array(self, name, shape=(n,))


def compare_elements(
    old: ShellMesh, new: ShellMesh, *, has_same_elements: bool, has_same_layout: bool
) -> ElementChange:
    """Compare stacks by content, and axes, element by element.

    Parameters
    ----------
    old, new : ShellMesh
    has_same_elements : bool
        Whether equal element numbers mean equal elements.
    has_same_layout : bool
        Whether rows, seams and webs are the same.

    Returns
    -------
    ElementChange
    """
    pairs = _by_number(old, new) if has_same_elements else _by_nearest(old, new, has_same_layout=has_same_layout)
    contents = [np.array([stack.content_name for stack in mesh.stacks] + [""]) for mesh in (old, new)]
    changed = contents[0][old.stack[pairs.old]] != contents[1][new.stack[pairs.new]]
    if has_same_elements:
        turned = _angle(old.e1[pairs.old], new.e1[pairs.new])
        tilted = _angle(old.e3[pairs.old], new.e3[pairs.new])
    else:
        turned, tilted = _against_surface(old, new, pairs)
    return ElementChange(pairs, changed, _stack_changes(old, new, pairs, changed), turned, tilted)


def _by_number(old: ShellMesh, new: ShellMesh) -> Pairs:
    return Pairs(BY_NUMBER, element_order(old), element_order(new))


def _by_nearest(old: ShellMesh, new: ShellMesh, *, has_same_layout: bool) -> Pairs:
    """Pair within regions of the same name, by parametric coordinates where these mean the same."""
    places = [_parametric(mesh, old) if has_same_layout else element_centres(mesh) for mesh in (old, new)]
    number = {region.name: k for k, region in enumerate(old.regions)}
    firsts, seconds = [np.zeros(0, dtype=np.int64)], [np.zeros(0, dtype=np.int64)]
    for k, region in enumerate(new.regions):
        there = np.flatnonzero(old.region == number[region.name]) if region.name in number else np.zeros(0, np.int64)
        here = np.flatnonzero(new.region == k)
        if len(there) and len(here):
            _, nearest = cKDTree(places[0][there]).query(places[1][here])
            firsts.append(there[nearest])
            seconds.append(here)
    return Pairs(BY_NEAREST, np.concatenate(firsts), np.concatenate(seconds))


def _parametric(mesh: ShellMesh, scale: ShellMesh) -> Floats:
    """(m, 2) row and seam in the middle of every element, about in metres of one of the meshes."""
    corners = mesh.cells[:, : mesh.n_sides]
    z = np.array([place for _, place in scale.report.rows])
    row = np.interp(mesh.row[corners].mean(axis=1), np.arange(len(z)), z)
    # a skin goes round some three times its extent across
    width = 3.0 * float(np.ptp(scale.points[:, :2], axis=0).max()) / max(len(scale.report.seams), 1)
    return np.column_stack([row, width * mesh.seam[corners].mean(axis=1)])


def _against_surface(old: ShellMesh, new: ShellMesh, pairs: Pairs) -> tuple[Floats, Floats]:
    """Angles between the axes of each new element and those at the closest point of the same side or web.

    The 0° direction is the pitch axis laid on the surface, so that the normal gives it.
    """
    turned, tilted = np.zeros(len(pairs.new)), np.zeros(len(pairs.new))
    centres = element_centres(new)[pairs.new]
    faces = [np.array([_face(region) for region in mesh.regions])[mesh.region] for mesh in (old, new)]
    for face in dict.fromkeys(map(_face, new.regions)):
        own, there = np.flatnonzero(faces[1][pairs.new] == face), np.flatnonzero(faces[0] == face)
        if not len(own) or not len(there):
            continue
        normal = closest_points(old, centres[own], elements=there).normal
        direction = np.array([0.0, 0.0, 1.0]) - normal[:, 2:] * normal
        direction /= np.maximum(np.linalg.norm(direction, axis=1), 1e-30)[:, None]
        turned[own] = _angle(direction, new.e1[pairs.new[own]])
        tilted[own] = _angle(normal, new.e3[pairs.new[own]])
    return turned, tilted


def _face(region: Region) -> str:
    """What an element is a part of: one side of the skin, the trailing base, or a web."""
    return SIDE_NAMES[region.side] if region.side else region.name


def _angle(first: Floats, second: Floats) -> Floats:
    """Angle between unit vectors, exact for small ones too."""
    angle: Floats = 2.0 * np.arctan2(np.linalg.norm(first - second, axis=1), np.linalg.norm(first + second, axis=1))
    return angle


def _stack_changes(old: ShellMesh, new: ShellMesh, pairs: Pairs, changed: NDArray[np.bool_]) -> tuple[StackChange, ...]:
    before, after = pairs.old[changed], pairs.new[changed]
    if not len(after):
        return ()
    combinations, which = np.unique(np.column_stack([old.stack[before], new.stack[after]]), axis=0, return_inverse=True)
    which = which.ravel()
    details = [
        layer_changes(old.stacks[first].layers if first >= 0 else (), new.stacks[second].layers if second >= 0 else ())
        for first, second in combinations.tolist()
    ]
    keys = [tuple((change.ply, change.aspect, _sense(change)) for change in changes) for changes in details]
    kinds = list(dict.fromkeys(keys))
    words = [change_words([own for own, key in zip(details, keys, strict=True) if key == kind]) for kind in kinds]
    kind = np.array([kinds.index(key) for key in keys])[which]
    area = element_areas(new)[after]
    z = new.points[new.cells[after, : new.n_sides], 2].mean(axis=1)
    heavier = area * (new.areal_mass[after] - old.areal_mass[before])
    thicker = new.thickness[after] - old.thickness[before]
    found = [
        _stack_change(new, words[k], after[own], area[own], heavier[own], z[own], thicker[own])
        for k, own in enumerate(_groups(kind, len(kinds)))
    ]
    return tuple(sorted(found, key=lambda change: -change.area))


def _sense(change: LayerChange) -> int:
    """Whether layers came, went, grew more or fewer, so that these are told apart; 0 for other aspects."""
    if change.aspect != LAYERS:
        return 0
    if change.before == "0":
        return 2
    if change.after == "0":
        return -2
    return 1 if int(change.after) > int(change.before) else -1


def _groups(kind: Ints, n: int) -> Sequence[Ints]:
    order = np.argsort(kind, kind="stable")
    return np.split(order, np.searchsorted(kind[order], np.arange(1, n)))


def _stack_change(
    new: ShellMesh, what: str, elements: Ints, area: Floats, heavier: Floats, z: Floats, thicker: Floats
) -> StackChange:
    return StackChange(
        what=what,
        elements=len(elements),
        area=float(area.sum()),
        mass=float(heavier.sum()),
        regions=tuple(new.regions[k].name for k in np.unique(new.region[elements])),
        z=(float(z.min()), float(z.max())),
        largest_thickness=float(thicker[np.argmax(np.abs(thicker))]),
    )
