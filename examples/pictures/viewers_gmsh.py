"""Take a picture of gmsh's own window with a built blade in it, some regions hidden, and the list of their names.

Usage: xvfb-run -s "-screen 0 1600x434x24 -wr" python viewers_gmsh.py MESH_DIR STEM FILE.png
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

import gmsh
import numpy as np
from PIL import ImageGrab
from scipy.spatial.transform import Rotation

WIDTH, HEIGHT, LIST = 1600, 434, 344
# Root left, leading edge up; the eye stands on the suction side, towards trailing edge and root.
INSIDE = (0.70, 0.55, -0.45)
SWITCHED_OFF = ("suction leading strip", "suction leading panel", "suction trailing panel", "suction trailing strip")
# Where things are in the window Visibility, in pixels of the screen.
FIRST_LINE, LINE, APPLY = 83, 13.03, (WIDTH - 64, 384)
WINDOW = {
    "GraphicsPositionX": 0,
    "GraphicsPositionY": 0,
    "GraphicsWidth": WIDTH - LIST,
    "GraphicsHeight": HEIGHT,
    "MenuWidth": 1,
    "VisibilityPositionX": WIDTH - LIST,
    "VisibilityPositionY": 0,
    "BackgroundGradient": 0,
}


def main(folder: Path, stem: str, picture: Path) -> None:
    """Open ``stem.msh``, to which gmsh adds the colours of ``stem.msh.opt`` by itself, and save a picture."""
    gmsh.initialize(readConfigFiles=False)
    for name, value in WINDOW.items():
        gmsh.option.setNumber(f"General.{name}", value)
    gmsh.open(str(folder / f"{stem}.msh"))
    gmsh.option.setNumber("Mesh.SurfaceEdges", 1)
    gmsh.option.setNumber("Mesh.Light", 0)
    gmsh.option.setColor("Mesh.Lines", 90, 90, 90)
    for k, part in enumerate(quaternion(INSIDE)):
        gmsh.option.setNumber(f"General.TrackballQuaternion{k}", part)
    for axis in "XYZ":
        gmsh.option.setNumber(f"General.Scale{axis}", 1.25)
    gmsh.option.setNumber("General.TranslationX", 8.5)
    gmsh.fltk.initialize()
    wait(1.0)
    press("key", "ctrl+shift+v")  # Tools > Visibility
    names = [gmsh.model.getPhysicalName(*group) for group in gmsh.model.getPhysicalGroups(2)]
    press("keydown", "ctrl")
    for name in SWITCHED_OFF:
        press("mousemove", WIDTH - 160, FIRST_LINE + round(LINE * names.index(name)), "click", 1)
    press("keyup", "ctrl")
    press("mousemove", *APPLY, "click", 1, "mousemove", WIDTH // 2, HEIGHT - 1)
    wait(1.0)
    ImageGrab.grab(xdisplay=os.environ["DISPLAY"]).save(picture)
    gmsh.finalize()


def press(*arguments: str | int) -> None:
    """Use keys and mouse."""
    subprocess.run(["xdotool", *map(str, arguments)], check=True)
    wait(0.5)


def wait(seconds: float) -> None:
    """Let the windows work."""
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        gmsh.fltk.wait(0.1)


def quaternion(direction: tuple[float, float, float]) -> np.ndarray:
    """(4,) rotation of the blade for an eye in this direction, z to the right; imaginary parts first."""
    out = np.array(direction) / np.linalg.norm(direction)
    up = np.array([out[1], -out[0], 0.0]) / np.hypot(out[0], out[1])
    return Rotation.from_matrix(np.stack([np.cross(up, out), up, out])).inv().as_quat()


if __name__ == "__main__":
    main(Path(sys.argv[1]), sys.argv[2], Path(sys.argv[3]))
