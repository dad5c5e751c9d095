/* Plans: what the design promises of every one of them. Sources beside the checks; what has none is a rule of
 * the design (Plan chapter). */
#include "core/plan/plan.h"
#include "support/near.h"
#include "support/plans.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static enum status make(const struct profile *profile, const struct demand *demand, struct plan *plan,
                        struct message *why)
{
    const struct stimulator stimulator = plans_stimulator();
    const struct plan_options options = plans_options();
    return plan_make(profile, demand, &stimulator, NULL, &options, plan, why);
}

static double last_duration_us(const struct contraction *one)
{
    return isnan(one->trim_duration_us) ? one->duration_us : one->trim_duration_us;
}

static void a_demand_that_can_be_met_is_met(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    const struct demand demand = plans_demand(8);
    struct plan plan;
    struct message why = {""};
    assert_status(make(&profile, &demand, &plan, &why), STATUS_OK, &why);
    assert_true(plan.feasible);
    assert_true(plan.ledger.within);
    assert_int_equal(plan.contractions_met, 8);
    assert_int_equal(plan.first_miss, 0);
    assert_string_equal(plan.verdict, "Makes 8 of 8");
    const struct plan_channel *channel = &plan.channel[0];
    unsigned next = 1;
    for (size_t b = 0; b < channel->blocks; b++) {
        const struct plan_block *block = &channel->block[b];
        assert_int_equal(block->first, next);
        next += block->count;
        assert_int_equal(block->warm_up, block->first <= 2);
        if (block->warm_up) continue;
        assert_between(block->recount.mean_n_low, 95.0, 105.0);
        assert_between(block->recount.mean_n_high, 95.0, 105.0);
        assert_between(block->recount.ripple_percent, 0.0, 10.0);
        assert_between(block->recount.droop_percent, 0.0, 5.0);
        assert_between(block->recount.rise_ms, 0.0, 800.0);
        assert_between(block->recount.overshoot_percent, -100.0, 10.0);
    }
    assert_int_equal(next, 1 + 2 + 8);
    plan_free(&plan);
}

static void every_pulse_is_on_the_stimulators_steps_and_comfortable(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    const struct demand demand = plans_demand(6);
    struct plan plan;
    struct message why = {""};
    assert_status(make(&profile, &demand, &plan, &why), STATUS_OK, &why);
    size_t count = 0;
    struct pulse *pulses = plans_pulses(&plan, &count);
    assert_true(count > 100);
    for (size_t i = 0; i < count; i++) {
        assert_int_equal((pulses[i].duration_us - 40) % 5, 0);
        assert_int_equal(pulses[i].current_ua % 500, 0);
        assert_true(pulses[i].duration_us >= 40 && pulses[i].duration_us <= 500);
        assert_true(pulses[i].current_ua > 0 && pulses[i].current_ua <= 65000);
        assert_true((uint64_t)pulses[i].current_ua * pulses[i].duration_us <=
                    (uint64_t)65000 * 300); /* charge that was comfortable */
        if (i > 0) assert_true(pulses[i].at_us - pulses[i - 1].at_us >= 4000);
    }
    for (size_t b = 0; b < plan.channel[0].blocks; b++)
        assert_true(isnan(plan.channel[0].block[b].settings.trim_current_ma));
    free(pulses);
    plan_free(&plan);
}

static void the_same_demand_gives_the_same_bytes(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    const struct demand demand = plans_demand(4);
    struct text_out out[2] = {{0}, {0}};
    struct message why = {""};
    for (int i = 0; i < 2; i++) {
        struct plan plan;
        assert_status(make(&profile, &demand, &plan, &why), STATUS_OK, &why);
        plan_print(&plan, &out[i]);
        plan_free(&plan);
    }
    assert_int_equal(out[0].size, out[1].size);
    assert_memory_equal(out[0].data, out[1].data, out[0].size);
    text_out_free(&out[0]);
    text_out_free(&out[1]);
}

