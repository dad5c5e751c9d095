/* The one expansion of a segment into pulses. The goal of this code: predict, recount, ledger, sign-off and
 * the device see the same pulses to the microsecond and the step, because they all run these lines.
 * Freestanding: no heap, no floating point, no libc. Products fit: settings are below 2^32, counts below
 * 2^16, so from (n-1-k) + to k stays below 2^48. Method: this project's (house chapter, "Trains"). */
#include "core/train/segment.h"

#include <stddef.h>

_Static_assert(sizeof(((struct segment *)NULL)->count) == 2, "the products below rely on 16-bit counts");

/* Pulses that stand for the first period: the opening, or the first pair where that is longer. */
static uint32_t opening_pulses(const struct segment *segment)
{
    const uint32_t opening = segment->opening < 1 ? 1 : segment->opening > 3 ? 3 : segment->opening;
    return segment->pattern == SEGMENT_PAIRS && opening < 2 ? 2 : opening;
}

static uint32_t period_pulses(const struct segment *segment)
{
    return segment->pattern == SEGMENT_PAIRS ? 2 : 1;
}

uint32_t segment_value(uint32_t from, uint32_t to, uint32_t k, uint32_t n)
{
    if (n <= 1 || k == 0) return from;
    if (k >= n - 1) return to;
    return (uint32_t)(((uint64_t)from * (n - 1 - k) + (uint64_t)to * k) / (n - 1));
}

uint32_t segment_grid_value(uint32_t value, uint32_t from, uint32_t step)
{
    if (value < from) return 0;
    if (step == 0) return value;
    return from + (value - from) / step * step;
}

uint32_t segment_periods(const struct segment *segment)
{
    const uint32_t first = opening_pulses(segment), each = period_pulses(segment);
    if (segment->count == 0) return 0;
    if (segment->count <= first) return 1;
    return 1 + (segment->count - first + each - 1) / each; /* a pair cut short at the end still is a period */
}

/* The period runs from the opening's last pulse; from pair to pair where the opening is just the first pair.
 */
uint64_t segment_period_start(const struct segment *segment, uint32_t k)
{
    if (k == 0) return segment->start_us;
    const uint32_t first = opening_pulses(segment);
    const bool just_a_pair = segment->pattern == SEGMENT_PAIRS && first == 2;
    const uint64_t anchor = just_a_pair ? 0 : (uint64_t)(first - 1) * segment->opening_gap_us;
    return segment->start_us + anchor + (uint64_t)k * segment->period_us;
}

uint64_t segment_next_start(const struct segment *segment)
{
    return segment_period_start(segment, segment_periods(segment));
}

void segment_begin(struct segment_cursor *cursor, const struct segment *segment,
                   const struct train_grid *grid)
{
    cursor->segment = *segment;
    cursor->grid = *grid;
    cursor->given = 0;
}

/* Period and place within it of single pulse i. */
static void locate(const struct segment *segment, uint32_t i, uint32_t *period, uint32_t *place)
{
    const uint32_t first = opening_pulses(segment), each = period_pulses(segment);
    *period = i < first ? 0 : 1 + (i - first) / each;
    *place = i < first ? i : (i - first) % each;
}

bool segment_next(struct segment_cursor *cursor, struct pulse *pulse)
{
    const struct segment *segment = &cursor->segment;
    const struct train_grid *grid = &cursor->grid;
    const uint32_t periods = segment_periods(segment);
    while (cursor->given < segment->count) {
        uint32_t period, place;
        locate(segment, cursor->given++, &period, &place);
        const uint32_t duration = segment_grid_value(
            segment_value(segment->duration_from_us, segment->duration_to_us, period, periods),
            grid->duration_from_us, grid->duration_step_us);
        const uint32_t current = segment_grid_value(
            segment_value(segment->current_from_ua, segment->current_to_ua, period, periods),
            grid->current_from_ua, grid->current_step_ua);
        if (duration == 0 || current == 0) continue;
        pulse->at_us = segment_period_start(segment, period) + (uint64_t)place * segment->opening_gap_us;
        pulse->current_ua = current;
        pulse->duration_us = (uint16_t)duration;
        pulse->channel = segment->channel;
        pulse->opening_extra = period == 0 && place >= 1 && place < segment->opening;
        return true;
    }
    return false;
}
