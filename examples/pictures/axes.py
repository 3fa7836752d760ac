"""Draw axes.png: blade axes, the sense of twist, element axes and a positive ply angle.

Usage: python examples/pictures/axes.py [FILE.png]
"""

from __future__ import annotations

import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import Arc, Polygon

INK, QUIET, PALE = "#222222", "#767676", "#f1eee4"
X_COLOUR, Y_COLOUR, Z_COLOUR, PLY = "#009e73", "#0072b2", "#d55e00", "#cc79a7"

# The eye stands on the suction side, towards the trailing edge and towards the root; z runs to the right.
OUT = np.array([0.62, 0.66, -0.42]) / np.linalg.norm([0.62, 0.66, -0.42])
UP = np.cross(OUT, [0, 0, 1]) / np.linalg.norm(np.cross(OUT, [0, 0, 1]))
ONTO_PAGE = np.stack([np.cross(UP, OUT), UP], axis=1)


def section(*, roundness: float, n: int = 121) -> np.ndarray:
    """(n, 2) x, y of a section of unit chord from the trailing edge over the suction side and back, y from the nose."""
    angle = np.linspace(0, 2 * np.pi, n)
    y = 0.5 + 0.5 * np.cos(angle)
    # NACA 4-digit thickness, closed; Abbott & von Doenhoff, Theory of Wing Sections, eq. 6.2, from memory.
    half = 1.1 * (0.2969 * np.sqrt(y) - 0.126 * y - 0.3516 * y**2 + 0.2843 * y**3 - 0.1036 * y**4)
    camber = 0.16 * y * (1 - y)
    shape = np.sign(np.sin(angle)) * half + camber
    return np.column_stack([roundness * 0.5 * np.sin(angle) + (1 - roundness) * shape, y])


def blade() -> list[np.ndarray]:
    """Points of some sections of an invented blade, root first."""
    z = np.linspace(0, 11, 56)
    chord = np.interp(z, [0, 0.6, 2.6, 10, 11], [0.95, 0.95, 1.9, 0.6, 0.1])
    roundness = np.interp(z, [0, 0.6, 2.4], [1, 1, 0])
    twist = np.radians(np.interp(z, [0, 0.6, 11], [16, 16, 0]))
    axis = np.interp(z, [0, 0.6, 2.6], [0.5, 0.5, 0.33])
    rings = []
    for k in range(len(z)):
        x, y = (chord[k] * (section(roundness=roundness[k]) - [0, axis[k]])).T
        c, s = np.cos(-twist[k]), np.sin(-twist[k])
        rings.append(np.column_stack([c * x - s * y, s * x + c * y, np.full(len(x), z[k])]))
    return rings


def arrow(axes, start, end, *, colour=INK, width=1.8, head=13) -> None:
    """An arrow from start to end."""
    style = {"arrowstyle": "-|>", "color": colour, "lw": width, "mutation_scale": head, "shrinkA": 0, "shrinkB": 0}
    axes.annotate("", xy=end, xytext=start, arrowprops=style, zorder=9)


def say(axes, x, y, words, *, colour=INK, size=11, **style) -> None:
    """Words at a place."""
    axes.text(x, y, words, color=colour, fontsize=size, zorder=10, **{"ha": "center", "va": "center", **style})


