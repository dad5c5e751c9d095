/* One channel of a plan, made. The goal of this code: what the search sees (target, settings, muscle, limits)
 * is put together in one place, and the blocks that come of it hold nothing that was not run. */
#include "core/plan/maker.h"
#include "core/plan/channel.h"
#include "core/plan/recount.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { CAP_ROUNDS = 6 };
static const double ramp_longest = 8.0; /* of the latest rise: what ramp.c may try */

/* N from N*m or back takes a lever; a profile measured as torque has its forces in N*m. */
static enum status lever_of(const struct profile_muscle *muscle, const char *what, double *lever_m,
                            struct message *why)
{
    *lever_m = muscle->has_measured ? muscle->measured.lever_m : (double)NAN;
    if (*lever_m > 0.0) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "%s needs measured: lever_m: in the profile of %s", what,
                       muscle->name);
}

static bool as_torque(const struct profile_muscle *muscle)
{
    return muscle->has_measured && muscle->measured.as_torque;
}

/* The greatest fused force: the rested, potentiated muscle without fatigue, at the strongest settings and the
 * highest rate allowed, over the second of two seconds. */
static enum status greatest_force(struct maker *maker, double *force_n, struct message *why)
{
    const struct demand *demand = maker->demand;
    const bool pairs = !demand->pattern[0];
    const struct session_frequencies list =
        search_frequencies(demand, maker->stimulator, &maker->channel->limits, pairs, 1);
    if (list.count == 0)
        return status_fail(why, STATUS_REFUSED, "no frequency is left: %s", plan_why_text(list.end.reason));
    struct attempt_bench *bench = &maker->work.bench;
    const double fastest = list.from + (double)(list.count - 1) * list.step;
    bench->space = maker->problem.space;
    settings_rate(&bench->space, fastest * (pairs ? 2.0 : 1.0));
    const struct solve_request request = {.frame = {.frequency_pps = fastest,
                                                    .opening = 1,
                                                    .pairs = pairs,
                                                    .opening_gap_ms = 5.0,
                                                    .ramp_up = {.ms = 1000.0},
                                                    .hold_ms = 1000.0},
                                          .before = maker->awake};
    const struct solve_settings strongest = solve_strongest(bench);
    struct solve_result result;
    const enum status status = solve_at(bench, &request, &strongest, &result, why);
    *force_n = result.attempt.hold.mean_n;
    return status;
}

enum status maker_target(struct maker *maker, double *target_n, struct message *why)
{
    const struct demand *demand = maker->demand;
    const struct profile_muscle *muscle = maker->muscle;
    double lever_m = (double)NAN, greatest_n = (double)NAN;
    enum status status = STATUS_OK;
    *target_n = demand->target;
    switch (demand->target_kind) {
    case TARGET_N:
        if (!as_torque(muscle)) break;
        status = lever_of(muscle, "target_n on a muscle measured as torque", &lever_m, why);
        *target_n = demand->target * lever_m;
        break;
    case TARGET_NM:
        if (as_torque(muscle)) break;
        status = lever_of(muscle, "target_nm", &lever_m, why);
        *target_n = demand->target / lever_m;
        break;
    case TARGET_PERCENT:
        status = greatest_force(maker, &greatest_n, why);
        *target_n = demand->target / 100.0 * greatest_n;
        break;
    }
    if (status == STATUS_OK && !(*target_n > maker->muscle->parameters.tone_n))
        return status_fail(why, STATUS_REFUSED, "the target of %g N is not above the muscle's tone of %g N",
                           *target_n, maker->muscle->parameters.tone_n);
    return status;
}

static enum status open_work(struct maker *maker, struct message *why)
{
    const struct demand *demand = maker->demand;
    const double longest_ms =
        fmax(ramp_longest * demand->rise_ms_max + demand->hold_ms + demand->release_ms, 3000.0);
    const double fastest = maker->stimulator->frequency_pps.to;
    enum status status = attempt_bench_open(&maker->work.bench, &maker->muscle->parameters,
                                            attempt_pulses_max(longest_ms, fastest), false, why);
    if (status != STATUS_OK) return status;
    maker->work.now = predictor_new(&maker->muscle->parameters, false, NULL, why);
    maker->rested = predictor_new(&maker->muscle->parameters, false, NULL, why);
    struct muscle_parameters untiring = maker->muscle->parameters;
    untiring.has_potentiation = false;
    untiring.alpha_A_per_ms2 = untiring.alpha_Km_per_ms_n = untiring.alpha_tau1_per_n =
        untiring.beta_A_per_pulse = 0.0;
    maker->awake = predictor_new(&untiring, false, NULL, why);
    if (!maker->work.now || !maker->rested || !maker->awake) return STATUS_REFUSED;
    maker->work.bench.limits = maker->channel->limits;
    maker->work.bench.channel = (uint8_t)maker->channel->channel;
    return STATUS_OK;
}

