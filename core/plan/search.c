/* The scan over policies. The goal of this code: start slow, raise recruitment, raise frequency when
 * recruitment is spent (design, Plan) is one family of policies among which the start, the step, the opening
 * and the pattern are found by running them. Order: the first pattern and opening from slow to fast in
 * fifths, rates at which force can not fuse left out; then its neighbours by halving; the other patterns and
 * openings about what did best; then larger steps of frequency, and every ramp. A policy that misses early
 * ends early, so the scan costs little where it is hopeless. */
#include "core/plan/search.h"

#include <math.h>
#include <string.h>

enum { HALVINGS = 6, WORSE_MAX = 2 };
static const double coarse_ratio = 1.2;
static const double hopeless_ripple = 1.25; /* of the limit: fatigue slows a muscle and smooths a little */
static const double fuse_ms = 800.0;
static const double growths[] = {0.1, 0.25, 0.5};

struct scan {
    struct session_work *work;
    const struct session_problem *problem;
    const struct search_options *options;
    const struct session_frequencies *frequencies;
    struct search_result *result;
    struct message *why;
    unsigned tried;
};

static double frequency_at(const struct session_frequencies *list, unsigned i)
{
    return list->from + (double)i * list->step;
}

/* Which end of the range binds. */
static void lower_end(struct session_frequencies *list, double *to, double value, enum plan_why_reason reason)
{
    if (!isfinite(value) || value >= *to) return;
    *to = value;
    list->end = plan_why_make(reason, value, value, "pps");
}

struct session_frequencies search_frequencies(const struct demand *demand,
                                              const struct stimulator *stimulator,
                                              const struct dose_limits *limits, bool pairs, unsigned opening)
{
    const struct stepped *steps = &stimulator->frequency_pps;
    struct session_frequencies list = {.from = steps->from, .step = steps->step > 0.0 ? steps->step : 1.0};
    double to = steps->to;
    list.end = plan_why_make(WHY_FREQUENCY_RANGE, to, to, "pps");
    lower_end(&list, &to, demand->frequency_pps.to, WHY_FREQUENCY_RANGE);
    lower_end(&list, &to, (double)limits->rate / (pairs ? 2.0 : 1.0), WHY_RATE_LIMIT);
    /* the gap that the guard asks for: the limit, or the pulse's length and half a millisecond */
    const double duration = (double)limits->duration_us;
    const double second = limits->recovery_us ? (double)limits->recovery_us : duration;
    const double gap_us =
        fmax((double)limits->gap_us, duration + (double)limits->interphase_us + second + 500.0);
    const double close_us = 5000.0; /* inside a pair or an opening */
    if ((pairs || opening > 1) && close_us < gap_us) {
        list.end = plan_why_make(WHY_GAP, close_us, gap_us, "us");
        return list;
    }
    const double used_us = pairs ? gap_us + close_us : gap_us;
    if ((double)train_period_us(to) < used_us) lower_end(&list, &to, 1e6 / used_us, WHY_GAP);
    const double least = isfinite(demand->frequency_pps.from) ? demand->frequency_pps.from : steps->from;
    const double skipped = least > list.from ? ceil((least - list.from) / list.step - 1e-9) : 0.0;
    list.from += skipped * list.step;
    if (list.from <= 0.0) list.from += list.step;
    if (to >= list.from) list.count = 1 + (unsigned)floor((to - list.from) / list.step + 1e-9);
    return list;
}

/* The order of preference. `charge` and `smoothness` put theirs first among plans that keep the demand
 * equally long: a plan that gives up at once costs no charge and is no answer. */
bool search_better(const struct demand *demand, const struct session_outcome *a,
                   const struct session_outcome *b)
{
    if (a->met != b->met) return a->met > b->met;
    if (a->given != b->given) return a->given > b->given;
    const bool by_charge = a->charge_uc < b->charge_uc;
    if (demand->prefer == PREFER_CHARGE && fabs(a->charge_uc - b->charge_uc) > 1e-9 * b->charge_uc)
        return by_charge;
    if (demand->prefer == PREFER_SMOOTHNESS && fabs(a->ripple_percent - b->ripple_percent) > 1e-9)
        return a->ripple_percent < b->ripple_percent;
    if (fabs(a->remaining_50 - b->remaining_50) > 1e-9) return a->remaining_50 > b->remaining_50;
    return by_charge && a->charge_uc < b->charge_uc * (1.0 - 1e-9);
}

