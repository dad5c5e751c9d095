/* The engine's speed against SUNDIALS CVODE-Adams at equal measured error: the able-bodied muscle,
 * contractions of 1 s at 30 pps every 2 s. Error: greatest over 2-ms samples of the first contractions, of
 * the peak, against CVODE at rtol 1e-11. Each side's setting is the fastest that keeps the error asked for;
 * CVODE has C and S in closed form and a restart at every pulse. One line a figure: name value unit target.
 */
#include "core/predict/predictor.h"
#include "support/cvode_muscle.h"
#include "support/muscles.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

enum { CONTRACTIONS = 4, EACH = 30, PULSES = CONTRACTIONS * EACH, SAMPLES = 4000, TURNS = 50 };

static double now_s(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

static struct train_pulse pulses[PULSES];
static double sample_ms[SAMPLES], wanted_n[SAMPLES], got_n[SAMPLES], spare[SAMPLES];

static double error_of_got(void)
{
    double peak = 0, worst = 0;
    for (int i = 0; i < SAMPLES; i++) {
        peak = fmax(peak, wanted_n[i]);
        worst = fmax(worst, fabs(got_n[i] - wanted_n[i]));
    }
    return worst / peak;
}

/* The engine at a tolerance: error at the samples, then the time of many contractions without samples, in ns
 * a pulse. */
static double engine_error(const struct muscle_parameters *p, double tolerance)
{
    struct message why;
    struct predictor *predictor = predictor_new(p, tolerance < 1e-6, NULL, &why);
    engine_tolerate(&predictor->engine, tolerance);
    int sample = 0;
    for (int i = 0; i < PULSES; i++) {
        /* to the pulse as a session goes; the samples between from a copy, which does not change the steps */
        struct engine copy = predictor->engine;
        for (; sample < SAMPLES && sample_ms[sample] < pulses[i].time_ms; sample++) {
            engine_advance(&copy, sample_ms[sample]);
            got_n[sample] = engine_force_n(&copy);
        }
        predictor_advance(predictor, pulses[i].time_ms);
        predictor_pulse(predictor, pulses[i].duration_us, pulses[i].current_ma);
    }
    for (; sample < SAMPLES; sample++) {
        predictor_advance(predictor, sample_ms[sample]);
        got_n[sample] = predictor_force_n(predictor);
    }
    predictor_free(predictor);
    return error_of_got();
}

static double engine_ns(const struct muscle_parameters *p, double tolerance)
{
    struct message why;
    struct predictor *predictor = predictor_new(p, tolerance < 1e-6, NULL, &why);
    engine_tolerate(&predictor->engine, tolerance);
    double best = (double)INFINITY;
    for (int turn = 0; turn < TURNS; turn++) {
        const double start_ms = predictor_time_ms(predictor) + 1000, begun = now_s();
        for (int repeat = 0; repeat < 20; repeat++)
            for (int i = 0; i < PULSES; i++) {
                predictor_advance(predictor, start_ms + repeat * CONTRACTIONS * 2000 + pulses[i].time_ms);
                predictor_pulse(predictor, pulses[i].duration_us, pulses[i].current_ma);
            }
        best = fmin(best, (now_s() - begun) * 1e9 / (20 * PULSES));
    }
    if (getenv("PULSEWRIGHT_BENCH_STEPS"))
        fprintf(stderr, "tolerance %g: %.2f steps and %.2f rejected a pulse\n", tolerance,
                (double)predictor->engine.steps / (20.0 * TURNS * PULSES),
                (double)predictor->engine.rejected / (20.0 * TURNS * PULSES));
    predictor_free(predictor);
    return best;
}

/* CVODE at a tolerance: error, then ns a pulse of the same contractions without samples between pulses. */
static double cvode_error(const struct muscle_parameters *p, const struct cvode_settings *settings)
{
    cvode_run(p, pulses, PULSES, settings, sample_ms, SAMPLES, got_n, spare, NULL, NULL);
    return error_of_got();
}

static double cvode_ns(const struct muscle_parameters *p, const struct cvode_settings *settings)
{
    double best = (double)INFINITY;
    for (int turn = 0; turn < 5; turn++) {
        const double begun = now_s();
        cvode_run(p, pulses, PULSES, settings, &pulses[PULSES - 1].time_ms, 1, got_n, spare, NULL, NULL);
        best = fmin(best, (now_s() - begun) * 1e9 / PULSES);
    }
    return best;
}

/* ns a pulse of both at an error of at most `error`; prints the ratio. */
static void compare(const char *name, const char *target, const struct muscle_parameters *p, double error)
{
    const struct cvode_settings reference = {.rtol = 1e-11, .atol = 1e-14, .closed_form = true};
    cvode_run(p, pulses, PULSES, &reference, sample_ms, SAMPLES, wanted_n, spare, NULL, NULL);
    double tolerance = 1e-3, engine = 0, cvode = (double)INFINITY;
    while (engine_error(p, tolerance) > error) tolerance /= 1.3;
    engine = engine_ns(p, tolerance);
    const int orders[] = {3, 4, 5, 7, 12};
    for (int i = 0; i < 5; i++) {
        struct cvode_settings settings = {
            .rtol = 1e-2, .atol = 1e-4, .order_max = orders[i], .closed_form = true};
        while (cvode_error(p, &settings) > error) {
            settings.rtol /= 1.5;
            settings.atol = settings.rtol * 1e-2;
        }
        cvode = fmin(cvode, cvode_ns(p, &settings));
    }
    printf("%s %.1f ratio %s\n", name, cvode / engine, target);
    printf("%s_engine %.1f ns_per_pulse -\n", name, engine);
    printf("%s_cvode %.0f ns_per_pulse -\n", name, cvode);
}

int main(void)
{
    for (int i = 0; i < PULSES; i++)
        pulses[i] = (struct train_pulse){
            .time_ms = (i / EACH) * 2000 + (i % EACH) * 33.334, .duration_us = 300, .current_ma = 60};
    for (int i = 0; i < SAMPLES; i++) sample_ms[i] = 2.0 * i + 1;
    const struct muscle_parameters one = muscle_published(), unlike = muscle_composed();
    compare("unlike_tiers_1e-4", ">=100", &unlike, 1e-4);
    compare("unlike_tiers_1e-6", ">=200", &unlike, 1e-6);
    compare("one_tier_1e-4", ">=40", &one, 1e-4);
    compare("one_tier_1e-6", "-", &one, 1e-6);
    printf("default_unlike %.1f ns_per_pulse -\n", engine_ns(&unlike, 1e-6));
    printf("exact_unlike %.1f ns_per_pulse -\n", engine_ns(&unlike, 2e-9));
    return 0;
}
