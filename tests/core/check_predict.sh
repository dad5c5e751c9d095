#!/bin/sh
# predict, curves and pulses as programs: exits, keys, files. Arguments: build folder, source folder.
set -u
program="$1/bin/pulsewright"
source="$2"
work="$1/check-predict"
rm -rf "$work"
mkdir -p "$work"
cd "$work" || exit 1
failed=0
person="$source/profiles/people/p-017.yaml"
train="$source/profiles/trains/constant-30.yaml"
bench="$source/profiles/stimulators/bench-a.yaml"

wants() { # wants CODE what command...
    wanted=$1 what=$2
    shift 2
    "$@" >out.txt 2>err.txt
    code=$?
    if [ "$code" -ne "$wanted" ]; then
        echo "$what: exit $code, not $wanted"
        cat err.txt
        failed=1
    fi
}
has() { # has FILE TEXT
    if ! grep -q -- "$2" "$1"; then
        echo "$1 lacks: $2"
        failed=1
    fi
}

wants 0 "predict a train" "$program" predict "$person" --muscle left-quadriceps --train "$train" --until-ms 3000 -o trace.csv --json
for key in peak_n time_to_peak_ms half_relaxation_ms mean_n ripple_percent fusion_index force_time_integral_n_s capacity_end \
    potentiation_end force_remaining_20_end force_remaining_50_end window_ms; do
    has out.txt "\"$key\""
done
has trace.csv '^time_ms,force_n,capacity,potentiation,force_remaining_20,force_remaining_50'
# samples 0, 1, .. up to and including --until-ms, and the header
lines=$(wc -l <trace.csv)
[ "$lines" -eq 3002 ] || { echo "trace has $lines lines, not 3002"; failed=1; }
wants 2 "no pulses at all" "$program" predict "$person" --muscle left-quadriceps
wants 2 "which of two muscles" "$program" predict "$person" --train "$train"
has err.txt 'left-quadriceps'
has err.txt 'right-quadriceps'
wants 4 "a profile that is not there" "$program" predict none.yaml --train "$train"

wants 2 "a train without a profile" "$program" pulses "$train" -o pulses.csv
wants 0 "pulses of a train" "$program" pulses "$train" --profile "$person" --muscle left-quadriceps --stimulator "$bench" -o pulses.csv --json
has out.txt '"approval"'
has err.txt 'NOT SIGNED: no clinician has approved these pulses. Not for use on a person.'
head -1 pulses.csv | grep -q '^time_ms,duration_us,current_ma,approval' || { echo "header of pulses.csv"; failed=1; }
# ten contractions: 12 ramp, 30 hold and 9 ramp-down pulses each at 33,334 us (house chapter: ceil(10^6/30)) from 0
lines=$(wc -l <pulses.csv)
[ "$lines" -eq 511 ] || { echo "pulses.csv has $lines lines, not 511"; failed=1; }
sed -n 3p pulses.csv | grep -q '^33.334,' || { echo "second pulse is not at 33.334 ms"; failed=1; }
cp pulses.csv before.csv
wants 2 "writes over nothing" "$program" pulses "$train" --profile "$person" --muscle left-quadriceps -o pulses.csv
cmp -s pulses.csv before.csv || { echo "an existing file was changed"; failed=1; }
wants 0 "predict the pulses" "$program" predict "$person" --muscle left-quadriceps --pulses pulses.csv --exact --json

# another current than that of a duration-exponential law: told by file, line and column, in a train and in a table
printf 'format: pulsewright-train-1\ncontractions:\n  - {frequency_pps: 30, duration_us: 300, current_ma: 50, hold_ms: 500}\n' >other.yaml
wants 4 "another current in a train" "$program" predict "$2/profiles/people/p-023.yaml" --muscle right-tibialis-anterior --train other.yaml
has err.txt 'other.yaml:3:[0-9]*: contractions\[0\].current_ma: holds 50, may hold 45'
printf 'time_ms,duration_us,current_ma\n0,300,45\n50,300,46\n' >other.csv
wants 4 "another current in a table" "$program" predict "$2/profiles/people/p-023.yaml" --muscle right-tibialis-anterior --pulses other.csv
has err.txt 'other.csv:3:3: current_ma: '

wants 0 "curves" "$program" curves "$person" --muscle left-quadriceps -o curves.csv --json
has out.txt '"force_frequency"'
has curves.csv '^force-frequency dormant,'
exit $failed
