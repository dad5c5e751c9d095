/* One policy through the whole demand. The goal of this code: every contraction aims at the target while any
 * allowed setting reaches it; only then may its mean sink to the lower edge of the tolerance (design, Plan).
 * Settings stay while the predicted mean stays within a fifth of the tolerance (this project's choice: it
 * makes blocks that a person can read); then they are solved anew from the state the muscle is in.
 * Recruitment is raised first, frequency when recruitment is spent. Limits are the guard's: the pulses of
 * each contraction are played through the function the device runs. */
#include "core/plan/session.h"

#include <math.h>
#include <string.h>

static const double search_margin = 0.002; /* of every bound: the search engine's error, ten times over */

struct state {
    struct session_work *work;
    const struct session_problem *problem;
    const struct session_policy *policy;
    const struct session_frequencies *frequencies;
    struct message *why;
    struct contraction_aim solve_aim;
    struct contraction frame;
    struct dose_channel guard;
    uint64_t at_us;
    struct solve_result present; /* settings in use, and their last attempt */
    bool have;
    bool knows; /* what the settings in use give in the contraction that comes, in this frame */
    struct attempt_result known;
    bool at_end;   /* no allowed setting reaches the target any more: the mean may sink */
    bool given_up; /* nor does any keep it within the tolerance */
    bool missed;   /* a scored contraction was missed already */
    struct ramp_choice ramp;
};

bool session_same_settings(const struct contraction *a, const struct contraction *b)
{
    const bool trims =
        (isnan(a->trim_duration_us) == isnan(b->trim_duration_us)) &&
        (isnan(a->trim_current_ma) == isnan(b->trim_current_ma)) &&
        !(a->trim_duration_us < b->trim_duration_us || a->trim_duration_us > b->trim_duration_us) &&
        !(a->trim_current_ma < b->trim_current_ma || a->trim_current_ma > b->trim_current_ma);
    const double pairs[][2] = {{a->frequency_pps, b->frequency_pps}, {a->duration_us, b->duration_us},
                               {a->current_ma, b->current_ma},       {a->ramp_up.ms, b->ramp_up.ms},
                               {a->ramp_down.ms, b->ramp_down.ms},   {a->rest_ms, b->rest_ms}};
    for (size_t i = 0; i < sizeof pairs / sizeof *pairs; i++)
        if (pairs[i][0] < pairs[i][1] || pairs[i][0] > pairs[i][1]) return false;
    return trims && a->opening == b->opening && a->pairs == b->pairs && a->ramp_up.shape == b->ramp_up.shape;
}

struct plan_why session_dose_why(const struct dose_verdict *verdict)
{
    static const struct {
        enum plan_why_reason reason;
        double scale; /* comparison unit -> shown unit */
        const char *unit;
    } table[DOSE_FIGURES] = {
        [DOSE_CURRENT] = {WHY_CURRENT_RANGE, 1e-3, "mA"},
        [DOSE_DURATION] = {WHY_DURATION_RANGE, 1.0, "us"},
        [DOSE_CHARGE] = {WHY_CHARGE_LIMIT, 1e-6, "uC"},
        [DOSE_RMS] = {WHY_RMS_LIMIT, 1e-3, "mA"},
        [DOSE_RATE] = {WHY_RATE_LIMIT, 1.0, "pps"},
        [DOSE_GAP] = {WHY_GAP, 1.0, "us"},
        [DOSE_ENERGY] = {WHY_CURRENT_RANGE, 1e-3, "mJ"},
        [DOSE_VOLTAGE] = {WHY_CURRENT_RANGE, 1e-3, "V"},
        [DOSE_NET_DC] = {WHY_CHARGE_LIMIT, 1e-3, "uA"},
        [DOSE_ON_TIME] = {WHY_ON_TIME, 1e-6, "s"},
        [DOSE_DUTY] = {WHY_DUTY, 0.1, "%"},
        [DOSE_SLEW] = {WHY_SLEW_LIMIT, 1e-6, "uC"},
        [DOSE_SESSION_TIME] = {WHY_SESSION, 1e-6, "s"},
        [DOSE_SESSION_PULSES] = {WHY_SESSION, 1.0, "pulses"},
        [DOSE_SESSION_CHARGE] = {WHY_SESSION, 1e-9, "mC"},
    };
    const double scale = table[verdict->figure].scale;
    return plan_why_make(table[verdict->figure].reason, (double)verdict->value * scale,
                         (double)verdict->limit * scale,
                         table[verdict->figure].unit ? table[verdict->figure].unit : "");
}

