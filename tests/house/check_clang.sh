#!/bin/sh
# A second compiler reads every source with the same warnings as errors. Skipped where clang is not installed: it is no need of
# the build.
build=$1
source=$2
command -v clang >/dev/null || { echo "no clang: skipped"; exit 77; }
quietly() {
    "$@" >"$build/clang.log" 2>&1 || { grep -E 'error|warning' "$build/clang.log" || tail -n 30 "$build/clang.log"; echo "FAILED: $*"; exit 1; }
}
quietly cmake -S "$source" -B "$build/clang" -G Ninja -DCMAKE_C_COMPILER=clang -DPULSEWRIGHT_WERROR=ON -DCMAKE_BUILD_TYPE=Debug \
    -DPULSEWRIGHT_TEST_BUILD=ON
quietly ninja -C "$build/clang"