/* Runs one policy and keeps it where it is the best so far. */
static enum status try_policy(struct scan *scan, const struct session_policy *policy,
                              struct session_outcome *outcome)
{
    const enum status status =
        session_run(scan->work, scan->problem, policy, scan->frequencies, false, NULL, outcome, scan->why);
    if (status != STATUS_OK) return status;
    scan->tried++;
    if (!scan->result->any || search_better(scan->problem->demand, outcome, &scan->result->outcome)) {
        scan->result->any = true;
        scan->result->policy = *policy;
        scan->result->frequencies = *scan->frequencies;
        scan->result->outcome = *outcome;
    }
    if (scan->options->progress &&
        !scan->options->progress(scan->options->context, 0.8 * scan->tried / (scan->tried + 12.0), "search"))
        return status_fail(scan->why, STATUS_REFUSED, "stopped");
    return STATUS_OK;
}

/* Could the force be smooth enough at this rate at all? Run once on a muscle that is awake and does not tire:
 * both only ripple more. */
static enum status could_fuse(struct scan *scan, const struct session_policy *policy, bool *yes)
{
    const struct session_problem *problem = scan->problem;
    struct attempt_bench *bench = &scan->work->bench;
    bench->space = problem->space;
    settings_rate(&bench->space, policy->frequency_pps * (policy->pairs ? 2.0 : 1.0));
    const struct solve_request request = {.frame = {.frequency_pps = policy->frequency_pps,
                                                    .opening = policy->opening,
                                                    .pairs = policy->pairs,
                                                    .opening_gap_ms = 5.0,
                                                    .ramp_up = {.ms = fuse_ms},
                                                    .hold_ms = fuse_ms},
                                          .before = problem->awake};
    const struct solve_settings strongest = solve_strongest(bench);
    struct solve_result result;
    const enum status status = solve_at(bench, &request, &strongest, &result, scan->why);
    const double ripple = result.attempt.hold.ripple_percent;
    *yes = status == STATUS_OK && ripple <= hopeless_ripple * problem->demand->ripple_percent_max;
    return status;
}

/* What a scan over first frequencies has found for its pattern and opening. */
struct climb {
    unsigned low, best, high, since; /* indices; coarse steps since the best */
    bool any;
    struct session_outcome outcome;
};

/* Halves towards the better neighbour on each side of the best first frequency. */
static enum status refine(struct scan *scan, struct session_policy policy, struct climb *climb)
{
    for (int i = 0; i < HALVINGS && (climb->best - climb->low > 1 || climb->high - climb->best > 1); i++) {
        const unsigned below_width = climb->best - climb->low, above_width = climb->high - climb->best;
        const bool below = below_width > above_width;
        const unsigned middle = below ? climb->low + below_width / 2 : climb->best + (above_width + 1) / 2;
        struct session_outcome outcome;
        policy.frequency_pps = frequency_at(scan->frequencies, middle);
        const enum status status = try_policy(scan, &policy, &outcome);
        if (status != STATUS_OK) return status;
        const bool wins = search_better(scan->problem->demand, &outcome, &climb->outcome);
        if (wins == below)
            climb->high = wins ? climb->best : middle;
        else
            climb->low = wins ? climb->best : middle;
        if (!wins) continue;
        climb->best = middle;
        climb->outcome = outcome;
    }
    return STATUS_OK;
}

/* One pattern and opening: from slow to fast by fifths while it gets better, then fine. */
static enum status scan_starts(struct scan *scan, struct session_policy policy)
{
    const struct session_frequencies *list = scan->frequencies;
    struct climb climb = {.any = false};
    unsigned before = 0;
    for (unsigned i = 0; i < list->count;) {
        unsigned next = i + 1;
        while (next + 1 < list->count && frequency_at(list, next) < frequency_at(list, i) * coarse_ratio)
            next++;
        struct session_outcome outcome;
        bool fuses = true;
        policy.frequency_pps = frequency_at(list, i);
        enum status status = next < list->count ? could_fuse(scan, &policy, &fuses)
                                                : STATUS_OK; /* the fastest is always tried */
        if (status == STATUS_OK && fuses) status = try_policy(scan, &policy, &outcome);
        if (status != STATUS_OK) return status;
        if (fuses && (!climb.any || search_better(scan->problem->demand, &outcome, &climb.outcome))) {
            climb = (struct climb){before, i, next < list->count ? next : i, 0, true, outcome};
        } else if (fuses && climb.outcome.met > 0 && ++climb.since == WORSE_MAX) {
            break;
        }
        before = i;
        i = next;
    }
    return climb.any ? refine(scan, policy, &climb) : STATUS_OK;
}

/* The best first frequency with another opening, or with pairs, which carry twice the pulses; and a
 * neighbour. */
