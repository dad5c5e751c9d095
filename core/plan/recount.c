/* The recount. The goal of this code: what a plan says of itself is what its pulses do, by the exact engine;
 * a plan edited by hand gets the same honest figures as one that was searched. The muscle and 64 draws of it
 * (lanes) are carried through the blocks side by side. */
#include "core/plan/recount.h"
#include "core/plan/channel.h"
#include "core/plan/ensemble.h"
#include "core/plan/search.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* One muscle carried through a channel's contractions. */
struct lane {
    struct predictor *now;
    bool met; /* every scored contraction so far */
};

/* A channel while it is counted. */
struct counter {
    struct plan *plan; /* NULL where only contractions are asked for */
    const struct plan_channel *channel;
    struct plan_channel *fill; /* NULL where only contractions are asked for */
    struct attempt_bench bench;
    struct lane lane;              /* the profile's muscle */
    struct lane *draw;             /* `draws` of them */
    double *draw_mean, *draw_peak; /* of the contraction at hand */
    unsigned draws;
    struct contraction_aim aim;
    bool asked; /* there is a demand to be met */
    uint64_t at_us;
    unsigned number, met, first_miss;
    struct plan_why miss;
    struct contraction miss_settings;
    struct plan_contraction *list; /* NULL: not wanted */
    double cap_edge_n;             /* greatest upper edge of the peak */
};

static size_t pulses_needed(const struct plan_channel *channel)
{
    size_t most = 16;
    for (size_t b = 0; b < channel->blocks; b++) {
        const struct contraction *one = &channel->block[b].settings;
        const size_t need =
            one->gaps_ms
                ? one->gaps + 1
                : attempt_pulses_max(one->ramp_up.ms + one->hold_ms + one->ramp_down.ms, one->frequency_pps);
        if (need > most) most = need;
    }
    return most;
}

static void counter_close(struct counter *counter)
{
    attempt_bench_close(&counter->bench);
    predictor_free(counter->lane.now);
    for (unsigned d = 0; d < counter->draws && counter->draw; d++) predictor_free(counter->draw[d].now);
    free(counter->draw);
    free(counter->draw_mean);
    free(counter->draw_peak);
    counter->draw = NULL;
}

static enum status open_draws(struct counter *counter, const struct profile_muscle *muscle,
                              const struct plan_options *options, struct message *why)
{
    const unsigned draws = options->ensemble;
    struct muscle_parameters *parameters = calloc(draws, sizeof *parameters);
    counter->draw = calloc(draws, sizeof *counter->draw);
    counter->draw_mean = calloc(draws, sizeof *counter->draw_mean);
    counter->draw_peak = calloc(draws, sizeof *counter->draw_peak);
    enum status status = parameters && counter->draw && counter->draw_mean && counter->draw_peak
                             ? ensemble_draw(muscle, draws, options->seed, parameters, why)
                             : status_fail(why, STATUS_INTERNAL, "out of memory");
    counter->draws = counter->draw ? draws : 0;
    for (unsigned d = 0; d < draws && status == STATUS_OK; d++) {
        counter->draw[d] = (struct lane){predictor_new(&parameters[d], false, NULL, why), true};
        if (!counter->draw[d].now) status = STATUS_REFUSED;
    }
    free(parameters);
    return status;
}

static enum status counter_open(struct counter *counter, const struct plan *plan,
                                const struct plan_channel *channel, const struct profile_muscle *muscle,
                                bool exact, const struct plan_options *options, struct message *why)
{
    counter->channel = channel;
    counter->asked = channel->demand.contractions > 0;
    counter->aim = contraction_aim_of(&channel->demand, channel->target_n, channel->force_cap_n);
    counter->at_us = plan_us_up(channel->start_ms);
    counter->bench.space.recruitment = channel->recruitment;
    counter->bench.space.grid = stimulator_grid(&plan->stimulator);
    counter->bench.limits = channel->limits;
    counter->bench.channel = (uint8_t)channel->channel;
    counter->bench.target_n = counter->asked ? channel->target_n : (double)NAN;
    counter->bench.tolerance_percent = counter->asked ? channel->demand.tolerance_percent : 5.0;
    enum status status =
        attempt_bench_open(&counter->bench, &muscle->parameters, pulses_needed(channel), exact, why);
    if (status != STATUS_OK) return status;
    counter->lane = (struct lane){predictor_new(&muscle->parameters, exact, NULL, why), true};
    if (!counter->lane.now) status = STATUS_REFUSED;
    if (status == STATUS_OK && options && options->ensemble > 0 && ensemble_known(muscle))
        status = open_draws(counter, muscle, options, why);
    if (status != STATUS_OK) counter_close(counter);
    return status;
}

