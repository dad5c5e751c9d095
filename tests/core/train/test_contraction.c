/* Contractions: exact pulses, compiled segments, and that the two agree. Rules: house chapter, "Trains" and
 * "Train"; numbers by hand. */
#include "core/muscle/recruitment.h"
#include "core/train/contraction.h"
#include "support/near.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { MOST = 4096 };
static const struct recruitment spread_law = {
    .law = RECRUITMENT_STRENGTH_DURATION, .rheobase_ma = 22, .chronaxie_us = 180, .spread = 0.25};
static const struct recruitment full_law = {.law = RECRUITMENT_FULL};
static const struct train_grid bench_grid = {
    .current_from_ua = 0, .current_step_ua = 500, .duration_from_us = 40, .duration_step_us = 5};

static struct contraction steady(double pps, double hold_ms)
{
    return (struct contraction){.frequency_pps = pps,
                                .opening = 1,
                                .opening_gap_ms = 5,
                                .duration_us = 300,
                                .current_ma = 60,
                                .trim_duration_us = (double)NAN,
                                .trim_current_ma = (double)NAN,
                                .hold_ms = hold_ms,
                                .rest_ms = 1000,
                                .repeat = 1};
}

static size_t exact(const struct contraction *contraction, const struct recruitment *law,
                    struct train_pulse *pulses)
{
    struct message why;
    size_t count;
    assert_status(contraction_pulses(contraction, law, pulses, MOST, &count, &why), STATUS_OK, &why);
    return count;
}

/* 30 pps: 33,334 us (house chapter) */
static void periods_are_rounded_up_to_the_microsecond(void **state)
{
    (void)state;
    assert_int_equal(train_period_us(30), 33334);
    assert_int_equal(train_period_us(50), 20000);
    assert_int_equal(train_period_us(12.5), 80000);
    assert_int_equal(train_period_us(1e6 / 7.0), 7);
}

static void a_hold_has_no_pulse_at_its_end(void **state)
{
    (void)state;
    struct train_pulse pulses[MOST];
    const struct contraction c = steady(20, 1000);
    assert_int_equal(exact(&c, &full_law, pulses), 20); /* 0, 50 .. 950 */
    assert_near(pulses[19].time_ms, 950, 1e-9, 0);
    const struct contraction longer = steady(20, 1000.001);
    assert_int_equal(exact(&longer, &full_law, pulses), 21);
}

/* t < ramp_up is the ramp's: at 20 pps and 400 ms pulses 0 .. 350 ms, eight of them; the ninth at 400 is the
 * hold's. */
static void ramp_pulses_follow_their_shape_in_recruitment(void **state)
{
    (void)state;
    struct train_pulse pulses[MOST];
    struct contraction c = steady(20, 500);
    c.ramp_up = (struct ramp){.shape = RAMP_RAISED_COSINE, .ms = 400};
    c.ramp_down = (struct ramp){.shape = RAMP_EXPONENTIAL, .ms = 300};
    const size_t count = exact(&c, &spread_law, pulses);
    assert_int_equal(count, 8 + 10 + 6);
    const double rho = recruitment_of(&spread_law, 300, 60);
    for (unsigned i = 1; i <= 8; i++) {
        const double u = (1 - cos(3.14159265358979323846 * i / 9)) / 2;
        assert_near(recruitment_of(&spread_law, pulses[i - 1].duration_us, 60), u * rho, 0, 1e-10);
    }
    for (int i = 8; i < 18; i++) assert_near(pulses[i].duration_us, 300, 0, 0);
    for (unsigned i = 1; i <= 6; i++) { /* mirrored: the weakest is the last */
        const double u = (1 - exp(-3.0 * i / 7)) / (1 - exp(-3));
        assert_near(recruitment_of(&spread_law, pulses[count - i].duration_us, 60), u * rho, 0, 1e-10);
    }
}

static void with_law_full_a_ramp_is_of_duration(void **state)
{
    (void)state;
    struct train_pulse pulses[MOST];
    struct contraction c = steady(20, 100);
    c.ramp_up = (struct ramp){.shape = RAMP_LINEAR, .ms = 150};
    assert_int_equal(exact(&c, &full_law, pulses), 5);
    for (int i = 0; i < 3; i++) assert_near(pulses[i].duration_us, 300 * (i + 1) / 4.0, 1e-9, 0);
}

static void a_trim_runs_from_the_first_to_the_last_pulse_of_the_hold(void **state)
{
    (void)state;
    struct train_pulse pulses[MOST];
    struct contraction c = steady(10, 500);
    c.trim_duration_us = 340;
    c.trim_current_ma = 58;
    assert_int_equal(exact(&c, &spread_law, pulses), 5);
    for (int i = 0; i < 5; i++) {
        assert_near(pulses[i].duration_us, 300 + 10 * i, 1e-9, 0);
        assert_near(pulses[i].current_ma, 60 - 0.5 * i, 1e-9, 0);
    }
}

