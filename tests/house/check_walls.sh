#!/bin/sh
# The walls: the arrows gui -> bridge -> core in every include, and a planning program that can not open a port, by what it
# links and by what it imports (1: what a reader sees; 2: what the linker saw).
build=$1
source=$2
failed=0
fail() { printf 'FAILED: %s\n' "$*"; failed=1; }
cd "$source" || exit 1

# forbid WHERE PATTERN WHY: no include in the sources of WHERE may match
forbid() {
    [ -d "$1" ] || return 0 # a part that has no sources yet
    found=$(grep -rnE --include='*.[ch]' "^[[:space:]]*#[[:space:]]*include[[:space:]]*[<\"]($2)" "$1")
    [ -z "$found" ] || fail "$3:
$found"
}
forbid core '(\.\./)*(bridge|gui)/' "core includes another wing"
forbid bridge '(\.\./)*gui/' "bridge includes gui"
forbid core 'sys/socket|sys/un\.h|netinet/|arpa/|netdb|termios|sys/ioctl|libserialport|SDL|sodium|sqlite3|pty\.h|X11/|xcb' \
    "core includes what could open a port, a socket or a window"
forbid bridge 'SDL' "bridge includes SDL"
forbid gui 'libserialport|termios|sodium' "gui reaches past the bridge"
forbid gui/widget 'SDL' "widgets know SDL"
forbid gui/view 'SDL' "views know SDL"
for folder in core/train core/dose core/digest bridge/wire bridge/stimulator; do
    [ -d "$folder" ] || fail "$folder is gone: the checks above and below it check nothing"
done

# Freestanding parts: no heap, no libc beyond string.h, no floating point, so that the device runs the same source. Of core/train
# segment.c is the device's part; of core/dose the guard; of core/digest all.
for file in core/train/segment.[ch] core/dose/dose.[ch] core/digest/*.[ch] bridge/wire/*.[ch] bridge/stimulator/*.[ch]; do
    [ -f "$file" ] || { fail "$file is gone"; continue; }
    grep -nE '^[[:space:]]*#[[:space:]]*include[[:space:]]*<' "$file" |
        grep -vE '<(stdint|stdbool|stddef|limits|string|assert)\.h>' && fail "$file: a header the device has not"
    sed -e 's,/\*.*\*/,,' -e 's,//.*,,' "$file" | grep -vE '^[[:space:]]*(/\*|\*)' |
        grep -nwE 'float|double|malloc|calloc|realloc|free|printf' && fail "$file: no heap, no floating point, no printing"
done

program=$build/bin/pulsewright
[ -x "$program" ] || { fail "$program is not built"; exit 1; }
linked=$(ldd "$program") || fail "ldd can not read $program"
needed=$(readelf -d "$program" | sed -n 's/.*(NEEDED).*\[\(.*\)\]/\1/p')
[ -n "$needed" ] || fail "readelf shows nothing that $program needs"
for library in libserialport libSDL2 libsodium libsqlite3; do
    printf '%s\n%s\n' "$linked" "$needed" | grep -F "$library" && fail "pulsewright links $library"
done
# symbols that a program imports itself; what a sanitizer's runtime brings is not the program's (it wraps many calls by name)
imports=$(nm -D --undefined-only "$program" | sed 's/@.*//' | awk '{print $2}')
printf '%s\n' "$imports" | grep -q '^fy_' || fail "nm shows no import of libfyaml: the check of imports would check nothing"
for symbol in socket connect bind listen accept accept4 socketpair sendto sendmsg recvfrom recvmsg getaddrinfo tcsetattr cfsetispeed \
    cfsetospeed cfsetspeed cfmakeraw openpty forkpty posix_openpt grantpt unlockpt dlopen popen system execve execvp execl execlp \
    posix_spawn posix_spawnp sp_open SDL_Init; do
    printf '%s\n' "$imports" | grep -qx "$symbol" && fail "pulsewright imports $symbol"
done
bridge=$build/bin/pulsewright-bridge
if [ -x "$bridge" ]; then
    readelf -d "$bridge" | grep -F libSDL2 && fail "pulsewright-bridge links SDL"
fi
exit $failed
