"""Element axes as the files give them, against the elements' own geometry."""

from __future__ import annotations

import numpy as np

from skinmesh.check.finding import Finding, span_of, verdict_of
from skinmesh.mesh.frames import element_axes
from skinmesh.mesh.shellmesh import ShellMesh
from skinmesh.wording import counted

ORTHONORMAL = 1e-9
DIRECTION = 0.001
"""Degrees."""


def check_axes(mesh: ShellMesh) -> list[Finding]:
    """Unit length, right angles, hand; e3 against the geometry, whatever its sense; e1 against the pitch axis.

    Parameters
    ----------
    mesh : ShellMesh

    Returns
    -------
    list of Finding
    """
    frame = np.stack([mesh.e1, mesh.e2, mesh.e3], axis=1)
    product = np.abs(np.einsum("eik,ejk->eij", frame, frame) - np.eye(3)).max(axis=(1, 2))
    hand = np.abs(np.einsum("ei,ei->e", np.cross(mesh.e1, mesh.e2), mesh.e3) - 1.0)
    off = np.maximum(product, hand)
    normal = element_axes(mesh.points, mesh.connectivity)[2]
    # Which way round the normal goes is the check of normals' to say.
    tilt = np.degrees(
        np.arctan2(np.linalg.norm(np.cross(normal, mesh.e3), axis=1), np.abs(np.einsum("ei,ei->e", normal, mesh.e3)))
    )
    return [
        _line(mesh, off, ORTHONORMAL, "axes off from orthonormal and right-handed by {:.2g}", "rounding"),
        _line(mesh, tilt, DIRECTION, "e3 off from the element's normal by {:.2g}°", "rounding"),
        _line(
            mesh, _turn_of_e1(mesh), DIRECTION, "e1 off from the pitch axis laid on the element by {:.2g}°", "rounding"
        ),
    ]


def _turn_of_e1(mesh: ShellMesh) -> np.ndarray:
    """Angle between e1 and the pitch axis projected along e3, degrees; y stands in where the projection vanishes."""
    along = np.array([0.0, 0.0, 1.0]) - mesh.e3[:, 2:] * mesh.e3
    lost = np.linalg.norm(along, axis=1) < 1e-6
    along[lost] = (np.array([0.0, 1.0, 0.0]) - mesh.e3[:, 1:2] * mesh.e3)[lost]
    across = np.linalg.norm(np.cross(along, mesh.e1), axis=1)
    turn: np.ndarray = np.degrees(np.arctan2(across, np.einsum("ei,ei->e", along, mesh.e1)))
    return turn


def _line(mesh: ShellMesh, value: np.ndarray, limit: float, text: str, source: str) -> Finding:
    beyond = np.flatnonzero(~(value <= limit))
    beyond = beyond[np.argsort(-value[beyond], kind="stable")]
    return Finding(
        "axes",
        f"{text.format(float(value.max()))} at most, {counted(len(beyond), 'element')} beyond the limit",
        f"fail {limit:g}",
        source,
        verdict_of(fails=len(beyond)),
        span_of(mesh, beyond),
        beyond,
        {"largest": float(value.max())},
    )
