/* From recruitment to settings. The goal of this code: every pair of duration and current that the planner
 * may use is on the stimulator's grid and inside every limit before any force is computed, and the rule that
 * picks among them is written down once. Laws: Weiss 1901 / Lapicque 1909 and Ding et al. 2007 through
 * core/muscle; the rule for current and duration is this project's. */
#include "core/plan/settings.h"
#include "core/muscle/recruitment.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

enum { PRACTICE_DURATION_US = 300 }; /* 200-500 us is practice (read, J Neuroeng Rehabil 2021 review) */

struct plan_why plan_why_make(enum plan_why_reason reason, double value, double limit, const char *unit)
{
    struct plan_why why = {.reason = reason, .value = value, .limit = limit};
    (void)snprintf(why.unit, sizeof why.unit, "%s", unit);
    return why;
}

static uint32_t grid_up(double value, uint32_t from, uint32_t step)
{
    if (value <= (double)from) return from;
    if (step == 0) return (uint32_t)ceil(value);
    return from + (uint32_t)ceil((value - (double)from) / (double)step - 1e-9) * step;
}

static uint32_t grid_down(double value, uint32_t from, uint32_t step)
{
    if (value < (double)from) return 0;
    if (step == 0) return (uint32_t)floor(value + 1e-9);
    return from + (uint32_t)floor((value - (double)from) / (double)step + 1e-9) * step;
}

/* The lower of a bound and a further limit, with its reason. */
static void lower(struct settings_bound *bound, double value, enum plan_why_reason reason)
{
    if (!isfinite(value) || value >= (double)bound->value) return;
    bound->value = value > 0.0 ? (uint32_t)floor(value + 1e-9) : 0;
    bound->reason = reason;
}

static bool is_fixed(const struct range *range)
{
    return isfinite(range->from) && range->from == range->to;
}

/* A knob that is not varied: fixed by the demand, else chosen once. */
static enum status fix_duration(struct settings_space *space, const struct demand *demand,
                                const struct profile_muscle *muscle, struct message *why)
{
    double value = muscle->has_found ? muscle->found.duration_us : (double)PRACTICE_DURATION_US;
    if (is_fixed(&demand->duration_us)) value = demand->duration_us.from;
    if (value > (double)space->duration_to.value && !is_fixed(&demand->duration_us))
        value = (double)space->duration_to.value;
    const uint32_t on_grid = grid_down(value, space->grid.duration_from_us, space->grid.duration_step_us);
    if (on_grid < space->duration_from_us || on_grid > space->duration_to.value)
        return status_fail(why, STATUS_REFUSED, "duration_us %g is not allowed here: %u to %u us are left",
                           value, space->duration_from_us, space->duration_to.value);
    space->duration_from_us = on_grid;
    if (on_grid < space->duration_to.value)
        space->duration_to = (struct settings_bound){on_grid, WHY_DURATION_RANGE};
    return STATUS_OK;
}

static enum status check_law(const struct demand *demand, const struct profile_muscle *muscle,
                             struct message *why)
{
    const enum recruitment_law law = muscle->parameters.recruitment.law;
    const unsigned all = VARY_FREQUENCY | VARY_DURATION | VARY_CURRENT;
    if (law == RECRUITMENT_FULL && demand->vary != all && (demand->vary & (VARY_DURATION | VARY_CURRENT)))
        return status_fail(why, STATUS_REFUSED,
                           "vary: [%s] can not be: the recruitment law of %s is `full`, recruitment can not "
                           "be varied; only frequency "
                           "and opening may",
                           demand->vary & VARY_DURATION ? "duration" : "current", muscle->name);
    if (law == RECRUITMENT_DURATION_EXPONENTIAL && demand->vary != all && (demand->vary & VARY_CURRENT))
        return status_fail(why, STATUS_REFUSED,
                           "vary: [current] can not be: the recruitment law of %s holds at %g mA only",
                           muscle->name, muscle->parameters.recruitment.current_ma);
    return STATUS_OK;
}