enum status maker_open(struct maker *maker, const struct demand *demand, const struct profile_muscle *muscle,
                       const struct stimulator *stimulator, struct plan_channel *channel, struct message *why)
{
    *maker = (struct maker){.demand = demand, .muscle = muscle, .stimulator = stimulator, .channel = channel};
    enum status status = open_work(maker, why);
    if (status == STATUS_OK)
        status = settings_space_make(&maker->problem.space, &maker->whole, demand, channel, muscle,
                                     stimulator, why);
    double target_n = (double)NAN;
    if (status == STATUS_OK) status = maker_target(maker, &target_n, why);
    if (status != STATUS_OK) return status;
    channel->demand = *demand;
    channel->target_n = target_n;
    channel->start_ms = demand->start_ms;
    if (as_torque(muscle) && muscle->measured.lever_m > 0.0) channel->force_cap_n *= muscle->measured.lever_m;
    struct session_problem *problem = &maker->problem;
    problem->demand = demand;
    problem->aim = contraction_aim_of(demand, target_n, channel->force_cap_n);
    problem->solve_target_n = target_n;
    problem->rested = maker->rested;
    problem->awake = maker->awake;
    problem->start_us = plan_us_up(demand->start_ms);
    problem->warm_up =
        muscle->parameters.has_potentiation ? demand->warm_up : 0; /* only a dormant muscle needs them */
    problem->contractions = problem->warm_up + demand->contractions;
    maker->contraction = calloc(problem->contractions, sizeof *maker->contraction);
    if (!maker->contraction) return status_fail(why, STATUS_INTERNAL, "out of memory");
    return STATUS_OK;
}

void maker_close(struct maker *maker)
{
    attempt_bench_close(&maker->work.bench);
    predictor_free(maker->work.now);
    predictor_free(maker->rested);
    predictor_free(maker->awake);
    free(maker->contraction);
    maker->work.now = maker->rested = maker->awake = NULL;
    maker->contraction = NULL;
}

/* Runs of equal contractions become blocks; warm-ups have their own. */
static size_t blocks_of(const struct maker *maker, unsigned given, struct plan_block *block)
{
    size_t blocks = 0;
    for (unsigned k = 0; k < given; k++) {
        const struct session_contraction *one = &maker->contraction[k];
        const bool warm = k < maker->problem.warm_up;
        if (k > 0 && warm == (k - 1 < maker->problem.warm_up) &&
            session_same_settings(&one->settings, &maker->contraction[k - 1].settings)) {
            if (block) {
                block[blocks - 1].count++;
                block[blocks - 1].settings.repeat++;
            }
            continue;
        }
        if (block)
            block[blocks] = (struct plan_block){
                .first = k + 1, .count = 1, .settings = one->settings, .why = one->why, .warm_up = warm};
        if (block && block[blocks].why.reason == WHY_NONE &&
            k > 0) /* the first scored ones with the warm-ups' settings */
            block[blocks].why =
                plan_why_make(WHY_START, one->hold.mean_n, maker->problem.solve_target_n, "N");
        blocks++;
    }
    return blocks;
}

enum status maker_fill(struct maker *maker, struct message *why)
{
    struct plan_channel *channel = maker->channel;
    const struct search_result *found = &maker->found;
    struct session_outcome outcome;
    const enum status status = session_run(&maker->work, &maker->problem, &found->policy, &found->frequencies,
                                           true, maker->contraction, &outcome, why);
    if (status != STATUS_OK) return status;
    free(channel->block);
    channel->block = NULL;
    channel->blocks = 0;
    const size_t blocks = blocks_of(maker, outcome.given, NULL);
    channel->block = calloc(blocks ? blocks : 1, sizeof *channel->block);
    if (!channel->block) return status_fail(why, STATUS_INTERNAL, "out of memory");
    channel->blocks = blocks_of(maker, outcome.given, channel->block);
    maker->found.outcome = outcome;
    channel->ramp_trials = outcome.ramp.trials;
    memcpy(channel->ramp_trial, outcome.ramp.trial, sizeof channel->ramp_trial);
    return STATUS_OK;
}

/* A current that is not varied is chosen once. The search ran at the one that reaches most; the least that
 * covers what the session turned out to need gives finer steps of force. It is taken where it carries the
 * demand as long. */
