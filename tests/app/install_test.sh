#!/usr/bin/env bash
# Installs into a temporary folder, builds a program that uses the library from there, and runs it: install_test.sh
# BUILD_FOLDER CONSUMER_FOLDER COMPILER FLAGS. The program predicts two scenarios one after the other and then at the same
# time; both ways must give the same bytes.
set -euo pipefail
build=$1 consumer=$2 compiler=$3 flags=$4
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
fail() {
    echo "install_test: $*" >&2
    exit 1
}

prefix="$work/pre fix"
cmake --install "$build" --prefix "$prefix" >"$work/log" || { cat "$work/log"; fail "install failed"; }
for file in bin/aureole include/aureole/app/predict.hpp include/aureole/version.hpp \
    share/bash-completion/completions/aureole share/man/man1/aureole.1 share/man/man1/aureole-predict.1; do
    [ -s "$prefix/$file" ] || fail "$file was not installed"
done
[ "$(find "$prefix" -name aureoleConfig.cmake | wc -l)" = 1 ] || fail "aureoleConfig.cmake was not installed"
config=$(find "$prefix" -name aureoleTargets.cmake)
for place in "$build" "$(dirname "$consumer")"; do
    if grep -qF "$place" "$config"; then
        fail "$config names $place"
    fi
done

cmake -S "$consumer" -B "$work/consumer" -DCMAKE_PREFIX_PATH="$prefix" -DCMAKE_CXX_COMPILER="$compiler" \
    -DCMAKE_CXX_FLAGS="$flags" \
    >"$work/log" 2>&1 || { cat "$work/log"; fail "find_package(aureole) failed"; }
cmake --build "$work/consumer" >"$work/log" 2>&1 || { cat "$work/log"; fail "the consumer was not built"; }

export SOURCE_DATE_EPOCH=1700000000
said=$("$work/consumer/consumer" "$work")
[ "$said" = "$("$prefix/bin/aureole" --version)" ] || fail "the library says '$said', the program another version"
for run in 0 1; do
    [ -s "$work/alone_$run/summary.json" ] || fail "run $run left no summary"
    compgen -G "$work/alone_$run/maps/*.fits" >/dev/null || fail "run $run left no maps"
    diff -r "$work/alone_$run" "$work/together_$run" || fail "run $run differs when another goes on beside it"
done
if diff -rq "$work/alone_0" "$work/alone_1" >/dev/null; then
    fail "two scenarios gave the same results"
fi
echo "installed, built against, and two runs at the same time gave the bytes of two runs in turn"
