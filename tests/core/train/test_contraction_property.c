/* Drawn contractions (seed 20261203): what a stimulator is given against the exact pulses, over shapes,
 * rates, openings, pairs, steps. */
#include "core/muscle/recruitment.h"
#include "core/train/contraction.h"
#include "support/draws.h"
#include "support/near.h"

#include <math.h>
#include <stdlib.h>

enum { MOST = 8192, CASES = 400 };

struct drawn {
    struct contraction contraction;
    struct recruitment law;
    struct train_grid grid;
};

static struct drawn draw(uint64_t *state)
{
    static const uint16_t steps[] = {1, 2, 5, 10};
    struct drawn d = {.law = {.law = RECRUITMENT_STRENGTH_DURATION}};
    d.law.rheobase_ma = draw_uniform(state, 10, 30);
    d.law.chronaxie_us = draw_uniform(state, 100, 400);
    d.law.spread = draw_uniform(state, 0.1, 0.5);
    d.grid.current_step_ua = 500;
    d.grid.duration_step_us = steps[draw_next(state) % 4];
    d.grid.duration_from_us = (uint16_t)(d.grid.duration_step_us * (uint16_t)(1 + draw_next(state) % 20));
    d.contraction = (struct contraction){
        .frequency_pps = floor(draw_uniform(state, 8, 80)),
        .opening = (unsigned)(1 + draw_next(state) % 3),
        .pairs = draw_next(state) % 4 == 0,
        .opening_gap_ms = 5,
        .duration_us =
            d.grid.duration_from_us +
            d.grid.duration_step_us * floor(draw_uniform(state, 100, 400) / d.grid.duration_step_us),
        .current_ma = 0.5 * floor(draw_uniform(state, 60, 160)),
        .trim_duration_us = (double)NAN,
        .trim_current_ma = (double)NAN,
        .ramp_up = {.shape = (enum ramp_shape)(draw_next(state) % 3), .ms = draw_uniform(state, 0, 2500)},
        .hold_ms = draw_uniform(state, 200, 3000),
        .ramp_down = {.shape = (enum ramp_shape)(draw_next(state) % 3), .ms = draw_uniform(state, 0, 1500)},
        .rest_ms = 1000,
        .repeat = 1,
    };
    return d;
}

/* Times are the exact ones, moved so that the first pulse given is at 0; values are on the steps; nothing
 * turns on a ramp. */
static void check(const struct drawn *d, const struct train_pulse *ideal, size_t first,
                  const struct train_pulse *given, size_t count)
{
    const double up_ms = d->contraction.ramp_up.ms, hold_ms = up_ms + d->contraction.hold_ms;
    for (size_t k = 0; k < count; k++) {
        const struct train_pulse *exact = &ideal[first + k];
        const double step_us = d->grid.duration_step_us;
        assert_near(given[k].time_ms, exact->time_ms - ideal[first].time_ms, 1e-9, 0);
        assert_near(fmod(given[k].duration_us - d->grid.duration_from_us, step_us), 0, 0, 0);
        assert_true(given[k].duration_us >= d->grid.duration_from_us &&
                    given[k].duration_us <= d->contraction.duration_us);
        /* half a step where eight pieces allow it; a ramp of 2.5 s at 80 pps of any of the laws drawn stays
         * within 2 % of the hold more */
        assert_near(given[k].duration_us, exact->duration_us,
                    0.5 * step_us + 0.5 + 0.02 * d->contraction.duration_us, 0);
        if (k == 0) continue;
        if (exact->time_ms < up_ms) assert_true(given[k].duration_us >= given[k - 1].duration_us);
        if (exact->time_ms >= hold_ms + 5) assert_true(given[k].duration_us <= given[k - 1].duration_us);
    }
}

static void drawn_contractions_are_given_as_meant(void **state)
{
    (void)state;
    static struct train_pulse ideal[MOST];
    uint64_t seed = 20261203;
    int within_half_a_step = 0;
    for (int i = 0; i < CASES; i++) {
        const struct drawn d = draw(&seed);
        struct message why;
        struct train_pulse *given;
        size_t exact_count, count, first = 0, end;
        assert_status(contraction_pulses(&d.contraction, &d.law, ideal, MOST, &exact_count, &why), STATUS_OK,
                      &why);
        end = exact_count;
        while (ideal[first].duration_us + 1e-6 < d.grid.duration_from_us) first++;
        while (ideal[end - 1].duration_us + 1e-6 < d.grid.duration_from_us) end--;
        assert_status(contraction_list_pulses(&d.contraction, 1, &d.law, &d.grid, MOST, &given, NULL, &count,
                                              NULL, &why),
                      STATUS_OK, &why);
        assert_int_equal(count, end - first);
        check(&d, ideal, first, given, count);
        double worst = 0;
        for (size_t k = 0; k < count; k++)
            worst = fmax(worst, fabs(given[k].duration_us - ideal[first + k].duration_us));
        within_half_a_step += worst <= 0.5 * d.grid.duration_step_us + 0.5 + 1e-9;
        free(given);
    }
    print_message("%d of %d drawn contractions within half a step throughout\n", within_half_a_step, CASES);
    assert_true(within_half_a_step > CASES / 2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(drawn_contractions_are_given_as_meant)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
