/* Tight limits are never exceeded: drawn demands under drawn limits give either a plan that is within every
 * limit, by sums made here from its pulses and not by the ledger, or an exit that names what binds. Seed
 * 20261102. */
#include "core/plan/plan.h"
#include "support/draws.h"
#include "support/near.h"
#include "support/plans.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { DRAWS = 12, TRAIN_SILENCE_US = 250000, DUTY_AFTER_US = 60000000 };

/* What one plan's pulses come to. */
struct sums {
    double charge_most_uc, charge_total_mc, rms_most_ma, on_most_s, duty_most_percent;
    unsigned long rate_most, pulses;
};

/* Over (t - 1 s, t], this pulse included: squares of both phases and the count. */
static void add_window(const struct pulse *pulses, size_t i, struct sums *sums)
{
    double square = 0.0;
    unsigned long count = 0;
    for (size_t j = i + 1; j-- > 0 && pulses[i].at_us - pulses[j].at_us < 1000000;) {
        const double ma = pulses[j].current_ua / 1000.0;
        square += 2.0 * ma * ma * pulses[j].duration_us * 1e-6;
        count += pulses[j].opening_extra ? 0 : 1;
    }
    sums->rms_most_ma = fmax(sums->rms_most_ma, sqrt(square));
    if (count > sums->rate_most) sums->rate_most = count;
}

static struct sums sums_of(const struct pulse *pulses, size_t count)
{
    struct sums sums = {.pulses = count};
    uint64_t train_from = 0;
    double on_before_s = 0.0; /* of trains that ended */
    for (size_t i = 0; i < count; i++) {
        const double charge_uc = (double)pulses[i].current_ua * pulses[i].duration_us / 1e6;
        sums.charge_most_uc = fmax(sums.charge_most_uc, charge_uc);
        sums.charge_total_mc += charge_uc / 1000.0;
        add_window(pulses, i, &sums);
        if (i == 0 || pulses[i].at_us - pulses[i - 1].at_us >= TRAIN_SILENCE_US) {
            if (i > 0) on_before_s += (double)(pulses[i - 1].at_us - train_from) / 1e6;
            train_from = pulses[i].at_us;
        }
        const double on_s = (double)(pulses[i].at_us - train_from) / 1e6;
        sums.on_most_s = fmax(sums.on_most_s, on_s);
        if (pulses[i].at_us >= DUTY_AFTER_US)
            sums.duty_most_percent =
                fmax(sums.duty_most_percent, 100.0 * (on_before_s + on_s) / ((double)pulses[i].at_us / 1e6));
    }
    return sums;
}

static void draw_limits(uint64_t *state, struct person_limits *limits)
{
    limits->current_ma = draw_uniform(state, 25, 80);
    limits->charge_uc = draw_uniform(state, 5, 30);
    limits->rms_ma = draw_uniform(state, 3, 12);
    limits->frequency_pps = floor(draw_uniform(state, 15, 50));
    limits->on_ms = draw_uniform(state, 1500, 6000);
    limits->duty_percent = draw_uniform(state, 15, 50);
    limits->first_uc = draw_uniform(state, 2, 20);
    limits->slew_uc_per_s = draw_uniform(state, 5, 60);
    limits->session_pulses = floor(draw_uniform(state, 200, 1500));
    limits->session_charge_mc = draw_uniform(state, 2, 15);
    limits->force_n = draw_uniform(state, 80, 200);
}

static struct demand draw_demand(uint64_t *state)
{
    struct demand demand = plans_demand(5);
    demand.target = draw_uniform(state, 30, 150);
    demand.hold_ms = floor(draw_uniform(state, 600, 3000));
    demand.rest_ms = floor(draw_uniform(state, 2000, 7000));
    demand.ripple_percent_max = draw_uniform(state, 8, 20);
    demand.opening[2] = draw_uniform(state, 0, 1) < 0.3;
    demand.prefer = (enum demand_prefer)(int)draw_uniform(state, 0, 2.999);
    demand.vary = draw_uniform(state, 0, 1) < 0.3 ? VARY_FREQUENCY | VARY_DURATION : demand.vary;
    return demand;
}

static void tight_limits_are_never_exceeded(void **state)
{
    (void)state;
    uint64_t random = 20261102;
    unsigned made = 0, met = 0;
    struct stimulator stimulator = plans_stimulator();
    stimulator.frequency_pps =
        (struct stepped){10, 60, 5}; /* few rates: the test is about limits, and quick */
    const struct plan_options options = plans_options();
    for (int draw = 0; draw < DRAWS; draw++) {
        struct profile_muscle muscle;
        const struct profile profile = plans_profile(&muscle);
        struct person_limits *limits = &muscle.limits;
        draw_limits(&random, limits);
        const struct demand demand = draw_demand(&random);
        struct plan plan;
        struct message why = {""};
        const enum status status = plan_make(&profile, &demand, &stimulator, NULL, &options, &plan, &why);
        assert_true(status == STATUS_OK || status == STATUS_REFUSED);
        if (plan.channels == 0) {
            assert_true(status == STATUS_REFUSED && why.text[0] != '\0');
            continue;
        }
        made++;
        met += plan.feasible ? 1 : 0;
        assert_int_equal(plan.feasible, status == STATUS_OK);
        assert_true(plan.ledger.within);
        assert_true(plan.feasible || plan.binding.reason != WHY_NONE);
        size_t count = 0;
        struct pulse *pulses = plans_pulses(&plan, &count);
        const struct sums sums = sums_of(pulses, count);
        free(pulses);
        assert_true(sums.charge_most_uc <=
                    fmin(limits->charge_uc, 19.5) + 1e-9); /* comfort: 65 mA x 300 us */
        assert_true(sums.charge_total_mc <= limits->session_charge_mc + 1e-9);
        assert_true(sums.rms_most_ma <= limits->rms_ma + 1e-9);
        assert_true((double)sums.rate_most <= limits->frequency_pps);
        assert_true((double)sums.pulses <= limits->session_pulses);
        assert_true(sums.on_most_s <= limits->on_ms / 1000.0 + 1e-9);
        assert_true(sums.duty_most_percent <= limits->duty_percent + 1e-9);
        for (size_t b = 0; b < plan.channel[0].blocks; b++)
            assert_true(plan.channel[0].block[b].recount.peak_n <= limits->force_n + 1e-9);
        plan_free(&plan);
    }
    assert_true(made >= DRAWS / 2); /* the draw is neither hopeless nor trivial */
    assert_true(met >= 1 && met < made);
}