/* One lane through what is compiled; the lane then stands at the last pulse. */
static enum status lane_step(struct counter *counter, struct lane *lane, const struct contraction *settings,
                             struct attempt_result *result, struct message *why)
{
    const enum status status =
        attempt_run(&counter->bench, settings, lane->now, (double)counter->at_us / 1000.0, result, why);
    struct predictor *after = counter->bench.after;
    counter->bench.after = lane->now;
    lane->now = after;
    return status;
}

/* The draws through the contraction at hand: their means and peaks, and whether each meets the demand. */
static enum status step_draws(struct counter *counter, const struct contraction *settings, bool scored,
                              struct message *why)
{
    for (unsigned d = 0; d < counter->draws; d++) {
        struct attempt_result result;
        const enum status status = lane_step(counter, &counter->draw[d], settings, &result, why);
        if (status != STATUS_OK) return status;
        counter->draw_mean[d] = result.hold.mean_n;
        counter->draw_peak[d] = result.hold.greatest_n;
        if (scored && contraction_miss(&counter->aim, &result.hold, 0.0).reason != WHY_NONE)
            counter->draw[d].met = false;
    }
    return STATUS_OK;
}

static double worse(double a, double b)
{
    return isnan(b) || b > a ? b : a; /* what never settles is the worst */
}

/* A contraction's figures into its block's. `which`: 0 is the block's first. */
static void note_block(struct plan_recount *recount, const struct hold_measures *hold, unsigned which)
{
    if (which == 0) {
        recount->mean_n_first = recount->mean_n_low = recount->mean_n_high = hold->mean_n;
        recount->peak_n = hold->peak_n;
        recount->ripple_percent = hold->ripple_percent;
        recount->droop_percent = hold->droop_percent;
        recount->rise_ms = hold->rise_ms;
        recount->overshoot_percent = hold->overshoot_percent;
    }
    recount->mean_n_last = hold->mean_n;
    recount->mean_n_low = fmin(recount->mean_n_low, hold->mean_n);
    recount->mean_n_high = fmax(recount->mean_n_high, hold->mean_n);
    recount->peak_n = fmax(recount->peak_n, hold->peak_n);
    recount->ripple_percent = worse(recount->ripple_percent, hold->ripple_percent);
    if (fabs(hold->droop_percent) > fabs(recount->droop_percent))
        recount->droop_percent = hold->droop_percent;
    if (!isnan(recount->rise_ms)) recount->rise_ms = worse(recount->rise_ms, hold->rise_ms);
    recount->overshoot_percent = worse(recount->overshoot_percent, hold->overshoot_percent);
}

static enum status count_contraction(struct counter *counter, size_t b, unsigned which, struct message *why)
{
    const struct plan_block *block = &counter->channel->block[b];
    const bool scored = counter->asked && !block->warm_up;
    struct attempt_result result;
    enum status status = lane_step(counter, &counter->lane, &block->settings, &result, why);
    if (status == STATUS_OK) status = step_draws(counter, &block->settings, scored, why);
    if (status != STATUS_OK) return status;
    const double edge =
        counter->draws ? ensemble_quantile(counter->draw_peak, counter->draws, 0.95) : result.hold.greatest_n;
    counter->cap_edge_n = fmax(counter->cap_edge_n, fmax(edge, result.hold.greatest_n));
    struct plan_why miss = plan_why_make(WHY_NONE, 0.0, 0.0, "");
    if (counter->asked) {
        struct hold_measures against = result.hold;
        against.greatest_n = fmax(
            edge, result.hold.greatest_n); /* a cap is held at the ensemble's upper edge, not at its middle */
        miss = contraction_miss(&counter->aim, &against, 0.0);
        if (!scored && miss.reason != WHY_FORCE_CAP) miss = plan_why_make(WHY_NONE, 0.0, 0.0, "");
    }
    counter->number++;
    if (miss.reason != WHY_NONE && counter->first_miss == 0) {
        counter->first_miss = counter->number;
        counter->miss = miss;
        counter->miss_settings = block->settings;
    }
    if (scored && counter->first_miss == 0) counter->met++;
    if (counter->fill) {
        struct plan_recount *recount = &counter->fill->block[b].recount;
        note_block(recount, &result.hold, which);
        if (which == 0) {
            recount->band_5_n = ensemble_quantile(counter->draw_mean, counter->draws, 0.05);
            recount->band_95_n = ensemble_quantile(counter->draw_mean, counter->draws, 0.95);
        }
        recount->capacity = predictor_capacity(counter->lane.now);
        recount->remaining_20 = predictor_force_remaining(counter->lane.now, 20.0);
        recount->remaining_50 = predictor_force_remaining(counter->lane.now, 50.0);
    }
    if (counter->list)
        counter->list[counter->number - 1] =
            (struct plan_contraction){.number = counter->number,
                                      .block = b,
                                      .warm_up = block->warm_up,
                                      .start_ms = (double)counter->at_us / 1000.0,
                                      .ramp_up_ms = counter->bench.compiled.ramp_up_ms,
                                      .hold_ms = block->settings.hold_ms,
                                      .hold = result.hold,
                                      .capacity = predictor_capacity(counter->lane.now),
                                      .potentiation = predictor_potentiation(counter->lane.now),
                                      .remaining_20 = predictor_force_remaining(counter->lane.now, 20.0),
                                      .remaining_50 = predictor_force_remaining(counter->lane.now, 50.0),
                                      .miss = miss};
    counter->at_us += result.last_us + plan_us_up(block->settings.rest_ms);
    return STATUS_OK;
}

