/* Documents for tests of the planner. The goal of this code: tests of the planner need no files. */
#include "support/plans.h"
#include "support/muscles.h"
#include "support/near.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct profile plans_profile(struct profile_muscle *muscle)
{
    const double absent = (double)NAN;
    *muscle = (struct profile_muscle){
        .name = "left-quadriceps",
        .parameters = muscle_composed(),
        .electrode_area_cm2 = 45,
        .has_limits = true,
        .limits = {.current_ma = 80,
                   .duration_us = 500,
                   .frequency_pps = 80,
                   .charge_uc = 40,
                   .rms_ma = 40,
                   .gap_us = 4000,
                   .on_ms = 10000,
                   .duty_percent = 60,
                   .first_uc = 30,
                   .slew_uc_per_s = 60,
                   .slew_memory_ms = absent,
                   .session_pulses = 60000,
                   .session_charge_mc = 2000,
                   .session_ms = absent,
                   .force_n = 250},
        .has_found = true,
        .found = {.duration_us = 300, .threshold_ma = 24, .comfort_ma = 65, .as_train = true}};
    muscle->parameters.has_pool = false;
    muscle->parameters.delay_ms = 25;
    muscle->measured.joint_deg = muscle->measured.lever_m = absent;
    struct profile profile = {.person = "P-017", .muscles = 1, .muscle = muscle};
    return profile;
}

struct stimulator plans_stimulator(void)
{
    return (struct stimulator){.name = "bench-a",
                               .unit = "A-003",
                               .channels = 6,
                               .current_ma = {0, 110, 0.5},
                               .duration_us = {40, 800, 5},
                               .frequency_pps = {1, 100, 1},
                               .gap_us_min = 4000,
                               .recovery_us = (double)NAN,
                               .interphase_us = 100,
                               .mismatch_percent = 1,
                               .queue_segments = 128,
                               .compliance_v = 150,
                               .load_ohm = 1000,
                               .baud = 115200};
}

struct demand plans_demand(unsigned contractions)
{
    const struct range open = {(double)NAN, (double)NAN};
    return (struct demand){.muscle = "left-quadriceps",
                           .target_kind = TARGET_N,
                           .target = 100,
                           .tolerance_percent = 5,
                           .ripple_percent_max = 10,
                           .droop_percent_max = 5,
                           .rise_ms_max = 800,
                           .overshoot_percent_max = 10,
                           .hold_ms = 2000,
                           .release_ms = 500,
                           .rest_ms = 8000,
                           .contractions = contractions,
                           .warm_up = 2,
                           .opening = {false, true, false, false},
                           .pattern = {true, false},
                           .ramp = {true, true, true},
                           .vary = VARY_FREQUENCY | VARY_DURATION | VARY_CURRENT,
                           .frequency_pps = open,
                           .duration_us = open,
                           .current_ma = open};
}

struct plan_options plans_options(void)
{
    return (struct plan_options){.ensemble = 0, .seed = 1};
}

static int by_time(const void *a, const void *b)
{
    const struct pulse *left = a, *right = b;
    if (left->at_us != right->at_us) return left->at_us < right->at_us ? -1 : 1;
    return (int)left->channel - (int)right->channel;
}

struct pulse *plans_pulses(const struct plan *plan, size_t *count)
{
    struct segment *segments = NULL;
    size_t segment_count = 0, most = 1;
    struct message why = {""};
    assert_status(plan_segments(plan, &segments, &segment_count, &why), STATUS_OK, &why);
    for (size_t i = 0; i < segment_count; i++) most += segments[i].count;
    struct pulse *pulses = malloc(most * sizeof *pulses);
    assert_non_null(pulses);
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    *count = 0;
    for (size_t i = 0; i < segment_count; i++) {
        struct segment_cursor cursor;
        segment_begin(&cursor, &segments[i], &grid);
        while (segment_next(&cursor, &pulses[*count])) (*count)++;
    }
    free(segments);
    qsort(pulses, *count, sizeof *pulses, by_time);
    return pulses;
}
