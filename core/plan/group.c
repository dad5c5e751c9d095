/* Several muscles. The goal of this code: two pulses never meet where only one may be given. Channels that
 * share a return, and all channels of a stimulator that gives one pulse at a time, take one common period, a
 * slot each (longest pulse + 1 ms); every contraction starts on its slot of that period, so rests are drawn
 * out by less than a period. Two rates side by side would collide within half a second (4-limits). The
 * planner chooses the period: one frequency for the group, kept through the session, and each muscle's
 * recruitment at it. Muscles whose channels do not meet are planned one by one. Openings and pairs would put
 * a pulse into another's slot: with turns there are none. */
#include "core/plan/group.h"
#include "core/plan/channel.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { SLOT_SPARE_US = 1000, GROUP_HALVINGS = 6, GROUP_CAP_ROUNDS = 6 };
static const double group_coarse = 1.2;
static const double return_rms_ma = 50.0; /* at a return mean squares add (4-limits) */

static bool share_return(const struct stimulator *stimulator, unsigned a, unsigned b)
{
    for (size_t g = 0; g < stimulator->returns; g++) {
        bool has_a = false, has_b = false;
        for (size_t i = 0; i < stimulator->return_group[g].channels; i++) {
            has_a = has_a || stimulator->return_group[g].channel[i] == a;
            has_b = has_b || stimulator->return_group[g].channel[i] == b;
        }
        if (has_a && has_b) return true;
    }
    return false;
}

bool group_takes_turns(const struct plan *plan)
{
    if (plan->channels < 2) return false;
    if (!plan->stimulator.independent) return true;
    for (size_t a = 0; a < plan->channels; a++)
        for (size_t b = a + 1; b < plan->channels; b++)
            if (share_return(&plan->stimulator, plan->channel[a].channel, plan->channel[b].channel))
                return true;
    return false;
}

/* What all of them come to at one frequency. */
struct group_outcome {
    unsigned met, given;
    double remaining_50, charge_uc, ripple_percent;
};

struct group {
    struct maker *makers;
    size_t count;
    const struct stimulator *stimulator;
    struct session_frequencies list; /* allowed to all */
    const struct plan_options *options;
    unsigned tried;
    struct message *why;
};

static uint32_t slot_us(const struct maker *maker)
{
    const struct dose_limits *limits = &maker->channel->limits;
    const uint32_t duration = maker->problem.space.duration_to.value;
    const uint32_t second = limits->recovery_us ? limits->recovery_us : duration;
    return duration + limits->interphase_us + second + SLOT_SPARE_US;
}

static enum status check_patterns(const struct maker *maker, struct message *why)
{
    const struct demand *demand = maker->demand;
    if (demand->pattern[0] && demand->opening[1]) return STATUS_OK;
    return status_fail(
        why, STATUS_REFUSED,
        "%s: %s would put a pulse into another muscle's slot; with turns opening: [single] and pattern: "
        "[singles] are what there is",
        demand->muscle, demand->pattern[0] ? "an opening gap" : "a pair's gap");
}

/* Frequencies allowed to every muscle, whose period has room for every slot. */
static enum status common_frequencies(struct group *group, struct message *why)
{
    uint32_t slots_us = 0;
    double from = 0.0, to = (double)INFINITY;
    for (size_t i = 0; i < group->count; i++) {
        const struct maker *maker = &group->makers[i];
        const enum status status = check_patterns(maker, why);
        if (status != STATUS_OK) return status;
        const struct session_frequencies one =
            search_frequencies(maker->demand, group->stimulator, &maker->channel->limits, false, 1);
        if (one.count == 0)
            return status_fail(why, STATUS_REFUSED, "%s: no frequency is left", maker->demand->muscle);
        group->list = one;
        from = fmax(from, one.from);
        to = fmin(to, one.from + (double)(one.count - 1) * one.step);
        slots_us += slot_us(maker);
    }
    struct session_frequencies *list = &group->list; /* the same steps for all: the stimulator's */
    list->from = from;
    list->count = to >= from ? 1 + (unsigned)floor((to - from) / list->step + 1e-9) : 0;
    while (list->count > 0 && train_period_us(from + (double)(list->count - 1) * list->step) < slots_us)
        list->count--;
    if (list->count > 0) return STATUS_OK;
    return status_fail(
        why, STATUS_REFUSED,
        "no common frequency: %g to %g pps are allowed to all, and %u us of slots have to fit its period",
        from, to, slots_us);
}