/* The law's own current, or the one the demand fixes. */
static enum status fix_current(struct settings_space *space, double current_ma, const char *whose,
                               struct message *why)
{
    const uint32_t value = (uint32_t)lround(current_ma * 1000.0);
    const uint32_t on_grid =
        grid_down((double)value, space->grid.current_from_ua, space->grid.current_step_ua);
    if (on_grid != value)
        return status_fail(why, STATUS_REFUSED, "%s current of %g mA is not on the stimulator's steps", whose,
                           current_ma);
    if (value < space->current_from_ua || value > space->current_to.value)
        return status_fail(why, STATUS_REFUSED,
                           "%s current of %g mA is not allowed here: %g to %g mA are left", whose, current_ma,
                           (double)space->current_from_ua / 1000.0, (double)space->current_to.value / 1000.0);
    space->current_from_ua = value;
    if (value < space->current_to.value)
        space->current_to = (struct settings_bound){value, WHY_CURRENT_RANGE};
    return STATUS_OK;
}

static void bound_space(struct settings_space *space, const struct demand *demand,
                        const struct plan_channel *channel, const struct profile_muscle *muscle,
                        const struct stimulator *stimulator)
{
    const struct dose_limits *limits = &channel->limits;
    space->current_to = (struct settings_bound){limits->current_ua, WHY_CURRENT_RANGE};
    space->duration_to = (struct settings_bound){limits->duration_us, WHY_DURATION_RANGE};
    space->charge_to = (struct settings_bound){limits->charge_pc, WHY_CHARGE_LIMIT};
    lower(&space->current_to, stimulator->current_ma.to * 1000.0, WHY_CURRENT_RANGE);
    lower(&space->current_to, demand->current_ma.to * 1000.0, WHY_CURRENT_RANGE);
    lower(&space->duration_to, stimulator->duration_us.to, WHY_DURATION_RANGE);
    lower(&space->duration_to, demand->duration_us.to, WHY_DURATION_RANGE);
    if (limits->load_ohm > 0)
        lower(&space->current_to, floor((double)limits->voltage_mv * 1000.0 / (double)limits->load_ohm),
              WHY_CURRENT_RANGE);
    if (muscle->has_found) {
        lower(&space->current_to, muscle->found.comfort_ma * 1000.0, WHY_COMFORT);
        lower(&space->charge_to, muscle->found.comfort_ma * muscle->found.duration_us * 1000.0, WHY_COMFORT);
    }
    const struct train_grid *grid = &space->grid;
    space->current_to.value =
        grid_down((double)space->current_to.value, grid->current_from_ua, grid->current_step_ua);
    space->duration_to.value =
        grid_down((double)space->duration_to.value, grid->duration_from_us, grid->duration_step_us);
    const double least_ma = isfinite(demand->current_ma.from) ? demand->current_ma.from : 0.0;
    const double least_us = isfinite(demand->duration_us.from) ? demand->duration_us.from : 0.0;
    space->current_from_ua =
        grid_up(fmax(least_ma * 1000.0, 1.0), grid->current_from_ua, grid->current_step_ua);
    space->duration_from_us = grid_up(fmax(least_us, 1.0), grid->duration_from_us, grid->duration_step_us);
    space->rms_ua = limits->rms_ua;
    space->net_dc_na = limits->net_dc_na;
    space->mismatch_ppm = limits->mismatch_ppm;
}

/* With `full` any pulse recruits all, so the model can not choose the settings: they are the demand's, else
 * what was comfortable. */
static enum status fix_full(struct settings_space *space, const struct demand *demand,
                            const struct profile_muscle *muscle, struct message *why)
{
    if (!muscle->has_found && !(is_fixed(&demand->current_ma) && is_fixed(&demand->duration_us)))
        return status_fail(why, STATUS_REFUSED,
                           "the recruitment law of %s is `full`, which says nothing about strength: give "
                           "current_ma: and duration_us: in "
                           "the demand, or found: in the profile",
                           muscle->name);
    const double wanted_ma =
        is_fixed(&demand->current_ma) ? demand->current_ma.from : muscle->found.comfort_ma;
    const double capped_ma = fmin(wanted_ma, (double)space->current_to.value / 1000.0);
    const uint32_t on_grid =
        grid_down(capped_ma * 1000.0, space->grid.current_from_ua, space->grid.current_step_ua);
    const enum status status = fix_current(
        space, is_fixed(&demand->current_ma) ? wanted_ma : (double)on_grid / 1000.0, "the demand's", why);
    return status == STATUS_OK ? fix_duration(space, demand, muscle, why) : status;
}

