#!/usr/bin/env bash
# Installs what is missing, builds everything and runs all tests.
set -euo pipefail
# shellcheck source=scripts/setup.sh
source "$(dirname "$0")/setup.sh"
install_packages test
build ON all
ctest --test-dir "$build_folder" --output-on-failure -j "$(nproc)" "$@"
