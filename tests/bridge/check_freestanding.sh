#!/bin/sh
# The parts that a microcontroller shares: they compile without floating-point registers, use no heap and nothing of the C library beyond
# mem* calls.
set -eu
source=$2
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
compiler=${CC:-cc}
count=0
for file in "$source"/core/train/segment.c "$source"/core/dose/dose.c "$source"/core/digest/blake2b.c "$source"/bridge/wire/*.c "$source"/bridge/stimulator/*.c; do
    flags=
    case $(uname -m) in x86_64 | aarch64) flags=-mgeneral-regs-only ;; esac
    "$compiler" -std=c17 -O2 -ffreestanding -fno-stack-protector $flags -I"$source" -c "$file" -o "$work/$count.o"
    if nm -u "$work/$count.o" | awk '{ print $2 }' | grep -Ev '^(mem(cpy|set|move|cmp)|segment_|dose_|blake2b|image_|message_|frame_|device_|crc32c|cobs_|cause_text|reason_text|_GLOBAL_OFFSET_TABLE_)'; then
        echo "$file uses the names above"
        exit 1
    fi
    count=$((count + 1))
done
[ "$count" -ge 10 ]
echo "$count files: no heap, no floating point, no library but mem*"
