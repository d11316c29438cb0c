#!/bin/sh
# Sets up Wellposed in .venv beside this folder:  sh docker/setup.sh [test]
# With "test" also what the tests need. A second run finds everything in place and ends at once.
set -eu
cd -- "$(dirname -- "$0")/.."

packages="libgl1 libglu1-mesa libglvnd0 libx11-6 libxext6 libxrender1 libxcursor1 libxfixes3 libxft2 libxinerama1 \
libfontconfig1 libgomp1"

fail() {
    echo "docker/setup.sh: $1" >&2
    exit 1
}

can_install() {
    [ "$(id -u)" = 0 ] && command -v apt-get >/dev/null
}

install_packages() {
    echo "Installing Debian packages: $*"
    export DEBIAN_FRONTEND=noninteractive
    apt-get -qq update && apt-get -qq install -y --no-install-recommends "$@" >/dev/null
}

is_recent() {
    "$1" -c 'import sys; sys.exit(sys.version_info < (3, 11))' >/dev/null 2>&1
}

find_python() {
    for python in python3 python3.14 python3.13 python3.12 python3.11 python; do
        if is_recent "$python"; then return; fi
    done
    fail "Python 3.11 or newer is needed, and none was found as python3, python3.11 ... python3.14."
}

make_environment() {
    find_python
    if ! "$python" -c 'import ensurepip, venv' >/dev/null 2>&1; then
        module="python$("$python" -c 'import sys; print("%d.%d" % sys.version_info[:2])')-venv"
        if can_install; then install_packages "$module" || :; fi
        "$python" -c 'import ensurepip, venv' >/dev/null 2>&1 ||
            fail "$python has no module venv or ensurepip; on Debian and Ubuntu they come with: apt-get install $module"
    fi
    "$python" -m venv --clear .venv
}

gmsh_loads() {
    .venv/bin/python -c 'import gmsh' >/dev/null 2>&1
}

case ${1:-} in
    "") extra="" ;;
    test) extra="[test]" ;;
    *)
        echo "usage: sh docker/setup.sh [test]" >&2
        exit 2
        ;;
esac

# One line per set-up that is complete; the tests' set-up holds the other one.
mark="$(cksum <pyproject.toml) $(pwd)"
if ! is_recent .venv/bin/python || ! grep -qxF -e "$mark $extra" -e "$mark [test]" .venv/set-up 2>/dev/null; then
    echo "Setting up Wellposed in $(pwd)/.venv; this takes a minute or two."
    if ! is_recent .venv/bin/python || ! .venv/bin/python -m pip --version >/dev/null 2>&1; then make_environment; fi
    .venv/bin/python -m pip install --quiet --disable-pip-version-check --editable ".$extra" ||
        fail "the Python packages could not be installed; the reason is above."
    echo "$mark $extra" >.venv/set-up
fi

if ! gmsh_loads; then
    # shellcheck disable=SC2086 # a list of words
    if can_install; then install_packages $packages || :; fi
    gmsh_loads ||
        fail "the mesh generator gmsh lacks shared libraries; on Debian and Ubuntu: apt-get install --no-install-recommends $packages"
fi
