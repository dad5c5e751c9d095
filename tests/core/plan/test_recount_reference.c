/* A planned session against CVODE: the pulses a plan stands for, integrated by SUNDIALS from the model's
 * equations (support/cvode_muscle.h, no shared code), give the means, peaks and quarters that the plan's
 * recount says. Tolerance: the design's (1e-4 of the peak). */
#include "core/plan/recount.h"
#include "support/cvode_muscle.h"
#include "support/near.h"
#include "support/plans.h"

#include <math.h>
#include <stdlib.h>

enum { SAMPLES = 4001 }; /* of one hold: 0.5 ms apart in 2 s */

/* Mean and peak of the reference's force over [from, from + hold], by Simpson's rule between samples. */
static void reference_hold(const struct muscle_parameters *parameters, const struct train_pulse *pulses,
                           size_t count, double from_ms, double hold_ms, double *mean_n, double *peak_n)
{
    static double at_ms[SAMPLES], force_n[SAMPLES], capacity[SAMPLES], potentiation[SAMPLES];
    for (int i = 0; i < SAMPLES; i++) at_ms[i] = from_ms + hold_ms * i / (SAMPLES - 1);
    const struct cvode_settings settings = {.rtol = 1e-9, .atol = 1e-11, .closed_form = true};
    cvode_run(parameters, pulses, count, &settings, at_ms, SAMPLES, force_n, capacity, potentiation, NULL);
    double sum = force_n[0] + force_n[SAMPLES - 1];
    *peak_n = force_n[0];
    for (int i = 1; i < SAMPLES - 1; i++) sum += (i % 2 ? 4.0 : 2.0) * force_n[i];
    for (int i = 0; i < SAMPLES; i++) *peak_n = fmax(*peak_n, force_n[i]);
    *mean_n = sum / (3.0 * (SAMPLES - 1)) + parameters->tone_n;
    *peak_n += parameters->tone_n;
}

static void the_recount_says_what_cvode_says(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    muscle.parameters.tiers = 4;
    muscle.parameters.tone_n = 2;
    const struct stimulator stimulator = plans_stimulator();
    struct demand demand = plans_demand(3);
    demand.warm_up = 1;
    const struct plan_options options = plans_options();
    struct plan plan;
    struct message why = {""};
    assert_status(plan_make(&profile, &demand, &stimulator, NULL, &options, &plan, &why), STATUS_OK, &why);
    struct plan_contraction *contraction = NULL;
    size_t contractions = 0, count = 0;
    assert_status(plan_contractions(&plan, 0, &profile, true, &contraction, &contractions, &why), STATUS_OK,
                  &why);
    assert_int_equal(contractions, 4);
    struct pulse *pulses = plans_pulses(&plan, &count);
    struct train_pulse *timed = calloc(count, sizeof *timed);
    assert_non_null(timed);
    for (size_t i = 0; i < count; i++)
        timed[i] = (struct train_pulse){(double)pulses[i].at_us / 1000.0, pulses[i].duration_us,
                                        pulses[i].current_ua / 1000.0};
    for (size_t k = 0; k < contractions; k++) {
        double mean_n, peak_n;
        reference_hold(&muscle.parameters, timed, count, contraction[k].start_ms + contraction[k].ramp_up_ms,
                       contraction[k].hold_ms, &mean_n, &peak_n);
        assert_near(contraction[k].hold.mean_n, mean_n, 1e-4 * peak_n, 0.0);
        assert_near(contraction[k].hold.peak_n, peak_n, 1e-4 * peak_n, 0.0);
        if (!contraction[k].warm_up)
            assert_near(mean_n, demand.target, 0.05 * demand.target, 0.0); /* what was demanded, by CVODE */
    }
    free(timed);
    free(pulses);
    free(contraction);
    plan_free(&plan);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(the_recount_says_what_cvode_says)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
