#!/usr/bin/env bash
# Install skinmesh into .venv of this repository and build the demonstration blade, with its pictures and its page.
# Usage: bash examples/first-mesh.sh
# On Debian and Ubuntu, missing system packages are installed too. A second run only builds.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."
source examples/prepare.sh

need_packages "${SYSTEM_PACKAGES[@]}"
make_environment .venv
pip_install .venv -e '.[pictures]'

.venv/bin/skinmesh build examples/marram-24/marram-24.yaml -o marram-24-mesh --pictures
.venv/bin/skinmesh page marram-24-mesh

cat <<'NEXT'

Look at it       in marram-24-mesh: marram-24.regions.png, .stacks.png, .thickness.png, .e1.png,
                 .cuts.png (three sections with every ply), .developed.png (the skin laid flat);
                 marram-24.page.html in a browser; marram-24.vtm in ParaView
Next             source .venv/bin/activate
                 skinmesh new my-blade
                 skinmesh build my-blade/marram-24.yaml
Your own table   skinmesh new my-blade --table TABLE.csv --profiles FOLDER
NEXT
