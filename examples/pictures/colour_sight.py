"""Draw colour_sight.png: colours of regions and materials as four kinds of eyes see them, on light and on dark.

Usage: python examples/pictures/colour_sight.py [FILE.png]

``tests/test_colours.py`` holds the colours to the figures that stand in this picture.
"""

from __future__ import annotations

import sys
from itertools import combinations
from pathlib import Path

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from skinmesh.mesh.shellmesh import Region
from skinmesh.show.palette import MATERIAL_TONES, part_colours

# Complete loss of one kind of cone, on linear RGB: Machado, Oliveira and Fernandes, "A Physiologically-based Model for
# Simulation of Color Vision Deficiency" (2009), table of severity 1.0; the digits are from memory.
SIGHT = {
    "full colour sight": ((1, 0, 0), (0, 1, 0), (0, 0, 1)),
    "protanopia": ((0.152286, 1.052583, -0.204868), (0.114503, 0.786281, 0.099216), (-0.003882, -0.048116, 1.051998)),
    "deuteranopia": ((0.367322, 0.860646, -0.227968), (0.280085, 0.672501, 0.047413), (-0.011820, 0.042940, 0.968881)),
    "tritanopia": ((1.255528, -0.076749, -0.178779), (-0.078411, 0.930809, 0.147602), (0.004733, 0.691367, 0.303900)),
}
GROUNDS = {"light": ("#f3f1ea", "#222222"), "dark": ("#20252b", "#e9e6df")}
# One section from the pressure trailing edge round the nose, with all the caps and webs that have a tone of their own.
REGIONS = (
    *(Region(f"suction {name} strip", 1, "strip") for name in ("leading", "trailing")),
    *(Region(f"suction {name} panel", 1, "panel") for name in ("leading", "middle", "trailing")),
    *(Region(f"suction cap {k}", 1, "cap") for k in range(1, 5)),
    *(Region(f"web {k}", 0, "web") for k in range(1, 5)),
    Region("trailing base", 0, "base"),
)


def linear(colour: str) -> np.ndarray:
    """(3,) linear RGB of ``#rrggbb`` (IEC 61966-2-1)."""
    parts = np.array([int(colour[k : k + 2], 16) for k in (1, 3, 5)]) / 255
    return np.where(parts <= 0.04045, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)


def seen(colour: str, kind: str) -> np.ndarray:
    """(3,) linear RGB of a colour as such eyes see it."""
    return np.clip(np.array(SIGHT[kind]) @ linear(colour), 0, 1)


