/* Traces and measures by their definitions (house chapter, "Quantities, said once"), against sums over fine
 * samples made here. */
#include "core/predict/predict.h"
#include "support/muscles.h"
#include "support/near.h"

#include <math.h>
#include <stdlib.h>

enum { COUNT = 20 };
static const double none = (double)NAN;

static size_t pulses_at(double gap_ms, struct train_pulse *pulses)
{
    for (int i = 0; i < COUNT; i++)
        pulses[i] = (struct train_pulse){.time_ms = i * gap_ms, .duration_us = 300, .current_ma = 60};
    return COUNT;
}

static struct trace traced(const struct muscle_parameters *p, const struct train_pulse *pulses, size_t count,
                           const struct motion *motion, const struct trace_options *options,
                           struct trace_summary *summary)
{
    struct trace trace;
    struct message why;
    assert_status(predict_trace(p, pulses, count, motion, options, &trace, summary, &why), STATUS_OK, &why);
    return trace;
}

/* A trace's force at t is F(t - delay) + tone; capacity and potentiation are not delayed; samples 0, step, ..
 * up to and including until */
static void delay_shifts_force_only_and_tone_is_added(void **state)
{
    (void)state;
    struct muscle_parameters plain = muscle_composed(), late = muscle_composed();
    late.delay_ms = 25;
    late.tone_n = 7;
    struct train_pulse pulses[COUNT];
    const size_t count = pulses_at(40, pulses);
    const struct trace_options options = {
        .exact = true, .step_ms = 5, .until_ms = 1000, .window_from_ms = 200, .window_to_ms = 600};
    struct trace_summary a_summary, b_summary;
    struct trace a = traced(&plain, pulses, count, NULL, &options, &a_summary);
    struct trace b = traced(&late, pulses, count, NULL, &options, &b_summary);
    assert_int_equal(a.samples, 201);
    assert_near(a.time_ms[200], 1000, 0, 0);
    for (size_t i = 0; i < b.samples; i++) {
        assert_near(b.force_n[i], (i < 5 ? 0 : a.force_n[i - 5]) + 7, 2e-5, 0);
        assert_near(b.capacity[i], a.capacity[i], 1e-9, 0);
        assert_near(b.potentiation[i], a.potentiation[i], 1e-8, 0);
    }
    assert_near(b_summary.mean_n, a_summary.mean_n + 7, 1e-5, 0); /* of F(t + delay) */
    assert_near(b_summary.time_to_peak_ms, a_summary.time_to_peak_ms + 25, 1e-2, 0);
    assert_near(b_summary.half_relaxation_ms, a_summary.half_relaxation_ms, 1e-2, 0);
    trace_free(&a);
    trace_free(&b);
}

static void summary_agrees_with_fine_samples(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_composed();
    struct train_pulse pulses[COUNT];
    const size_t count = pulses_at(50, pulses);
    const struct trace_options options = {
        .exact = true, .step_ms = 0.05, .until_ms = none, .window_from_ms = 200, .window_to_ms = 900};
    struct trace_summary s;
    struct trace t = traced(&p, pulses, count, NULL, &options, &s);
    double sum = 0, ripple = 0, peak = 0, peak_ms = 0, whole = 0;
    for (size_t i = 4000; i < 18000; i++) sum += 0.5 * (t.force_n[i] + t.force_n[i + 1]);
    for (size_t i = 0; i + 1 < t.samples; i++) whole += 0.5 * (t.force_n[i] + t.force_n[i + 1]) * 0.05;
    for (size_t period = 4; period < 18; period++) {
        double least = 1e9, greatest = 0;
        for (size_t i = period * 1000; i <= (period + 1) * 1000; i++) {
            least = fmin(least, t.force_n[i]);
            greatest = fmax(greatest, t.force_n[i]);
        }
        ripple = fmax(ripple, greatest - least);
    }
    for (size_t i = 0; i < t.samples; i++)
        if (t.force_n[i] > peak) {
            peak = t.force_n[i];
            peak_ms = t.time_ms[i];
        }
    const double mean = sum / 14000;
    assert_near(s.mean_n, mean, 0, 1e-6);
    assert_near(s.ripple_percent, 100 * ripple / mean, 1e-3, 0);
    assert_near(s.peak_n, peak, 0, 1e-6);
    assert_near(s.time_to_peak_ms, peak_ms, 0.06, 0);
    assert_near(s.force_time_integral_n_s, whole / 1000, 0, 1e-6);
    assert_near(s.capacity_end, t.capacity[t.samples - 1], 0, 0);
    assert_near(s.window_ms[0], 200, 0, 0);
    trace_free(&t);
}

