"""Draw a built blade in ParaView, for ParaView's own pvbatch: regions by name, some switched off, and node sets.

Usage: pvbatch viewers_paraview.py MESH_DIR STEM FILE.png
"""

from __future__ import annotations

import json
import sys
from pathlib import Path

from paraview.simple import (
    AssignViewToLayout,
    ColorBy,
    CreateLayout,
    CreateView,
    ExtractBlock,
    GetColorTransferFunction,
    GetScalarBar,
    ImportPresets,
    SaveScreenshot,
    Show,
    XMLMultiBlockDataReader,
)

INK = [0.13, 0.13, 0.13]
PAPER = [1.0, 1.0, 1.0]
SIZE = (1600, 640)
# Root left, leading edge up: the eye stands on the suction side, for the inside also towards trailing edge and root.
SUCTION = (1.0, 0.0, 0.0)
INSIDE = (0.70, 0.55, -0.45)
SWITCHED_OFF = ("suction leading strip", "suction leading panel", "suction trailing panel", "suction trailing strip")


def main(folder: Path, stem: str, picture: Path) -> None:
    """Open ``stem.vtm`` with the colours of ``stem.colours.json`` and save a picture."""
    colours = folder / f"{stem}.colours.json"
    ImportPresets(str(colours))
    names = json.loads(colours.read_text(encoding="utf-8"))[0]["Annotations"][1::2]
    blade = XMLMultiBlockDataReader(FileName=[str(folder / f"{stem}.vtm")])
    whole = ExtractBlock(Input=blade, Selectors=[selector(name) for name in names])
    opened = ExtractBlock(Input=blade, Selectors=[selector(name) for name in names if name not in SWITCHED_OFF])
    sets = ExtractBlock(Input=blade, Selectors=[selector("node sets")])

    layout = CreateLayout()
    layout.SetSize(*SIZE)
    layout.SplitHorizontal(0, 0.81)
    layout.SplitVertical(1, 0.33)
    above = view_of(layout, 3, focus=(0.0, 0.36, 12.0), direction=SUCTION, half_height=2.0)
    coloured(Show(whole, above), stem)
    below = view_of(layout, 4, focus=(0.0, 0.40, 4.62), direction=INSIDE, half_height=1.5)
    shown = coloured(Show(opened, below), stem)
    shown.SetRepresentationType("Surface With Edges")
    shown.EdgeColor, shown.LineWidth = [0.35, 0.35, 0.35], 0.5
    dots = Show(sets, below)
    ColorBy(dots, ("CELLS", ""))
    dots.SetRepresentationType("Points")
    dots.AmbientColor = dots.DiffuseColor = INK
    dots.PointSize = 4
    # The legend has a view of its own, which looks past the blade.
    beside = view_of(layout, 2, focus=(0.0, 100.0, 0.0), direction=SUCTION, half_height=1.0)
    legend(coloured(Show(whole, beside), stem), beside)
    SaveScreenshot(str(picture), layout, ImageResolution=list(SIZE), CompressionLevel="9")


def selector(name: str) -> str:
    """How ParaView finds a block by name: without blanks and most marks."""
    return "/Root/" + "".join(letter for letter in name if letter.isalnum() or letter in "-_.")


def view_of(layout, place: int, *, focus, direction, half_height: float):
    """A calm view: white, parallel, no axes, the blade's z to the right."""
    view = CreateView("RenderView")
    AssignViewToLayout(view=view, layout=layout, hint=place)
    view.UseColorPaletteForBackground = 0
    view.Background = PAPER
    view.OrientationAxesVisibility = 0
    view.CameraParallelProjection = 1
    view.CameraFocalPoint = focus
    view.CameraPosition = [f + 40.0 * d for f, d in zip(focus, direction, strict=True)]
    view.CameraViewUp = (direction[1], -direction[0], 0.0)
    view.CameraParallelScale = half_height
    return view


def coloured(shown, stem: str):
    """By region, in the colours of the imported preset."""
    ColorBy(shown, ("CELLS", "region"))
    GetColorTransferFunction("region").ApplyPreset(f"{stem} regions", False)
    shown.Specular = 0.0
    shown.Ambient, shown.Diffuse = 0.55, 0.5
    return shown


def legend(shown, view) -> None:
    """Names beside their colours."""
    shown.SetScalarBarVisibility(view, True)
    bar = GetScalarBar(GetColorTransferFunction("region"), view)
    bar.Title, bar.ComponentTitle = "region", ""
    bar.HorizontalTitle = 1
    bar.TitleColor = bar.LabelColor = INK
    bar.TitleFontSize = bar.LabelFontSize = 10
    bar.WindowLocation = "Any Location"
    bar.Position = [0.82, 0.1]
    bar.ScalarBarLength = 0.8


if __name__ == "__main__":
    main(Path(sys.argv[1]), sys.argv[2], Path(sys.argv[3]))