def draw_blade(axes) -> None:
    """The blade with its axes at the root."""
    rings = blade()
    for a, b in pairwise(rings):
        quads = np.stack([a[:-1], a[1:], b[1:], b[:-1]], axis=1)
        normals = np.cross(quads[:, 2] - quads[:, 0], quads[:, 3] - quads[:, 1])
        normals /= np.linalg.norm(normals, axis=1, keepdims=True) + 1e-12
        order = np.argsort(quads.mean(axis=1) @ OUT)
        for quad, normal in zip(quads[order], normals[order], strict=True):
            tone = 0.78 + 0.2 * abs(float(normal @ [0.85, 0.1, -0.5]))
            axes.add_patch(
                Polygon(quad @ ONTO_PAGE, facecolor=(tone, tone * 0.99, tone * 0.95), edgecolor="none", lw=0)
            )
    for k in (0, 3, 8, 13, 22, 34, 46):
        axes.plot(*(rings[k][:61] @ ONTO_PAGE).T, color=QUIET, lw=0.7)
    axes.plot(*(rings[0] @ ONTO_PAGE).T, color=QUIET, lw=0.9)
    origin = np.zeros(2)
    for axis, length, colour, name in (
        ([1, 0, 0], 1.55, X_COLOUR, "x  to the suction side"),
        ([0, 1, 0], 1.75, Y_COLOUR, "y  to the trailing edge"),
        ([0, 0, 1], 12.4, Z_COLOUR, "z  root to tip"),
    ):
        end = length * np.array(axis) @ ONTO_PAGE
        if name[0] == "z":
            axes.plot(*np.array([origin, end]).T, color=colour, lw=1.2, ls=(0, (6, 3)))
            arrow(axes, 0.93 * end, end, colour=colour)
        else:
            arrow(axes, origin, end, colour=colour)
        shift = {"x": (0.12, 0.16), "y": (0.12, -0.16), "z": (-0.1, 0.3)}[name[0]]
        say(axes, *(end + shift), name, colour=colour, ha="right" if name[0] == "z" else "left")
    axes.plot(0, 0, "o", color=INK, ms=4, zorder=10)
    say(axes, -0.62, 0.0, "root", colour=QUIET)
    say(axes, 11.35, -0.3, "tip", colour=QUIET)
    say(axes, 6.4, -0.85, "trailing edge", colour=QUIET)
    say(axes, 5.0, 0.62, "leading edge", colour=QUIET)
    axes.set_title("Blade axes, hand: clockwise", loc="left", fontsize=12.5, fontweight="bold")


def draw_twist(axes) -> None:
    """A section at zero twist and one with positive twist, seen from the root: y to the right, x up."""
    plain = section(roundness=0.0) - [0, 0.33]
    twist = np.radians(18)
    turned = plain @ np.array([[np.cos(twist), -np.sin(twist)], [np.sin(twist), np.cos(twist)]])
    axes.plot(plain[:, 1], plain[:, 0], color=QUIET, lw=1, ls=(0, (4, 3)))
    axes.add_patch(Polygon(turned[:, ::-1], facecolor=PALE, edgecolor=INK, lw=1.4))
    arrow(axes, (0, 0), (0, 0.46), colour=X_COLOUR)
    arrow(axes, (0, 0), (0.9, 0), colour=Y_COLOUR)
    say(axes, 0.035, 0.45, "x, prebend", colour=X_COLOUR, ha="left")
    say(axes, 0.92, -0.01, "y, sweep", colour=Y_COLOUR, ha="left")
    axes.plot(0, 0, "o", color=Z_COLOUR, ms=6, zorder=11)
    axes.plot([0, 0.05], [-0.03, -0.27], color=Z_COLOUR, lw=0.6)
    say(axes, 0.05, -0.31, "z, into the page (pitch axis)", colour=Z_COLOUR, size=9.5)
    chord = np.array([[-0.33, 0.0], [0.67, 0.0]]) @ np.array(
        [[np.cos(twist), np.sin(twist)], [-np.sin(twist), np.cos(twist)]]
    )
    axes.plot(*chord.T, color=INK, lw=0.8)
    axes.add_patch(Arc((0, 0), 1.12, 1.12, theta1=0, theta2=18, color=INK, lw=1.2))
    arrow(axes, (0.5405, 0.146), (0.5326, 0.173), width=1.2, head=11)
    say(axes, 0.6, 0.085, "+twist", ha="left")
    say(axes, -0.35, -0.2, "leading edge", colour=QUIET, size=9.5)
    say(axes, 0.66, 0.28, "trailing edge", colour=QUIET, size=9.5)
    say(axes, -0.21, 0.2, "suction side", colour=QUIET, size=9.5)
    say(axes, 0.52, -0.12, "pressure side", colour=QUIET, size=9.5)
    axes.set_title("Positive twist, seen from the root", loc="left", fontsize=12.5, fontweight="bold")


