/* The engine against SUNDIALS CVODE at rtol 1e-10, restarted at every pulse, on drawn muscles and trains
 * (seed 20261201): default within 1e-4 of a trace's peak and 1e-5 of capacity, exact within 1e-7 and 1e-8.
 * More draws: bench-accuracy. */
#include "core/predict/predict.h"
#include "support/accuracy.h"
#include "support/cvode_muscle.h"
#include "support/muscles.h"
#include "support/near.h"

#include <math.h>
#include <stdio.h>

static void drawn_muscles_agree_with_cvode(void **state)
{
    (void)state;
    struct accuracy worst[2];
    const int failed = accuracy_of_draws(20261201, 60, worst);
    for (int exact = 0; exact < 2; exact++)
        print_message("%s: worst force %.3g of peak, capacity %.3g, potentiation %.3g\n",
                      exact ? "exact" : "default", worst[exact].force, worst[exact].capacity,
                      worst[exact].potentiation);
    assert_int_equal(failed, 0);
}

/* With tiers 1, law full, no potentiation and beta_A 0 the model is the published one: Ding et al. 2000,
 * 2003, own right-hand side. */
static void one_full_tier_is_the_published_model(void **state)
{
    (void)state;
    enum { PULSES = 90, TIMES = 300 };
    double pulse_ms[PULSES], sample_ms[TIMES], force_n[TIMES], A[TIMES];
    struct message why;
    const struct muscle_parameters p = muscle_published();
    for (int i = 0; i < PULSES; i++)
        pulse_ms[i] = (i / 30) * 2000 + (i % 30) * 1000.0 / 30; /* three contractions */
    for (int i = 0; i < TIMES; i++) sample_ms[i] = i * 20.0;
    cvode_run_published(&p, pulse_ms, PULSES, sample_ms, TIMES, force_n, A);
    struct predictor *predictor = predictor_new(&p, true, NULL, &why);
    assert_non_null(predictor);
    int pulse = 0;
    for (int i = 0; i < TIMES; i++) {
        for (; pulse < PULSES && pulse_ms[pulse] <= sample_ms[i]; pulse++) {
            predictor_advance(predictor, pulse_ms[pulse]);
            predictor_pulse(predictor, 600, 50);
        }
        predictor_advance(predictor, sample_ms[i]);
        assert_near(predictor_force_n(predictor), force_n[i], 1e-7 * 264, 0);
        assert_near(predictor_capacity(predictor), A[i] / p.A_rest_n_per_ms, 1e-8, 0);
    }
    predictor_free(predictor);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(one_full_tier_is_the_published_model),
                                       cmocka_unit_test(drawn_muscles_agree_with_cvode)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