static void set_rate(struct state *state, double frequency_pps)
{
    const unsigned extras = state->policy->opening > 1 ? state->policy->opening - 1 : 0;
    state->frame.frequency_pps = frequency_pps;
    state->knows = false;
    settings_rate(&state->work->bench.space,
                  frequency_pps * (state->policy->pairs ? 2.0 : 1.0) + (double)extras);
}

static struct solve_request request_of(const struct state *state)
{
    return (struct solve_request){.frame = state->frame,
                                  .before = state->work->now,
                                  .start_ms = (double)state->at_us / 1000.0,
                                  .aim = &state->solve_aim,
                                  .has_guess = state->have,
                                  .guess = state->present.settings,
                                  .slopes = state->present.slopes,
                                  .known = state->knows ? &state->known : NULL};
}

static enum status solve_now(struct state *state)
{
    const struct solve_request request = request_of(state);
    const enum status status = solve_settings(&state->work->bench, &request, &state->present, state->why);
    if (status == STATUS_OK) state->have = true;
    return status;
}

/* Chooses the ramp for the present settings and solves them anew on it. */
static enum status choose_ramp(struct state *state)
{
    const struct solve_request request = request_of(state);
    enum status status =
        ramp_choose(&state->work->bench, &request, state->problem->demand, &state->present.settings,
                    &state->guard, state->at_us, !state->policy->thorough, &state->ramp, state->why);
    if (status != STATUS_OK) return status;
    state->frame.ramp_up.shape = state->frame.ramp_down.shape = state->ramp.shape;
    state->frame.ramp_up.ms = state->ramp.ms;
    state->knows = false;
    return solve_now(state);
}

/* Does the strongest setting at this frequency reach `least_n`? */
static enum status reaches(struct state *state, double frequency_pps, double least_n, bool *yes)
{
    set_rate(state, frequency_pps);
    const struct solve_request request = request_of(state);
    const struct solve_settings strongest = solve_strongest(&state->work->bench);
    struct solve_result result;
    const enum status status = solve_at(&state->work->bench, &request, &strongest, &result, state->why);
    *yes = status == STATUS_OK && result.attempt.hold.mean_n >= least_n;
    return status;
}

/* The least allowed frequency above the present one that reaches `least_n`; the present one where none does.
 */
static enum status raise_frequency(struct state *state, double least_n, bool *raised)
{
    const struct session_frequencies *list = state->frequencies;
    const double present = state->frame.frequency_pps;
    *raised = false;
    for (unsigned i = 0; i < list->count; i++) {
        const double frequency = list->from + (double)i * list->step;
        if (frequency < present * (1.0 + state->policy->growth) || !(frequency > present)) continue;
        bool yes;
        const enum status status = reaches(state, frequency, least_n, &yes);
        if (status != STATUS_OK) return status;
        if (!yes) continue;
        *raised = true;
        return solve_now(state);
    }
    set_rate(state, present);
    return STATUS_OK;
}

static double keep_n(const struct state *state)
{
    return solve_keep_share * state->problem->aim.tolerance_percent / 100.0 * state->problem->solve_target_n;
}

/* Are the settings in use still right for the next contraction? */
static bool still_right(const struct state *state, const struct hold_measures *hold)
{
    const struct plan_why miss = contraction_miss(&state->problem->aim, hold, search_margin);
    if (miss.reason != WHY_NONE) return false;
    if (state->at_end && hold->mean_n < state->problem->solve_target_n) return true;
    return fabs(hold->mean_n - state->problem->solve_target_n) <= keep_n(state);
}

/* Recruitment is spent at this frequency. While a higher one reaches the target it is taken; then, the target
 * being out of reach, the settings stay until the mean would leave the tolerance, and a higher frequency may
 * keep it inside. */