def draw_element(axes, *, mirrored: bool) -> None:
    """An element of the suction side seen from outside, e1 to the right."""
    sign = -1 if mirrored else 1
    corners = np.array([[-0.75, -0.5 * sign], [0.75, -0.42 * sign], [0.75, 0.42 * sign], [-0.75, 0.55 * sign]])
    frame = Polygon(corners, facecolor=PALE, edgecolor=INK, lw=1.2)
    axes.add_patch(frame)
    angle = sign * np.radians(30)
    along, across = np.array([np.cos(angle), np.sin(angle)]), np.array([-np.sin(angle), np.cos(angle)])
    for step in np.arange(-1.2, 1.21, 0.1):
        line = np.array([step * across - 2 * along, step * across + 2 * along])
        (stroke,) = axes.plot(*line.T, color=PLY, lw=0.9)
        stroke.set_clip_path(frame)
    arrow(axes, (0, 0), (0.98, 0), colour=Z_COLOUR)
    arrow(axes, (0, 0), (0, 0.72), colour=Y_COLOUR)
    axes.plot(0, 0, "o", color=INK, ms=11, mfc="white", mew=1.4, zorder=11)
    axes.plot(0, 0, "o", color=INK, ms=3.5, zorder=12)
    say(axes, 1.0, 0.0, "e1", colour=Z_COLOUR, ha="left")
    say(axes, 0.0, 0.8, "e2", colour=Y_COLOUR)
    say(axes, -0.13, -0.14, "e3", colour=INK)
    low, high = sorted((0.0, 30.0 * sign))
    axes.add_patch(Arc((0, 0), 1.0, 1.0, theta1=low, theta2=high, color=INK, lw=1.4, zorder=9))
    end = 0.5 * np.array([np.cos(angle), np.sin(angle)])
    arrow(axes, end - 0.03 * sign * across, end, width=1.4, head=11)
    say(
        axes,
        0.53,
        0.155 * sign,
        "30°" if not mirrored else "−30°",
        ha="left",
        size=10,
        bbox={"fc": PALE, "ec": "none", "pad": 1},
    )
    edges = ("leading edge", "trailing edge")[::sign]
    say(axes, -0.78, 0.72, f"{edges[0]} ↑", colour=QUIET, size=9.5, ha="left")
    say(axes, -0.78, -0.68, f"{edges[1]} ↓", colour=QUIET, size=9.5, ha="left")
    title = "The same ply, hand: counter-clockwise" if mirrored else "Ply angle +30°, hand: clockwise"
    axes.set_title(title, loc="left", fontsize=12.5, fontweight="bold")


def main(path: Path) -> None:
    """Draw all four parts and write them."""
    figure = Figure(figsize=(14, 8.6), facecolor="white")
    FigureCanvasAgg(figure)
    grid = figure.add_gridspec(
        2, 3, height_ratios=[1, 1], left=0.02, right=0.98, top=0.94, bottom=0.07, hspace=0.2, wspace=0.08
    )
    for place, limits, draw in (
        (grid[0, :], (-1.0, 12.2, -1.55, 1.7), draw_blade),
        (grid[1, 0], (-0.5, 1.12, -0.42, 0.6), draw_twist),
        (grid[1, 1], (-0.85, 1.15, -0.8, 0.9), lambda axes: draw_element(axes, mirrored=False)),
        (grid[1, 2], (-0.85, 1.15, -0.8, 0.9), lambda axes: draw_element(axes, mirrored=True)),
    ):
        axes = figure.add_subplot(place)
        axes.set(xlim=limits[:2], ylim=limits[2:], aspect="equal", anchor="N")
        axes.set_axis_off()
        draw(axes)
    caption = (
        "Elements of the suction side, seen from outside. e1 is the pitch axis laid on the element, e3 the outward "
        "normal (on webs: towards the leading edge), e2 = e3 × e1."
    )
    figure.text(0.02, 0.025, caption, fontsize=10.5, color=QUIET)
    figure.savefig(path, dpi=115, metadata={"Software": None})


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_name("axes.png"))
