/* A plan's blocks -> all its segments, in order of time. The goal of this code: recount, ledger, `pulses`,
 * sign-off and device all start from this one list, so none of them sees other pulses than the others. A
 * block is compiled once; its repeats are the same segments later in time. Rests run from the last pulse
 * given to the next first pulse (design: Quantities). */
#include "core/plan/channel.h"

#include <stdlib.h>
#include <string.h>

enum { PLAN_SEGMENTS_MAX = 1 << 20 };

static size_t block_capacity(const struct contraction *settings)
{
    return settings->gaps_ms ? settings->gaps + 1 : (size_t)CONTRACTION_SEGMENTS_MAX;
}

/* One channel's walk through its blocks: counts segments where `segments` is NULL, else writes them. */
static enum status channel_segments(const struct plan_channel *channel, const struct train_grid *grid,
                                    struct segment *scratch, size_t scratch_size, struct segment *segments,
                                    size_t *count, struct message *why)
{
    uint64_t at_us = plan_us_up(channel->start_ms);
    for (size_t b = 0; b < channel->blocks; b++) {
        const struct plan_block *block = &channel->block[b];
        size_t some = 0;
        uint64_t last_us = 0;
        const enum status status =
            contraction_segments(&block->settings, grid, at_us, (uint8_t)channel->channel, scratch,
                                 scratch_size, &some, &last_us, why);
        if (status != STATUS_OK) return status;
        if (some == 0)
            return status_fail(
                why, STATUS_REFUSED,
                "channel %u, block %zu: its settings lie below the stimulator's range: no pulse",
                channel->channel, b + 1);
        if (block->count > PLAN_SEGMENTS_MAX / some || *count > PLAN_SEGMENTS_MAX - some * block->count)
            return status_fail(why, STATUS_REFUSED, "channel %u, block %zu: more than %d segments in all",
                               channel->channel, b + 1, (int)PLAN_SEGMENTS_MAX);
        const uint64_t stride_us = last_us - at_us + plan_us_up(block->settings.rest_ms);
        for (unsigned k = 0; k < block->count && segments; k++)
            for (size_t i = 0; i < some; i++) {
                struct segment *to = &segments[*count + (size_t)k * some + i];
                *to = scratch[i];
                to->start_us += stride_us * k;
            }
        *count += some * block->count;
        at_us += stride_us * block->count;
    }
    return STATUS_OK;
}

static int by_start(const void *a, const void *b)
{
    const struct segment *left = a, *right = b;
    if (left->start_us != right->start_us) return left->start_us < right->start_us ? -1 : 1;
    return (int)left->channel - (int)right->channel;
}

enum status plan_segments(const struct plan *plan, struct segment **segments, size_t *count,
                          struct message *why)
{
    *segments = NULL;
    *count = 0;
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    size_t scratch_size = 1;
    for (size_t c = 0; c < plan->channels; c++)
        for (size_t b = 0; b < plan->channel[c].blocks; b++) {
            const size_t need = block_capacity(&plan->channel[c].block[b].settings);
            if (need > scratch_size) scratch_size = need;
        }
    struct segment *scratch = calloc(scratch_size, sizeof *scratch);
    if (!scratch) return status_fail(why, STATUS_INTERNAL, "out of memory");
    enum status status = STATUS_OK;
    size_t total = 0;
    for (size_t c = 0; c < plan->channels && status == STATUS_OK; c++)
        status = channel_segments(&plan->channel[c], &grid, scratch, scratch_size, NULL, &total, why);
    struct segment *all = status == STATUS_OK ? calloc(total ? total : 1, sizeof *all) : NULL;
    if (status == STATUS_OK && !all) status = status_fail(why, STATUS_INTERNAL, "out of memory");
    size_t filled = 0;
    for (size_t c = 0; c < plan->channels && status == STATUS_OK; c++)
        status = channel_segments(&plan->channel[c], &grid, scratch, scratch_size, all, &filled, why);
    free(scratch);
    if (status != STATUS_OK) {
        free(all);
        return status;
    }
    qsort(all, filled, sizeof *all, by_start);
    *segments = all;
    *count = filled;
    return STATUS_OK;
}

enum status plan_contraction_start_us(const struct plan *plan, size_t channel, unsigned number, uint64_t *start_us, struct message *why)
{
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    const struct plan_channel *of = &plan->channel[channel];
    uint64_t at_us = plan_us_up(of->start_ms);
    for (size_t b = 0; b < of->blocks; b++) {
        const struct plan_block *block = &of->block[b];
        const size_t capacity = block_capacity(&block->settings);
        struct segment *scratch = calloc(capacity, sizeof *scratch);
        size_t some = 0;
        uint64_t last_us = 0;
        if (!scratch) return status_fail(why, STATUS_INTERNAL, "out of memory");
        const enum status status = contraction_segments(&block->settings, &grid, at_us, (uint8_t)of->channel, scratch, capacity, &some, &last_us, why);
        free(scratch);
        if (status != STATUS_OK) return status;
        const uint64_t stride_us = last_us - at_us + plan_us_up(block->settings.rest_ms);
        if (number >= block->first && number < block->first + block->count) {
            *start_us = at_us + stride_us * (number - block->first);
            return STATUS_OK;
        }
        at_us += stride_us * block->count;
    }
    return status_fail(why, STATUS_USAGE, "the plan has no contraction %u", number);
}