/* Window where none is given: the second half from first to last pulse; until: last pulse + 1000 */
static void defaults_are_the_second_half_and_a_second_more(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_published();
    struct train_pulse pulses[COUNT];
    const size_t count = pulses_at(50, pulses);
    const struct trace_options options = {.until_ms = none, .window_from_ms = none, .window_to_ms = none};
    struct trace_summary s;
    struct trace t = traced(&p, pulses, count, NULL, &options, &s);
    assert_int_equal(t.samples, 1951);
    assert_near(s.window_ms[0], 475, 1e-9, 0);
    assert_near(s.window_ms[1], 950, 1e-9, 0);
    trace_free(&t);
}

/* A pair counts as one period: the ripple of 5 ms doublets is that from pair to pair. */
static void pairs_are_one_period_each(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_published();
    struct train_pulse pulses[40];
    bool same[40];
    for (int i = 0; i < 40; i++) {
        pulses[i] =
            (struct train_pulse){.time_ms = (i / 2) * 80 + (i % 2) * 5, .duration_us = 300, .current_ma = 60};
        same[i] = i % 2 == 1;
    }
    struct trace_options options = {
        .exact = true, .step_ms = 1, .until_ms = none, .window_from_ms = 800, .window_to_ms = 1520};
    struct trace_summary told, found;
    options.same_period = same;
    struct trace t = traced(&p, pulses, 40, NULL, &options, &told);
    trace_free(&t);
    options.same_period = NULL; /* told from the gaps */
    t = traced(&p, pulses, 40, NULL, &options, &found);
    assert_near(found.ripple_percent, told.ripple_percent, 0, 1e-12);
    trace_free(&t);
}

/* predictor_contraction on the same pulses: mean as the trace's, quarters and rise by their definitions */
static void measures_of_a_hold_follow_their_definitions(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_published();
    struct train_pulse pulses[COUNT + 1];
    const size_t count = pulses_at(50, pulses);
    struct message why;
    struct predictor *predictor = predictor_new(&p, true, NULL, &why);
    assert_non_null(predictor);
    const struct hold_window window = {
        .ramp_up_ms = 200, .hold_ms = 800, .target_n = 200, .tolerance_percent = 5};
    struct hold_measures m;
    assert_status(predictor_contraction(predictor, 0, pulses, count, false, 1, &window, &m, &why), STATUS_OK,
                  &why);
    assert_near(predictor_time_ms(predictor), 950, 1e-9, 0);
    const struct trace_options options = {
        .exact = true, .step_ms = 0.05, .until_ms = 1000, .window_from_ms = 200, .window_to_ms = 1000};
    struct trace_summary s;
    struct trace t = traced(&p, pulses, count, NULL, &options, &s);
    assert_near(m.ripple_percent, s.ripple_percent, 1e-3,
                0);                           /* the last period, behind which no pulse stands, too */
    assert_near(m.mean_n, s.mean_n, 0, 1e-6); /* by a cubic through each step: the trace steps finer */
    double period_mean[COUNT] = {0};
    for (size_t k = 0; k < COUNT; k++) {
        for (size_t i = k * 1000; i < (k + 1) * 1000; i++)
            period_mean[k] += 0.5 * (t.force_n[i] + t.force_n[i + 1]);
        period_mean[k] /= 1000;
    }
    /* pulses of the hold: 200 .. 950, 15 whole periods between them, quarters of 3 */
    assert_int_equal(m.periods, 16); /* inside the hold the last one, to its end, is whole too */
    assert_near(m.first_quarter_n, (period_mean[4] + period_mean[5] + period_mean[6]) / 3, 0, 1e-6);
    assert_near(m.last_quarter_n, (period_mean[16] + period_mean[17] + period_mean[18]) / 3, 0, 1e-6);
    assert_near(m.droop_percent, 100 * fabs(m.last_quarter_n - m.first_quarter_n) / m.mean_n, 1e-9, 0);
    size_t settled = COUNT;
    double greatest = 0;
    for (size_t k = COUNT; k-- > 0 && fabs(period_mean[k] - m.mean_n) <= 0.05 * m.mean_n;) settled = k;
    for (size_t k = 0; k < COUNT; k++) greatest = fmax(greatest, period_mean[k]);
    assert_near(m.rise_ms, 50.0 * (double)settled, 1e-9, 0);
    assert_near(m.overshoot_percent, 100 * (greatest / 200 - 1), 1e-4, 0);
    trace_free(&t);
    predictor_free(predictor);
}

