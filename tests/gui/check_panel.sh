#!/bin/sh
# The panel as a program: without a window by a script, and the real window under Xvfb by real key events. The peak it shows equals that of
# `predict` to three digits.
set -eu
build=$1 source=$2
panel=$build/bin/pulsewright-panel
[ -x "$panel" ] || exit 77
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
person=$source/profiles/people/p-001.yaml
value() { sed -n "s/.*\"$1\": \([-0-9.e+]*\).*/\1/p" "$2"; }

# by keyboard alone: frequency 20, duration 250
printf 'key Tab\ntext 20\nkey Enter\nkey Tab\ntext 250\nkey Enter\n' >"$work/script"
"$panel" "$person" --train "$source/profiles/trains/constant-30.yaml" --script "$work/script" --picture "$work/a.png" --json >"$work/panel.json"
[ "$(value frequency_pps "$work/panel.json")" = 20 ] && [ "$(value duration_us "$work/panel.json")" = 250 ]
sed -e 's/frequency_pps: 30/frequency_pps: 20/' -e 's/duration_us: 300/duration_us: 250/' "$source/profiles/trains/constant-30.yaml" >"$work/train.yaml"
"$build/bin/pulsewright" predict "$person" --muscle left-quadriceps --train "$work/train.yaml" --json >"$work/predict.json" 2>/dev/null
awk -v a="$(value peak_n "$work/panel.json")" -v b="$(value peak_n "$work/predict.json")" \
    'BEGIN { d = a - b; if (d < 0) d = -d; if (!(b > 10) || d > 0.0005 * b) { print "peaks differ:", a, b; exit 1 } }'
[ "$(head -c 4 "$work/a.png" | tail -c 3)" = PNG ]

# undo brings the old value back
printf 'key Tab\ntext 20\nkey Enter\nkey Undo\n' >"$work/script"
"$panel" "$person" --script "$work/script" --json >"$work/undo.json"
[ "$(value frequency_pps "$work/undo.json")" = 30 ]

# a script that can not be read is told by its line
printf 'key Tab\nshout\n' >"$work/script"
if "$panel" "$person" --script "$work/script" 2>"$work/told"; then exit 1; fi
grep -q 'script:2:1' "$work/told"

# the real window
command -v Xvfb >/dev/null && command -v xdotool >/dev/null || { echo "the window was not tried: no Xvfb or xdotool"; exit 0; }
number=$((90 + $$ % 400))
Xvfb ":$number" -screen 0 1280x900x24 >/dev/null 2>&1 &
server=$!
trap 'kill $server 2>/dev/null || true; rm -rf "$work"' EXIT
export DISPLAY=":$number"
for i in $(seq 40); do
    sleep 0.3
    xdotool getmouselocation >/dev/null 2>&1 && break
done
"$panel" "$person" --picture "$work/window.png" --json >"$work/window.json" &
shown=$!
window=
for i in $(seq 100); do # a loaded machine takes its time
    sleep 0.3
    window=$(xdotool search --name '^pulsewright$' 2>/dev/null | head -n 1) && [ -n "$window" ] && break
done
[ -n "$window" ]
xdotool mousemove 640 400
xdotool windowfocus "$window" 2>/dev/null || true
sleep 0.3
xdotool key Tab
xdotool type --delay 60 25
xdotool key Return
sleep 0.6
xdotool key ctrl+q
wait "$shown"
[ "$(value frequency_pps "$work/window.json")" = 25 ]
[ "$(wc -c <"$work/window.png")" -gt 20000 ]
echo "window: typed 25, shown and predicted"