static void free_gaps_are_one_pulse_more_than_gaps(void **state)
{
    (void)state;
    struct train_pulse pulses[MOST];
    double gaps[] = {5, 40, 40, 80};
    struct contraction c = steady(30, 0);
    c.gaps_ms = gaps;
    c.gaps = 4;
    assert_int_equal(exact(&c, &full_law, pulses), 5);
    const double at_ms[] = {0, 5, 45, 85, 165};
    for (int i = 0; i < 5; i++) assert_near(pulses[i].time_ms, at_ms[i], 1e-9, 0);

    struct message why;
    struct train_pulse *list;
    size_t count;
    assert_status(
        contraction_list_pulses(&c, 1, &full_law, &bench_grid, MOST, &list, NULL, &count, NULL, &why),
        STATUS_OK, &why);
    assert_int_equal(count, 5);
    for (int i = 0; i < 5; i++) assert_near(list[i].time_ms, at_ms[i], 1e-9, 0);
    free(list);
}

static void another_current_than_the_laws_is_refused_by_both_names(void **state)
{
    (void)state;
    struct message why;
    struct train_pulse pulses[8];
    size_t count;
    const struct recruitment law = {
        .law = RECRUITMENT_DURATION_EXPONENTIAL, .pd0_us = 130, .pdt_us = 190, .current_ma = 55};
    const struct contraction c = steady(30, 100);
    assert_status(contraction_pulses(&c, &law, pulses, 8, &count, &why), STATUS_REFUSED, &why);
    assert_non_null(strstr(why.text, "60 mA"));
    assert_non_null(strstr(why.text, "55 mA"));
}

/* Compiled pulses stand where the exact ones stand, each within half a step and half a microsecond of its
 * ideal where eight pieces allow it, and settings never turn along a ramp. */
static void a_compiled_ramp_is_within_half_a_step(void **state)
{
    (void)state;
    struct train_pulse ideal[MOST], *given;
    struct message why;
    const enum ramp_shape shapes[] = {RAMP_LINEAR, RAMP_RAISED_COSINE, RAMP_EXPONENTIAL};
    for (int i = 0; i < 3; i++) {
        struct contraction c = steady(30, 1000);
        c.ramp_up = (struct ramp){.shape = shapes[i], .ms = 400};
        c.ramp_down = (struct ramp){.shape = shapes[i], .ms = 300};
        const size_t exact_count = exact(&c, &spread_law, ideal);
        size_t count;
        assert_status(
            contraction_list_pulses(&c, 1, &spread_law, &bench_grid, MOST, &given, NULL, &count, NULL, &why),
            STATUS_OK, &why);
        assert_int_equal(count, exact_count);
        for (size_t k = 0; k < count; k++) {
            assert_near(given[k].time_ms, ideal[k].time_ms, 1e-9, 0);
            assert_near(given[k].duration_us, ideal[k].duration_us, 3.0, 0);
            assert_near(fmod(given[k].duration_us - 40, 5), 0, 0, 0);
            if (k > 0 && k <= 12) assert_true(given[k].duration_us >= given[k - 1].duration_us);
            if (k > count - 9) assert_true(given[k].duration_us <= given[k - 1].duration_us);
        }
        free(given);
    }
}

static void on_tiny_steps_compiled_and_exact_agree(void **state)
{
    (void)state;
    struct train_pulse ideal[MOST], *given;
    struct message why;
    const struct train_grid fine = {
        .current_from_ua = 1, .current_step_ua = 1, .duration_from_us = 1, .duration_step_us = 1};
    struct contraction c = steady(40, 700);
    c.opening = 3;
    c.ramp_up = (struct ramp){.shape = RAMP_LINEAR, .ms = 200};
    c.trim_duration_us = 351;
    const size_t exact_count = exact(&c, &spread_law, ideal);
    size_t count;
    bool *same;
    double hold_ms[2];
    assert_status(
        contraction_list_pulses(&c, 1, &spread_law, &fine, MOST, &given, &same, &count, hold_ms, &why),
        STATUS_OK, &why);
    assert_int_equal(count, exact_count);
    for (size_t k = 0; k < count; k++) {
        assert_near(given[k].time_ms, ideal[k].time_ms, 1e-9, 0);
        assert_near(given[k].duration_us, ideal[k].duration_us, 1.01, 0);
    }
    assert_false(same[0]);
    assert_true(same[1] && same[2] && !same[3]);
    assert_near(hold_ms[0], 200, 1e-9, 0);
    assert_near(hold_ms[1], 900, 1e-9, 0);
    free(given);
    free(same);
}

/* A long ramp can not be followed to half a step in eight pieces: the pieces are at most eight and the error
 * is said by the pulses. */
