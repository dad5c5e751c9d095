#!/bin/sh
# A session as programs: signed for rehearsal, streamed to a twin in real time, recorded, verified, exported; and what has to be refused.
set -eu
build=$1 source=$2
core=$build/bin/pulsewright bridge=$build/bin/pulsewright-bridge
[ -x "$bridge" ] || exit 77
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
cd "$work"
fail() { echo "$1"; exit 1; }
refused() { # CODE WORDS COMMAND...
    code=$1 words=$2
    shift 2
    set +e
    "$@" >out 2>told
    got=$?
    set -e
    [ "$got" = "$code" ] || { cat told; fail "exit $got, not $code: $*"; }
    grep -q "$words" told || { cat told; fail "not told: $words"; }
}
person=$source/profiles/people/p-001.yaml stimulator=$source/profiles/stimulators/bench-a.yaml
cat >train.yaml <<'T'
format: pulsewright-train-1
contractions:
  - {frequency_pps: 30, opening: doublet, duration_us: 300, current_ma: 40, ramp_up: {shape: linear, ms: 300}, hold_ms: 700, rest_ms: 600, repeat: 2}
T
train="--profile $person --muscle left-quadriceps --stimulator $stimulator"

"$bridge" sign train.yaml $train --as S-2 -o ok.signoff --rehearsal >sheet
grep -q "NOT SIGNED" sheet && grep -q "implanted electronic device" sheet
"$bridge" verify ok.signoff train.yaml $train >state
grep -q "REHEARSAL, TWIN ONLY" state
sed 's/current_ma: 40/current_ma: 41/' train.yaml >other.yaml
refused 3 "not among those that were signed" "$bridge" verify ok.signoff other.yaml $train
refused 2 "never overwritten" "$bridge" sign train.yaml $train --as S-2 -o ok.signoff --rehearsal
refused 3 "not among those that were signed" "$bridge" stream other.yaml $train --to twin: --signoff ok.signoff
refused 3 "never plays on a real port" "$bridge" stream train.yaml $train --to serial:/dev/ttyS0 --rehearse
refused 2 "one of --signoff FILE and --rehearse" "$bridge" stream train.yaml $train --to twin:
refused 5 "can not be opened" "$bridge" stream train.yaml $train --to pty:/dev/pts/none --rehearse
# a ledger that was edited in the document is not what the signer is shown
"$core" plan "$person" "$source/profiles/demands/short-hold.yaml" --stimulator "$stimulator" -o plan.yaml --ensemble 0 >/dev/null 2>&1 || [ $? -eq 3 ]
sed 's/figure: rms, value: [0-9.]*/figure: rms, value: 0.001/' plan.yaml >forged.yaml
cmp -s plan.yaml forged.yaml && fail "the plan holds no r.m.s. figure to forge"
"$bridge" sign plan.yaml --as S-2 -o true.signoff --rehearsal | grep "r.m.s. current over" >true.rms
"$bridge" sign forged.yaml --as S-2 -o forged.signoff --rehearsal | grep "r.m.s. current over" >forged.rms
cmp -s true.rms forged.rms || { cat forged.rms; fail "the sheet shows a forged dose"; }
cp ok.signoff bad.signoff
printf 'x' | dd of=bad.signoff bs=1 seek=200 conv=notrunc 2>/dev/null
refused 3 "changed after it was signed" "$bridge" stream train.yaml $train --to twin: --signoff bad.signoff

"$bridge" stream train.yaml $train --to twin: --signoff ok.signoff --record session.db --mark "a try" --log given.csv --json >summary.json 2>progress
planned=$("$core" pulses train.yaml $train -o pulses.csv >/dev/null 2>&1; grep -c '^[0-9]' pulses.csv)
given=$(grep -c '^[0-9]' given.csv)
[ "$planned" = "$given" ] || fail "planned $planned, given $given"
grep -q '"end": "finished"' summary.json
head=$(sed -n 's/.*head \([0-9a-f]*\)$/\1/p' progress)
"$bridge" sessions session.db --verify --head "$head" >listed
grep -q "the chain holds" listed
refused 3 "" "$bridge" sessions session.db --verify --head 0000000000000000000000000000000000000000000000000000000000000000
"$bridge" export session.db -o exported >/dev/null 2>&1
[ "$(grep -c '^[0-9]' exported/pulses.csv)" = "$given" ]
[ "$(grep -c '^[0-9]' exported/force.csv)" -gt 50 ]
grep -q 'note,"a try"' exported/marks.csv
"$core" check exported/recordings.yaml >/dev/null 2>&1
grep -q REHEARSAL exported/pulses.csv
"$bridge" export ok.signoff -o signed >/dev/null 2>&1
[ "$(grep -c '^[0-9]' signed/pulses-1.csv)" = "$planned" ]
echo "signed, streamed ($given pulses), recorded, verified, exported"
