# shellcheck shell=bash
# Shared by examples/first-mesh.sh and tests/run.sh: system packages, a Python, an environment. Sourced, not run.

# shellcheck disable=SC2034  # used by the scripts that source this one
# What the wheels of gmsh (windows, fonts, threads) and VTK (EGL and a software renderer) load at run time.
SYSTEM_PACKAGES=(
    libgl1 libglu1-mesa libegl1 libgl1-mesa-dri libx11-6 libxcursor1 libxext6 libxfixes3 libxft2 libxinerama1
    libxrender1 libfontconfig1 libgomp1
)

say() { printf '%s\n' "$*" >&2; }

fail() {
    say "$*"
    exit 1
}

# Run a command quietly; show the end of what it printed only where it fails.
quietly() {
    local log status=0
    log=$(mktemp)
    "$@" >"$log" 2>&1 </dev/null || status=$?
    if ((status)); then tail -n 25 "$log" >&2; fi
    rm -f "$log"
    return "$status"
}

is_installed() { dpkg-query -W -f='${Status}' "$1" 2>/dev/null | grep -q 'install ok installed'; }

# need_packages NAME...: install the Debian or Ubuntu packages that are missing; do nothing where none is.
need_packages() {
    if ! command -v dpkg-query >/dev/null || ! command -v apt-get >/dev/null; then
        say "This machine has no apt-get. If a library is missing later, install what these packages hold: $*"
        return
    fi
    local name missing=() as_root=()
    for name in "$@"; do is_installed "$name" || missing+=("$name"); done
    ((${#missing[@]})) || return 0
    if (($(id -u))); then
        command -v sudo >/dev/null || fail "Packages are missing. Ask an administrator for: apt-get install ${missing[*]}"
        as_root=(sudo)
    fi
    say "Installing system packages: ${missing[*]}"
    if ((${#as_root[@]})); then sudo -v || fail "Cannot install packages without sudo."; fi
    quietly "${as_root[@]}" env DEBIAN_FRONTEND=noninteractive apt-get -qq update || fail "apt-get update failed."
    quietly "${as_root[@]}" env DEBIAN_FRONTEND=noninteractive \
        apt-get -qq install -y --no-install-recommends "${missing[@]}" || fail "apt-get install failed."
}

is_new_enough() { "$1" -c 'import sys; sys.exit(sys.version_info < (3, 11))' >/dev/null 2>&1; }

# Print a Python of version 3.11 or newer: $PYTHON where it is set, else the first one found.
find_python() {
    local candidate
    if [[ -n ${PYTHON:-} ]]; then
        is_new_enough "$PYTHON" || fail "PYTHON=$PYTHON is not a Python of version 3.11 or newer."
        printf '%s\n' "$PYTHON"
        return
    fi
    for candidate in python3 /usr/bin/python3 python3.14 python3.13 python3.12 python3.11; do
        if is_new_enough "$candidate"; then
            printf '%s\n' "$candidate"
            return
        fi
    done
    if command -v python3 >/dev/null; then
        fail "skinmesh needs Python 3.11 or newer; python3 here is $(python3 -c 'import platform; print(platform.python_version())')." \
            "Install a newer one, for example python3.12 and python3.12-venv, and run again with PYTHON=python3.12 set."
    fi
    fail "No python3 was found."
}

# make_environment FOLDER: a virtual environment, made only where there is no usable one.
make_environment() {
    local python version
    if [[ -x $1/bin/python ]] && is_new_enough "$1/bin/python" && "$1/bin/python" -m pip --version >/dev/null 2>&1; then
        return
    fi
    command -v python3 >/dev/null || [[ -n ${PYTHON:-} ]] || need_packages python3 python3-venv
    python=$(find_python) || exit 1
    if ! "$python" -c 'import ensurepip, venv' >/dev/null 2>&1; then
        version=$("$python" -c 'import sys; print(f"{sys.version_info[0]}.{sys.version_info[1]}")')
        need_packages "python$version-venv"
    fi
    say "Making a Python environment in ${1#"$PWD"/}"
    rm -rf -- "$1"
    quietly "$python" -m venv "$1" || fail "Cannot make a Python environment in $1."
}

# pip_install FOLDER ARGUMENT...: install into an environment; do nothing where the same was installed before.
pip_install() {
    local folder=$1 note wanted
    shift
    note=$folder/installed-$(printf '%s ' "$@" | cksum | cut -d ' ' -f 1).txt
    wanted="$* $(sha256sum pyproject.toml)"
    if [[ -f $note && $(<"$note") == "$wanted" ]]; then return; fi
    say "Installing Python packages into ${folder#"$PWD"/}"
    rm -f "$note"
    quietly "$folder/bin/python" -m pip install --disable-pip-version-check "$@" || fail "pip install failed."
    printf '%s\n' "$wanted" >"$note"
}
