/* A plan's head and channels as they start. The goal of this code: a planned demand and a compiled train
 * carry the same limits, pads and identity, filled in one place. Source of the limits: core/dose/limits.h
 * (the strictest of stimulator, person and program). */
#include "core/plan/channel.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { PROFILE_AGE_DAYS_MAX = 14 }; /* this project's choice (design: Profile) */

uint64_t plan_us_up(double ms)
{
    return ms > 0.0 ? (uint64_t)ceil(ms * 1000.0 - 1e-6) : 0;
}

enum status plan_begin(struct plan *plan, const struct profile *profile, const struct stimulator *stimulator,
                       size_t channels, struct message *why)
{
    memset(plan, 0, sizeof *plan);
    plan->channel = calloc(channels ? channels : 1, sizeof *plan->channel);
    if (!plan->channel) return status_fail(why, STATUS_INTERNAL, "out of memory");
    (void)snprintf(plan->person, sizeof plan->person, "%s", profile->person);
    (void)snprintf(plan->program, sizeof plan->program, "pulsewright %s", PULSEWRIGHT_VERSION);
    plan->stimulator = *stimulator;
    plan->channels = channels;
    plan->target_n = (double)NAN;
    plan->ensemble_met_share = (double)NAN;
    plan->would_work.largest_target_n = (double)NAN;
    plan->would_work.longest_hold_ms = (double)NAN;
    return STATUS_OK;
}

static enum status find_channel(struct plan_channel *channel, const char *muscle,
                                const struct stimulator *stimulator, const struct hookup *hookup,
                                struct message *why)
{
    channel->channel = 1;
    if (!hookup) return STATUS_OK;
    for (size_t i = 0; i < hookup->channels; i++) {
        const struct hookup_channel *one = &hookup->channel[i];
        if (strcmp(one->muscle, muscle) != 0) continue;
        if (one->channel > stimulator->channels)
            return status_fail(why, STATUS_REFUSED, "the hookup puts %s on channel %u; %s has %u channels",
                               muscle, one->channel, stimulator->name, stimulator->channels);
        channel->channel = one->channel;
        (void)snprintf(channel->side, sizeof channel->side, "%s", one->side);
        if (isfinite(one->pad_cm2)) channel->pad_cm2 = one->pad_cm2;
        channel->return_pad_cm2 = one->return_pad_cm2;
        return STATUS_OK;
    }
    return status_fail(why, STATUS_REFUSED, "the hookup has no channel for muscle %s", muscle);
}

enum status plan_channel_begin(struct plan_channel *channel, const struct profile_muscle *muscle,
                               const struct stimulator *stimulator, const struct hookup *hookup,
                               struct message *why)
{
    (void)snprintf(channel->muscle, sizeof channel->muscle, "%s", muscle->name);
    channel->pad_cm2 = muscle->electrode_area_cm2;
    channel->return_pad_cm2 = (double)NAN;
    const enum status status = find_channel(channel, muscle->name, stimulator, hookup, why);
    if (status != STATUS_OK) return status;
    const struct dose_device device = stimulator_dose_device(stimulator);
    limits_effective(&device, muscle->has_limits ? &muscle->limits : NULL, &channel->limits,
                     channel->limit_source);
    channel->recruitment = muscle->parameters.recruitment;
    channel->force_cap_n = muscle->has_limits ? muscle->limits.force_n : (double)NAN;
    channel->comfort_ma = muscle->has_found ? muscle->found.comfort_ma : (double)NAN;
    channel->target_n = (double)NAN;
    return STATUS_OK;
}

void plan_note(struct plan *plan, const char *format, ...)
{
    if (plan->notes == PLAN_NOTES_MAX) return;
    va_list list;
    va_start(list, format);
    (void)vsnprintf(plan->note[plan->notes], sizeof plan->note[0], format, list);
    va_end(list);
    for (size_t i = 0; i < plan->notes; i++)
        if (strcmp(plan->note[i], plan->note[plan->notes]) == 0) return;
    plan->notes++;
}

void plan_note_profile(struct plan *plan, const struct profile_muscle *muscle, struct date today)
{
    if (today.year != 0 && muscle->has_measured && muscle->measured.on.year != 0) {
        const long age = date_days(today) - date_days(muscle->measured.on);
        if (age > PROFILE_AGE_DAYS_MAX)
            plan_note(plan,
                      "%s was measured %ld days ago (more than %d): pads, skin and muscle may have changed",
                      muscle->name, age, (int)PROFILE_AGE_DAYS_MAX);
        if (age < 0) plan_note(plan, "%s is dated after today", muscle->name);
    }
    if (muscle->has_found && !muscle->found.as_train)
        plan_note(plan,
                  "comfort of %s was found with single pulses: a comfortable twitch is not a comfortable "
                  "train; the first "
                  "contraction starts at strength 0 and is raised by hand",
                  muscle->name);
    if (!muscle->has_found) plan_note(plan, "no comfort limit was found for %s", muscle->name);
    if (!muscle->has_limits)
        plan_note(plan, "no personal limits are set for %s: the program's ceilings hold", muscle->name);
    (void)snprintf(plan->as_found, sizeof plan->as_found, "%s",
                   muscle->has_found ? (muscle->found.as_train ? "train" : "single") : "");
}

void plan_ledger_channels(const struct plan *plan, struct ledger_channel *to)
{
    for (size_t c = 0; c < plan->channels; c++) {
        const struct plan_channel *from = &plan->channel[c];
        to[c].channel = from->channel;
        to[c].limits = from->limits;
        memcpy(to[c].source, from->limit_source, sizeof to[c].source);
        to[c].pad_cm2 = from->pad_cm2;
        to[c].return_pad_cm2 = from->return_pad_cm2;
    }
}
