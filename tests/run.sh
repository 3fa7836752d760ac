#!/usr/bin/env bash
# Everything that is checked: lint, format, types, tests, with their environments and system packages.
# Usage: bash tests/run.sh [PYTEST ARGUMENT...]
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."
source examples/prepare.sh

browser=()
if grep -qs '^ID=debian' /etc/os-release; then browser=(chromium chromium-driver); fi  # elsewhere the page's tests skip
need_packages "${SYSTEM_PACKAGES[@]}" calculix-ccx "${browser[@]}"
make_environment .venv-test
pip_install .venv-test -e '.[test]'
bin=$PWD/.venv-test/bin

# try_environment FOLDER ARGUMENT...: an environment of its own for what cannot stand beside skinmesh, or is not meant to.
# Where it cannot be had, the tests that want it are skipped.
try_environment() {
    local folder=$1
    shift
    if ! (make_environment "$folder" && pip_install "$folder" "$@"); then
        say "No ${folder#.venv-} here: the tests that want it are skipped."
        return 1
    fi
}

# Reads our bulk data back; wants an older NumPy than skinmesh has.
if ! "$bin/python" -c 'import sys; sys.exit(sys.version_info >= (3, 13))'; then
    say "pyNastran's NumPy has no wheel for this Python: the tests that read bulk data back with it are skipped."
elif try_environment .venv-pynastran pyNastran 'numpy<2'; then
    export SKINMESH_PYNASTRAN=$PWD/.venv-pynastran/bin/python
fi
# A second solver; its wheel asks for a newer Python than it needs.
if try_environment .venv-nastran95 --no-deps --ignore-requires-python --only-binary :all: numpy nastran95; then
    export SKINMESH_NASTRAN95=$PWD/.venv-nastran95/bin/python
fi
# Plane finite elements, to set sections beside; brings half a gigabyte of packages.
if try_environment .venv-sections sectionproperties; then
    export SKINMESH_SECTIONPROPERTIES=$PWD/.venv-sections/bin/python
fi
# A package that carries some 2 000 profile files; nothing of it is imported.
if try_environment .venv-airfoils --no-deps AeroSandbox; then
    SKINMESH_AIRFOILS=$(find "$PWD/.venv-airfoils" -name '*.dat' -printf '%h\n' | sort | uniq -c | sort -rn | awk 'NR == 1 {print $2}')
    export SKINMESH_AIRFOILS
fi

status=0
step() {
    say "== $1"
    shift
    "$@" || status=1
}
step "ruff check" "$bin/ruff" check .
step "ruff format" "$bin/ruff" format --check .
step "mypy" "$bin/mypy"
# Two processes, however many cores: a solver run of the demonstration deck takes 4 GB.
export OMP_NUM_THREADS=1
step "pytest" "$bin/python" -m pytest --numprocesses 2 --dist worksteal "$@"
exit "$status"