static enum status count_channel(struct counter *counter, const struct plan_options *options,
                                 struct message *why)
{
    const struct plan_channel *channel = counter->channel;
    enum status status = STATUS_OK;
    for (size_t b = 0; b < channel->blocks && status == STATUS_OK; b++) {
        struct contraction settings = channel->block[b].settings;
        status = attempt_compile(&counter->bench, &settings, true, why);
        if (status == STATUS_OK && counter->bench.compiled.pulses == 0)
            status =
                status_fail(why, STATUS_REFUSED, "channel %u, block %zu gives no pulse on this stimulator",
                            channel->channel, b + 1);
        for (unsigned k = 0; k < channel->block[b].count && status == STATUS_OK; k++)
            status = count_contraction(counter, b, k, why);
        const double share = (double)(b + 1) / (double)channel->blocks;
        if (status == STATUS_OK && options && options->progress &&
            !options->progress(options->context, share, "recount"))
            status = status_fail(why, STATUS_REFUSED, "stopped");
    }
    return status;
}

/* A plan that ends before the demand does was ended by a limit: the guard says which, asked for one
 * contraction more. */
static struct plan_why why_it_ends(struct counter *counter, unsigned asked)
{
    const struct plan_channel *channel = counter->channel;
    struct dose_channel guard;
    dose_init(&guard);
    dose_session(&guard, 0, 0, 0);
    uint64_t at_us = plan_us_up(channel->start_ms);
    for (size_t b = 0; b < channel->blocks; b++) {
        struct contraction settings = channel->block[b].settings;
        struct message ignored;
        if (attempt_compile(&counter->bench, &settings, true, &ignored) != STATUS_OK) break;
        const unsigned more = b + 1 == channel->blocks ? 1 : 0;
        for (unsigned k = 0; k < channel->block[b].count + more; k++) {
            const struct dose_verdict verdict = attempt_guard(&counter->bench, at_us, &guard);
            if (verdict.figure != DOSE_NONE) return session_dose_why(&verdict);
            at_us += counter->bench.compiled.last_us + plan_us_up(settings.rest_ms);
        }
    }
    return plan_why_make(WHY_SESSION, (double)counter->number, (double)asked, "contractions");
}

/* Which limit binds where a contraction missed. Where settings stand at their end, it is what ends them: a
 * level hold would have needed more. */