static enum status choose_knob(struct settings_space *space, const struct demand *demand,
                               const struct profile_muscle *muscle, struct message *why)
{
    const enum recruitment_law law = space->recruitment.law;
    enum status status = STATUS_OK;
    space->knob = KNOB_NONE;
    if (law == RECRUITMENT_FULL) return fix_full(space, demand, muscle, why);
    const bool duration = (demand->vary & VARY_DURATION) && !is_fixed(&demand->duration_us);
    const bool current = (demand->vary & VARY_CURRENT) && !is_fixed(&demand->current_ma) &&
                         law == RECRUITMENT_STRENGTH_DURATION;
    if (duration)
        space->knob = KNOB_DURATION;
    else if (current)
        space->knob = KNOB_CURRENT;
    space->steps_current = duration && current;
    if (is_fixed(&demand->current_ma))
        status = fix_current(space, demand->current_ma.from, "the demand's", why);
    if (status == STATUS_OK && law == RECRUITMENT_DURATION_EXPONENTIAL)
        status = fix_current(space, space->recruitment.current_ma, "the recruitment law's", why);
    if (status == STATUS_OK && !duration) status = fix_duration(space, demand, muscle, why);
    const bool open_current = space->current_from_ua < space->current_to.value;
    space->choose_current = space->knob == KNOB_NONE && open_current;
    space->choose_cover = space->knob == KNOB_DURATION && !space->steps_current && open_current;
    return status;
}

enum status settings_space_make(struct settings_space *space, struct settings_space *whole,
                                const struct demand *demand, const struct plan_channel *channel,
                                const struct profile_muscle *muscle, const struct stimulator *stimulator,
                                struct message *why)
{
    *space = (struct settings_space){.recruitment = muscle->parameters.recruitment,
                                     .grid = stimulator_grid(stimulator),
                                     .greatest_current = demand->prefer == PREFER_CHARGE};
    enum status status = check_law(demand, muscle, why);
    if (status != STATUS_OK) return status;
    bound_space(space, demand, channel, muscle, stimulator);
    if (space->current_to.value < space->current_from_ua || space->current_to.value == 0)
        return status_fail(why, STATUS_REFUSED,
                           "no current is left for %s: at least %g mA, at most %g mA (%s)", muscle->name,
                           (double)space->current_from_ua / 1000.0, (double)space->current_to.value / 1000.0,
                           plan_why_text(space->current_to.reason));
    if (space->duration_to.value < space->duration_from_us || space->duration_to.value == 0)
        return status_fail(why, STATUS_REFUSED,
                           "no phase duration is left for %s: at least %u us, at most %u us", muscle->name,
                           space->duration_from_us, space->duration_to.value);
    status = choose_knob(space, demand, muscle, why);
    if (status != STATUS_OK) return status;
    settings_rate(space, 1.0);
    if (whole) *whole = *space;
    if (space->choose_cover)
        settings_fix_current(space, space->strongest_ua); /* the most reach; lowered once the need is known */
    if (settings_duration_to(space, space->strongest_ua, NULL) == 0)
        return status_fail(why, STATUS_REFUSED,
                           "no settings are left for %s: the charge of the least pulse is above %g uC (%s)",
                           muscle->name, (double)space->charge_to.value / 1e6,
                           plan_why_text(space->charge_to.reason));
    return STATUS_OK;
}

double settings_share(const struct settings_space *space, double duration_us, double current_ua)
{
    return recruitment_of(&space->recruitment, duration_us, current_ua / 1000.0);
}

/* Longest duration that r.m.s. allows: n 2 I^2 d <= L^2 s. The guard counts a recovery phase as the first
 * one, which bounds it. */
static double rms_duration_us(const struct settings_space *space, double current_ua)
{
    return (double)space->rms_ua * (double)space->rms_ua * 1e6 /
           (2.0 * space->pulses_per_s * current_ua * current_ua);
}

/* Charge that the net direct current allows at this rate: mismatch x charge x rate. */
static double net_dc_charge_pc(const struct settings_space *space)
{
    if (space->mismatch_ppm == 0) return (double)INFINITY;
    return (double)space->net_dc_na * 1e9 / ((double)space->mismatch_ppm * space->pulses_per_s);
}