static void what_would_work_works(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    struct demand demand = plans_demand(10);
    struct plan plan, other;
    struct message why = {""};
    demand.target = 220;
    demand.rest_ms = 4000;
    demand.frequency_pps = (struct range){15, 40};
    assert_status(make(&profile, &demand, &plan, &why), STATUS_REFUSED, &why);
    assert_true(plan.channels > 0 && plan.channel[0].blocks > 0); /* written all the same */
    assert_false(plan.feasible);
    assert_true(plan.ledger.within);
    assert_true(plan.contractions_met < 10);
    assert_int_equal(plan.first_miss, 2 + plan.contractions_met + 1);
    assert_true(plan.binding.reason ==
                WHY_COMFORT); /* 65 mA and 19.5 uC are below every other bound of this profile */
    assert_int_equal(plan.would_work.most_contractions, plan.contractions_met);
    demand.target = plan.would_work.largest_target_n;
    assert_between(demand.target, 50.0, 219.0);
    assert_status(make(&profile, &demand, &other, &why), STATUS_OK, &why);
    plan_free(&other);
    demand.target = 220;
    if (!isnan(plan.would_work.longest_hold_ms)) {
        demand.hold_ms = plan.would_work.longest_hold_ms;
        assert_status(make(&profile, &demand, &other, &why), STATUS_OK, &why);
        plan_free(&other);
        demand.hold_ms = 2000;
    }
    if (plan.would_work.most_contractions > 0) {
        demand.contractions = plan.would_work.most_contractions;
        assert_status(make(&profile, &demand, &other, &why), STATUS_OK, &why);
        plan_free(&other);
    }
    plan_free(&plan);
}

static void with_the_full_law_only_frequency_may_vary(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    struct demand demand = plans_demand(1);
    struct plan plan;
    struct message why = {""};
    muscle.parameters.recruitment = (struct recruitment){.law = RECRUITMENT_FULL};
    demand.vary = VARY_DURATION;
    assert_status(make(&profile, &demand, &plan, &why), STATUS_REFUSED, &why);
    assert_int_equal(plan.channels, 0);
    assert_non_null(strstr(why.text, "vary: [duration]"));
    assert_non_null(strstr(why.text, "full"));
    demand.vary = VARY_FREQUENCY;
    demand.ripple_percent_max = 60;
    demand.tolerance_percent = 15;
    demand.overshoot_percent_max = 40;
    const enum status status = make(&profile, &demand, &plan, &why);
    assert_true(status == STATUS_OK || status == STATUS_REFUSED);
    assert_int_equal(plan.channels, 1);
    const struct contraction *one = &plan.channel[0].block[0].settings;
    for (size_t b = 0; b < plan.channel[0].blocks; b++) {
        const struct contraction *settings = &plan.channel[0].block[b].settings;
        assert_near(settings->duration_us, one->duration_us, 0.0, 0.0);
        assert_near(settings->current_ma, one->current_ma, 0.0, 0.0);
        assert_true(isnan(settings->trim_duration_us) && isnan(settings->trim_current_ma));
    }
    assert_near(one->current_ma, 65.0, 0.0, 0.0); /* what was found comfortable */
    assert_near(one->duration_us, 300.0, 0.0, 0.0);
    plan_free(&plan);
}

static void a_dormant_muscle_begins_otherwise(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    struct demand demand = plans_demand(2);
    demand.warm_up = 0;
    demand.frequency_pps = (struct range){25, 25};
    demand.tolerance_percent = 10;
    demand.current_ma = (struct range){40, 40};
    struct plan dormant, awake;
    struct message why = {""};
    (void)make(&profile, &demand, &dormant, &why);
    muscle.parameters.has_potentiation = false;
    assert_status(make(&profile, &demand, &awake, &why), STATUS_OK, &why);
    const struct contraction *first = &dormant.channel[0].block[0].settings,
                             *other = &awake.channel[0].block[0].settings;
    /* half the force for the same pulses (common practice, staircase): more is recruited to begin with, and
     * it is lowered as the muscle wakes */
    assert_true(first->duration_us > other->duration_us);
    assert_true(last_duration_us(first) < first->duration_us);
    assert_true(last_duration_us(first) / first->duration_us < last_duration_us(other) / other->duration_us);
    plan_free(&dormant);
    plan_free(&awake);
    /* a muscle that is awake needs no warm-up */
    demand.warm_up = 3;
    assert_status(make(&profile, &demand, &awake, &why), STATUS_OK, &why);
    assert_false(awake.channel[0].block[0].warm_up);
    plan_free(&awake);
}

