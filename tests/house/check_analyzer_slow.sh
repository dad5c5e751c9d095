#!/bin/sh
# gcc's analyzer over every source of the libraries and programs; its findings are errors.
build=$1
source=$2
quietly() {
    "$@" >"$build/analyzer.log" 2>&1 || { grep -E 'error|warning' "$build/analyzer.log" || tail -n 30 "$build/analyzer.log"; echo "FAILED: $*"; exit 1; }
}
quietly cmake -S "$source" -B "$build/analyzer" -G Ninja -DPULSEWRIGHT_WERROR=ON -DPULSEWRIGHT_TESTS=OFF -DCMAKE_BUILD_TYPE=Debug \
    -DCMAKE_C_FLAGS=-fanalyzer
quietly ninja -k 0 -C "$build/analyzer"
