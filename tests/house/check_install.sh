#!/bin/sh
# An install is whole: built for release, put into a folder, moved away, used there by a stranger's project through CMake and
# through pkg-config, with static and with shared libraries; the programs run, the pages and the profiles are there.
build=$1/install-test
source=$2
say() { printf '%s\n' "$*"; }
die() { say "FAILED: $*"; exit 1; }

# quietly COMMAND...: its output is shown only where it fails
quietly() {
    "$@" >"$build/log" 2>&1 || { tail -n 40 "$build/log"; die "$*"; }
}

use_tree() { # use_tree KIND PREFIX
    rm -rf "$build/consumer-$1"
    quietly cmake -S "$source/tests/consumer" -B "$build/consumer-$1" -G Ninja -DCMAKE_PREFIX_PATH="$2"
    quietly ninja -C "$build/consumer-$1"
    for program in twitch frame; do
        quietly env LD_LIBRARY_PATH="$2/lib" "$build/consumer-$1/$program"
    done
    PKG_CONFIG_PATH=$(dirname "$(find "$2" -name pulsewright-core.pc)")
    export PKG_CONFIG_PATH
    for pair in twitch:core frame:bridge; do
        program=${pair%:*}
        # shellcheck disable=SC2046 # lists of words
        quietly cc -std=gnu17 -o "$build/$program-$1" "$source/tests/consumer/$program.c" \
            $(pkg-config --cflags --libs "pulsewright-${pair#*:}")
        quietly env LD_LIBRARY_PATH="$(dirname "$PKG_CONFIG_PATH")" "$build/$program-$1"
    done
}

mkdir -p "$build"
for kind in static shared; do
    shared=OFF
    [ "$kind" = static ] || shared=ON
    rm -rf "$build/put-$kind" "$build/moved-$kind"
    quietly cmake -S "$source" -B "$build/$kind" -G Ninja -DCMAKE_BUILD_TYPE=Release -DPULSEWRIGHT_TESTS=OFF \
        -DBUILD_SHARED_LIBS=$shared -DCMAKE_INSTALL_PREFIX="$build/put-$kind" -DCMAKE_INSTALL_LIBDIR=lib
    quietly ninja -C "$build/$kind"
    quietly cmake --install "$build/$kind"
    mv "$build/put-$kind" "$build/moved-$kind"
    use_tree "$kind" "$build/moved-$kind"
    quietly "$build/moved-$kind/bin/pulsewright" --version
    quietly "$build/moved-$kind/bin/pulsewright-bridge" --version
    say "$kind: installed, moved, used by CMake and by pkg-config"
done

tree=$build/moved-static
for file in share/pulsewright/profiles/people/p-017.yaml share/doc/pulsewright/LICENSE share/doc/pulsewright/README.md \
    share/man/man1/pulsewright.1 share/man/man1/pulsewright-bridge.1 share/man/man1/pulsewright-panel.1 include/pulsewright/core/predict/predict.h; do
    [ -s "$tree/$file" ] || die "$file is not installed"
done
[ ! -e "$tree/include/pulsewright/core/command" ] || die "headers of the program are installed as the library's"
quietly "$tree/bin/pulsewright" check "$tree/share/pulsewright/profiles/people/p-017.yaml" --today 2026-11-25
grep -rl "$source" "$tree/lib/cmake" "$tree/lib/pkgconfig" && die "the files above name the folder of the sources"
grep -rl "$build" "$tree/lib/cmake" "$tree/lib/pkgconfig" && die "the files above name the folder of the build"
exit 0