static void a_long_ramp_takes_at_most_eight_pieces(void **state)
{
    (void)state;
    struct message why;
    const struct train_grid fine = {
        .current_from_ua = 1, .current_step_ua = 1, .duration_from_us = 1, .duration_step_us = 1};
    struct contraction c = steady(80, 1000);
    c.ramp_up = (struct ramp){.shape = RAMP_RAISED_COSINE, .ms = 3500};
    assert_status(contraction_compile_ramps(&c, &spread_law, &fine, &why), STATUS_OK, &why);
    assert_between((double)c.ramp_up.pieces, 2, RAMP_PIECES_MAX);
    uint32_t pulses = 0;
    for (size_t i = 0; i < c.ramp_up.pieces; i++) pulses += c.ramp_up.piece[i].pulses;
    assert_int_equal(pulses, 280);
    struct train_pulse ideal[MOST], *given;
    size_t count;
    const size_t exact_count = exact(&c, &spread_law, ideal);
    assert_status(contraction_list_pulses(&c, 1, &spread_law, &fine, MOST, &given, NULL, &count, NULL, &why),
                  STATUS_OK, &why);
    assert_int_equal(count, exact_count);
    for (size_t k = 0; k < count; k++) assert_near(given[k].duration_us, ideal[k].duration_us, 5, 0);
    free(given);
}

/* Pulses of a ramp below the stimulator's `from` are not given; the contraction starts at the first that is,
 * and its hold comes earlier. */
static void a_weak_beginning_is_not_given_and_the_contraction_starts_later(void **state)
{
    (void)state;
    struct train_pulse ideal[MOST], *given;
    struct message why;
    const struct train_grid coarse = {
        .current_from_ua = 500, .current_step_ua = 500, .duration_from_us = 200, .duration_step_us = 5};
    struct contraction c = steady(25, 400);
    c.opening = 2;
    c.ramp_up = (struct ramp){.shape = RAMP_LINEAR, .ms = 400};
    c.ramp_down = (struct ramp){.shape = RAMP_LINEAR, .ms = 200};
    const size_t exact_count = exact(&c, &spread_law, ideal);
    size_t first = 0, end = exact_count, count;
    while (ideal[first].duration_us < 200) first++;
    while (ideal[end - 1].duration_us < 200) end--;
    assert_true(first > 2 && end < exact_count);
    double hold_ms[2];
    assert_status(
        contraction_list_pulses(&c, 1, &spread_law, &coarse, MOST, &given, NULL, &count, hold_ms, &why),
        STATUS_OK, &why);
    assert_int_equal(count, end - first);
    for (size_t k = 0; k < count; k++) {
        assert_near(given[k].time_ms, ideal[first + k].time_ms - ideal[first].time_ms, 1e-9, 0);
        assert_near(given[k].duration_us, ideal[first + k].duration_us, 3, 0);
    }
    assert_near(hold_ms[0], 400 - ideal[first].time_ms, 1e-9, 0);
    free(given);
}

/* rest_ms runs from the last pulse to the next first pulse. */
static void contractions_repeat_after_their_rest(void **state)
{
    (void)state;
    struct train_pulse *list;
    struct message why;
    size_t count;
    struct contraction c[2] = {steady(20, 200), steady(50, 60)};
    c[0].repeat = 3;
    c[0].rest_ms = 800;
    assert_status(contraction_list_pulses(c, 2, &full_law, NULL, MOST, &list, NULL, &count, NULL, &why),
                  STATUS_OK, &why);
    assert_int_equal(count, 3 * 4 + 3);
    assert_near(list[4].time_ms, 150 + 800, 1e-9, 0);
    assert_near(list[12].time_ms, 3 * 950, 1e-9, 0);
    assert_near(list[14].time_ms, 3 * 950 + 40, 1e-9, 0);
    free(list);
    assert_status(contraction_list_pulses(c, 2, &full_law, NULL, 14, &list, NULL, &count, NULL, &why),
                  STATUS_REFUSED, &why);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(periods_are_rounded_up_to_the_microsecond),
        cmocka_unit_test(a_hold_has_no_pulse_at_its_end),
        cmocka_unit_test(ramp_pulses_follow_their_shape_in_recruitment),
        cmocka_unit_test(with_law_full_a_ramp_is_of_duration),
        cmocka_unit_test(a_trim_runs_from_the_first_to_the_last_pulse_of_the_hold),
        cmocka_unit_test(free_gaps_are_one_pulse_more_than_gaps),
        cmocka_unit_test(another_current_than_the_laws_is_refused_by_both_names),
        cmocka_unit_test(a_compiled_ramp_is_within_half_a_step),
        cmocka_unit_test(on_tiny_steps_compiled_and_exact_agree),
        cmocka_unit_test(a_long_ramp_takes_at_most_eight_pieces),
        cmocka_unit_test(a_weak_beginning_is_not_given_and_the_contraction_starts_later),
        cmocka_unit_test(contractions_repeat_after_their_rest),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