def cielab(light: np.ndarray) -> np.ndarray:
    """(3,) CIELAB of linear RGB under D65 (CIE 15)."""
    to_xyz = np.array([[0.41246, 0.35758, 0.18044], [0.21267, 0.71515, 0.07217], [0.01933, 0.11919, 0.95030]])
    xyz = to_xyz @ light / np.array([0.95047, 1.0, 1.08883])
    f = np.where(xyz > 216 / 24389, np.cbrt(xyz), (24389 / 27 * xyz + 16) / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def ciede2000(one: np.ndarray, two: np.ndarray) -> float:
    """Difference of two CIELAB colours: Sharma, Wu and Dalal, "The CIEDE2000 Color-Difference Formula" (2005)."""
    (l1, a1, b1), (l2, a2, b2) = one, two
    c = (np.hypot(a1, b1) + np.hypot(a2, b2)) / 2
    stretch = 1.5 - 0.5 * np.sqrt(c**7 / (c**7 + 25.0**7))
    c1, c2 = np.hypot(stretch * a1, b1), np.hypot(stretch * a2, b2)
    h1, h2 = np.degrees(np.arctan2(b1, stretch * a1)), np.degrees(np.arctan2(b2, stretch * a2))
    turn = (h2 - h1 + 180) % 360 - 180 if c1 * c2 else 0.0
    hue = h1 + turn / 2 if c1 * c2 else h1 + h2
    light, c = (l1 + l2) / 2, (c1 + c2) / 2
    d_l, d_c, d_h = l2 - l1, c2 - c1, 2 * np.sqrt(c1 * c2) * np.sin(np.radians(turn / 2))
    t = sum(
        share * np.cos(np.radians(k * hue + shift))
        for share, k, shift in ((1, 0, 0), (-0.17, 1, -30), (0.24, 2, 0), (0.32, 3, 6), (-0.20, 4, -63))
    )
    s_l = 1 + 0.015 * (light - 50) ** 2 / np.sqrt(20 + (light - 50) ** 2)
    s_c, s_h = 1 + 0.045 * c, 1 + 0.015 * c * t
    turned = ((hue % 360) - 275) / 25
    mixed = -2 * np.sqrt(c**7 / (c**7 + 25.0**7)) * np.sin(np.radians(60 * np.exp(-(turned**2))))
    return float(np.sqrt((d_l / s_l) ** 2 + (d_c / s_c) ** 2 + (d_h / s_h) ** 2 + mixed * (d_c / s_c) * (d_h / s_h)))


def differences(colours: dict[str, str], kind: str) -> dict[tuple[str, str], float]:
    """Difference of every two named colours as such eyes see them."""
    places = {name: cielab(seen(colour, kind)) for name, colour in colours.items()}
    return {(a, b): ciede2000(places[a], places[b]) for a, b in combinations(colours, 2)}


def shown(light: np.ndarray) -> np.ndarray:
    """(3,) sRGB, 0 to 1, of linear RGB."""
    return np.clip(np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055), 0, 1)


def draw(path: Path) -> None:
    """Draw the picture."""
    figure = Figure(figsize=(15, 8.6), dpi=80, facecolor="white")
    FigureCanvasAgg(figure)
    regions, materials = part_colours(REGIONS), dict(zip("12345678", MATERIAL_TONES, strict=True))
    figure.text(
        0.02, 0.965, "Colours of regions and of materials as different eyes see them", fontsize=16, weight="bold"
    )
    words = (
        "Simulated after Machado, Oliveira and Fernandes (2009); differences are CIEDE2000. 2 is hardly seen, 10 at a "
        "glance."
    )
    figure.text(0.02, 0.935, words, fontsize=11, color="#555555")
    for side, (ground, ink) in enumerate(GROUNDS.values()):
        axes = figure.add_axes((0.0, 0.46 - 0.46 * side, 1.0, 0.45))
        axes.add_patch(Rectangle((0, 0), 1, 1, color=ground))
        axes.set(xlim=(0, 1), ylim=(0, 1))
        axes.set_axis_off()
        for k, name in enumerate(regions):
            axes.text(
                0.148 + 0.043 * k, 0.93, name.replace(" ", "\n", 1), color=ink, fontsize=8, ha="center", va="center"
            )
        axes.text(0.87, 0.93, "materials in a cut", color=ink, fontsize=8, ha="center", va="center")
        for row, kind in enumerate(SIGHT):
            y = 0.70 - 0.215 * row
            least = [min(differences(group, kind).items(), key=lambda pair: pair[1]) for group in (regions, materials)]
            axes.text(0.01, y + 0.12, kind, color=ink, fontsize=11, weight="bold", va="center")
            (a, b), value = least[0]
            axes.text(0.01, y + 0.045, f"least {value:.1f}:\n{a}, {b}", color=ink, fontsize=8, va="center")
            for k, colour in enumerate(regions.values()):
                axes.add_patch(Rectangle((0.127 + 0.043 * k, y), 0.043, 0.16, color=shown(seen(colour, kind)), lw=0))
            for k, colour in enumerate(materials.values()):
                axes.add_patch(Rectangle((0.755 + 0.029 * k, y), 0.029, 0.16, color=shown(seen(colour, kind)), lw=0))
            axes.text(0.755, y - 0.022, f"least {least[1][1]:.1f}", color=ink, fontsize=8, va="center")
    figure.savefig(path, metadata={"Software": None})


if __name__ == "__main__":
    draw(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).with_suffix(".png"))
