#!/usr/bin/env bash
# Install skinmesh into .venv of this repository and build the demonstration blade, with a picture of its regions.
# Usage: bash examples/first-mesh.sh
# On Debian and Ubuntu, missing system packages are installed too. A second run only builds.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."
source examples/prepare.sh

need_packages "${SYSTEM_PACKAGES[@]}"
make_environment .venv
pip_install .venv -e '.[pictures]'

.venv/bin/skinmesh build examples/marram-24/marram-24.yaml -o marram-24-mesh --pictures

cat <<'NEXT'

Look at it       marram-24-mesh/marram-24.regions.png, or open marram-24.vtu in ParaView
Next             source .venv/bin/activate
                 skinmesh new my-blade
                 skinmesh build my-blade/marram-24.yaml
Your own table   skinmesh new my-blade --table TABLE.csv --profiles FOLDER
NEXT
