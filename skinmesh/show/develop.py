"""Arc lengths on a mesh: the skin unrolled from the leading edge, every web laid flat."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.mesh.shellmesh import ShellMesh

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

NOSE = "leading edge"
_DIGITS = 9


@dataclass(frozen=True, eq=False)
class DevelopedMesh:
    """Where the corners of every element lie on the developed skin.

    Attributes
    ----------
    arc : (m, k) float array, m
        Arc length of each corner from the leading edge, positive on the suction side; on the face of a blunt trailing
        edge it runs on from the suction side's end; on webs it is the height above the pressure foot.
    seams : tuple of (r, 2) float array, m
        z and arc of every seam at every element row where the mesh has a node on it, root first.
    skin : (2,) float array, m
        Least and largest arc of the skin.
    heights : mapping of int to float, m
        Largest height of each web, by its region.
    """

    arc: Floats
    seams: tuple[Floats, ...]
    skin: Floats
    heights: dict[int, float]


def develop(mesh: ShellMesh) -> DevelopedMesh:
    """Unroll a mesh whose nodes stand in rows.

    Chords between the corner nodes of each row are summed, as the elements' edges run.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    DevelopedMesh
    """
    corners = mesh.cells[:, : mesh.n_sides]
    n_seams = max(len(mesh.report.seams), 1)
    nose = mesh.report.seams.index(NOSE) if NOSE in mesh.report.seams else (n_seams - 1) / 2
    kinds = np.array([region.kind for region in mesh.regions])
    arc = np.zeros(corners.shape)

    on_skin = np.flatnonzero(~np.isin(kinds, ["web", "base"])[mesh.region])
    sides = mesh.side[on_skin]
    # Joined trailing edges share the nodes of seam 0; to the suction side those are its last seam.
    place = np.where(
        (mesh.seam[corners[on_skin]] == 0.0) & (sides[:, None] > 0), n_seams - 1.0, mesh.seam[corners[on_skin]]
    )
    skin = _Rows(mesh, corners[on_skin], place)
    skin_arc = skin.arc(start=nose)
    arc[on_skin] = skin_arc[skin.of_corner]

    end_z, end_arc = skin.on_seam(skin_arc, n_seams - 1.0)
    base = np.flatnonzero((kinds == "base")[mesh.region])
    if len(base):
        place = np.where(mesh.seam[corners[base]] == 0.0, float(n_seams), mesh.seam[corners[base]])
        rows = _Rows(mesh, corners[base], place)
        values = rows.arc(start=n_seams - 1.0) + np.interp(rows.z, end_z, end_arc)
        arc[base] = values[rows.of_corner]

    heights = {}
    for region in np.flatnonzero(kinds == "web").tolist():
        web = np.flatnonzero(mesh.region == region)
        nodes = corners[web]
        feet = np.where(mesh.seam[nodes] < nose, 0.0, 1.0)
        rows = _Rows(mesh, nodes, np.where(mesh.sheet[nodes] == 0, feet, mesh.seam[nodes]))
        values = rows.arc(start=0.0)
        arc[web] = values[rows.of_corner]
        heights[region] = float(values.max(initial=0.0))

    seams = tuple(np.column_stack(skin.on_seam(skin_arc, float(k))) for k in range(len(mesh.report.seams)))
    return DevelopedMesh(arc, seams, np.array([arc[on_skin].min(initial=0.0), arc.max(initial=0.0)]), heights)


class _Rows:
    """The nodes of some elements, sorted along each row of constant z."""

    def __init__(self, mesh: ShellMesh, corners: Ints, place: Floats) -> None:
        row = np.round(mesh.row[corners].ravel(), _DIGITS)
        place = np.round(place.ravel(), _DIGITS)
        order = np.lexsort((place, row))
        row, place, node = row[order], place[order], corners.ravel()[order]
        first = np.r_[True, (row[1:] != row[:-1]) | (place[1:] != place[:-1])]
        of_corner = np.empty(len(order), dtype=np.int64)
        of_corner[order] = np.cumsum(first) - 1
        self.of_corner: Ints = of_corner.reshape(corners.shape)
        self._row, self._place = row[first], place[first]
        self._points: Floats = mesh.points[node[first]]
        self.z: Floats = self._points[:, 2]

    def arc(self, *, start: float) -> Floats:
        """Arc length along its row of every place, nothing at the place ``start`` or, without it, at the first."""
        step = np.linalg.norm(np.diff(self._points, axis=0), axis=1)
        new_row = np.r_[True, self._row[1:] != self._row[:-1]]
        arc = np.cumsum(np.r_[0.0, np.where(new_row[1:], 0.0, step)])
        number = np.cumsum(new_row) - 1
        origin = arc[new_row]
        at_start = np.flatnonzero(self._place == round(start, _DIGITS))
        origin[number[at_start]] = arc[at_start]
        length: Floats = arc - origin[number]
        return length

    def on_seam(self, arc: Floats, seam: float) -> tuple[Floats, Floats]:
        """z and arc length of the places on a seam, root first."""
        found = np.flatnonzero(self._place == seam)
        return self.z[found], arc[found]