static enum status lower_current(struct maker *maker, const struct settings_space *whole,
                                 const struct search_options *options, struct message *why)
{
    double most = 0.0, least = 1.0;
    enum status status =
        session_run(&maker->work, &maker->problem, &maker->found.policy, &maker->found.frequencies, false,
                    maker->contraction, &maker->found.outcome, why);
    for (unsigned k = 0; k < maker->found.outcome.given && status == STATUS_OK; k++) {
        const struct contraction *one = &maker->contraction[k].settings;
        const double end_us = isnan(one->trim_duration_us) ? one->duration_us : one->trim_duration_us;
        most = fmax(most, settings_share(&maker->problem.space, fmax(one->duration_us, end_us),
                                         one->current_ma * 1000.0));
        least = fmin(least, settings_share(&maker->problem.space, fmin(one->duration_us, end_us),
                                           one->current_ma * 1000.0));
    }
    const struct settings_space strongest = maker->problem.space;
    const uint32_t current = settings_current_for(whole, least, fmin(1.02 * most, 0.999));
    if (status != STATUS_OK || current >= strongest.strongest_ua) return status;
    settings_fix_current(&maker->problem.space, current);
    struct search_options near = *options;
    near.quick = true;
    near.near = maker->found.policy;
    struct search_result lower = {0};
    status = search_policies(&maker->work, &maker->problem, maker->stimulator, &near, &lower, why);
    if (status != STATUS_OK) return status;
    if (lower.outcome.met >= maker->found.outcome.met)
        maker->found = lower;
    else
        maker->problem.space = strongest;
    return STATUS_OK;
}

/* Where the strongest current does not carry the demand its coarse steps of force may be what fails: lower
 * ones are searched too. */
static enum status other_currents(struct maker *maker, const struct search_options *options,
                                  struct message *why)
{
    static const double shares[] = {0.65, 0.45, 0.3};
    const struct settings_space strongest = maker->problem.space;
    const double most =
        settings_share(&strongest, (double)settings_duration_to(&strongest, strongest.strongest_ua, NULL),
                       (double)strongest.strongest_ua);
    struct settings_space best = strongest;
    enum status status = STATUS_OK;
    for (size_t i = 0;
         i < sizeof shares / sizeof *shares && maker->found.outcome.first_miss != 0 && status == STATUS_OK;
         i++) {
        struct search_result lower = {0};
        maker->problem.space = maker->whole;
        settings_fix_current(&maker->problem.space,
                             settings_current_for(&maker->whole, 0.0, shares[i] * most));
        status = search_policies(&maker->work, &maker->problem, maker->stimulator, options, &lower, why);
        if (status != STATUS_OK || !search_better(maker->demand, &lower.outcome, &maker->found.outcome))
            continue;
        maker->found = lower;
        best = maker->problem.space;
    }
    maker->problem.space = best;
    return status;
}

/* The cap could not be kept: nothing is given. */
static void drop_blocks(struct plan_channel *channel)
{
    free(channel->block);
    channel->block = NULL;
    channel->blocks = 0;
}

enum status maker_make(struct maker *maker, struct plan *plan, const struct profile *profile,
                       const struct plan_options *options, struct message *why)
{
    struct search_options search = {.progress = options->progress, .context = options->context};
    struct session_problem *problem = &maker->problem;
    const double cap_n = maker->channel->force_cap_n;
    if (problem->solve_target_n > 0.98 * cap_n) problem->solve_target_n = 0.98 * cap_n;
    for (int round = 0; round <= CAP_ROUNDS; round++) {
        search.quick = round > 0;
        search.near = maker->found.policy;
        enum status status =
            search_policies(&maker->work, problem, maker->stimulator, &search, &maker->found, why);
        const bool first = round == 0 && problem->space.choose_cover;
        if (status == STATUS_OK && first)
            status = maker->found.outcome.first_miss == 0 ? lower_current(maker, &maker->whole, &search, why)
                                                          : other_currents(maker, &search, why);
        if (status == STATUS_OK) status = maker_fill(maker, why);
        if (status != STATUS_OK) return status;
        plan->first_miss_why = maker->found.outcome.first_miss_why;
        status = plan_recount(plan, profile, options, why);
        if (status != STATUS_OK || !(maker->channel->force_edge_n > cap_n)) return status;
        problem->solve_target_n *= 0.995 * cap_n / maker->channel->force_edge_n;
    }
    drop_blocks(maker->channel);
    plan->first_miss_why = plan_why_make(WHY_FORCE_CAP, maker->channel->force_edge_n, cap_n, "N");
    return plan_recount(plan, profile, options, why);
}
