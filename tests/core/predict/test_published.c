/* Values computed from the published equations by an independent program (published.md, "computed": numerics,
 * not evidence). */
#include "core/predict/predict.h"
#include "support/muscles.h"
#include "support/near.h"

#include <math.h>
#include <stdlib.h>

static struct trace_summary summary_of(const struct muscle_parameters *p, double pps, double length_ms,
                                       bool exact)
{
    struct train_pulse pulses[256];
    size_t count = 0;
    for (double t = 0; t < length_ms - 1e-9 && count < 256; t += 1000 / pps)
        pulses[count++] = (struct train_pulse){.time_ms = t, .duration_us = 600, .current_ma = 60};
    const struct trace_options options = {.exact = exact,
                                          .step_ms = 1,
                                          .until_ms = (double)NAN,
                                          .window_from_ms = (double)NAN,
                                          .window_to_ms = (double)NAN};
    struct trace trace;
    struct trace_summary summary;
    struct message why;
    assert_status(predict_trace(p, pulses, count, NULL, &options, &trace, &summary, &why), STATUS_OK, &why);
    trace_free(&trace);
    return summary;
}

/* computed, able-bodied values, tau2 60, fatigue off: twitch 99.475 N at 78.37 ms, half-relaxation +70.61 ms
 */
static void one_pulse_gives_the_twitch(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_untiring();
    for (int exact = 0; exact < 2; exact++) {
        const struct trace_summary summary = summary_of(&p, 1, 1, exact);
        assert_near(summary.peak_n, 99.475, 0.0006 + (exact ? 0 : 0.01), 0);
        assert_near(summary.time_to_peak_ms, 78.37, 0.006 + (exact ? 0 : 0.1), 0);
        assert_near(summary.half_relaxation_ms, 70.61, 0.01 + (exact ? 0 : 0.1), 0);
    }
}

/* computed, same values: peaks of 1-s trains at 5 .. 100 pps */
static void trains_reach_the_published_peaks(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_untiring();
    const double pps[] = {5, 10, 12.5, 15, 20, 30, 40, 50, 80, 100};
    const double peak_n[] = {108.44, 166.02, 191.58, 210.45, 235.71, 263.75, 279.40, 289.44, 305.39, 310.93};
    for (int i = 0; i < 10; i++) assert_near(summary_of(&p, pps[i], 1000, true).peak_n, peak_n[i], 0.0051, 0);
}

/* computed, pulses every 30 ms: F(500 ms) 267.57501599 N */
static void force_at_half_a_second(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_untiring();
    struct message why;
    for (int exact = 0; exact < 2; exact++) {
        struct predictor *predictor = predictor_new(&p, exact, NULL, &why);
        assert_non_null(predictor);
        for (int i = 0; i * 30 < 500; i++) {
            predictor_advance(predictor, i * 30);
            predictor_pulse(predictor, 600, 60);
        }
        predictor_advance(predictor, 500);
        assert_near(predictor_force_n(predictor), 267.57501599, 0, exact ? 1e-7 : 1e-4);
        predictor_free(predictor);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(one_pulse_gives_the_twitch),
                                       cmocka_unit_test(trains_reach_the_published_peaks),
                                       cmocka_unit_test(force_at_half_a_second)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
