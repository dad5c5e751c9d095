#!/bin/sh
# `begin` writes documents that `check` calls sound and `predict` takes; it writes over nothing; a bad document exits 4.
set -eu
program=$1/bin/pulsewright
folder=$(mktemp -d)
trap 'rm -rf "$folder"' EXIT
fail() { echo "$1"; exit 1; }
"$program" begin "$folder/new" --person P-9 --muscle left-quadriceps >"$folder/said"
grep -q '^Next: ' "$folder/said" || fail "begin does not say the next step"
count=0
for document in "$folder"/new/*.yaml "$2"/profiles/*/*.yaml; do
    "$program" check "$document" --today 2026-12-01 >"$folder/out" 2>"$folder/err" || fail "$document: $(cat "$folder/err")"
    grep -q ': sound; ' "$folder/out" || fail "$document is not called sound"
    grep -q 'NOT SIGNED' "$folder/err" || fail "$document: NOT SIGNED is missing"
    count=$((count + 1))
done
[ "$count" -ge 20 ] || fail "only $count documents"
"$program" predict "$folder/new/profile.yaml" --muscle left-quadriceps --train "$folder/new/train.yaml" --json >"$folder/out"
code=0; "$program" begin "$folder/new" --person P-9 --muscle m >/dev/null 2>&1 || code=$?
[ "$code" -eq 2 ] || fail "a second begin exits $code, not 2"
code=0; "$program" begin "$folder/other" --person "Jo Doe" --muscle m >/dev/null 2>&1 || code=$?
[ "$code" -eq 2 ] || fail "a name instead of a code exits $code, not 2"
sed 's/^  *tiers: .*/    tiers: 3.0q/' "$folder/new/profile.yaml" >"$folder/bad.yaml"
code=0; "$program" check "$folder/bad.yaml" >/dev/null 2>"$folder/err" || code=$?
[ "$code" -eq 4 ] || fail "a bad document exits $code, not 4"
grep -q 'bad.yaml:[0-9]*:12: muscles\[0\].tiers: holds 3.0q' "$folder/err" || fail "told: $(cat "$folder/err")"
"$program" check "$2/profiles/people/p-023.yaml" --today 2026-12-25 | grep -q 'measured 30 days ago' || fail "an old profile is not warned of"
