"""Profile coordinate files: plain text in either of the two public orderings."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from skinmesh.definition.filetext import InputText
from skinmesh.definition.problems import Findings

Floats = NDArray[np.float64]

FEWEST_POINTS = 10
MOST_POINTS = 20_000
LARGEST_GAP = 0.35  # of the chord; the two ends of a loop lie nearer than this, however blunt the trailing edge
LARGEST_LAG = 0.1  # of the chord, by which one end of a loop may lie ahead of the other
SHARPEST_TURN = np.radians(135.0)  # an outline that turns more than this away from its edges doubles back
EDGE_ZONE = 0.05  # of the chord at both edges, where sharp corners belong to the shape
_NUMBER = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eEdD][-+]?\d+)?\Z")
_NO_NUMBER = re.compile(r"[-+]?(nan|inf(inity)?)\Z", re.IGNORECASE)
_DECIMAL_COMMA = re.compile(r"\s*[-+]?\d+,\d+[\s;]+[-+]?\d+,\d+\s*\Z")
_CROSSING_BLOCK = 128


@dataclass(frozen=True, eq=False)
class _Points:
    """Points with the lines that they come from."""

    xy: Floats
    line: NDArray[np.int64]

    def __getitem__(self, rows: slice | NDArray[np.int64] | NDArray[np.bool_]) -> _Points:
        return _Points(self.xy[rows], self.line[rows])

    def __len__(self) -> int:
        return len(self.xy)


class _RefusedError(Exception):
    """A profile file is refused: the text, and the line or 0."""

    def __init__(self, text: str, line: int = 0) -> None:
        super().__init__(text)
        self.text, self.line = text, line


def read_coordinates(source: InputText, findings: Findings) -> Floats | None:
    """Read the points of a profile.

    Either one loop from the trailing edge over one side to the leading edge and back over the other, or, after a line
    with their counts, two blocks that both run from the leading to the trailing edge. Any number of title lines may
    stand before the points and any text behind them.

    Parameters
    ----------
    source : InputText
    findings : Findings
        Takes the reason where the file is refused.

    Returns
    -------
    (n, 2) float array or None
        In the file's own unit: from the trailing edge over the suction side (+y) to the leading edge and back over
        the pressure side, no point twice in a row.
    """
    try:
        points = _read_points(source)
        loop = _without_repeats(_joined_blocks(points))
        if len(loop) < FEWEST_POINTS:
            raise _RefusedError(f"has {len(loop)} different points; a profile needs at least {FEWEST_POINTS}")
        _check_extent(loop)
        loop = _from_trailing_edge(loop)
        _check_closing(loop)
        _check_crossing(loop)
        _check_turns(loop)
    except _RefusedError as refused:
        findings.add(source.file, refused.text, line=refused.line)
        return None
    return loop.xy if _area(loop.xy) > 0 else loop.xy[::-1].copy()


def _read_points(source: InputText) -> _Points:
    rows: list[tuple[float, float]] = []
    lines: list[int] = []
    text_line = 0  # of the first text behind the points
    for number, line in enumerate(source.lines, start=1):
        tokens = [token for token in re.split(r"[\s,;]+", line) if token]
        if not tokens:
            continue
        if _DECIMAL_COMMA.match(line):
            raise _RefusedError(f"'{line.strip()}' has decimal commas; write decimals with a point", number)
        has_numbers = len(tokens) == 2 and all(_NUMBER.match(token) or _NO_NUMBER.match(token) for token in tokens)
        if not has_numbers:
            text_line = text_line or (number if rows else 0)
            continue
        if text_line:
            _refuse_broken_list(source, text_line, n_before=len(rows))
        x, y = (float(token.lower().replace("d", "e")) if _NUMBER.match(token) else np.nan for token in tokens)
        if not (np.isfinite(x) and np.isfinite(y)):
            raise _RefusedError(f"'{' '.join(tokens)}' is no point: both coordinates must be finite numbers", number)
        rows.append((x, y))
        lines.append(number)
    if not rows:
        raise _RefusedError(
            "holds no line with two numbers; a profile file lists the points of the outline, 'x y' in each line"
        )
    if len(rows) > MOST_POINTS:
        raise _RefusedError(f"has {len(rows)} points, more than {MOST_POINTS}; thin them out")
    return _Points(np.array(rows), np.array(lines))


def _refuse_broken_list(source: InputText, text_line: int, *, n_before: int) -> None:
    text = " ".join(source.lines[text_line - 1].split())[:40]
    where = "behind the first point" if n_before == 1 else f"between the points, after {n_before} of them"
    raise _RefusedError(
        f"'{text}' stands {where}; every line from the first to the last point must be 'x y'", text_line
    )


def _joined_blocks(points: _Points) -> _Points:
    """Make one loop of two blocks; leave a loop as it is."""
    first, rest = points.xy[0], points[np.arange(1, len(points))]
    if len(rest) == 0 or not (np.all(first >= 2) and np.all(first == np.round(first))):
        return points
    n_first, n_second = int(first[0]), int(first[1])
    if n_first + n_second != len(rest):
        # no outline begins so far away from its own second point: the line was meant to hold counts
        if np.hypot(*(first - rest.xy[0])) > LARGEST_GAP * np.ptp(rest.xy[:, 0]):
            raise _RefusedError(
                f"the counts {n_first} and {n_second} ask for {n_first + n_second} points, but {len(rest)} follow;"
                " correct the counts",
                int(points.line[0]),
            )
        return points
    blocks = rest[np.arange(n_first)], rest[np.arange(n_first, n_first + n_second)]
    for block, name in zip(blocks, ("first", "second"), strict=True):
        if block.xy[0, 0] >= block.xy[-1, 0]:
            raise _RefusedError(
                f"the {name} block must run from the leading to the trailing edge, but x goes from"
                f" {block.xy[0, 0]:g} to {block.xy[-1, 0]:g}",
                int(block.line[0]),
            )
    return rest[np.concatenate([np.arange(n_first)[::-1], np.arange(n_first, n_first + n_second)])]


def _without_repeats(points: _Points) -> _Points:
    keep = np.concatenate([[True], np.any(np.diff(points.xy, axis=0) != 0, axis=1)])
    return points[keep]


def _check_extent(loop: _Points) -> None:
    width, height = np.ptp(loop.xy, axis=0)
    if width <= 0 or height <= 0:
        raise _RefusedError("all points lie on one line; a profile is an outline with an inside")
    if height > 1.5 * width:
        raise _RefusedError(f"is {height / width:.2g} times as high as long; x must run along the chord, y across it")


def _from_trailing_edge(loop: _Points) -> _Points:
    """Begin a closed loop that starts elsewhere at its rearmost point."""
    xy = loop.xy
    x_max, chord = xy[:, 0].max(), np.ptp(xy[:, 0])
    is_closed = np.hypot(*(xy[0] - xy[-1])) <= 1e-9 * chord
    if xy[0, 0] > x_max - EDGE_ZONE * chord or not is_closed:
        return loop
    start = int(np.argmax(xy[:, 0]))
    return loop[np.concatenate([np.arange(start, len(loop)), np.arange(1, start + 1)])]


def _check_closing(loop: _Points) -> None:
    xy = loop.xy
    chord = np.ptp(xy[:, 0])
    for end, which in ((0, "first"), (-1, "last")):
        ahead = (xy[:, 0].max() - xy[end, 0]) / chord
        if ahead > LARGEST_LAG:
            raise _RefusedError(
                f"is no loop: the {which} point ({xy[end, 0]:g}, {xy[end, 1]:g}) lies {ahead:.0%} of the chord ahead of"
                " the trailing edge; is the file cut off? List the points from the trailing edge over one side to the"
                " leading edge and back over the other, or two blocks after a line with their counts",
                int(loop.line[end]),
            )
    gap = np.hypot(*(xy[0] - xy[-1])) / chord
    if gap > LARGEST_GAP:
        raise _RefusedError(f"is no loop: its first and its last point are {gap:.0%} of the chord apart")
    nose = int(np.argmin(xy[:, 0]))
    if min(nose, len(xy) - 1 - nose) < 3:
        raise _RefusedError("one of its sides has fewer than three points between the leading and the trailing edge")


def _check_crossing(loop: _Points) -> None:
    a, b = loop.xy[:-1], loop.xy[1:]
    low, high = np.minimum(a, b), np.maximum(a, b)
    for start in range(0, len(a), _CROSSING_BLOCK):
        own = np.arange(start, min(start + _CROSSING_BLOCK, len(a)))
        box_low, box_high = low[own].min(axis=0), high[own].max(axis=0)
        near = np.flatnonzero(np.all((low <= box_high) & (high >= box_low), axis=1) & (np.arange(len(a)) > start))
        crossing = _sides(a[own], b[own], a[near], b[near]) & _sides(a[near], b[near], a[own], b[own]).T
        crossing &= near[None, :] > own[:, None] + 1
        if crossing.any():
            i, j = np.argwhere(crossing)[0]
            first, second = int(loop.line[own[i]]), int(loop.line[near[j]])
            x, y = _meeting(a[own[i]], b[own[i]], a[near[j]], b[near[j]])
            raise _RefusedError(
                f"the outline crosses itself near ({x:.5g}, {y:.5g}): the stretch after line {first} cuts the one after"
                f" line {second}; are points out of order, or do the sides cross at the trailing edge?",
                first,
            )


def _sides(a: Floats, b: Floats, c: Floats, d: Floats) -> NDArray[np.bool_]:
    """(n, m) whether c and d lie strictly on different sides of the line through a and b."""
    ab = (b - a)[:, None, :]
    to_c, to_d = c[None, :, :] - a[:, None, :], d[None, :, :] - a[:, None, :]
    cross_c = ab[..., 0] * to_c[..., 1] - ab[..., 1] * to_c[..., 0]
    cross_d = ab[..., 0] * to_d[..., 1] - ab[..., 1] * to_d[..., 0]
    return np.asarray(np.sign(cross_c) * np.sign(cross_d) < 0)


def _meeting(a: Floats, b: Floats, c: Floats, d: Floats) -> tuple[float, float]:
    """Point where the stretches a–b and c–d meet."""
    matrix = np.column_stack([b - a, c - d])
    share = np.linalg.solve(matrix, c - a)[0]
    x, y = a + share * (b - a)
    return float(x), float(y)


def _check_turns(loop: _Points) -> None:
    """Refuse an outline that doubles back where no edge is."""
    steps = np.diff(loop.xy, axis=0) @ np.array([1, 1j])
    turn = np.abs(np.angle(steps[1:] / steps[:-1]))
    x = loop.xy[1:-1, 0]
    chord = np.ptp(loop.xy[:, 0])
    is_inner = (x > loop.xy[:, 0].min() + EDGE_ZONE * chord) & (x < loop.xy[:, 0].max() - EDGE_ZONE * chord)
    back = np.flatnonzero((turn > SHARPEST_TURN) & is_inner)
    if len(back):
        k = back[0] + 1
        raise _RefusedError(
            f"the outline jumps back at ({loop.xy[k, 0]:g}, {loop.xy[k, 1]:g}): it turns by"
            f" {np.degrees(turn[back[0]]):.0f} degrees; is a point out of order?",
            int(loop.line[k]),
        )


def _area(xy: Floats) -> float:
    """Signed area of the closed loop, positive where it runs anticlockwise."""
    x, y = xy.T
    return float(0.5 * np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y))