static struct plan_why binding_of(const struct counter *counter, const struct profile_muscle *muscle)
{
    const struct plan_channel *channel = counter->channel;
    const struct contraction *at = &counter->miss_settings;
    const enum plan_why_reason miss = counter->miss.reason;
    if ((miss != WHY_RECRUITMENT_SPENT && miss != WHY_DROOP && miss != WHY_RISE) || !counter->asked)
        return counter->miss;
    const bool low = miss == WHY_RECRUITMENT_SPENT;
    if (low && counter->cap_edge_n > 0.97 * channel->force_cap_n)
        return plan_why_make(WHY_FORCE_CAP, counter->cap_edge_n, channel->force_cap_n, "N");
    struct settings_space space;
    struct message ignored;
    if (settings_space_make(&space, NULL, &channel->demand, channel, muscle, &counter->plan->stimulator,
                            &ignored) != STATUS_OK)
        return counter->miss;
    if (space.recruitment.law == RECRUITMENT_FULL)
        return low ? search_frequencies(&channel->demand, &counter->plan->stimulator, &channel->limits,
                                        at->pairs, at->opening)
                         .end
                   : counter->miss;
    settings_rate(&space, at->frequency_pps * (at->pairs ? 2.0 : 1.0) +
                              (at->opening > 1 ? (double)at->opening - 1.0 : 0.0));
    const double duration = fmax(at->duration_us, isnan(at->trim_duration_us) ? 0.0 : at->trim_duration_us);
    const double current =
        1000.0 * fmax(at->current_ma, isnan(at->trim_current_ma) ? 0.0 : at->trim_current_ma);
    const double most = settings_share(&space, (double)settings_duration_to(&space, space.strongest_ua, NULL),
                                       (double)space.strongest_ua);
    if (!low && settings_share(&space, duration, current) < most - 1e-3) return counter->miss;
    return settings_binding(&space, (uint32_t)lround(duration), (uint32_t)lround(current));
}

/* A channel's outcome into the plan's: sums over channels, the earliest first miss in channel order. */
static void gather_channel(struct plan *plan, struct counter *counter, const struct profile_muscle *muscle)
{
    const struct plan_channel *channel = counter->channel;
    const unsigned warm = counter->asked && muscle->parameters.has_potentiation ? channel->demand.warm_up : 0;
    const unsigned asked = counter->asked ? channel->demand.contractions : counter->number;
    if (!counter->asked) counter->met = counter->number;
    if (counter->first_miss == 0 && counter->asked && counter->number < asked + warm) {
        counter->first_miss = counter->number + 1;
        /* where not even the first fits, the planner has said why */
        counter->miss = channel->blocks ? why_it_ends(counter, asked + warm) : plan->first_miss_why;
    }
    plan->contractions_asked += asked;
    plan->contractions_met += counter->met;
    if (counter->first_miss != 0 && plan->first_miss == 0) {
        plan->first_miss = counter->first_miss;
        plan->first_miss_why = counter->miss;
        plan->binding = binding_of(counter, muscle);
    }
    counter->fill->force_edge_n = counter->cap_edge_n;
    plan->capacity_end = fmin(plan->capacity_end, predictor_capacity(counter->lane.now));
    plan->force_remaining_50_end =
        fmin(plan->force_remaining_50_end, predictor_force_remaining(counter->lane.now, 50.0));
    if (counter->draws == 0 || !counter->asked) return;
    unsigned met = 0;
    for (unsigned d = 0; d < counter->draws; d++) met += counter->draw[d].met ? 1 : 0;
    const double share =
        counter->first_miss && counter->number < asked + warm ? 0.0 : (double)met / counter->draws;
    plan->ensemble_met_share =
        isnan(plan->ensemble_met_share) ? share : fmin(plan->ensemble_met_share, share);
}

static enum status make_ledger(struct plan *plan, struct message *why)
{
    struct ledger_channel channels[STIMULATOR_CHANNELS_MAX];
    if (plan->channels > STIMULATOR_CHANNELS_MAX)
        return status_fail(why, STATUS_REFUSED, "%zu channels, at most %d", plan->channels,
                           (int)STIMULATOR_CHANNELS_MAX);
    plan_ledger_channels(plan, channels);
    struct segment *segments = NULL;
    size_t count = 0;
    enum status status = plan_segments(plan, &segments, &count, why);
    if (status != STATUS_OK) return status;
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    struct ledger ledger = {0};
    status = ledger_make(segments, count, &grid, channels, plan->channels, &ledger, why);
    free(segments);
    if (status != STATUS_OK) return status;
    ledger_free(&plan->ledger);
    plan->ledger = ledger;
    plan->charge_total_uc = ledger.charge_total_uc;
    return STATUS_OK;
}

/* A limit that the pulses break: a plan made here never does, one edited by hand may. */
static void bind_ledger(struct plan *plan)
{
    for (size_t i = 0; i < plan->ledger.figures && !plan->ledger.within; i++) {
        const struct ledger_figure *figure = &plan->ledger.figure[i];
        if (!(figure->share > 1.0)) continue;
        const struct dose_verdict verdict = {.figure = figure->figure};
        plan->binding = plan_why_make(session_dose_why(&verdict).reason, figure->value, figure->limit,
                                      dose_figure_unit(figure->figure));
        return;
    }
}