/* Puts every muscle on its slot of a frequency's period. */
static void place(struct group *group, double frequency_pps)
{
    const uint64_t period = train_period_us(frequency_pps);
    uint64_t offset = 0;
    for (size_t i = 0; i < group->count; i++) {
        struct maker *maker = &group->makers[i];
        const uint64_t wanted = plan_us_up(maker->demand->start_ms);
        maker->problem.common_period_us = (uint32_t)period;
        maker->problem.start_us = (wanted + period - 1) / period * period + offset;
        maker->channel->start_ms = (double)maker->problem.start_us / 1000.0;
        offset += slot_us(maker);
    }
}

static struct session_policy policy_at(double frequency_pps, bool thorough)
{
    return (struct session_policy){.frequency_pps = frequency_pps, .opening = 1, .thorough = thorough};
}

static enum status run_at(struct group *group, double frequency_pps, struct group_outcome *all)
{
    *all = (struct group_outcome){.met = 0};
    place(group, frequency_pps);
    for (size_t i = 0; i < group->count; i++) {
        struct maker *maker = &group->makers[i];
        const struct session_policy policy = policy_at(frequency_pps, false);
        struct session_outcome outcome;
        const enum status status = session_run(&maker->work, &maker->problem, &policy, &group->list, false,
                                               NULL, &outcome, group->why);
        if (status != STATUS_OK) return status;
        all->met += outcome.met;
        all->given += outcome.given;
        all->remaining_50 += outcome.remaining_50;
        all->charge_uc += outcome.charge_uc;
        all->ripple_percent += outcome.ripple_percent;
    }
    group->tried++;
    if (group->options->progress &&
        !group->options->progress(group->options->context, 0.8 * group->tried / (group->tried + 12.0),
                                  "search"))
        return status_fail(group->why, STATUS_REFUSED, "stopped");
    return STATUS_OK;
}

static bool group_better(const struct group *group, const struct group_outcome *a,
                         const struct group_outcome *b)
{
    const struct session_outcome left = {.met = a->met,
                                         .given = a->given,
                                         .remaining_50 = a->remaining_50,
                                         .charge_uc = a->charge_uc,
                                         .ripple_percent = a->ripple_percent};
    const struct session_outcome right = {.met = b->met,
                                          .given = b->given,
                                          .remaining_50 = b->remaining_50,
                                          .charge_uc = b->charge_uc,
                                          .ripple_percent = b->ripple_percent};
    return search_better(group->makers[0].demand, &left, &right);
}

/* The frequency of the group: coarse, then halving about the best. */
static enum status choose_frequency(struct group *group, double *frequency_pps)
{
    const struct session_frequencies *list = &group->list;
    unsigned low = 0, best = 0, high = 0, before = 0;
    struct group_outcome best_outcome = {0}, outcome;
    bool any = false;
    for (unsigned i = 0; i < list->count;) {
        unsigned next = i + 1;
        while (next + 1 < list->count &&
               list->from + next * list->step < (list->from + i * list->step) * group_coarse)
            next++;
        const enum status status = run_at(group, list->from + i * list->step, &outcome);
        if (status != STATUS_OK) return status;
        if (!any || group_better(group, &outcome, &best_outcome)) {
            low = before;
            best = i;
            high = next < list->count ? next : i;
            best_outcome = outcome;
        }
        any = true;
        before = i;
        i = next;
    }
    for (int round = 0; round < GROUP_HALVINGS && (best - low > 1 || high - best > 1); round++) {
        const bool below = best - low > high - best;
        const unsigned middle = below ? low + (best - low) / 2 : best + (high - best + 1) / 2;
        const enum status status = run_at(group, list->from + middle * list->step, &outcome);
        if (status != STATUS_OK) return status;
        const bool wins = group_better(group, &outcome, &best_outcome);
        if (wins == below)
            high = wins ? best : middle;
        else
            low = wins ? best : middle;
        if (!wins) continue;
        best = middle;
        best_outcome = outcome;
    }
    *frequency_pps = list->from + best * list->step;
    return STATUS_OK;
}

