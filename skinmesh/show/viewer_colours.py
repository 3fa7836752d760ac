"""Colours of the regions for open viewers, as files that these read: the same colours as in pictures and page."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.show.palette import BARE, part_colours, part_name, rgb


def region_colours(mesh: ShellMesh) -> NDArray[np.float64]:
    """(k, 3) float array, 0 to 1: colour of each region, both sides of a part alike.

    Parameters
    ----------
    mesh : ShellMesh
    """
    colours = part_colours(mesh.regions)
    return rgb([colours[part_name(region)] for region in mesh.regions])


def write_paraview_colours(mesh: ShellMesh, path: Path) -> None:
    """Write a colour map by name for ParaView's array ``region``, to be imported in its preset dialogue.

    It is called ``stem regions`` there. Each number of a region has the region's name beside it, which the legend then
    shows, and its colour.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path
    """
    names = [part for k, region in enumerate(mesh.regions, start=1) for part in (str(k), region.name)]
    preset = {
        "Name": f"{mesh.stem} regions",
        "Annotations": names,
        "IndexedColors": _listed(region_colours(mesh)),
        "NanColor": _listed(rgb([BARE])),
    }
    path.write_text(json.dumps([preset], indent=1, ensure_ascii=False) + "\n", encoding="utf-8", newline="\n")


def write_gmsh_colours(mesh: ShellMesh, path: Path) -> None:
    """Write options for gmsh: faces shown, each region in its colour.

    gmsh reads ``stem.msh.opt`` by itself when it opens ``stem.msh``. The file is a script, so regions stand in it by
    number, and no name, which might be one, comes in.

    Parameters
    ----------
    mesh : ShellMesh
    path : Path
    """
    bytes_ = np.rint(255.0 * region_colours(mesh)).astype(int)
    lines = ["Mesh.SurfaceFaces = 1;", "Mesh.SurfaceEdges = 0;"]
    for k in np.unique(mesh.region):
        red, green, blue = bytes_[k]
        lines.append(f"Color {{{red}, {green}, {blue}}} {{ Physical Surface {{{k + 1}}}; }}")
    path.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def viewer_colours(formats: Iterable[str]) -> dict[str, Callable[[ShellMesh, Path], None] | None]:
    """Files of colours that go with the wanted formats, by the ending of their names; None where one is not wanted.

    Parameters
    ----------
    formats : iterable of str

    Examples
    --------
    >>> [ending for ending, writer in viewer_colours(["vtu", "inp"]).items() if writer]
    ['colours.json']
    """
    wanted = set(formats)
    return {
        "colours.json": write_paraview_colours if wanted & {"vtu", "vtm"} else None,
        "msh.opt": write_gmsh_colours if "msh" in wanted else None,
    }


def _listed(colours: NDArray[np.float64]) -> list[float]:
    return [round(float(value), 6) for value in colours.ravel()]
