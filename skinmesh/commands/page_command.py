"""``skinmesh page``: one page to look at a built blade."""

from __future__ import annotations

from pathlib import Path
from time import perf_counter

import click
from rich.console import Console
from rich.text import Text

from skinmesh.commands.closing import CAUTION, file_size, printable
from skinmesh.commands.stages import shown_stages
from skinmesh.page.write import write_page


@click.command()
@click.argument("directory", metavar="DIR", type=click.Path(path_type=Path))
def page(directory: Path) -> None:
    """Write one HTML page to look at the built mesh in DIR.

    The blade in 3D by region, stack, thickness, ply or quality; the developed skin; a cut at any z with every ply to
    scale; planform, mass and stiffness along the span; stacks, checks, warnings and inputs. The page holds all that it
    needs, opens in a browser without a network, and can be sent to a colleague as it is.

    \b
    Example:
      skinmesh page marram-24-mesh
    """
    start = perf_counter()
    with shown_stages() as stages:
        path = write_page(directory, progress=stages.begin)
        stages.end()
    console = Console(highlight=False, markup=False, emoji=False, soft_wrap=True)
    console.print(Text(f"{printable(str(path))}  {file_size(path.stat().st_size)}"))
    console.print(f"Done in {perf_counter() - start:.1f} s. Open it in a browser.")
    console.print(Text(CAUTION, style="dim"))
