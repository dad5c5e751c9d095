/* The engine against SUNDIALS CVODE at rtol 1e-10, restarted at every pulse. The goal of this code: the
 * errors of whole traces over the whole range of parameters, at times anywhere, more of them in the
 * milliseconds after pulses. */
#include "support/accuracy.h"

#include "core/predict/predict.h"
#include "support/cvode_muscle.h"
#include "support/draws.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

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

static struct accuracy errors_of(const struct muscle_parameters *p, const struct train_pulse *pulses,
                                 size_t count, const double *sample_ms, bool exact, const double *force_n,
                                 const double *capacity, const double *potentiation)
{
    struct message why;
    struct predictor *predictor = predictor_new(p, exact, NULL, &why);
    if (!predictor) {
        fprintf(stderr, "%s\n", why.text);
        abort();
    }
    struct accuracy errors = {0};
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

const struct accuracy accuracy_promised[2] = {{1e-4, 1e-5, 1e-4}, {1e-7, 1e-8, 1e-7}};

static bool keeps(const struct accuracy *e, const struct accuracy *promised)
{
    return e->force <= promised->force && e->capacity <= promised->capacity &&
           e->potentiation <= promised->potentiation;
}

int accuracy_of_draws(uint64_t seed, int cases, struct accuracy worst[2])
{
    uint64_t state = seed;
    struct train_pulse pulses[DRAW_PULSES_MAX];
    double sample_ms[SAMPLES], force_n[SAMPLES], capacity[SAMPLES], potentiation[SAMPLES];
    int failed = 0;
    memset(worst, 0, 2 * sizeof *worst);
    for (int i = 0; i < cases; i++) {
        const struct muscle_parameters p = draw_muscle(&state);
        const size_t count = draw_pulses(&state, p.tau1_rest_ms, pulses);
        const size_t samples = draw_samples(&state, pulses, count, sample_ms);
        cvode_run(&p, pulses, count, i % 6 == 0 ? &integrated : &closed, sample_ms, samples, force_n,
                  capacity, potentiation, NULL);
        for (int exact = 0; exact < 2; exact++) {
            const struct accuracy e =
                errors_of(&p, pulses, count, sample_ms, exact, force_n, capacity, potentiation);
            if (!keeps(&e, &accuracy_promised[exact])) {
                fprintf(stderr,
                        "case %d %s: force %.3g, capacity %.3g, potentiation %.3g (A %g Km %g R0 %g tau1 %g "
                        "tau2 %g tau_c %g tiers %u)\n",
                        i, exact ? "exact" : "default", e.force, e.capacity, e.potentiation,
                        p.A_rest_n_per_ms, p.Km_rest, p.R0, p.tau1_rest_ms, p.tau2_ms, p.tau_c_ms, p.tiers);
                failed++;
            }
            worst[exact].force = fmax(worst[exact].force, e.force);
            worst[exact].capacity = fmax(worst[exact].capacity, e.capacity);
            worst[exact].potentiation = fmax(worst[exact].potentiation, e.potentiation);
        }
    }
    return failed;
}