static enum status spent(struct state *state, bool scored)
{
    const double target = state->problem->solve_target_n;
    const double low = state->problem->aim.target_n *
                       (1.0 - (1.0 - search_margin) * state->problem->aim.tolerance_percent / 100.0);
    if (!scored ||
        !state->policy->steps) { /* a warm-up does not drive the frequency up: the muscle wakes by itself */
        state->at_end = scored;
        return STATUS_OK;
    }
    const struct hold_measures before = state->present.attempt.hold;
    bool raised = false, tried = false;
    enum status status = STATUS_OK;
    if (!state->at_end) {
        status = raise_frequency(state, target, &raised);
        state->at_end = !raised;
        tried = true;
    }
    const bool missed = contraction_miss(&state->problem->aim, &before, search_margin).reason != WHY_NONE;
    if (status == STATUS_OK && !raised && !state->given_up && missed) {
        status = raise_frequency(state, low, &raised);
        state->given_up = !raised;
        tried = true;
    }
    if (status == STATUS_OK && tried && !raised)
        status = solve_now(state); /* what was tried last is not what stands */
    return status;
}

/* Why the settings changed, from what the former ones would have given. */
static struct plan_why change_why(const struct state *state, const struct solve_result *former,
                                  const struct hold_measures *would)
{
    const double target = state->problem->solve_target_n;
    const struct contraction *was = &former->contraction, *now = &state->present.contraction;
    const struct plan_why miss = contraction_miss(&state->problem->aim, would, search_margin);
    if (now->frequency_pps > was->frequency_pps)
        return plan_why_make(WHY_RECRUITMENT_SPENT, would->mean_n, target, "N");
    if (miss.reason != WHY_NONE && miss.reason != WHY_RECRUITMENT_SPENT) return miss;
    if (now->current_ma > was->current_ma && state->work->bench.space.knob == KNOB_DURATION) {
        const uint32_t to =
            settings_duration_to(&state->work->bench.space, (uint32_t)lround(was->current_ma * 1000.0), NULL);
        return plan_why_make(WHY_DURATION_RANGE,
                             isnan(was->trim_duration_us) ? was->duration_us : was->trim_duration_us,
                             (double)to, "us");
    }
    return plan_why_make(would->mean_n > target ? WHY_OVERSHOOT : WHY_DROOP, would->mean_n, target, "N");
}

/* Neither duration nor current moves, but the current is still to be chosen once: the one whose mean is
 * nearest the target. */
static enum status choose_current(struct state *state)
{
    struct settings_space *space = &state->work->bench.space;
    const struct solve_request request = request_of(state);
    const uint32_t step = space->grid.current_step_ua ? space->grid.current_step_ua : 1;
    const uint32_t duration = space->duration_from_us;
    uint32_t low = state->problem->space.current_from_ua, high = settings_current_to(space, duration, NULL);
    double best_off = (double)INFINITY;
    uint32_t best = high;
    while (low <= high && high > 0) {
        const uint32_t middle = low + (high - low) / step / 2 * step;
        const struct solve_settings settings = {duration, duration, middle};
        struct solve_result result;
        const enum status status = solve_at(&state->work->bench, &request, &settings, &result, state->why);
        if (status != STATUS_OK) return status;
        const double off = result.attempt.hold.mean_n - state->problem->solve_target_n;
        if (fabs(off) < best_off) {
            best_off = fabs(off);
            best = middle;
        }
        if (off < 0.0)
            low = middle + step;
        else if (middle < step)
            break;
        else
            high = middle - step;
    }
    space->current_from_ua = space->current_to.value = space->strongest_ua = best;
    return STATUS_OK;
}

/* The first contraction: a middling ramp to solve on, then the ramp, then the settings. */
static enum status begin(struct state *state)
{
    const struct demand *demand = state->problem->demand;
    state->frame.ramp_up.shape = state->frame.ramp_down.shape = demand->ramp[RAMP_LINEAR] ? RAMP_LINEAR
                                                                : demand->ramp[RAMP_RAISED_COSINE]
                                                                    ? RAMP_RAISED_COSINE
                                                                    : RAMP_EXPONENTIAL;
    state->frame.ramp_up.ms = floor(0.5 * demand->rise_ms_max / 10.0) * 10.0;
    enum status status = state->problem->space.choose_current ? choose_current(state) : STATUS_OK;
    if (status == STATUS_OK) status = solve_now(state);
    if (status != STATUS_OK || state->problem->warm_up > 0)
        return status; /* the ramp is chosen for the scored ones */
    return choose_ramp(state);
}

