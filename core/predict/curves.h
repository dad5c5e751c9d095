/* Curves: a muscle at a glance. Force against frequency, recruitment against phase duration, the staircase,
 * the recovery after a bout. */
#ifndef PULSEWRIGHT_CORE_PREDICT_CURVES_H
#define PULSEWRIGHT_CORE_PREDICT_CURVES_H
#include "core/muscle/parameters.h"
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>

enum {
    CURVES_FREQUENCIES = 24,
    CURVES_DURATIONS = 61,
    CURVES_CURRENTS_MAX = 5,
    CURVES_STAIRCASE = 80,
    CURVES_RECOVERY = 33
};

/* Arrays are filled up to the count beside them. Every force is the muscle's own: full recruitment, tone
 * aside, delay aside. */
struct curves {
    /* Force-frequency: peak of a 1-s train at full recruitment, in N. `rested`: fully rested, potentiated as
     * far as the muscle can be. `dormant`: rested, potentiation 0 at its start; NAN where the muscle does not
     * potentiate. `tired`: rested curve's muscle after the bout. */
    size_t frequencies;
    double frequency_pps[CURVES_FREQUENCIES];
    double rested_n[CURVES_FREQUENCIES], dormant_n[CURVES_FREQUENCIES], tired_n[CURVES_FREQUENCIES];
    bool has_dormant, has_tired;

    /* Recruitment rho (0..1) against phase duration, one row a current. currents 0: the law is `full` (rho is
     * 1 for any pulse). With `duration-exponential` there is one row, at the law's own current. */
    size_t durations, currents;
    double duration_us[CURVES_DURATIONS];
    double current_ma[CURVES_CURRENTS_MAX];
    double recruited[CURVES_CURRENTS_MAX][CURVES_DURATIONS];

    /* Staircase: peak force of twitches at 2 Hz from rest (dormant where the muscle potentiates), at full
     * recruitment. */
    size_t staircase;
    double staircase_s[CURVES_STAIRCASE], staircase_n[CURVES_STAIRCASE];

    /* Recovery: remaining force (fraction of rest) at 20 and 50 pps after the bout, which ends at 0 s. */
    size_t recovery;
    double recovery_s[CURVES_RECOVERY], remaining_20[CURVES_RECOVERY], remaining_50[CURVES_RECOVERY];
    char bout[96]; /* what the bout was, in words */
};

/* Fills `curves`; owns nothing. STATUS_REFUSED with `why` where the parameters are not usable. */
enum status curves_make(const struct muscle_parameters *parameters, struct curves *curves,
                        struct message *why);

#endif
