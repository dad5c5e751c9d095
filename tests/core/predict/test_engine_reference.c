/* The engine against SUNDIALS CVODE at rtol 1e-10, restarted at every pulse, on drawn muscles and trains
 * (seed 20261201): default within 1e-4 of a trace's peak and 1e-5 of capacity, exact within 1e-7 and 1e-8. */
#include "core/predict/predict.h"
#include "support/cvode_muscle.h"
#include "support/draws.h"
#include "support/muscles.h"
#include "support/near.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

enum { SAMPLES = 160 };
/* Order 7 at most: higher Adams orders must creep where nothing happens. Every sixth case integrates C and S
 * too. */
static const struct cvode_settings closed = {
    .rtol = 1e-10, .atol = 1e-13, .order_max = 7, .closed_form = true};
static const struct cvode_settings integrated = {.rtol = 1e-10, .atol = 1e-13, .order_max = 5};

/* Samples: some anywhere, more in the milliseconds after pulses. */
static size_t draw_samples(uint64_t *state, const struct train_pulse *pulses, size_t count, double *sample_ms)
{
    const double end = pulses[count - 1].time_ms + 300;
    for (int i = 0; i < SAMPLES; i++) {
        const struct train_pulse *near = &pulses[draw_next(state) % count];
        sample_ms[i] = i % 4 == 0 ? draw_uniform(state, 0, end) : near->time_ms + draw_log(state, 0.05, 250);
    }
    for (int i = 1; i < SAMPLES; i++) /* insertion sort */
        for (int j = i; j > 0 && sample_ms[j] < sample_ms[j - 1]; j--) {
            const double swap = sample_ms[j];
            sample_ms[j] = sample_ms[j - 1];
            sample_ms[j - 1] = swap;
        }
    return SAMPLES;
}

struct errors {
    double force, capacity, potentiation; /* of the peak; absolute */
};

static struct errors errors_of(const struct muscle_parameters *p, const struct train_pulse *pulses,
                               size_t count, const double *sample_ms, bool exact, const double *force_n,
                               const double *capacity, const double *potentiation)
{
    struct message why;
    struct predictor *predictor = predictor_new(p, exact, NULL, &why);
    if (!predictor) fail_msg("%s", why.text);
    struct errors errors = {0};
    double peak = 0;
    size_t pulse = 0;
    for (size_t i = 0; i < SAMPLES; i++) {
        for (; pulse < count && pulses[pulse].time_ms <= sample_ms[i]; pulse++) {
            predictor_advance(predictor, pulses[pulse].time_ms);
            predictor_pulse(predictor, pulses[pulse].duration_us, pulses[pulse].current_ma);
        }
        predictor_advance(predictor, sample_ms[i]);
        peak = fmax(peak, force_n[i]);
        errors.force = fmax(errors.force, fabs(predictor_force_n(predictor) - force_n[i]));
        errors.capacity = fmax(errors.capacity, fabs(predictor_capacity(predictor) - capacity[i]));
        errors.potentiation =
            fmax(errors.potentiation, fabs(predictor_potentiation(predictor) - potentiation[i]));
        if (isnan(predictor_force_n(predictor))) errors.force = (double)NAN;
    }
    predictor_free(predictor);
    if (peak > 0) errors.force /= peak;
    return errors;
}

static void check_draws(uint64_t seed, int cases)
{
    uint64_t state = seed;
    struct train_pulse pulses[DRAW_PULSES_MAX];
    double sample_ms[SAMPLES], force_n[SAMPLES], capacity[SAMPLES], potentiation[SAMPLES];
    struct errors worst[2] = {0};
    int failed = 0;
    for (int i = 0; i < cases; i++) {
        const struct muscle_parameters p = draw_muscle(&state);
        const size_t count = draw_pulses(&state, p.tau1_rest_ms, pulses);
        const size_t samples = draw_samples(&state, pulses, count, sample_ms);
        cvode_run(&p, pulses, count, i % 6 == 0 ? &integrated : &closed, sample_ms, samples, force_n,
                  capacity, potentiation, NULL);
        for (int exact = 0; exact < 2; exact++) {
            const struct errors e =
                errors_of(&p, pulses, count, sample_ms, exact, force_n, capacity, potentiation);
            if (!(e.force <= (exact ? 1e-7 : 1e-4)) || !(e.capacity <= (exact ? 1e-8 : 1e-5)) ||
                !(e.potentiation <= (exact ? 1e-7 : 1e-4))) {
                print_error("case %d %s: force %.3g, capacity %.3g, potentiation %.3g (A %g Km %g R0 %g tau1 "
                            "%g tau2 %g tau_c %g tiers %u)\n",
                            i, exact ? "exact" : "default", e.force, e.capacity, e.potentiation,
                            p.A_rest_n_per_ms, p.Km_rest, p.R0, p.tau1_rest_ms, p.tau2_ms, p.tau_c_ms,
                            p.tiers);
                failed++;
            }
            worst[exact].force = fmax(worst[exact].force, e.force);
            worst[exact].capacity = fmax(worst[exact].capacity, e.capacity);
            worst[exact].potentiation = fmax(worst[exact].potentiation, e.potentiation);
        }
    }
    for (int exact = 0; exact < 2; exact++)
        print_message("%s: worst force %.3g of peak, capacity %.3g, potentiation %.3g\n",
                      exact ? "exact" : "default", worst[exact].force, worst[exact].capacity,
                      worst[exact].potentiation);
    assert_int_equal(failed, 0);
}

static void drawn_muscles_agree_with_cvode(void **state)
{
    (void)state;
    const char *cases = getenv("PULSEWRIGHT_REFERENCE_CASES"); /* more by hand: the same draws go on */
    check_draws(20261201, cases ? atoi(cases) : 60);
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
