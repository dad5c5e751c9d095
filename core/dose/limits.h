/* Limits: the strictest of stimulator, person and program, as integers, each with whose it is. Rounded against the user. */
#ifndef PULSEWRIGHT_CORE_DOSE_LIMITS_H
#define PULSEWRIGHT_CORE_DOSE_LIMITS_H
#include "core/dose/dose.h"

/* A person's limits as a profile states them; NAN where absent (then the program's ceiling holds). */
struct person_limits {
    double current_ma, duration_us, frequency_pps, charge_uc, rms_ma, gap_us, on_ms, duty_percent, first_uc, slew_uc_per_s,
        slew_memory_ms, session_pulses, session_charge_mc, session_ms, force_n;
};

/* What a stimulator can give, as far as dose is concerned. */
struct dose_device {
    double current_to_ma, duration_to_us, frequency_to_pps, gap_us_min, interphase_us, recovery_us, mismatch_percent, compliance_v,
        load_ohm, current_step_ma, duration_step_us;
    bool capacitor_balanced;
};

/* source[figure] is "person", "stimulator" or "program" (static strings). person NULL: none. */
void limits_effective(const struct dose_device *device, const struct person_limits *person, struct dose_limits *limits,
                      const char *source[DOSE_FIGURES]);

#endif
