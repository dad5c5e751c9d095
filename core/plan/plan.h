/* Plan: demand -> plan. Iso-force search, ramps, trim, adaptation, then the recount from the final pulses. */
#ifndef PULSEWRIGHT_CORE_PLAN_PLAN_H
#define PULSEWRIGHT_CORE_PLAN_PLAN_H
#include "core/document/demand.h"
#include "core/document/hookup.h"
#include "core/document/plan_document.h"
#include "core/document/profile.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"

struct plan_options {
    unsigned ensemble; /* draws, 64; 0: none */
    uint64_t seed;
    bool (*progress)(void *context, double share, const char *what); /* false: stop. NULL: none */
    void *context;
    struct date today; /* year 0: unknown (no age warnings) */
    double *seconds;   /* NULL, or where the caller's clock stands; core reads none */
};

/* Makes a plan. STATUS_OK: met in full. STATUS_REFUSED with plan->channels > 0: written all the same, it says
 * what fails first. STATUS_REFUSED with plan->channels == 0: nothing could be made (why says it). hookup may
 * be NULL (channel 1). Free with plan_free. */
enum status plan_make(const struct profile *profile, const struct demand *demand,
                      const struct stimulator *stimulator, const struct hookup *hookup,
                      const struct plan_options *options, struct plan *plan, struct message *why);
/* Several muscles, a demand each (each with its own start_ms). Channels that share a return, and all channels
 * of a stimulator that gives one pulse at a time, take one common period, a slot each. Otherwise as
 * plan_make. */
enum status plan_make_group(const struct profile *profile, const struct demand *demands, size_t count,
                            const struct stimulator *stimulator, const struct hookup *hookup,
                            const struct plan_options *options, struct plan *plan, struct message *why);
/* Every figure anew from the plan's blocks as they stand. */
enum status plan_recount(struct plan *plan, const struct profile *profile, const struct plan_options *options,
                         struct message *why);
/* All segments of a plan, sorted by start; *segments is malloc'ed. */
enum status plan_segments(const struct plan *plan, struct segment **segments, size_t *count,
                          struct message *why);
/* Time of a contraction's first pulse from T0, on the channel of this index. */
enum status plan_contraction_start_us(const struct plan *plan, size_t channel, unsigned number, uint64_t *start_us, struct message *why);
/* The limits of a plan's channel, tightened to what stimulator and program allow. */
struct dose_limits plan_channel_limits(const struct plan *plan, size_t channel);
/* The dose of a plan, made anew from its pulses under those limits. Free with ledger_free. */
enum status plan_ledger(const struct plan *plan, struct ledger *ledger, struct message *why);
/* A train compiled for a stimulator as a plan with one channel (no demand, no target), so that it can be
 * checked, signed and streamed. */
enum status plan_of_train(const struct train *train, const struct profile *profile, const char *muscle,
                          const struct stimulator *stimulator, const struct hookup *hookup,
                          const struct plan_options *options, struct plan *plan, struct message *why);

#endif