/* A motion takes the length factor's place: still at 0.8 it is L(0.8); at u = -0.25 the drive is 0.375 of it
 */
static void a_motion_multiplies_the_drive(void **state)
{
    (void)state;
    struct muscle_parameters p = muscle_untiring();
    struct train_pulse pulses[COUNT];
    const size_t count = pulses_at(50, pulses);
    const struct trace_options options = {
        .exact = true, .step_ms = 10, .until_ms = none, .window_from_ms = none, .window_to_ms = none};
    double time_ms[] = {0, 5000}, length[] = {0.8, 0.8}, still[] = {0, 0}, shortening[] = {-0.25, -0.25};
    struct motion motion = {
        .samples = 2, .time_ms = time_ms, .relative_length = length, .relative_velocity = still};
    struct trace moving = traced(&p, pulses, count, &motion, &options, NULL);
    motion.relative_velocity = shortening;
    struct trace fast = traced(&p, pulses, count, &motion, &options, NULL);
    p.length_factor = (double)NAN;
    p.length_relative = 0.8;
    struct trace fixed = traced(&p, pulses, count, NULL, &options, NULL);
    for (size_t i = 0; i < fixed.samples; i++) {
        assert_near(moving.force_n[i], fixed.force_n[i], 3e-5, 0);
        assert_near(fast.force_n[i], 0.375 * fixed.force_n[i], 3e-5,
                    0); /* F is linear in the drive without fatigue */
    }
    trace_free(&moving);
    trace_free(&fast);
    trace_free(&fixed);
}

/* A periodic motion goes on; one that is not stays at its last length with velocity 0 (house chapter,
 * "motions") */
static void motions_end_or_go_on(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_untiring();
    struct train_pulse pulses[COUNT];
    const size_t count = pulses_at(50, pulses);
    const struct trace_options options = {
        .exact = true, .step_ms = 10, .until_ms = 900, .window_from_ms = none, .window_to_ms = none};
    double time_ms[] = {0, 100, 200, 300, 400, 500, 600, 700, 800, 900, 1000};
    double length[] = {0.8, 1.0, 0.8, 1.0, 0.8, 1.0, 0.8, 1.0, 0.8, 1.0, 0.8};
    double velocity[] = {0.1, -0.2, 0.1, -0.2, 0.1, -0.2, 0.1, -0.2, 0.1, -0.2, 0.1};
    struct motion whole = {
        .samples = 11, .time_ms = time_ms, .relative_length = length, .relative_velocity = velocity};
    struct motion once = whole;
    once.samples = 3;
    once.periodic = true;
    struct trace a = traced(&p, pulses, count, &whole, &options, NULL),
                 b = traced(&p, pulses, count, &once, &options, NULL);
    for (size_t i = 0; i < a.samples; i++) assert_near(b.force_n[i], a.force_n[i], 5e-5, 0);
    trace_free(&b);
    double end_ms[] = {0, 100, 100.001, 5000}, end_length[] = {0.8, 1.0, 1.0, 1.0},
           end_velocity[] = {0, 0, 0, 0};
    struct motion stays = {
        .samples = 2, .time_ms = end_ms, .relative_length = end_length, .relative_velocity = end_velocity};
    struct motion longer = stays;
    longer.samples = 4;
    b = traced(&p, pulses, count, &stays, &options, NULL);
    struct trace c = traced(&p, pulses, count, &longer, &options, NULL);
    for (size_t i = 0; i < b.samples; i++) assert_near(c.force_n[i], b.force_n[i], 5e-5, 0);
    trace_free(&a);
    trace_free(&b);
    trace_free(&c);
}

