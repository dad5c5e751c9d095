#!/bin/sh
# Every command answers --help with its usage, its exit codes and exit 0, --version likewise, refuses what it does not know, and
# has its place on the program's page.
build=$1
source=$2
failed=0
fail() { printf 'FAILED: %s\n' "$*"; failed=1; }
log=$build/house-commands.log
for program in pulsewright pulsewright-bridge; do
    [ -x "$build/bin/$program" ] || { fail "$program is not built"; continue; }
    page=$build/man/$program.1
    [ -s "$page" ] || { fail "$program has no page"; continue; }
    "$build/bin/$program" --help >"$log" || fail "$program --help: exit $?"
    grep -q '^usage: ' "$log" || fail "$program --help shows no usage"
    "$build/bin/$program" --version | grep -q "^$program [0-9]" || fail "$program --version does not name program and version"
    "$build/bin/$program" no-such-command >/dev/null 2>"$log"
    [ $? -eq 2 ] || fail "$program takes a command it has not"
    # names are what the X list of commands.h holds, so that a command that --help leaves out is missed too
    wing=core
    [ "$program" = pulsewright ] || wing=bridge
    commands=$(grep -o 'X([a-z_]*)' "$source/$wing/command/commands.h" | sed 's/X(\(.*\))/\1/' | grep -vx name | tr _ -)
    [ -n "$commands" ] || fail "$wing/command/commands.h lists no command: this check would check nothing"
    for command in $commands; do
        timeout 20 "$build/bin/$program" "$command" --help >"$log" 2>&1 </dev/null || fail "$program $command --help: exit $?"
        grep -q "^usage: $program $command" "$log" || fail "$program $command --help shows no usage of its own"
        grep -q '^Exit: 0 done' "$log" || fail "$program $command --help does not say its exit codes"
        timeout 20 "$build/bin/$program" "$command" --no-such-option >/dev/null 2>&1 </dev/null
        [ $? -eq 2 ] || fail "$program $command takes --no-such-option"
        grep -q "^\.SS $command\$" "$page" || fail "$program.1 has nothing on $command"
        for option in $(sed -n 's/^  \(--*[a-zA-Z-]*\).*/\1/p' "$log"); do
            sed 's/\\-/-/g' "$page" | sed -n "/^\.SS $command\$/,/^\.S[SH] /p" | grep -qe "$option" ||
                case $option in --help | --version) ;; *) fail "$program.1: $command has no word on $option" ;; esac
        done
    done
done
exit $failed
