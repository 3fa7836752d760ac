"""What lies where: one line for each ply, all its layers together, measured on the mesh."""

from __future__ import annotations

from typing import Any

import numpy as np

from skinmesh.mesh.measure import element_areas
from skinmesh.mesh.shellmesh import NO_STACK, ShellMesh
from skinmesh.show.palette import part_name


def ply_table(mesh: ShellMesh) -> list[dict[str, Any]]:
    """Materials, angles, regions, span, area and mass of every ply.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    list of dict
        In the order in which the plies first occur in the stacks. ``angles`` in degrees; ``thickness`` of one layer, m,
        ``layers`` of one stack, and ``z``, m, each least and largest; ``area``, m², and ``mass``, kg, of all layers;
        ``regions`` by name, without a side where the ply lies on both.
    """
    # Everything is the same for all elements of one stack in one region.
    key = mesh.stack * len(mesh.regions) + mesh.region
    covered = np.flatnonzero(mesh.stack != NO_STACK)
    pairs, place = np.unique(key[covered], return_inverse=True)
    stack, region = np.divmod(pairs, len(mesh.regions))
    area = np.bincount(place, weights=element_areas(mesh)[covered], minlength=len(pairs))
    z = mesh.points[mesh.cells[covered, : mesh.n_sides], 2]
    low, high = np.full(len(pairs), np.inf), np.full(len(pairs), -np.inf)
    np.minimum.at(low, place, z.min(axis=1))
    np.maximum.at(high, place, z.max(axis=1))

    table = []
    for ply in dict.fromkeys(layer.ply for one in mesh.stacks for layer in one.layers):
        of_stack = [[layer for layer in one.layers if layer.ply == ply] for one in mesh.stacks]
        chosen = np.flatnonzero([bool(of_stack[s]) for s in stack])
        layers = [layer for s in dict.fromkeys(stack[chosen].tolist()) for layer in of_stack[s]]
        if not layers:
            continue
        counts = [len(of_stack[s]) for s in stack[chosen]]
        areal_mass = np.array([sum(one.thickness * one.material.density for one in of_stack[s]) for s in stack[chosen]])
        table.append(
            {
                "ply": ply,
                "materials": sorted({layer.material.name for layer in layers}),
                "angles": sorted({layer.angle_degrees for layer in layers}),
                "thickness": _range([layer.thickness for layer in layers]),
                "layers": _range(counts),
                "regions": _regions(mesh, np.unique(region[chosen]).tolist()),
                "z": [float(low[chosen].min()), float(high[chosen].max())],
                "area": float(np.array(counts) @ area[chosen]),
                "mass": float(areal_mass @ area[chosen]),
            }
        )
    return table


def _range(values: list[Any]) -> list[Any]:
    return [min(values), max(values)]


def _regions(mesh: ShellMesh, chosen: list[int]) -> list[str]:
    """Names of regions in their order, without a side where those of both sides are among them."""
    sides: dict[str, set[int]] = {}
    for region in mesh.regions:
        sides.setdefault(part_name(region), set()).add(region.side)
    found: dict[str, set[int]] = {}
    for k in chosen:
        found.setdefault(part_name(mesh.regions[k]), set()).add(mesh.regions[k].side)
    whole = {name for name, there in found.items() if there == sides[name]}
    names = [
        part_name(mesh.regions[k]) if part_name(mesh.regions[k]) in whole else mesh.regions[k].name for k in chosen
    ]
    return list(dict.fromkeys(names))
