"""Whether the numbers of two meshes mean the same: nodes, elements, regions and sets."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.check.finding import listed
from skinmesh.mesh.shellmesh import ShellMesh

Ints = NDArray[np.int64]

SAME_PLACE = 1e-9
"""Parametric coordinates that differ by less are the same: files and sums round at some 1e-16 of them."""


@dataclass(frozen=True)
class Numbering:
    """What of the numbers is the same in both meshes.

    Attributes
    ----------
    has_same_nodes : bool
        The same node numbers.
    has_same_places : bool
        The same node numbers at the same parametric coordinates.
    has_same_elements : bool
        The same element numbers, each with the same nodes in the same order.
    has_same_regions : bool
        The same element numbers, each in the region of the same name.
    sets_gone, sets_new, sets_changed : tuple of str
        Node sets by name; changed are those of other node numbers.
    layout : tuple of str
        What differs in rows, seams, webs and regions, a sentence each: empty where a rebuild can keep the numbers.
    """

    has_same_nodes: bool
    has_same_places: bool
    has_same_elements: bool
    has_same_regions: bool
    sets_gone: tuple[str, ...]
    sets_new: tuple[str, ...]
    sets_changed: tuple[str, ...]
    layout: tuple[str, ...]

    @property
    def is_kept(self) -> bool:
        """Whether loads, sets and results of one mesh, by number, fit the other."""
        return (
            self.has_same_places
            and self.has_same_elements
            and self.has_same_regions
            and not (self.sets_gone or self.sets_new or self.sets_changed)
        )

    @property
    def sentence(self) -> str:
        """One line for a person: whether load files, sets and results stay valid, and why not."""
        if self.is_kept:
            return (
                "Node and element numbers, regions and sets are the same: loads, sets and results by number stay valid."
            )
        sets = [
            f"{word} {listed(names, most=4)}"
            for word, names in (
                ("gone:", self.sets_gone),
                ("new:", self.sets_new),
                ("of other nodes:", self.sets_changed),
            )
            if names
        ]
        if self.has_same_places and self.has_same_elements:
            what = "node sets " + "; ".join(sets) if sets else "elements changed their regions"
            return f"Node and element numbers are the same, but {what}: look at loads that name these."
        if self.has_same_places and not sets:
            why = f" ({'; '.join(self.layout)})" if self.layout else ""
            return f"Node numbers and node sets stay valid, but those of the elements do NOT: other elements{why}."
        remedy = (
            f"the layout differs ({'; '.join(self.layout)}); --keep OLD_DIR --map writes tables from old to new"
            if self.layout
            else "the layout is the same: a build with --keep OLD_DIR keeps the numbers"
        )
        return f"Numbers are NOT the same: loads, sets and results by number of OLD do not fit NEW; {remedy}."


TOGETHER = " + "
"""Stands between the labels of rows that fall together."""


def compare_numbering(old: ShellMesh, new: ShellMesh) -> Numbering:
    """Compare node and element numbers, connectivity, parametric coordinates, regions and node sets.

    Parameters
    ----------
    old, new : ShellMesh

    Returns
    -------
    Numbering
    """
    same_nodes = same_places = same_elements = same_regions = False
    before, after = node_order(old), node_order(new)
    if np.array_equal(old.node_number[before], new.node_number[after]):
        same_nodes = True
        same_places = bool(np.array_equal(old.sheet[before], new.sheet[after])) and all(
            np.allclose(getattr(old, name)[before], getattr(new, name)[after], rtol=0.0, atol=SAME_PLACE)
            for name in ("row", "seam")
        )
    first, second = element_order(old), element_order(new)
    if np.array_equal(old.element_number[first], new.element_number[second]):
        same_elements = np.array_equal(
            old.node_number[old.connectivity[first]], new.node_number[new.connectivity[second]]
        )
        names = [np.array([region.name for region in mesh.regions]) for mesh in (old, new)]
        same_regions = bool(np.all(names[0][old.region[first]] == names[1][new.region[second]]))
    sets = [{name: np.sort(mesh.node_number[mesh.node_set(name)]) for name in mesh.node_sets} for mesh in (old, new)]
    return Numbering(
        has_same_nodes=same_nodes,
        has_same_places=same_places,
        has_same_elements=same_elements,
        has_same_regions=same_regions,
        sets_gone=tuple(name for name in sets[0] if name not in sets[1]),
        sets_new=tuple(name for name in sets[1] if name not in sets[0]),
        sets_changed=tuple(
            name for name, nodes in sets[0].items() if name in sets[1] and not np.array_equal(nodes, sets[1][name])
        ),
        layout=layout_differences(old, new),
    )


def node_order(mesh: ShellMesh) -> Ints:
    """Indices of the nodes that the files have, by their number."""
    return np.argsort(mesh.node_number[: mesh.n_nodes], kind="stable")


def element_order(mesh: ShellMesh) -> Ints:
    """Indices of the elements by their number."""
    return np.argsort(mesh.element_number, kind="stable")


def layout_differences(old: ShellMesh, new: ShellMesh) -> tuple[str, ...]:
    """What of rows, seams and webs would keep a rebuild from keeping the numbers, in words.

    Parameters
    ----------
    old, new : ShellMesh

    Returns
    -------
    tuple of str
    """
    found = []
    kinds = [
        (mesh.hand, "quadrilaterals" if mesh.n_sides == 4 else "triangles", f"order {mesh.order}")
        for mesh in (old, new)
    ]
    found += [f"{before}, now {after}" for before, after in zip(*kinds, strict=True) if before != after]
    webs = [[region.name for region in mesh.regions if region.kind == "web"] for mesh in (old, new)]
    labels = [[label for label, _ in mesh.report.rows] for mesh in (old, new)]
    rows = [[part for label in own for part in label.split(TOGETHER)] for own in labels]
    seams = [list(mesh.report.seams) for mesh in (old, new)]
    for word, (before, after) in (("web", webs), ("seam", seams), ("row", rows)):
        gone = [name for name in before if name not in after]
        added = [name for name in after if name not in before]
        if gone:
            found.append(f"{_counted(word, gone)} gone: {listed(gone, most=3)}")
        if added:
            found.append(f"{_counted(word, added)} new: {listed(added, most=3)}")
        if not gone and not added and before != after:
            first = next(name for name, other in zip(after, before, strict=True) if name != other)
            found.append(f"{word}s in another order from {first} on")
    if rows[0] == rows[1] and labels[0] != labels[1]:
        moved = [label for label in labels[1] if label not in labels[0]]
        found.append(f"rows lie apart or together that did not: {listed(moved, most=3)}")
    return tuple(found)


def _counted(word: str, names: list[str]) -> str:
    return word if len(names) == 1 else f"{len(names)} {word}s"