/* Settings for the contraction that comes, by the state the muscle is in; `changed` and its reason. */
static enum status next_settings(struct state *state, unsigned number, struct plan_why *reason)
{
    struct attempt_bench *bench = &state->work->bench;
    const double target = state->problem->solve_target_n;
    enum status status;
    state->knows = false;
    *reason = plan_why_make(WHY_NONE, 0.0, 0.0, "");
    const bool first_scored = number == state->problem->warm_up + 1;
    if (!state->have) {
        status = begin(state);
        if (status == STATUS_OK && state->present.spent)
            status = spent(state, number > state->problem->warm_up);
        const bool warm = state->problem->warm_up > 0;
        *reason =
            plan_why_make(warm ? WHY_WARM_UP : WHY_START, state->present.attempt.hold.mean_n, target, "N");
        return status;
    }
    struct hold_measures would;
    {
        const struct solve_request request = request_of(state);
        struct solve_result again;
        status = solve_at(bench, &request, &state->present.settings, &again, state->why);
        if (status != STATUS_OK) return status;
        would = again.attempt.hold;
        state->known = again.attempt;
        state->knows = true;
        if (still_right(state, &would) && !first_scored) {
            state->present.attempt = again.attempt;
            return STATUS_OK;
        }
    }
    const struct solve_result former = state->present;
    const double rest_ms = former.contraction.rest_ms;
    if (first_scored &&
        state->problem->space.choose_current) { /* what woke the muscle is not what it works with */
        bench->space.current_to = state->problem->space.current_to;
        status = choose_current(state);
        if (status == STATUS_OK) status = solve_now(state);
        if (status != STATUS_OK) return status;
    }
    status = first_scored ? choose_ramp(state) : solve_now(state);
    if (status == STATUS_OK && state->present.spent)
        status = spent(state, number > state->problem->warm_up);
    else
        state->at_end = false;
    if (status != STATUS_OK) return status;
    const enum plan_why_reason miss =
        contraction_miss(&state->problem->aim, &state->present.attempt.hold, search_margin).reason;
    if (!first_scored && !state->missed && (miss == WHY_RISE || miss == WHY_OVERSHOOT || miss == WHY_RIPPLE))
        status = choose_ramp(state);
    if (status != STATUS_OK) return status;
    state->present.contraction.rest_ms = rest_ms; /* move_on says it anew; not a change of settings */
    if (first_scored)
        *reason = plan_why_make(WHY_START, state->present.attempt.hold.mean_n, target, "N");
    else if (!session_same_settings(&former.contraction, &state->present.contraction))
        *reason = change_why(state, &former, &would);
    return STATUS_OK;
}

/* Plays the contraction through the guard; a slew limit that is broken gets one other ramp. */
static enum status play(struct state *state, struct dose_verdict *verdict)
{
    struct dose_channel played = state->guard;
    *verdict = attempt_guard(&state->work->bench, state->at_us, &played);
    if (verdict->figure == DOSE_SLEW) {
        const enum status status = choose_ramp(state);
        if (status != STATUS_OK) return status;
        played = state->guard;
        *verdict = attempt_guard(&state->work->bench, state->at_us, &played);
    }
    if (verdict->figure == DOSE_NONE) state->guard = played;
    return STATUS_OK;
}

static double compiled_charge_uc(const struct compiled *compiled)
{
    uint64_t charge_pc = 0;
    for (size_t i = 0; i < compiled->pulses; i++)
        charge_pc += dose_charge_pc(compiled->pulse[i].current_ua, compiled->pulse[i].duration_us);
    return (double)charge_pc / 1e6;
}

/* The next first pulse: rest after the last, on the common period where there is one; the settings carry the
 * rest that comes of it. */
