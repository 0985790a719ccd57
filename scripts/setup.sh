#!/usr/bin/env bash
# Sourced by demo.sh and test.sh: installs what is missing and builds. Functions only.

project=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
build_folder=${AUREOLE_BUILD:-$project/build}

# Names of the packages up to a heading of packages.txt ("# to test"), or all.
package_names() {
    if [ "$1" = run ]; then
        sed '/^# to test/,$d' "$project/scripts/packages.txt" | grep -v '^#'
    else
        grep -v '^#' "$project/scripts/packages.txt"
    fi
}

missing_packages() {
    local name
    for name in $(package_names "$1"); do
        dpkg-query -W -f='${Status}' "$name" 2>/dev/null | grep -q 'ok installed' || echo "$name"
    done
}

# Installs with apt as root or through sudo. Without the right to, says what is missing, and stops unless the
# build finds its libraries elsewhere (CMAKE_PREFIX_PATH or PKG_CONFIG_PATH is set).
install_packages() {
    local missing run=()
    if ! command -v dpkg-query >/dev/null; then
        echo "This is not a Debian system; these packages or their like are needed:" >&2
        package_names "$1" | sed 's/^/  /' >&2
        [ -n "${CMAKE_PREFIX_PATH:-}${PKG_CONFIG_PATH:-}" ] && return 0
        exit 1
    fi
    missing=$(missing_packages "$1" | tr '\n' ' ')
    [ -z "${missing// /}" ] && return 0
    if [ "$(id -u)" -ne 0 ]; then
        if command -v sudo >/dev/null && { [ -t 0 ] || sudo -n true 2>/dev/null; }; then
            run=(sudo)
        elif [ -n "${CMAKE_PREFIX_PATH:-}${PKG_CONFIG_PATH:-}" ]; then
            echo "Not installed by apt: $missing; going on with CMAKE_PREFIX_PATH and PKG_CONFIG_PATH." >&2
            return 0
        else
            echo "These packages are missing and there is no right to install them. Ask for:" >&2
            echo "  apt-get install $missing" >&2
            echo "or set CMAKE_PREFIX_PATH and PKG_CONFIG_PATH to where the libraries are." >&2
            exit 1
        fi
    fi
    echo "Installing: $missing"
    "${run[@]}" apt-get update -qq
    # shellcheck disable=SC2086
    "${run[@]}" env DEBIAN_FRONTEND=noninteractive apt-get install -y -qq --no-install-recommends $missing >/dev/null
}

# build TESTS(ON|OFF) TARGET...
build() {
    local tests=$1
    shift
    local options=()
    command -v ccache >/dev/null && options+=(-DCMAKE_CXX_COMPILER_LAUNCHER=ccache)
    [ -n "${CI:-}" ] && options+=(-DAUREOLE_WARNINGS_AS_ERRORS=ON)
    # A build with tests serves the demo as well: going back and forth between the two scripts compiles nothing again.
    if [ ! -f "$build_folder/build.ninja" ] ||
        { [ "$tests" = ON ] && ! grep -q "AUREOLE_BUILD_TESTS:BOOL=ON" "$build_folder/CMakeCache.txt"; }; then
        cmake -S "$project" -B "$build_folder" -G Ninja -DCMAKE_BUILD_TYPE=Release -DAUREOLE_BUILD_TESTS="$tests" \
            "${options[@]}" >"$build_folder.log" 2>&1 || { cat "$build_folder.log" >&2; exit 1; }
        rm -f "$build_folder.log"
    fi
    cmake --build "$build_folder" --target "$@"
}
