/* A stranger's program: one pulse on a muscle, by the installed headers and library alone.
 * The goal of this code is to show that an install is complete, and that what was installed computes the
 * published twitch. */
#include "core/predict/predict.h"

#include <math.h>
#include <stdio.h>

int main(void)
{
    /* Ding 2003 rest values, able-bodied quadriceps (A, Km, tau2 from memory; tau1 second-hand; tau_c, R0 =
     * Km + 1.04 read in Kesar 2008), no fatigue, no potentiation, one tier */
    const struct muscle_parameters muscle = {.A_rest_n_per_ms = 3.009,
                                             .Km_rest = 0.103,
                                             .R0 = 1.143,
                                             .R0_above_Km = (double)NAN,
                                             .tau1_rest_ms = 50.957,
                                             .tau2_ms = 60,
                                             .tau_c_ms = 20,
                                             .has_force = true,
                                             .tau_fat_ms = 1e5,
                                             .recruitment = {.law = RECRUITMENT_FULL},
                                             .length_factor = 1,
                                             .length_relative = (double)NAN,
                                             .length_reference_mm = (double)NAN,
                                             .slope_Km = (double)NAN,
                                             .slope_tau1 = (double)NAN,
                                             .slope_tau_c = (double)NAN,
                                             .tiers = 1};
    const struct train_pulse pulse = {.time_ms = 0, .duration_us = 600, .current_ma = 60};
    const struct trace_options options = {.exact = true,
                                          .step_ms = 1,
                                          .until_ms = (double)NAN,
                                          .window_from_ms = (double)NAN,
                                          .window_to_ms = (double)NAN};
    struct trace trace;
    struct trace_summary summary;
    struct message why;
    if (predict_trace(&muscle, &pulse, 1, NULL, &options, &trace, &summary, &why) != STATUS_OK) {
        fprintf(stderr, "%s\n", why.text);
        return 1;
    }
    trace_free(&trace);
    printf("twitch %.3f N at %.2f ms\n", summary.peak_n, summary.time_to_peak_ms);
    /* computed from the published equations by an independent program: 99.475 N at 78.37 ms; half a last
     * digit either way */
    return !(fabs(summary.peak_n - 99.475) <= 0.0006 && fabs(summary.time_to_peak_ms - 78.37) <= 0.006);
}