/* Kesar and Binder-Macleod 2006 (read): equal first force from 600 us at 11.5 Hz, 150 us at 30 Hz, 131 us at
 * 60 Hz; the 11.5 Hz protocol lost least peak force. The direction is checked: the muscle here is another. */
static void slow_and_strong_lasts_longer_than_fast_and_weak(void **state)
{
    (void)state;
    static const double rates_pps[] = {11.5, 30, 60};
    double duration_us[3], kept[3];
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    muscle.parameters.has_potentiation = false;
    muscle.found.duration_us = 600;
    muscle.found.comfort_ma = 40;
    muscle.limits.duration_us = 800;
    struct stimulator stimulator = plans_stimulator();
    stimulator.frequency_pps.step = 0.5;
    const struct plan_options options = plans_options();
    for (int i = 0; i < 3; i++) {
        struct demand demand = plans_demand(1);
        demand.vary = VARY_DURATION;
        demand.current_ma = (struct range){30, 30};
        demand.frequency_pps = (struct range){rates_pps[i], rates_pps[i]};
        demand.ripple_percent_max = 40;
        demand.overshoot_percent_max = 40;
        struct plan plan, worn;
        struct message why = {""};
        assert_status(plan_make(&profile, &demand, &stimulator, NULL, &options, &plan, &why), STATUS_OK,
                      &why);
        struct contraction one = plan.channel[0].block[0].settings;
        duration_us[i] = one.duration_us;
        one.repeat = 20;
        const struct train train = {.contractions = 1, .contraction = &one};
        assert_status(plan_of_train(&train, &profile, NULL, &stimulator, NULL, &options, &worn, &why),
                      STATUS_OK, &why);
        const struct plan_recount *recount = &worn.channel[0].block[0].recount;
        assert_near(recount->mean_n_first, 100.0, 5.0, 0.0);
        kept[i] = recount->mean_n_last / recount->mean_n_first;
        plan_free(&worn);
        plan_free(&plan);
    }
    assert_true(duration_us[0] > duration_us[1] && duration_us[1] > duration_us[2]);
    assert_true(kept[0] > kept[1] && kept[1] > kept[2]);
}