/* A cycling motion, sampled each 10 ms: the default engine against the exact one, and the exact one against
 * classical Runge-Kutta steps of 0.01 ms of the equations as the model chapter writes them (one full tier, no
 * fatigue). */
static void a_cycling_motion_is_followed(void **state)
{
    (void)state;
    enum { ROWS = 121 };
    static double time_ms[ROWS], length[ROWS], velocity[ROWS];
    const struct muscle_parameters p = muscle_untiring();
    const double turn = 6.28318530717958647692 / 1200;
    for (int i = 0; i < ROWS; i++) {
        time_ms[i] = 10 * i;
        length[i] = 1 + 0.2 * cos(turn * time_ms[i]);
        velocity[i] = -0.2 * sin(turn * time_ms[i]);
    }
    const struct motion motion = {.samples = ROWS,
                                  .time_ms = time_ms,
                                  .relative_length = length,
                                  .relative_velocity = velocity,
                                  .periodic = true};
    struct train_pulse pulses[COUNT];
    const size_t count = pulses_at(50, pulses);
    struct trace_options options = {
        .exact = true, .step_ms = 5, .until_ms = 1100, .window_from_ms = none, .window_to_ms = none};
    struct trace exact = traced(&p, pulses, count, &motion, &options, NULL);
    options.exact = false;
    struct trace quick = traced(&p, pulses, count, &motion, &options, NULL);
    double peak = 0, F = 0;
    for (size_t i = 0; i < exact.samples; i++) peak = fmax(peak, exact.force_n[i]);
    const double h = 0.01;
    for (int i = 0; i < 110000; i++) {
        if (i % 500 == 0) {
            assert_near(exact.force_n[i / 500], F, 2e-7 * peak, 0);
            assert_near(quick.force_n[i / 500], F, 1e-4 * peak, 0);
        }
        double slope[4], at = F;
        for (int s = 0; s < 4; s++) {
            const double t = (i + (s == 0 ? 0 : s == 3 ? 1 : 0.5)) * h;
            double C = 0;
            for (int j = 0; j < COUNT && 50.0 * j <= i * h + 1e-9; j++) {
                const double R = j == 0 ? 1 : 1 + 0.143 * exp(-50.0 / 20), since = (t - 50.0 * j) / 20;
                C += R * since * exp(-since);
            }
            const int row = (int)fmin(floor((i + 0.5) * h / 10), ROWS - 2);
            const double part = t / 10 - row, l = length[row] + part * (length[row + 1] - length[row]);
            const double u = velocity[row] + part * (velocity[row + 1] - velocity[row]);
            const double V = u > 0 ? (1 + 35 * u) / (1 + 25 * u) : (1 + u) / (1 - u / 0.25);
            const double x = C / (0.103 + C);
            slope[s] = 3.009 * x * exp(-(l - 1) * (l - 1) / 0.45) * V - at / (50.957 + 60 * x);
            at = F + (s < 2 ? 0.5 : 1) * h * slope[s];
        }
        F += h / 6 * (slope[0] + 2 * slope[1] + 2 * slope[2] + slope[3]);
    }
    trace_free(&exact);
    trace_free(&quick);
}

static void pulses_too_near_are_refused(void **state)
{
    (void)state;
    const struct muscle_parameters p = muscle_published();
    const struct train_pulse pulses[2] = {{0, 300, 60}, {0.0005, 300, 60}};
    const struct trace_options options = {.until_ms = none, .window_from_ms = none, .window_to_ms = none};
    struct trace trace;
    struct message why;
    assert_status(predict_trace(&p, pulses, 2, NULL, &options, &trace, NULL, &why), STATUS_REFUSED, &why);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(delay_shifts_force_only_and_tone_is_added),
        cmocka_unit_test(summary_agrees_with_fine_samples),
        cmocka_unit_test(defaults_are_the_second_half_and_a_second_more),
        cmocka_unit_test(pairs_are_one_period_each),
        cmocka_unit_test(measures_of_a_hold_follow_their_definitions),
        cmocka_unit_test(a_motion_multiplies_the_drive),
        cmocka_unit_test(motions_end_or_go_on),
        cmocka_unit_test(a_cycling_motion_is_followed),
        cmocka_unit_test(pulses_too_near_are_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