/* The cap is held at the upper edge of what the muscle may be, not at its middle. */
static void a_force_cap_is_kept_by_the_ensembles_upper_edge(void **state)
{
    (void)state;
    struct profile_muscle muscle;
    const struct profile profile = plans_profile(&muscle);
    muscle.parameters.has_potentiation = false;
    muscle.uncertainties = 1;
    muscle.uncertainty[0] = (struct uncertainty_entry){.key = "A_rest_n_per_ms", .relative_sd = 0.1};
    muscle.limits.force_n = 115; /* above the middle's peak, below its 95 % edge at 100 N */
    const struct stimulator stimulator = plans_stimulator();
    struct demand demand = plans_demand(2);
    demand.frequency_pps = (struct range){20, 20};
    struct plan_options options = plans_options();
    struct plan plan;
    struct message why = {""};
    assert_status(plan_make(&profile, &demand, &stimulator, NULL, &options, &plan, &why), STATUS_OK, &why);
    assert_near(plan.channel[0].block[plan.channel[0].blocks - 1].recount.mean_n_last, 100.0, 2.0, 0.0);
    plan_free(&plan);
    options.ensemble = 32;
    (void)plan_make(&profile, &demand, &stimulator, NULL, &options, &plan, &why);
    assert_int_equal(plan.channels, 1);
    assert_between(plan.channel[0].force_edge_n, 100.0, 115.0);
    const struct plan_recount *last = &plan.channel[0].block[plan.channel[0].blocks - 1].recount;
    assert_true(last->mean_n_last < 99.0); /* it aimed lower */
    assert_true(last->band_5_n < last->mean_n_last && last->mean_n_last < last->band_95_n);
    assert_between(plan.ensemble_met_share, 0.0, 1.0);
    plan_free(&plan);
}

static void channels_that_take_turns_never_meet(void **state)
{
    (void)state;
    struct profile_muscle muscles[2];
    (void)plans_profile(&muscles[0]);
    (void)plans_profile(&muscles[1]);
    (void)snprintf(muscles[1].name, sizeof muscles[1].name, "right-quadriceps");
    muscles[1].parameters.A_rest_n_per_ms *= 0.7;
    const struct profile profile = {.person = "P-017", .muscles = 2, .muscle = muscles};
    struct stimulator stimulator = plans_stimulator();
    stimulator.frequency_pps = (struct stepped){10, 40, 5};
    const struct hookup hookup = {
        .person = "P-017",
        .channels = 2,
        .channel = {
            {.channel = 1, .muscle = "left-quadriceps", .pad_cm2 = 45, .return_pad_cm2 = (double)NAN},
            {.channel = 3, .muscle = "right-quadriceps", .pad_cm2 = 45, .return_pad_cm2 = (double)NAN}}};
    struct demand demands[2] = {plans_demand(3), plans_demand(4)};
    (void)snprintf(demands[1].muscle, sizeof demands[1].muscle, "right-quadriceps");
    demands[1].target = 60;
    demands[1].start_ms = 1234;
    demands[1].hold_ms = 1500;
    demands[1].rest_ms = 3000;
    const struct plan_options options = plans_options();
    struct plan plan;
    struct message why = {""};
    assert_status(plan_make_group(&profile, demands, 2, &stimulator, &hookup, &options, &plan, &why),
                  STATUS_OK, &why);
    assert_int_equal(plan.contractions_met, 7);
    assert_true(plan.common_period_us > 0);
    size_t count = 0;
    struct pulse *pulses = plans_pulses(&plan, &count);
    for (size_t i = 1; i < count; i++) {
        /* the pulse before has ended, and a millisecond has passed less the slot's slack (2 d + interphase;
         * 4-limits) */
        const uint64_t length = 2u * pulses[i - 1].duration_us + 100;
        assert_true(pulses[i].at_us - pulses[i - 1].at_us >= length + 1000);
    }
    free(pulses);
    plan_free(&plan);
    demands[0].opening[1] = false;
    demands[0].opening[2] = true; /* its gap would meet the other's slot: refused by name */
    assert_status(plan_make_group(&profile, demands, 2, &stimulator, &hookup, &options, &plan, &why),
                  STATUS_REFUSED, &why);
    assert_int_equal(plan.channels, 0);
    assert_non_null(strstr(why.text, "slot"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(tight_limits_are_never_exceeded),
        cmocka_unit_test(a_force_cap_is_kept_by_the_ensembles_upper_edge),
        cmocka_unit_test(channels_that_take_turns_never_meet),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
