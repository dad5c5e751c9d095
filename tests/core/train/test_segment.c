/* The one expansion: values, periods, openings, pairs, grid. Expected numbers by hand from the house
 * chapter's "Trains". */
#include "core/train/segment.h"
#include "support/near.h"

static const struct train_grid plain = {0};

static void values_run_straight_and_round_down(void **state)
{
    (void)state;
    /* floor((from (n-1-k) + to k)/(n-1)) */
    const uint32_t up[] = {100, 133, 166, 200};
    for (uint32_t k = 0; k < 4; k++) assert_int_equal(segment_value(100, 200, k, 4), up[k]);
    const uint32_t down[] = {200, 166, 133, 100};
    for (uint32_t k = 0; k < 4; k++) assert_int_equal(segment_value(200, 100, k, 4), down[k]);
    assert_int_equal(segment_value(7, 9, 0, 1), 7);
    assert_int_equal(segment_value(4000000000u, 0, 32767, 65535), 2000000000u);
}

static void a_value_goes_down_to_the_step_and_below_from_to_nothing(void **state)
{
    (void)state;
    assert_int_equal(segment_grid_value(39, 40, 5), 0);
    assert_int_equal(segment_grid_value(40, 40, 5), 40);
    assert_int_equal(segment_grid_value(44, 40, 5), 40);
    assert_int_equal(segment_grid_value(123, 40, 5), 120);
    assert_int_equal(segment_grid_value(123, 0, 0), 123);
}

static void check_times(const struct segment *segment, const uint64_t *at_us, const bool *extra, int count)
{
    struct segment_cursor cursor;
    struct pulse pulse;
    segment_begin(&cursor, segment, &plain);
    for (int i = 0; i < count; i++) {
        assert_true(segment_next(&cursor, &pulse));
        assert_int_equal(pulse.at_us, at_us[i]);
        assert_int_equal(pulse.opening_extra, extra[i]);
    }
    assert_false(segment_next(&cursor, &pulse));
}

static void after_an_opening_the_period_starts_at_its_last_pulse(void **state)
{
    (void)state;
    const struct segment triplet = {.start_us = 1000,
                                    .period_us = 33334,
                                    .current_from_ua = 1,
                                    .current_to_ua = 1,
                                    .count = 5,
                                    .opening_gap_us = 5000,
                                    .duration_from_us = 1,
                                    .duration_to_us = 1,
                                    .opening = 3};
    check_times(&triplet, (const uint64_t[]){1000, 6000, 11000, 44334, 77668},
                (const bool[]){false, true, true, false, false}, 5);
    assert_int_equal(segment_periods(&triplet), 3);
    assert_int_equal(segment_next_start(&triplet), 111002);
    struct segment doublet = triplet;
    doublet.opening = 2;
    check_times(&doublet, (const uint64_t[]){1000, 6000, 39334, 72668, 106002},
                (const bool[]){false, true, false, false, false}, 5);
}

static void pairs_run_from_pair_to_pair(void **state)
{
    (void)state;
    struct segment pairs = {.period_us = 80000,
                            .current_from_ua = 1,
                            .current_to_ua = 1,
                            .count = 6,
                            .opening_gap_us = 5000,
                            .duration_from_us = 1,
                            .duration_to_us = 1,
                            .opening = 1,
                            .pattern = SEGMENT_PAIRS};
    check_times(&pairs, (const uint64_t[]){0, 5000, 80000, 85000, 160000, 165000}, (const bool[6]){false}, 6);
    pairs.opening = 2; /* the first pair is the doublet */
    check_times(&pairs, (const uint64_t[]){0, 5000, 80000, 85000, 160000, 165000},
                (const bool[]){false, true, false, false, false, false}, 6);
    pairs.opening = 3; /* the period from the triplet's last pulse */
    pairs.count = 7;
    check_times(&pairs, (const uint64_t[]){0, 5000, 10000, 90000, 95000, 170000, 175000},
                (const bool[]){false, true, true, false, false, false, false}, 7);
    assert_int_equal(segment_periods(&pairs), 3);
    assert_int_equal(segment_next_start(&pairs), 250000);
}

static void an_opening_and_a_pair_have_one_value(void **state)
{
    (void)state;
    const struct segment ramp = {.period_us = 50000,
                                 .current_from_ua = 10000,
                                 .current_to_ua = 10000,
                                 .count = 5,
                                 .opening_gap_us = 5000,
                                 .duration_from_us = 100,
                                 .duration_to_us = 200,
                                 .opening = 2};
    const uint32_t expected[] = {100, 100, 133, 166, 200};
    struct segment_cursor cursor;
    struct pulse pulse;
    segment_begin(&cursor, &ramp, &plain);
    for (int i = 0; i < 5; i++) {
        assert_true(segment_next(&cursor, &pulse));
        assert_int_equal(pulse.duration_us, expected[i]);
    }
}

static void pulses_below_from_are_skipped_and_keep_the_grid(void **state)
{
    (void)state;
    const struct train_grid grid = {
        .current_from_ua = 500, .current_step_ua = 500, .duration_from_us = 120, .duration_step_us = 10};
    const struct segment ramp = {.period_us = 50000,
                                 .current_from_ua = 10300,
                                 .current_to_ua = 10300,
                                 .count = 4,
                                 .duration_from_us = 100,
                                 .duration_to_us = 160,
                                 .opening = 1};
    struct segment_cursor cursor;
    struct pulse pulse;
    segment_begin(&cursor, &ramp, &grid);
    assert_true(segment_next(&cursor, &pulse));
    assert_int_equal(pulse.at_us, 50000);
    assert_int_equal(pulse.duration_us, 120);
    assert_int_equal(pulse.current_ua, 10000);
    assert_true(segment_next(&cursor, &pulse));
    assert_int_equal(pulse.duration_us, 140);
    assert_true(segment_next(&cursor, &pulse));
    assert_int_equal(pulse.duration_us, 160);
    assert_false(segment_next(&cursor, &pulse));
}

/* Joining two segments of one grid gives the times of one. */
static void a_segment_goes_on_where_the_one_before_ends(void **state)
{
    (void)state;
    const struct segment whole = {.start_us = 77,
                                  .period_us = 25000,
                                  .current_from_ua = 1,
                                  .current_to_ua = 1,
                                  .count = 21,
                                  .opening_gap_us = 4000,
                                  .duration_from_us = 1,
                                  .duration_to_us = 1,
                                  .opening = 2};
    struct segment first = whole, second = whole;
    first.count = 9;
    second.count = 12;
    second.opening = 1;
    second.start_us = segment_next_start(&first);
    struct segment_cursor one, part;
    struct pulse a, b;
    segment_begin(&one, &whole, &plain);
    segment_begin(&part, &first, &plain);
    for (int i = 0; i < 21; i++) {
        if (i == 9) segment_begin(&part, &second, &plain);
        assert_true(segment_next(&one, &a));
        assert_true(segment_next(&part, &b));
        assert_int_equal(a.at_us, b.at_us);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(values_run_straight_and_round_down),
        cmocka_unit_test(a_value_goes_down_to_the_step_and_below_from_to_nothing),
        cmocka_unit_test(after_an_opening_the_period_starts_at_its_last_pulse),
        cmocka_unit_test(pairs_run_from_pair_to_pair),
        cmocka_unit_test(an_opening_and_a_pair_have_one_value),
        cmocka_unit_test(pulses_below_from_are_skipped_and_keep_the_grid),
        cmocka_unit_test(a_segment_goes_on_where_the_one_before_ends),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