uint32_t settings_duration_to(const struct settings_space *space, uint32_t current_ua, struct plan_why *bound)
{
    const double current = (double)current_ua;
    double to = (double)space->duration_to.value;
    struct plan_why what = plan_why_make(space->duration_to.reason, to, to, "us");
    const double by_charge = (double)space->charge_to.value / current;
    if (by_charge < to) {
        to = by_charge;
        what = plan_why_make(space->charge_to.reason, by_charge * current / 1e6,
                             (double)space->charge_to.value / 1e6, "uC");
    }
    const double by_rms = rms_duration_us(space, current);
    if (by_rms < to) {
        to = by_rms;
        what = plan_why_make(WHY_RMS_LIMIT, (double)space->rms_ua / 1000.0, (double)space->rms_ua / 1000.0,
                             "mA");
    }
    const double dc_charge = net_dc_charge_pc(space);
    if (dc_charge / current < to) {
        to = dc_charge / current;
        what = plan_why_make(WHY_CHARGE_LIMIT, dc_charge / 1e6, dc_charge / 1e6, "uC");
    }
    if (bound) *bound = what;
    const uint32_t on_grid = grid_down(to, space->grid.duration_from_us, space->grid.duration_step_us);
    return on_grid < space->duration_from_us ? 0 : on_grid;
}

uint32_t settings_current_to(const struct settings_space *space, uint32_t duration_us, struct plan_why *bound)
{
    const uint32_t step = space->grid.current_step_ua ? space->grid.current_step_ua : 1;
    const double to = (double)space->current_to.value;
    if (bound) *bound = plan_why_make(space->current_to.reason, to / 1000.0, to / 1000.0, "mA");
    uint32_t current = space->current_to.value;
    while (current >= space->current_from_ua && current > 0) {
        struct plan_why by;
        if (settings_duration_to(space, current, &by) >= duration_us) return current;
        if (bound) *bound = by;
        if (current < step) break;
        current -= step;
    }
    return 0;
}

void settings_rate(struct settings_space *space, double pulses_per_s)
{
    space->pulses_per_s = pulses_per_s;
    const uint32_t step = space->grid.current_step_ua ? space->grid.current_step_ua : 1000;
    double best = -1.0;
    space->strongest_ua = space->current_from_ua;
    for (uint32_t current = space->current_from_ua; current <= space->current_to.value; current += step) {
        const uint32_t duration = settings_duration_to(space, current, NULL);
        if (duration == 0) continue;
        const double share = settings_share(space, (double)duration, (double)current);
        if (share > best) {
            best = share;
            space->strongest_ua = current;
        }
    }
}

void settings_fix_current(struct settings_space *space, uint32_t current_ua)
{
    space->current_from_ua = current_ua;
    space->strongest_ua = current_ua;
    if (current_ua < space->current_to.value)
        space->current_to = (struct settings_bound){current_ua, WHY_CURRENT_RANGE};
}

uint32_t settings_current_for(const struct settings_space *space, double least, double most)
{
    const uint32_t step = space->grid.current_step_ua ? space->grid.current_step_ua : 1000;
    uint32_t chosen = 0;
    for (uint32_t current = space->current_from_ua; current <= space->current_to.value; current += step) {
        const uint32_t duration = settings_duration_to(space, current, NULL);
        if (duration == 0 || settings_share(space, (double)duration, (double)current) < most) continue;
        if (!space->greatest_current) return current;
        if (settings_share(space, (double)space->duration_from_us, (double)current) <= least || chosen == 0)
            chosen = current;
    }
    return chosen ? chosen : space->strongest_ua;
}

struct plan_why settings_binding(const struct settings_space *space, uint32_t duration_us,
                                 uint32_t current_ua)
{
    struct plan_why by_duration, by_current;
    (void)settings_duration_to(space, current_ua, &by_duration);
    (void)settings_current_to(space, duration_us, &by_current);
    if (space->recruitment.law == RECRUITMENT_FULL) return plan_why_make(WHY_RECRUITMENT_SPENT, 1.0, 1.0, "");
    if (space->knob == KNOB_DURATION && !space->steps_current) return by_duration;
    if (by_duration.reason == WHY_COMFORT || by_duration.reason == WHY_CHARGE_LIMIT ||
        by_duration.reason == WHY_RMS_LIMIT)
        return by_duration;
    return by_current;
}

double settings_inverse(const struct settings_space *space, double share, double other, double from,
                        double to)
{
    const bool current = space->knob == KNOB_CURRENT;
    const double value = current ? recruitment_current_ma(&space->recruitment, share, other) * 1000.0
                                 : recruitment_duration_us(&space->recruitment, share, other / 1000.0);
    if (isnan(value)) return to; /* beyond what this setting reaches */
    return fmin(fmax(value, from), to);
}
