"""Small shell meshes by plain array work, without the builder and without the mesh kernel.

The shapes have closed forms: a tube or cone about z, and a rectangular tube with a web inside.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from math import radians

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import Source
from skinmesh.laminate.material import Material
from skinmesh.laminate.stack import Layer, Stack
from skinmesh.mesh.shellmesh import NO_STACK, BuildReport, Region, ShellMesh

Points = NDArray[np.float64]
Indices = NDArray[np.int64]

GLASS_UD = Material(
    name="glass UD",
    E1=41.0e9,
    E2=11.4e9,
    E3=11.4e9,
    nu12=0.28,
    nu13=0.28,
    nu23=0.4,
    G12=3.9e9,
    G13=3.9e9,
    G23=3.6e9,
    density=1920.0,
    source="invented",
)
BALSA = Material(
    name="balsa",
    E1=0.05e9,
    E2=0.05e9,
    E3=0.05e9,
    nu12=0.3,
    nu13=0.3,
    nu23=0.3,
    G12=0.15e9,
    G13=0.16e9,
    G23=0.16e9,
    density=110.0,
    source="invented",
)
REGIONS = (Region("suction panel", 1, "panel"), Region("pressure panel", -1, "panel"), Region("fore web", 0, "web"))
HOSTILE = ('Gürtel "außen"', "<script>alert('x')</script>", "=1+2 & more;")
SOURCES = (Source("sample.yaml", "0" * 64), Source("sample.csv", "1" * 64))


def sandwich(angle: float = 45.0) -> tuple[Layer, ...]:
    """An unsymmetric sandwich: two glass layers outside, balsa, one glass layer inside."""
    return (
        Layer("outer skin", GLASS_UD, 0.001, radians(angle)),
        Layer("cap", GLASS_UD, 0.002, 0.0),
        Layer("core", BALSA, 0.005, 0.0),
        Layer("inner skin", GLASS_UD, 0.001, radians(-angle)),
    )


def tube(
    n_around: int,
    n_along: int,
    *,
    radius: float = 0.5,
    length: float = 2.0,
    layers: Sequence[Layer] = (),
    order: int = 2,
    shape: str = "quad",
    taper: float = 1.0,
    n_bands: int = 1,
) -> ShellMesh:
    """A closed tube or cone about z, its nodes on the outer surface.

    Parameters
    ----------
    n_around, n_along : int
        Elements (pairs of triangles) round the tube, an even number, and along it.
    radius, length : float, m
        Radius at the root, z = 0; the tip lies at z = length.
    layers : sequence of Layer
        Stack of the first band; none makes a mesh without stacks.
    order : int
    shape : str
        'quad' or 'triangle'.
    taper : float
        Radius at the tip over radius at the root.
    n_bands : int
        Bands of equal length along the span, a divisor of ``n_along``; each has lost one layer more from the inside.
    """
    index = _half_step_grid(n_around, n_along, closed=True)
    level, around = _half_steps(index)
    z = length * level / (2 * n_along)
    angle = np.pi * around / n_around
    local_radius = radius * (1.0 + (taper - 1.0) * z / length)
    # From the trailing edge (+y) over the pressure side (−x), the nose (−y) and the suction side (+x) back.
    points = np.column_stack([-local_radius * np.sin(angle), local_radius * np.cos(angle), z])
    cells = _grid_cells(index, shape)
    height = points[cells[:, : cells.shape[1] // 2], 0].mean(axis=1)
    band = _band_of(cells, points[:, 2], length=length, n_bands=n_bands)
    stacks = tuple(Stack(tuple(layers[: len(layers) - k])) for k in range(n_bands)) if layers else ()
    return _assemble(
        points,
        cells,
        region=np.where(height > 0, 0, 1),
        stack=band if layers else np.full(len(cells), NO_STACK),
        stacks=stacks,
        sheet=np.zeros(len(points)),
        row=level * n_bands / (2 * n_along),
        seam=around / n_around,
        order=order,
        title="Sample tube",
        length=length,
        n_bands=n_bands,
        foot_sets={},
    )


def box_with_web(
    n_across: int = 4,
    n_up: int = 2,
    n_along: int = 6,
    *,
    width: float = 0.8,
    height: float = 0.4,
    length: float = 3.0,
    layers: Sequence[Layer] = (),
    web_layers: Sequence[Layer] = (),
    order: int = 2,
    shape: str = "quad",
    web_at: int | None = None,
) -> ShellMesh:
    """A rectangular tube about z, open at its ends, with one web inside that shares its foot nodes with the skin.

    Parameters
    ----------
    n_across, n_up, n_along : int
        Elements along y, along x (an even number) and along z.
    width, height, length : float, m
        Along y, x and z.
    layers, web_layers : sequence of Layer
        Stacks of skin and web; none leaves the part bare.
    order : int
    shape : str
        'quad' or 'triangle'.
    web_at : int
        Element edges between the leading wall and the web; by default half of ``n_across``.
    """
    n_around = 2 * (n_across + n_up)
    web_at = n_across // 2 if web_at is None else web_at
    skin = _half_step_grid(n_around, n_along, closed=True)
    level, around = _half_steps(skin)
    outline, seam_of = _box_outline(n_across, n_up, width=width, height=height)
    skin_points = np.column_stack([outline[around], length * level / (2 * n_along)])

    # Half steps run from the middle of the trailing wall: down, forwards, up the nose, aft, and down again.
    pressure_foot = n_up + 2 * (n_across - web_at)
    suction_foot = n_up + 2 * n_across + 2 * n_up + 2 * web_at
    web = _half_step_grid(n_up, n_along, closed=False) + len(skin_points)
    web_level, web_up = _half_steps(web - len(skin_points))
    web_points = np.column_stack(
        [
            height * (web_up / (2 * n_up) - 0.5),
            np.full(len(web_up), width * (web_at / n_across - 0.5)),
            length * web_level / (2 * n_along),
        ]
    )
    web[:, 0], web[:, -1] = skin[:, pressure_foot], skin[:, suction_foot]

    points = np.vstack([skin_points, web_points])
    skin_cells, web_cells = _grid_cells(skin, shape), _grid_cells(web, shape)
    side = points[skin_cells[:, : skin_cells.shape[1] // 2], 0].mean(axis=1)
    stacks = tuple(Stack(tuple(part)) for part in (layers, web_layers) if part)
    web_stack = len(stacks) - 1 if web_layers else NO_STACK
    return _assemble(
        points,
        np.vstack([skin_cells, web_cells]),
        region=np.concatenate([np.where(side > 0, 0, 1), np.full(len(web_cells), 2)]),
        stack=np.concatenate([np.full(len(skin_cells), 0 if layers else NO_STACK), np.full(len(web_cells), web_stack)]),
        stacks=stacks,
        sheet=np.repeat([0, 1], [len(skin_points), len(web_points)]),
        row=np.concatenate([level, web_level]) / (2 * n_along),
        seam=np.concatenate([seam_of[around], web_up / (2 * n_up)]),
        order=order,
        title="Sample box",
        length=length,
        n_bands=1,
        foot_sets={"fore web suction foot": skin[:, suction_foot], "fore web pressure foot": skin[:, pressure_foot]},
    )


def strip(
    n_across: int,
    n_along: int,
    *,
    width: float,
    length: float,
    layers: Sequence[Layer],
    offset: float = 0.0,
    shape: str = "quad",
) -> ShellMesh:
    """A flat strip along z, across y, of second order; e3 is +x.

    Parameters
    ----------
    n_across, n_along : int
    width, length : float, m
        y runs from minus to plus half of the width, z from 0.
    layers : sequence of Layer
    offset : float
        As of :class:`ShellMesh`.
    shape : str
        'quad' or 'triangle'.
    """
    index = _half_step_grid(n_across, n_along, closed=False)
    level, across = _half_steps(index)
    y, z = width * (across / (2 * n_across) - 0.5), length * level / (2 * n_along)
    cells = _grid_cells(index, shape)
    mesh = _assemble(
        np.column_stack([np.zeros(len(y)), y, z]),
        cells,
        region=np.zeros(len(cells), dtype=np.int64),
        stack=np.zeros(len(cells), dtype=np.int64),
        stacks=(Stack(tuple(layers)),),
        sheet=np.zeros(len(y)),
        row=level / (2 * n_along),
        seam=across / (2 * n_across),
        order=2,
        title="Sample strip",
        length=length,
        n_bands=1,
        foot_sets={},
    )
    return replace(mesh, offset=np.full(len(cells), offset))


def numbered_box(order: int = 2, shape: str = "quad") -> ShellMesh:
    """A box whose node and element numbers are none that a reader would make up, with hostile names."""
    mesh = box_with_web(layers=sandwich(), web_layers=sandwich()[:2], order=order, shape=shape)
    return replace(
        mesh,
        title=HOSTILE[1],
        regions=tuple(replace(region, name=name) for region, name in zip(mesh.regions, HOSTILE, strict=True)),
        node_number=3 * mesh.node_number + 100,
        element_number=2 * mesh.element_number[::-1] + 5,
    )


def _half_step_grid(n_columns: int, n_rows: int, *, closed: bool) -> Indices:
    """(2 n_rows + 1, 2 n_columns + 1) indices of points at half element steps; a closed grid ends on its first."""
    width = 2 * n_columns + (not closed)
    index = np.arange((2 * n_rows + 1) * width).reshape(-1, width)
    return np.hstack([index, index[:, :1]]) if closed else index


def _half_steps(index: Indices) -> tuple[Indices, Indices]:
    """Row and column of every point of the grid, in half steps."""
    first = np.unique(index.ravel(), return_index=True)[1]
    return first // index.shape[1], first % index.shape[1]


def _grid_cells(index: Indices, shape: str) -> Indices:
    """Second-order cells, counter-clockwise where columns run right and rows run up; all first halves come first."""
    a, ab, b = index[:-2:2, :-2:2], index[:-2:2, 1::2], index[:-2:2, 2::2]
    d, cd, c = index[2::2, :-2:2], index[2::2, 1::2], index[2::2, 2::2]
    ad, centre, bc = index[1::2, :-2:2], index[1::2, 1::2], index[1::2, 2::2]
    if shape == "quad":
        return np.stack([a, b, c, d, ab, bc, cd, ad], axis=-1).reshape(-1, 8)
    lower = np.stack([a, b, c, ab, bc, centre], axis=-1).reshape(-1, 6)
    upper = np.stack([a, c, d, centre, cd, ad], axis=-1).reshape(-1, 6)
    return np.vstack([lower, upper])


def _box_outline(n_across: int, n_up: int, *, width: float, height: float) -> tuple[Points, Points]:
    """(x, y) of the half steps round the box from the middle of the trailing wall, and their seam coordinate."""
    up = np.linspace(-height / 2, height / 2, 2 * n_up + 1)
    across = np.linspace(-width / 2, width / 2, 2 * n_across + 1)
    walls = [
        (up[n_up::-1], width / 2),
        (-height / 2, across[::-1]),
        (up, -width / 2),
        (height / 2, across),
        (up[: n_up - 1 : -1], width / 2),
    ]
    outline = np.vstack([np.column_stack(np.broadcast_arrays(x, y))[:-1] for x, y in walls])
    return outline, 2.0 * np.arange(len(outline)) / len(outline)


def _band_of(cells: Indices, z: Points, *, length: float, n_bands: int) -> Indices:
    corners = z[cells[:, : cells.shape[1] // 2]]
    middle = 0.5 * (corners.min(axis=1) + corners.max(axis=1))
    return np.floor(middle / length * n_bands).astype(np.int64)


def _element_axes(points: Points, cells: Indices, order: int) -> tuple[Points, Points, Points]:
    """Axes at the middle of each element: e1 is z projected."""
    x = np.moveaxis(points[cells], 1, 0)
    if cells.shape[1] == 8:
        # At the middle of an 8-node element the derivatives see the mid nodes only.
        first, second = (x[5] - x[7], x[6] - x[4]) if order == 2 else (x[2] - x[0], x[3] - x[1])
    elif order == 2:
        first, second = x[1] - x[0] + 4 * (x[4] - x[5]), x[2] - x[0] + 4 * (x[4] - x[3])
    else:
        first, second = x[1] - x[0], x[2] - x[0]
    e3 = np.cross(first, second)
    e3 /= np.linalg.norm(e3, axis=1, keepdims=True)
    e1 = np.array([0.0, 0.0, 1.0]) - e3[:, 2:] * e3
    e1 /= np.linalg.norm(e1, axis=1, keepdims=True)
    return e1, np.cross(e3, e1), e3


def _assemble(
    points: Points,
    cells: Indices,
    *,
    region: Indices,
    stack: Indices,
    stacks: tuple[Stack, ...],
    sheet: NDArray,
    row: Points,
    seam: Points,
    order: int,
    title: str,
    length: float,
    n_bands: int,
    foot_sets: Mapping[str, Indices],
) -> ShellMesh:
    """Drop the points that no cell uses, number corners first, elements from the root, and fill in the rest."""
    n_sides = cells.shape[1] // 2
    by_z = np.argsort(points[cells[:, :n_sides], 2].min(axis=1), kind="stable")
    cells, region, stack = cells[by_z], region[by_z], stack[by_z]
    corners = np.unique(cells[:, :n_sides])
    kept = np.concatenate([corners, np.unique(cells[:, n_sides:])])
    new = np.full(len(points), -1)
    new[kept] = np.arange(len(kept))
    points, cells = points[kept], new[cells]
    e1, e2, e3 = _element_axes(points, cells, order)
    root, tip = np.flatnonzero(points[:, 2] == 0.0), np.flatnonzero(points[:, 2] == length)
    sets = {"root": root, "tip": tip, "station 00": root, "station 01": tip}
    sets |= {name: np.sort(new[nodes]) for name, nodes in foot_sets.items()}
    materials = {layer.material.name: layer.material for each in stacks for layer in each.layers}
    return ShellMesh(
        title=title,
        stem="sample",
        hand="clockwise",
        order=order,
        surface="outer",
        points=points,
        n_corners=len(corners),
        cells=cells,
        region=region,
        stack=stack,
        offset=np.where(region == 2, 0.0, 0.5),
        e1=e1,
        e2=e2,
        e3=e3,
        sheet=sheet[kept],
        row=row[kept],
        seam=seam[kept],
        regions=REGIONS if np.any(region == 2) else REGIONS[:2],
        stacks=stacks,
        materials=materials,
        node_sets=sets,
        element_sets={},
        node_number=np.arange(1, len(points) + 1),
        element_number=np.arange(1, len(cells) + 1),
        sources=SOURCES,
        report=BuildReport(
            rows=tuple((f"row {k}", length * k / n_bands) for k in range(n_bands + 1)),
            seams=("pressure trailing edge", "leading edge", "suction trailing edge"),
            stations=np.array([0.0, length]),
        ),
    )
