/* What would work. The goal of this code: "no" comes with the nearest "yes", and each yes was planned, not
 * extrapolated. Method: bisection on one quantity at a time, the others as demanded, each step a search near
 * the policy that did best. */
#include "core/plan/maker.h"

#include <math.h>

enum { TARGET_ROUNDS = 6, HOLD_ROUNDS = 6, HOLD_STEP_MS = 50 };

/* Is a changed demand met in full, with the space of settings as it is? Searched near the policy that did
 * best; where none made even one contraction, the whole scan, until one does. */
static enum status try_demand(struct maker *maker, const struct plan_options *options, bool *yes,
                              struct message *why)
{
    const struct search_options search = {.quick = maker->near_known,
                                          .near = maker->near,
                                          .progress = options->progress,
                                          .context = options->context};
    struct search_result result = {0};
    const enum status status =
        search_policies(&maker->work, &maker->problem, maker->stimulator, &search, &result, why);
    *yes = status == STATUS_OK && result.outcome.first_miss == 0;
    if (*yes && !maker->near_known) {
        maker->near = result.policy;
        maker->near_known = true;
    }
    return status;
}

/* A current that is chosen once would be chosen lower for less force, and give finer steps: by the share that
 * is in need, roughly. */
static enum status try_currents(struct maker *maker, double less, const struct plan_options *options,
                                bool *yes, struct message *why)
{
    static const double shares[] = {0.95, 0.5};
    const struct settings_space *whole = &maker->whole;
    const uint32_t longest = settings_duration_to(whole, whole->strongest_ua, NULL);
    const double most = settings_share(whole, (double)longest, (double)whole->strongest_ua);
    enum status status = STATUS_OK;
    for (size_t i = 0; i < sizeof shares / sizeof *shares && !*yes && status == STATUS_OK; i++) {
        maker->problem.space = *whole;
        settings_fix_current(&maker->problem.space,
                             settings_current_for(whole, 0.0, fmin(1.0, less) * most * shares[i]));
        status = try_demand(maker, options, yes, why);
    }
    return status;
}

/* Is a changed demand met in full? */
static enum status works(struct maker *maker, const struct demand *demand, double target_n,
                         const struct plan_options *options, bool *yes, struct message *why)
{
    const struct session_problem kept = maker->problem;
    struct session_problem *problem = &maker->problem;
    const double edge = maker->channel->force_edge_n, cap = maker->channel->force_cap_n;
    problem->demand = demand;
    problem->aim = contraction_aim_of(demand, target_n, cap);
    problem->solve_target_n = target_n;
    problem->contractions = problem->warm_up + demand->contractions;
    /* the upper edge lies above the middle by about as much as it did in the plan */
    if (edge > 0.0 && isfinite(cap))
        problem->solve_target_n = fmin(target_n, cap * kept.solve_target_n / edge);
    enum status status = try_demand(maker, options, yes, why);
    if (maker->whole.choose_cover && !*yes && status == STATUS_OK) {
        problem->space = maker->whole;
        status = try_currents(maker, target_n / kept.aim.target_n, options, yes, why);
    }
    maker->problem = kept;
    return status;
}

static enum status find_target(struct maker *maker, struct plan *plan, const struct plan_options *options,
                               struct message *why)
{
    const double asked = maker->problem.aim.target_n;
    const double step = pow(10.0, floor(log10(asked))) / 200.0; /* 0.5 N for 150 N */
    double low = 0.0, high = asked;
    for (int i = 0; i < TARGET_ROUNDS && high - low > 1.5 * step; i++) {
        const double middle = floor(0.5 * (low + high) / step) * step;
        bool yes;
        const enum status status = works(maker, maker->demand, middle, options, &yes, why);
        if (status != STATUS_OK) return status;
        if (yes)
            low = middle;
        else
            high = middle;
    }
    plan->would_work.largest_target_n = low > 0.0 ? low : (double)NAN;
    return STATUS_OK;
}

static enum status find_hold(struct maker *maker, struct plan *plan, const struct plan_options *options,
                             struct message *why)
{
    double low = 0.0, high = ceil(maker->demand->hold_ms / HOLD_STEP_MS) * HOLD_STEP_MS;
    for (int i = 0; i < HOLD_ROUNDS && high - low > HOLD_STEP_MS; i++) {
        struct demand demand = *maker->demand;
        demand.hold_ms = floor(0.5 * (low + high) / HOLD_STEP_MS) * HOLD_STEP_MS;
        bool yes;
        const enum status status = works(maker, &demand, maker->problem.aim.target_n, options, &yes, why);
        if (status != STATUS_OK) return status;
        if (yes)
            low = demand.hold_ms;
        else
            high = demand.hold_ms;
    }
    plan->would_work.longest_hold_ms = low > 0.0 ? low : (double)NAN;
    return STATUS_OK;
}

static enum status find_contractions(struct maker *maker, struct plan *plan,
                                     const struct plan_options *options, struct message *why)
{
    struct demand demand = *maker->demand;
    for (demand.contractions = plan->contractions_met; demand.contractions > 0; demand.contractions--) {
        bool yes;
        const enum status status = works(maker, &demand, maker->problem.aim.target_n, options, &yes, why);
        if (status != STATUS_OK) return status;
        if (yes) break;
    }
    plan->would_work.most_contractions = demand.contractions;
    return STATUS_OK;
}

enum status would_work_find(struct maker *maker, struct plan *plan, const struct plan_options *options,
                            struct message *why)
{
    maker->near = maker->found.policy;
    maker->near_known = maker->found.outcome.met > 0;
    enum status status = find_contractions(maker, plan, options, why);
    if (status == STATUS_OK) status = find_target(maker, plan, options, why);
    if (status == STATUS_OK) status = find_hold(maker, plan, options, why);
    return status;
}