static enum status scan_about(struct scan *scan, struct session_policy policy,
                              const struct session_policy *best)
{
    static const double factors[] = {1.0, 0.85};
    const struct session_frequencies *list = scan->frequencies;
    const double twice = policy.pairs == best->pairs ? 1.0 : policy.pairs ? 0.6 : 1.7;
    for (size_t i = 0; i < sizeof factors / sizeof *factors; i++) {
        const double steps =
            floor((best->frequency_pps * twice * factors[i] - list->from) / list->step + 0.5);
        if (steps < 0.0 || steps >= (double)list->count) continue;
        policy.frequency_pps = frequency_at(list, (unsigned)steps);
        struct session_outcome outcome;
        const enum status status = try_policy(scan, &policy, &outcome);
        if (status != STATUS_OK) return status;
    }
    return STATUS_OK;
}

/* Larger steps of frequency where it was stepped at all; then every ramp on what did best. */
static enum status scan_growths(struct scan *scan)
{
    struct session_policy policy = scan->result->policy;
    const bool stepped = scan->result->outcome.frequency_last_pps > policy.frequency_pps;
    struct session_outcome outcome;
    for (size_t i = 0; stepped && i < sizeof growths / sizeof *growths; i++) {
        policy.growth = growths[i];
        const enum status status = try_policy(scan, &policy, &outcome);
        if (status != STATUS_OK) return status;
    }
    policy = scan->result->policy;
    policy.thorough = true;
    return try_policy(scan, &policy, &outcome);
}

/* Only the neighbourhood of a policy that is known: a few starts about it. */
static enum status scan_near(struct scan *scan)
{
    static const double factors[] = {1.0, 1.25};
    const struct session_frequencies *list = scan->frequencies;
    for (size_t i = 0; i < sizeof factors / sizeof *factors; i++) {
        struct session_policy policy = scan->options->near;
        const double steps = floor((policy.frequency_pps * factors[i] - list->from) / list->step + 0.5);
        if (steps < 0.0 || steps >= (double)list->count) continue;
        policy.frequency_pps = frequency_at(list, (unsigned)steps);
        struct session_outcome outcome;
        const enum status status = try_policy(scan, &policy, &outcome);
        if (status != STATUS_OK) return status;
        if (outcome.first_miss == 0) break; /* met in full: that is all that is asked */
    }
    return STATUS_OK;
}

enum status search_policies(struct session_work *work, const struct session_problem *problem,
                            const struct stimulator *stimulator, const struct search_options *options,
                            struct search_result *result, struct message *why)
{
    const struct demand *demand = problem->demand;
    const bool fixed =
        isfinite(demand->frequency_pps.from) && demand->frequency_pps.from == demand->frequency_pps.to;
    struct scan scan = {.work = work, .problem = problem, .options = options, .result = result, .why = why};
    struct plan_why end = plan_why_make(WHY_NONE, 0.0, 0.0, "");
    result->any = false;
    for (int pairs = 0; pairs < 2; pairs++)
        for (unsigned opening = 1; opening <= 3; opening++) {
            if (!demand->pattern[pairs] || !demand->opening[opening]) continue;
            if (pairs && opening == 2 && demand->opening[1]) continue; /* a train of pairs opens with one */
            if (options->quick && (options->near.pairs != (pairs == 1) || options->near.opening != opening))
                continue;
            const struct session_frequencies list =
                search_frequencies(demand, stimulator, &work->bench.limits, pairs == 1, opening);
            if (list.count == 0) {
                end = list.end;
                continue;
            }
            scan.frequencies = &list;
            const struct session_policy policy = {
                .opening = opening, .pairs = pairs == 1, .steps = (demand->vary & VARY_FREQUENCY) && !fixed};
            const struct session_policy about = result->policy;
            const bool others = result->any && result->outcome.met > 0;
            const enum status status = options->quick ? scan_near(&scan)
                                       : others       ? scan_about(&scan, policy, &about)
                                                      : scan_starts(&scan, policy);
            if (status != STATUS_OK) return status;
        }
    if (!result->any)
        return status_fail(why, STATUS_REFUSED,
                           "no frequency is left for any opening and pattern: %s, %g %s against %g",
                           plan_why_text(end.reason), end.value, end.unit, end.limit);
    if (options->quick) return STATUS_OK;
    const struct session_frequencies chosen = search_frequencies(
        demand, stimulator, &work->bench.limits, result->policy.pairs, result->policy.opening);
    scan.frequencies = &chosen;
    return scan_growths(&scan);
}