enum status plan_recount(struct plan *plan, const struct profile *profile, const struct plan_options *options,
                         struct message *why)
{
    plan->contractions_asked = plan->contractions_met = plan->first_miss = 0;
    plan->capacity_end = plan->force_remaining_50_end = (double)INFINITY;
    plan->ensemble_met_share = (double)NAN;
    enum status status = STATUS_OK;
    for (size_t c = 0; c < plan->channels && status == STATUS_OK; c++) {
        const struct profile_muscle *muscle = profile_muscle(profile, plan->channel[c].muscle, why);
        if (!muscle) return STATUS_REFUSED;
        struct counter counter = {.plan = plan, .fill = &plan->channel[c]};
        status = counter_open(&counter, plan, &plan->channel[c], muscle, true, options, why);
        if (status != STATUS_OK) return status;
        status = count_channel(&counter, options, why);
        if (status == STATUS_OK) gather_channel(plan, &counter, muscle);
        counter_close(&counter);
    }
    if (status == STATUS_OK) status = make_ledger(plan, why);
    if (status != STATUS_OK) return status;
    plan->feasible =
        plan->first_miss == 0 && plan->ledger.within && plan->contractions_met == plan->contractions_asked;
    if (plan->first_miss == 0) {
        plan->first_miss_why = plan_why_make(WHY_NONE, 0.0, 0.0, "");
        plan->binding = plan_why_make(WHY_NONE, 0.0, 0.0, "");
    }
    bind_ledger(plan);
    plan_verdict(plan);
    return STATUS_OK;
}

enum status plan_contractions(const struct plan *plan, size_t channel, const struct profile *profile,
                              bool exact, struct plan_contraction **contraction, size_t *count,
                              struct message *why)
{
    const struct plan_channel *one = &plan->channel[channel];
    const struct profile_muscle *muscle = profile_muscle(profile, one->muscle, why);
    if (!muscle) return STATUS_REFUSED;
    size_t total = 0;
    for (size_t b = 0; b < one->blocks; b++) total += one->block[b].count;
    struct counter counter = {.list = calloc(total ? total : 1, sizeof *counter.list)};
    if (!counter.list) return status_fail(why, STATUS_INTERNAL, "out of memory");
    enum status status = counter_open(&counter, plan, one, muscle, exact, NULL, why);
    if (status == STATUS_OK) {
        status = count_channel(&counter, NULL, why);
        counter_close(&counter);
    }
    if (status != STATUS_OK) {
        free(counter.list);
        return status;
    }
    *contraction = counter.list;
    *count = total;
    return STATUS_OK;
}

/* How a reason reads after "then". */
static const char *plain(enum plan_why_reason reason)
{
    switch (reason) {
    case WHY_CURRENT_RANGE: return "the current limit";
    case WHY_DURATION_RANGE: return "the duration limit";
    case WHY_FREQUENCY_RANGE: return "the frequency limit";
    case WHY_COMFORT: return "the comfort limit";
    case WHY_CHARGE_LIMIT: return "the charge limit";
    case WHY_RMS_LIMIT: return "the r.m.s. limit";
    case WHY_RATE_LIMIT: return "the rate limit";
    case WHY_SLEW_LIMIT: return "the slew limit";
    case WHY_FORCE_CAP: return "the force cap";
    case WHY_DUTY: return "the duty limit";
    case WHY_ON_TIME: return "the on-time limit";
    case WHY_SESSION: return "the session limit";
    case WHY_GAP: return "the gap limit";
    case WHY_RIPPLE: return "the ripple";
    case WHY_DROOP: return "the droop";
    case WHY_RISE: return "the rise";
    case WHY_OVERSHOOT: return "the overshoot";
    default: return plan_why_text(reason);
    }
}

void plan_verdict(struct plan *plan)
{
    const unsigned asked = plan->contractions_asked, met = plan->contractions_met;
    if (!(plan->channels > 0 && plan->channel[0].demand.contractions > 0))
        (void)snprintf(plan->verdict, sizeof plan->verdict, "A train of %u contraction%s; %s", asked,
                       asked == 1 ? "" : "s",
                       plan->ledger.within ? "within every limit" : plain(plan->binding.reason));
    else if (plan->feasible)
        (void)snprintf(plan->verdict, sizeof plan->verdict, "Makes %u of %u", met, asked);
    else
        (void)snprintf(plan->verdict, sizeof plan->verdict, "Makes %u of %u; then %s", met, asked,
                       plain(plan->binding.reason));
}
