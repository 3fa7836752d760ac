"""Input that can be built and is probably not meant: stations that stand out, profile points that wander."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.blade import FileProfile, Profile, StationTable

Floats = NDArray[np.float64]

CHORD_FACTOR = 2.5  # a chord this many times larger or smaller than both neighbours stands out
TWIST_STEP = np.radians(40.0)  # so does a twist that differs by this from both, to the same side
WANDER = 1e-5  # of the chord: file points that leave the curve through their neighbours by more were rounded
SMOOTH_PART = (0.12, 0.92)  # of the chord, where a profile curves gently


def doubtful_stations(table: StationTable) -> tuple[str, ...]:
    """Name stations whose chord or twist stands out from both neighbours.

    Parameters
    ----------
    table : StationTable

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> n = np.nan
    >>> table = StationTable([0, 1, 2], [2.0, 20.0, 1.9], [0, 0, 0], [0.3] * 3, [n] * 3, [0] * 3, [0] * 3, ("a",) * 3)
    >>> doubtful_stations(table)
    ('station 01 (z = 1.000 m): a chord of 20 m stands out from its neighbours, 2 and 1.9 m',)
    """
    told = []
    for i in range(1, len(table.z) - 1):
        before, here, after = table.chord[i - 1 : i + 2]
        place = f"station {i:02d} (z = {table.z[i]:.3f} m)"
        if here > CHORD_FACTOR * max(before, after) or here < min(before, after) / CHORD_FACTOR:
            told.append(f"{place}: a chord of {here:g} m stands out from its neighbours, {before:g} and {after:g} m")
        steps = table.twist[i] - table.twist[[i - 1, i + 1]]
        if np.all(steps > TWIST_STEP) or np.all(steps < -TWIST_STEP):
            degrees = np.degrees(table.twist[i - 1 : i + 2])
            told.append(
                f"{place}: a twist of {degrees[1]:g}° stands out from its neighbours, {degrees[0]:g} and"
                f" {degrees[2]:g}°"
            )
    return tuple(told)


def doubtful_profiles(profiles: Mapping[str, Profile]) -> tuple[str, ...]:
    """Name profile files whose points wander about a smooth curve.

    Each point is held against the cubic through its two neighbours on either side; where the profile curves gently,
    what is left is the rounding of the coordinates.

    Parameters
    ----------
    profiles : mapping of str to Profile

    Returns
    -------
    tuple of str
    """
    told = []
    for name, profile in profiles.items():
        if isinstance(profile, FileProfile) and len(profile.points) >= 20:
            wander = _wander(profile.points)
            if wander > WANDER:
                told.append(
                    f"profile '{name}' ({profile.file}): its points wander by some {wander:.1e} of the chord,"
                    " as rounded ones do; the surface goes through every point, so it is wavy there. Give more digits,"
                    " fewer points, or a smoothed file"
                )
    return tuple(told)


def _wander(points: Floats) -> float:
    chord = np.ptp(points[:, 0])
    step = np.linalg.norm(np.diff(points, axis=0), axis=1)
    s = np.concatenate([[0.0], np.cumsum(step)])
    inner = np.arange(2, len(points) - 2)
    others = inner[:, None] + np.array([-2, -1, 1, 2])
    # Lagrange's weights of the four neighbours at the point's own arc length
    here, there = s[inner][:, None], s[others]
    weights = np.ones_like(there)
    for k in range(4):
        for m in range(4):
            if m != k:
                weights[:, k] *= (here[:, 0] - there[:, m]) / (there[:, k] - there[:, m])
    curve = np.einsum("pk,pkd->pd", weights, points[others])
    place = (points[inner, 0] - points[:, 0].min()) / chord
    gentle = (place > SMOOTH_PART[0]) & (place < SMOOTH_PART[1])
    if not gentle.any():
        return 0.0
    return float(np.median(np.linalg.norm(points[inner][gentle] - curve[gentle], axis=1)) / chord)