static void move_on(struct state *state)
{
    const struct session_problem *problem = state->problem;
    const uint64_t last_us = state->at_us + state->present.attempt.last_us;
    uint64_t next_us = last_us + (uint64_t)ceil(problem->demand->rest_ms * 1000.0 - 1e-6);
    if (problem->common_period_us > 0) {
        const uint64_t period = problem->common_period_us;
        next_us = problem->start_us + (next_us - problem->start_us + period - 1) / period * period;
    }
    state->present.contraction.rest_ms = (double)(next_us - last_us) / 1000.0;
    state->at_us = next_us;
}

static void note_miss(struct session_outcome *outcome, unsigned number, const struct plan_why *miss)
{
    if (outcome->first_miss != 0) return;
    outcome->first_miss = number;
    outcome->first_miss_why = *miss;
}

static void start(struct state *state, struct session_work *work, const struct session_problem *problem,
                  const struct session_policy *policy)
{
    state->at_us = problem->start_us;
    state->solve_aim = problem->aim;
    state->solve_aim.target_n = problem->solve_target_n;
    state->frame = (struct contraction){.opening = policy->opening,
                                        .pairs = policy->pairs,
                                        .opening_gap_ms = 5.0,
                                        .trim_duration_us = (double)NAN,
                                        .trim_current_ma = (double)NAN,
                                        .hold_ms = problem->demand->hold_ms,
                                        .rest_ms = problem->demand->rest_ms,
                                        .repeat = 1};
    state->frame.ramp_down.ms = problem->demand->release_ms;
    work->bench.space = problem->space;
    work->bench.target_n = problem->aim.target_n;
    work->bench.tolerance_percent = problem->aim.tolerance_percent;
    predictor_copy(work->now, problem->rested);
    dose_init(&state->guard);
    dose_session(&state->guard, 0, 0, 0);
    set_rate(state, policy->frequency_pps);
}

enum status session_run(struct session_work *work, const struct session_problem *problem,
                        const struct session_policy *policy, const struct session_frequencies *frequencies,
                        bool whole, struct session_contraction *contraction, struct session_outcome *outcome,
                        struct message *why)
{
    struct state state = {
        .work = work, .problem = problem, .policy = policy, .frequencies = frequencies, .why = why};
    enum status status = STATUS_OK;
    start(&state, work, problem, policy);
    *outcome = (struct session_outcome){.first_miss = 0};
    double ripple_sum = 0.0;
    for (unsigned k = 1; k <= problem->contractions && status == STATUS_OK; k++) {
        struct plan_why reason;
        struct dose_verdict verdict;
        status = next_settings(&state, k, &reason);
        if (status == STATUS_OK) status = play(&state, &verdict);
        if (status != STATUS_OK) break;
        if (verdict.figure != DOSE_NONE) { /* what a limit forbids is not given: the session ends here */
            const struct plan_why broken = session_dose_why(&verdict);
            note_miss(outcome, k, &broken);
            break;
        }
        const struct hold_measures *hold = &state.present.attempt.hold;
        const struct plan_why miss = contraction_miss(&problem->aim, hold, search_margin);
        const bool scored = k > problem->warm_up;
        if (k == problem->warm_up + 1) outcome->ramp = state.ramp;
        if (scored && miss.reason != WHY_NONE) note_miss(outcome, k, &miss);
        state.missed = outcome->first_miss != 0;
        if (outcome->first_miss != 0 && !whole) break;
        outcome->given = k;
        outcome->charge_uc += compiled_charge_uc(&work->bench.compiled);
        if (scored && outcome->first_miss == 0) {
            outcome->met++;
            ripple_sum += hold->ripple_percent;
        }
        struct predictor *after =
            work->bench.after; /* the attempt's end is where the next contraction begins */
        work->bench.after = work->now;
        work->now = after;
        move_on(&state);
        if (contraction)
            contraction[k - 1] = (struct session_contraction){state.present.contraction, *hold, reason, miss};
    }
    outcome->remaining_50 = predictor_force_remaining(work->now, 50.0);
    outcome->ripple_percent = outcome->met ? ripple_sum / outcome->met : (double)INFINITY;
    outcome->frequency_last_pps = state.frame.frequency_pps;
    return status;
}