static enum status fill_all(struct group *group, double frequency_pps, struct plan *plan)
{
    place(group, frequency_pps);
    for (size_t i = 0; i < group->count; i++) {
        struct maker *maker = &group->makers[i];
        maker->found.policy = policy_at(frequency_pps, true);
        maker->found.frequencies = group->list;
        const enum status status = maker_fill(maker, group->why);
        if (status != STATUS_OK) return status;
        if (maker->channel->blocks == 0) plan->first_miss_why = maker->found.outcome.first_miss_why;
    }
    return STATUS_OK;
}

/* Forces above a cap at the ensemble's upper edge are aimed lower. False: all are below. */
static bool lower_targets(struct group *group)
{
    bool lowered = false;
    for (size_t i = 0; i < group->count; i++) {
        struct maker *maker = &group->makers[i];
        const double cap = maker->channel->force_cap_n, edge = maker->channel->force_edge_n;
        if (!(edge > cap)) continue;
        maker->problem.solve_target_n *= 0.995 * cap / edge;
        lowered = true;
    }
    return lowered;
}

/* Mean squares add at a return; the greatest of each channel bounds their sum from above. */
static enum status check_returns(const struct plan *plan, struct message *why)
{
    for (size_t g = 0; g < plan->stimulator.returns; g++) {
        double square = 0.0;
        for (size_t f = 0; f < plan->ledger.figures; f++) {
            const struct ledger_figure *figure = &plan->ledger.figure[f];
            if (figure->figure != DOSE_RMS) continue;
            for (size_t i = 0; i < plan->stimulator.return_group[g].channels; i++)
                if (plan->stimulator.return_group[g].channel[i] == figure->channel)
                    square += figure->value * figure->value;
        }
        if (sqrt(square) > return_rms_ma)
            return status_fail(why, STATUS_REFUSED,
                               "r.m.s. limit: %.1f mA at the return that channels share, at most %g mA",
                               sqrt(square), return_rms_ma);
    }
    return STATUS_OK;
}

static enum status make_in_turns(struct group *group, struct plan *plan, const struct profile *profile)
{
    double frequency_pps = 0.0;
    enum status status = common_frequencies(group, group->why);
    if (status == STATUS_OK) status = choose_frequency(group, &frequency_pps);
    for (int round = 0; status == STATUS_OK; round++) {
        status = fill_all(group, frequency_pps, plan);
        if (status == STATUS_OK) status = plan_recount(plan, profile, group->options, group->why);
        if (status != STATUS_OK || !lower_targets(group)) break;
        if (round == GROUP_CAP_ROUNDS)
            status = status_fail(group->why, STATUS_REFUSED, "a force cap can not be kept");
    }
    if (status != STATUS_OK) return status;
    plan->common_period_us = train_period_us(frequency_pps);
    return STATUS_OK;
}

enum status group_make(struct maker *makers, size_t count, struct plan *plan, const struct profile *profile,
                       const struct plan_options *options, struct message *why)
{
    struct group group = {
        .makers = makers, .count = count, .stimulator = &plan->stimulator, .options = options, .why = why};
    enum status status = STATUS_OK;
    if (group_takes_turns(plan)) {
        status = make_in_turns(&group, plan, profile);
    } else {
        for (size_t i = 0; i < count && status == STATUS_OK; i++)
            status = maker_make(&makers[i], plan, profile, options, why);
    }
    if (status == STATUS_OK) status = check_returns(plan, why);
    return status;
}
