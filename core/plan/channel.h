/* A plan's channel as it starts: who is driven, through which pads, under which limits. Shared by the planner
 * and the train compiler. */
#ifndef PULSEWRIGHT_CORE_PLAN_CHANNEL_H
#define PULSEWRIGHT_CORE_PLAN_CHANNEL_H
#include "core/plan/plan.h"

/* Fills the plan's head: person, program, stimulator, today's notes. Allocates `channels` zeroed channels
 * (plan_free). */
enum status plan_begin(struct plan *plan, const struct profile *profile, const struct stimulator *stimulator,
                       size_t channels, struct message *why);
/* Fills a channel for a muscle: its number, side and pads from the hookup (channel 1 where there is none),
 * its effective limits. */
enum status plan_channel_begin(struct plan_channel *channel, const struct profile_muscle *muscle,
                               const struct stimulator *stimulator, const struct hookup *hookup,
                               struct message *why);
/* Adds one line for a person; lines beyond PLAN_NOTES_MAX are dropped. */
__attribute__((format(printf, 2, 3))) void plan_note(struct plan *plan, const char *format, ...);
/* Notes on the profile's age and on what `found` is. */
void plan_note_profile(struct plan *plan, const struct profile_muscle *muscle, struct date today);
/* The guard's view of the channels, for ledger_make; `to` holds one entry a channel. */
void plan_ledger_channels(const struct plan *plan, struct ledger_channel *to);

/* Milliseconds up to whole microseconds. */
uint64_t plan_us_up(double ms);

#endif
