#!/bin/sh
# The house's habits that a program can see. What is listed is every breach, not the first.
build=$1
source=$2
failed=0
fail() { printf 'FAILED: %s\n' "$*"; failed=1; }
cd "$source" || exit 1
command -v git >/dev/null && git rev-parse --is-inside-work-tree >/dev/null 2>&1 || { echo "no git clone: skipped"; exit 77; }
git() { command git -c safe.directory='*' "$@"; }
git ls-files >"$build/house-files"
[ -s "$build/house-files" ] || fail "git lists no file"

# the top level: three documents, the build, six folders, dot-files; nothing else
sed 's,/.*,,' "$build/house-files" | sort -u | grep -v '^\.' |
    grep -vxE 'README\.md|DEVELOPERS\.md|LICENSE|CMakeLists\.txt|core|bridge|gui|tests|profiles|docs' && fail "not of the top level: the above"
grep -E '(^|/)(gmon\.out|a\.out|core\.[0-9]+)$|\.(o|a|so|gcda|gcno|orig|rej)$' "$build/house-files" && fail "made by a tool, not by a person: the above"

grep -E '\.[ch]$' "$build/house-files" >"$build/house-sources"
while read -r file; do
    [ -f "$file" ] || continue
    lines=$(wc -l <"$file")
    [ "$lines" -le 650 ] || fail "$file: $lines lines, at most 650"
    head -c 2 "$file" | grep -q '^/\*' || fail "$file: does not open by saying what it is"
    case $file in
    *.h) grep -q '^#ifndef PULSEWRIGHT_\|^#pragma once\|^#ifndef [A-Z_]*_H' "$file" || fail "$file: no include guard" ;;
    esac
    awk -v file="$file" 'length($0) > 160 { printf "%s:%d: %d columns, at most 160\n", file, FNR, length($0); bad = 1 }
         /\t/ { printf "%s:%d: a tab\n", file, FNR; bad = 1 }
         / +$/ { printf "%s:%d: blanks at the end\n", file, FNR; bad = 1 } END { exit bad }' "$file" || failed=1
done <"$build/house-sources"

# words are put together here so that this file does not hold them
grep -vE '^(LICENSE)$' "$build/house-files" | tr '\n' '\0' | xargs -0 grep -nIwE "TO""DO|FIX""ME|X""XX|HA""CK" && fail "work left over: the above"
tr '\n' '\0' <"$build/house-files" | xargs -0 grep -nIE "/wo""rk/|/tm""p/wt|far""m-|\.libra""ry/" && fail "a place of work: the above"

# functions that public headers promise carry the name of what they belong to, and no header leaves (void) out
grep -nE '^[a-z].*[a-z_]+\(\);' $(grep '\.h$' "$build/house-sources") && fail "() for (void): the above"
# a header's first comment says what it is: at least five words
for file in $(grep '\.h$' "$build/house-sources"); do
    words=$(sed -n '1,/\*\//p' "$file" | wc -w)
    [ "$words" -ge 5 ] || fail "$file: its first comment says nothing"
done
exit $failed
