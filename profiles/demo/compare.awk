# Is every pulse that the twin gave the planned one, at its microsecond? awk -F, -f compare.awk PLANNED GIVEN
# PLANNED: time_ms,duration_us,current_ma; GIVEN: time_us,channel,duration_us,current_ua on the twin's own clock.
function differs(a, b) { return a - b > 0.5 || b - a > 0.5 }
FNR == 1 { file++; next }
file == 1 { time_us[FNR] = $1 * 1000; duration_us[FNR] = $2; current_ua[FNR] = $3 * 1000; last = FNR; next }
FNR == 2 { start_us = $1 - time_us[2] }
{
    given = FNR
    if (differs($1 - start_us, time_us[FNR]) || differs($3, duration_us[FNR]) || differs($4, current_ua[FNR])) {
        print "given, not as planned: " $0
        bad = 1
    }
}
END {
    if (last < 2 || given != last) bad = 1
    print given - 1 " of " last - 1 " pulses"
    exit bad
}