static void a_train_is_a_plan_without_a_demand(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    const struct stimulator stimulator = plans_stimulator();
    const struct plan_options options = plans_options();
    double gaps_ms[] = {5, 40, 80};
    struct contraction list[2] = {{.frequency_pps = 30,
                                   .opening = 2,
                                   .opening_gap_ms = 5,
                                   .duration_us = 302, /* rounds down to 300 */
                                   .current_ma = 60,
                                   .trim_duration_us = (double)NAN,
                                   .trim_current_ma = (double)NAN,
                                   .ramp_up = {.shape = RAMP_LINEAR, .ms = 400},
                                   .hold_ms = 1000,
                                   .ramp_down = {.shape = RAMP_LINEAR, .ms = 300},
                                   .rest_ms = 1000,
                                   .repeat = 2},
                                  {.opening = 1,
                                   .duration_us = 300,
                                   .current_ma = 60,
                                   .trim_duration_us = (double)NAN,
                                   .trim_current_ma = (double)NAN,
                                   .rest_ms = 500,
                                   .repeat = 1,
                                   .gaps_ms = gaps_ms,
                                   .gaps = 3}};
    const struct train train = {.contractions = 2, .contraction = list};
    struct plan plan;
    struct message why = {""};
    assert_status(
        plan_of_train(&train, &profile, "left-quadriceps", &stimulator, NULL, &options, &plan, &why),
        STATUS_OK, &why);
    assert_int_equal(plan.contractions_asked, 3);
    assert_true(isnan(plan.target_n));
    size_t count = 0;
    struct pulse *pulses = plans_pulses(&plan, &count);
    const size_t last = count - 1; /* free gaps: 4 pulses, 5, 40 and 80 ms apart */
    assert_int_equal(pulses[last].at_us - pulses[last - 1].at_us, 80000);
    assert_int_equal(pulses[last - 1].at_us - pulses[last - 2].at_us, 40000);
    assert_int_equal(pulses[last - 2].at_us - pulses[last - 3].at_us, 5000);
    assert_int_equal(pulses[last - 3].at_us - pulses[last - 4].at_us,
                     1000000); /* the rest before, from last pulse to first pulse */
    for (size_t i = 0; i < count; i++) assert_true(pulses[i].duration_us <= 300);
    free(pulses);
    plan_free(&plan);
    list[0].current_ma = 120; /* above what the stimulator gives: refused by name, never rounded */
    assert_status(plan_of_train(&train, &profile, NULL, &stimulator, NULL, &options, &plan, &why),
                  STATUS_REFUSED, &why);
    assert_non_null(strstr(why.text, "current_ma"));
    assert_int_equal(plan.channels, 0);
}

static void a_recount_of_an_edited_plan_is_honest(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    const struct demand demand = plans_demand(3);
    const struct plan_options options = plans_options();
    struct plan plan;
    struct message why = {""};
    assert_status(make(&profile, &demand, &plan, &why), STATUS_OK, &why);
    struct plan_channel *channel = &plan.channel[0];
    struct plan_block *last = &channel->block[channel->blocks - 1];
    const struct train_grid grid = stimulator_grid(&plan.stimulator);
    last->settings.duration_us *= 0.7;
    last->settings.trim_duration_us = (double)NAN;
    assert_status(contraction_compile_ramps(&last->settings, &channel->recruitment, &grid, &why), STATUS_OK,
                  &why);
    assert_status(plan_recount(&plan, &profile, &options, &why), STATUS_OK, &why);
    assert_false(plan.feasible);
    assert_int_equal(plan.first_miss, last->first);
    assert_true(plan.first_miss_why.reason == WHY_RECRUITMENT_SPENT);
    assert_near(plan.first_miss_why.limit, 95.0, 1e-9, 0.0);
    last->settings.current_ma =
        100; /* above the person's limit: the ledger says so, and the plan is not within */
    assert_status(contraction_compile_ramps(&last->settings, &channel->recruitment, &grid, &why), STATUS_OK,
                  &why);
    assert_status(plan_recount(&plan, &profile, &options, &why), STATUS_OK, &why);
    assert_false(plan.ledger.within);
    assert_false(plan.feasible);
    assert_true(plan.binding.reason == WHY_CURRENT_RANGE);
    assert_near(plan.binding.value, 100.0, 1e-9, 0.0);
    assert_near(plan.binding.limit, 80.0, 1e-9, 0.0);
    plan_free(&plan);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_demand_that_can_be_met_is_met),
        cmocka_unit_test(every_pulse_is_on_the_stimulators_steps_and_comfortable),
        cmocka_unit_test(the_same_demand_gives_the_same_bytes),
        cmocka_unit_test(what_would_work_works),
        cmocka_unit_test(with_the_full_law_only_frequency_may_vary),
        cmocka_unit_test(a_dormant_muscle_begins_otherwise),
        cmocka_unit_test(slow_and_strong_lasts_longer_than_fast_and_weak),
        cmocka_unit_test(a_train_is_a_plan_without_a_demand),
        cmocka_unit_test(a_recount_of_an_edited_plan_is_honest),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
