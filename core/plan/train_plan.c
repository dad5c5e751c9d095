/* A train compiled for a stimulator as a plan with one channel: no demand, no target, no search. The goal of
 * this code: a train that a person wrote is checked, signed and streamed by the very path of a plan. What the
 * device can not give is refused by name; what it rounds is rounded down by the one expansion in core/train;
 * whether it is within limits is the ledger's to say. */
#include "core/plan/channel.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static enum status check_range(const char *what, size_t at, double value, const struct stepped *range,
                               const char *unit, struct message *why)
{
    if (!isfinite(value) || value <= range->to) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "contraction %zu: %s is %g %s, the stimulator gives at most %g",
                       at + 1, what, value, unit, range->to);
}

static enum status check_contraction(const struct contraction *one, size_t at,
                                     const struct stimulator *stimulator, struct message *why)
{
    enum status status =
        check_range("duration_us", at, one->duration_us, &stimulator->duration_us, "us", why);
    if (status == STATUS_OK)
        status = check_range("current_ma", at, one->current_ma, &stimulator->current_ma, "mA", why);
    if (status == STATUS_OK)
        status =
            check_range("trim duration_us", at, one->trim_duration_us, &stimulator->duration_us, "us", why);
    if (status == STATUS_OK)
        status = check_range("trim current_ma", at, one->trim_current_ma, &stimulator->current_ma, "mA", why);
    if (status == STATUS_OK && !one->gaps_ms)
        status = check_range("frequency_pps", at, one->frequency_pps, &stimulator->frequency_pps, "pps", why);
    return status;
}

static enum status fill_block(struct plan_block *block, const struct contraction *one,
                              const struct plan_channel *channel, const struct stimulator *stimulator,
                              struct message *why)
{
    block->settings = *one;
    block->settings.gaps_ms = NULL;
    block->count = one->repeat ? one->repeat : 1;
    block->settings.repeat = block->count;
    if (one->gaps_ms) {
        block->settings.gaps_ms = malloc(one->gaps * sizeof *one->gaps_ms);
        if (!block->settings.gaps_ms) return status_fail(why, STATUS_INTERNAL, "out of memory");
        memcpy(block->settings.gaps_ms, one->gaps_ms, one->gaps * sizeof *one->gaps_ms);
        return STATUS_OK;
    }
    const struct train_grid grid = stimulator_grid(stimulator);
    return contraction_compile_ramps(&block->settings, &channel->recruitment, &grid, why);
}

static enum status fill_blocks(struct plan *plan, const struct train *train,
                               const struct stimulator *stimulator, struct message *why)
{
    struct plan_channel *channel = &plan->channel[0];
    channel->block = calloc(train->contractions, sizeof *channel->block);
    if (!channel->block) return status_fail(why, STATUS_INTERNAL, "out of memory");
    unsigned first = 1;
    for (size_t i = 0; i < train->contractions; i++) {
        struct plan_block *block = &channel->block[i];
        channel->blocks = i + 1; /* so that plan_free sees what this block owns */
        enum status status = check_contraction(&train->contraction[i], i, stimulator, why);
        if (status == STATUS_OK) status = fill_block(block, &train->contraction[i], channel, stimulator, why);
        if (status != STATUS_OK) return status;
        block->first = first;
        first += block->count;
    }
    plan->contractions_asked = first - 1;
    return STATUS_OK;
}

enum status plan_of_train(const struct train *train, const struct profile *profile, const char *muscle,
                          const struct stimulator *stimulator, const struct hookup *hookup,
                          const struct plan_options *options, struct plan *plan, struct message *why)
{
    memset(plan, 0, sizeof *plan);
    const struct profile_muscle *found = profile_muscle(profile, muscle, why);
    if (!found) return STATUS_REFUSED;
    if (train->contractions == 0) return status_fail(why, STATUS_REFUSED, "the train has no contraction");
    enum status status = profile_muscle_usable(found, why);
    if (status != STATUS_OK) return status;
    status = plan_begin(plan, profile, stimulator, 1, why);
    if (status == STATUS_OK) status = plan_channel_begin(&plan->channel[0], found, stimulator, hookup, why);
    if (status == STATUS_OK) status = fill_blocks(plan, train, stimulator, why);
    if (status == STATUS_OK) {
        plan_note_profile(plan, found, options ? options->today : (struct date){0});
        status = plan_recount(plan, profile, options, why);
    }
    if (status != STATUS_OK) plan_free(plan);
    return status;
}
