#!/usr/bin/env bash
# Draw the demonstration blade in two open viewers, as marram-24.paraview.png and marram-24.gmsh.png beside this file.
# Usage: bash examples/pictures/viewers.sh [FOLDER]
# On Debian and Ubuntu, missing system packages are installed (ParaView takes 1 GB); elsewhere ParaView with pvbatch, Xvfb
# with xvfb-run, and xdotool are wanted. gmsh's viewer comes with skinmesh. Look at the result: gmsh's list of names is
# clicked at places on the screen, which another gmsh than 4.15 may have elsewhere.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/../.."
source examples/prepare.sh

need_packages "${SYSTEM_PACKAGES[@]}" paraview python3-paraview xvfb xauth xdotool
for name in pvbatch xvfb-run xdotool; do
    command -v "$name" >/dev/null || fail "There is no $name here. Install ParaView, Xvfb and xdotool."
done
make_environment .venv
pip_install .venv -e '.[pictures]'

pictures=examples/pictures
folder=${1:-$pictures}
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
quietly .venv/bin/skinmesh build examples/marram-24/marram-24.yaml -o "$work/mesh" --formats vtm,msh

quietly xvfb-run -a pvbatch "$pictures/viewers_paraview.py" "$work/mesh" marram-24 "$work/marram-24.paraview.png"
quietly xvfb-run -a -s "-screen 0 1600x434x24 -wr" \
    .venv/bin/python "$pictures/viewers_gmsh.py" "$work/mesh" marram-24 "$work/marram-24.gmsh.png"

# 256 colours are plenty, and keep the repository small.
.venv/bin/python - "$work" "$folder" <<'END'
import sys
from pathlib import Path

from PIL import Image

for path in sorted(Path(sys.argv[1]).glob("*.png")):
    few = Image.open(path).convert("RGB").quantize(256, method=Image.Quantize.FASTOCTREE, dither=Image.Dither.NONE)
    few.save(Path(sys.argv[2]) / path.name, optimize=True)
    print(Path(sys.argv[2]) / path.name)
END
