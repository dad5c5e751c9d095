#!/bin/sh
# plan, recount and pulses as programs: exit codes, the verdict first, what is written, the keys that machines read, the same bytes twice.
# check_plan.sh BUILD_DIR SOURCE_DIR
set -u
program=$1/bin/pulsewright
samples=$2/profiles
here=$(mktemp -d)
trap 'rm -rf "$here"' EXIT
profile=$samples/people/p-017.yaml
stimulator=$samples/stimulators/bench-a.yaml
failed=0
fail() { echo "FAILED: $1"; failed=1; }
expect() { # CODE WORDS...: the program's exit code
    want=$1; shift
    "$program" "$@" >"$here/out" 2>"$here/err"
    got=$?
    [ "$got" -eq "$want" ] || { fail "exit $got, not $want: $*"; cat "$here/err"; }
}

# met in full: 0, the verdict first, not signed
expect 0 plan "$profile" "$samples/demands/short-hold.yaml" --stimulator "$stimulator" -o "$here/plan.yaml" --today 2026-11-05 --ensemble 16
[ "$(head -n 1 "$here/out")" = "Makes 3 of 3" ] || fail "the verdict is not the first line"
grep -q "^NOT SIGNED: no clinician has approved these pulses. Not for use on a person.$" "$here/err" || fail "NOT SIGNED is missing on stderr"
grep -q "^format: pulsewright-plan-1$" "$here/plan.yaml" || fail "the plan is no plan document"

# never over an existing file without --replace; the old one is kept
cp "$here/plan.yaml" "$here/first.yaml"
expect 2 plan "$profile" "$samples/demands/short-hold.yaml" --stimulator "$stimulator" -o "$here/plan.yaml" --today 2026-11-05 --ensemble 16
cmp -s "$here/plan.yaml" "$here/first.yaml" || fail "an existing plan was changed"
expect 0 plan "$profile" "$samples/demands/short-hold.yaml" --stimulator "$stimulator" -o "$here/plan.yaml" --today 2026-11-05 --ensemble 16 --replace --json
cmp -s "$here/plan.yaml" "$here/first.yaml" || fail "the same demand gave other bytes"
cmp -s "$here/plan.yaml.1" "$here/first.yaml" || fail "the old plan is not kept as NAME.1"
for key in feasible contractions_asked contractions_met first_miss binding capacity_end force_remaining_50_end charge_total_uc blocks \
    ensemble_met_share seconds approval frequency_pps opening pattern duration_us current_ma ramp_up hold_ms ramp_down rest_ms why reason; do
    grep -q "\"$key\":" "$here/out" || fail "key $key is missing in the JSON of plan"
done

# can not be met: 3, written all the same, what fails first and what would work
sed 's/^target_n: .*/target_n: 200/' "$samples/demands/short-hold.yaml" >"$here/much.yaml"
expect 3 plan "$profile" "$here/much.yaml" --stimulator "$stimulator" -o "$here/much-plan.yaml" --ensemble 0
head -n 1 "$here/out" | grep -q "^Makes [0-9]* of 3; then " || fail "the verdict of a plan that is not met is not the first line"
grep -q "^Would work: " "$here/out" || fail "what would work is missing"
grep -q "^feasible: no$" "$here/much-plan.yaml" || fail "the plan that is not met was not written"

# wrong usage, bad document, another person's hookup
expect 2 plan "$profile" "$samples/demands/short-hold.yaml" -o "$here/x.yaml"
expect 2 plan "$profile" "$samples/demands/short-hold.yaml" --stimulator "$stimulator"
expect 4 plan "$samples/demands/short-hold.yaml" "$profile" --stimulator "$stimulator" -o "$here/x.yaml"
expect 3 plan "$samples/people/p-023.yaml" "$samples/demands/short-hold.yaml" --stimulator "$stimulator" --hookup "$samples/hookups/p-017.yaml" -o "$here/x.yaml"
[ ! -e "$here/x.yaml" ] || fail "something was written in spite of an error"

# recount: unedited, every figure stays; edited to half the duration, it says so
expect 0 recount "$here/plan.yaml" "$profile" -o "$here/again.yaml" --ensemble 16
grep "mean_n" "$here/plan.yaml" >"$here/means"
grep "mean_n" "$here/again.yaml" | cmp -s - "$here/means" || fail "an unedited plan recounts to other means"
sed 's/^\( *\)hold_ms: .*/&/; s/rest_ms: [0-9.e+]*/rest_ms: 100/' "$here/plan.yaml" >"$here/edited.yaml"
"$program" recount "$here/edited.yaml" "$profile" -o "$here/edited2.yaml" --ensemble 0 >"$here/out" 2>"$here/err"
got=$?
[ "$got" -eq 0 ] || [ "$got" -eq 3 ] || { fail "recount of an edited plan: exit $got"; cat "$here/err"; }
grep "mean_n" "$here/edited2.yaml" | cmp -s - "$here/means" && fail "shorter rests change no figure"

# check: the ledger from the pulses, not from the document's copy; limits that a document loosens are the device's and the program's still
expect 0 check "$here/plan.yaml" --json
for key in within figures channel figure value unit limit source share approval; do
    grep -q "\"$key\":" "$here/out" || fail "key $key is missing in the JSON of check"
done
grep -q '"within": true' "$here/out" || fail "a plan that was made is not within"
grep -q "^NOT SIGNED" "$here/err" || fail "check of a plan does not say NOT SIGNED"
sed 's/ limits: {current_ma: [0-9.e+]*/ limits: {current_ma: 20/' "$here/plan.yaml" >"$here/tight.yaml"
expect 3 check "$here/tight.yaml"
grep -q "peak current.*OVER" "$here/out" || fail "the figure that is broken is not shown as over"

# its pulses: one row a pulse, none signed
expect 0 pulses "$here/plan.yaml" -o "$here/pulses.csv"
head -n 1 "$here/pulses.csv" | grep -q "^time_ms,duration_us,current_ma,approval" || fail "the header of the pulses"
rows=$(($(wc -l <"$here/pulses.csv") - 1))
[ "$rows" -gt 50 ] || fail "only $rows pulses"
[ "$(grep -c "NOT SIGNED" "$here/pulses.csv")" -eq "$rows" ] || fail "a pulse without its approval"
exit $failed
