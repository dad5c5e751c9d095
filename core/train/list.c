/* Contractions one after another. The goal of this code: repeats and rests are laid out once, for prediction,
 * fit and the pulse file. rest_ms runs from the last pulse given to the next first pulse given, in whole
 * microseconds. */
#include "core/train/contraction.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Pulses being laid out. */
struct layout {
    struct train_pulse *pulses;
    bool *same_period;
    size_t count, capacity, most;
    struct segment *segments; /* scratch */
    size_t segment_capacity;
};

static enum status make_room(struct layout *layout, size_t more, struct message *why)
{
    const size_t needed = layout->count + more;
    if (needed > layout->most)
        return status_fail(why, STATUS_REFUSED, "a train has more than %zu pulses", layout->most);
    if (needed <= layout->capacity) return STATUS_OK;
    const size_t capacity = needed > 2 * layout->capacity ? needed : 2 * layout->capacity;
    struct train_pulse *pulses = realloc(layout->pulses, capacity * sizeof *pulses);
    if (pulses) layout->pulses = pulses;
    bool *same = realloc(layout->same_period, capacity * sizeof *same);
    if (same) layout->same_period = same;
    if (!pulses || !same) return status_fail(why, STATUS_INTERNAL, "out of memory for %zu pulses", capacity);
    layout->capacity = capacity;
    return STATUS_OK;
}

/* Marks the pulses from `first` on that share the period of the one before, given single pulses of the first
 * and of other periods. */
static void mark_periods(struct layout *layout, size_t first, size_t opening, size_t each)
{
    for (size_t i = first, next = first; i < layout->count; i++) {
        layout->same_period[i] = i != next;
        if (i == next) next += i == first ? opening : each;
    }
}

static enum status add_exact(struct layout *layout, const struct contraction *contraction,
                             const struct recruitment *recruitment, struct message *why)
{
    size_t needed = 0;
    enum status status = contraction_pulses(contraction, recruitment, NULL, 0, &needed, why);
    if (needed == 0) return status;
    status = make_room(layout, needed, why);
    if (status != STATUS_OK) return status;
    const size_t first = layout->count, each = contraction->pairs ? 2 : 1;
    status = contraction_pulses(contraction, recruitment, layout->pulses + first, needed, &needed, why);
    if (status != STATUS_OK) return status;
    layout->count += needed;
    mark_periods(layout, first,
                 contraction->gaps             ? 1
                 : contraction->opening > each ? contraction->opening
                                               : each,
                 contraction->gaps ? 1 : each);
    return STATUS_OK;
}

static enum status add_segment_pulses(struct layout *layout, const struct segment *segment,
                                      const struct train_grid *grid, struct message *why)
{
    struct segment_cursor cursor;
    struct pulse pulse;
    const enum status status = make_room(layout, segment->count, why);
    if (status != STATUS_OK) return status;
    segment_begin(&cursor, segment, grid);
    uint32_t period = 0;
    while (segment_next(&cursor, &pulse)) {
        while (period + 1 < segment_periods(segment) &&
               segment_period_start(segment, period + 1) <= pulse.at_us)
            period++;
        layout->same_period[layout->count] = pulse.at_us != segment_period_start(segment, period);
        layout->pulses[layout->count++] = (struct train_pulse){.time_ms = (double)pulse.at_us / 1000,
                                                               .duration_us = pulse.duration_us,
                                                               .current_ma = pulse.current_ua / 1000.0};
    }
    return STATUS_OK;
}

static enum status add_compiled(struct layout *layout, const struct contraction *contraction,
                                const struct recruitment *recruitment, const struct train_grid *grid,
                                struct message *why)
{
    struct contraction copy = *contraction;
    const size_t needed = contraction->gaps ? contraction->gaps + 1 : (size_t)CONTRACTION_SEGMENTS_MAX;
    enum status status = contraction_compile_ramps(&copy, recruitment, grid, why);
    if (status != STATUS_OK) return status;
    if (needed > layout->segment_capacity) {
        struct segment *segments = realloc(layout->segments, needed * sizeof *segments);
        if (!segments) return status_fail(why, STATUS_INTERNAL, "out of memory");
        layout->segments = segments;
        layout->segment_capacity = needed;
    }
    size_t count = 0;
    uint64_t last_us;
    status = contraction_segments(&copy, grid, 0, 1, layout->segments, needed, &count, &last_us, why);
    for (size_t i = 0; i < count && status == STATUS_OK; i++)
        status = add_segment_pulses(layout, &layout->segments[i], grid, why);
    return status;
}

/* Copies the pulses first .. end - 1 `repeat` - 1 times behind themselves, each after a rest. Times of the
 * first copy are from 0. */
static enum status repeat_pulses(struct layout *layout, size_t first, const struct contraction *contraction,
                                 uint64_t start_us, uint64_t *next_us, struct message *why)
{
    const size_t each = layout->count - first;
    const unsigned repeat = contraction->repeat > 0 ? contraction->repeat : 1;
    if (each > layout->most / repeat)
        return status_fail(why, STATUS_REFUSED, "a train has more than %zu pulses", layout->most);
    const enum status status = make_room(layout, each * (repeat - 1), why);
    if (status != STATUS_OK) return status;
    const uint64_t length_us = (uint64_t)llround(1000 * layout->pulses[layout->count - 1].time_ms);
    const uint64_t cycle_us = length_us + (uint64_t)llround(1000 * contraction->rest_ms);
    for (unsigned n = repeat; n-- > 0;) { /* from the last copy: the first one, at 0, is read by all */
        const uint64_t at_us = start_us + n * cycle_us;
        for (size_t i = 0; i < each; i++) {
            struct train_pulse pulse = layout->pulses[first + i];
            pulse.time_ms = (double)(at_us + (uint64_t)llround(1000 * pulse.time_ms)) / 1000;
            layout->pulses[first + n * each + i] = pulse;
            layout->same_period[first + n * each + i] = layout->same_period[first + i];
        }
    }
    layout->count = first + repeat * each;
    *next_us = start_us + repeat * cycle_us;
    return STATUS_OK;
}

/* The first contraction's hold, on the time of its first pulse given. */
static enum status first_hold(const struct contraction *contraction, const struct recruitment *recruitment,
                              const struct train_grid *grid, double hold_ms[2], struct message *why)
{
    struct contraction copy = *contraction;
    hold_ms[0] = hold_ms[1] = (double)NAN;
    if (contraction->gaps || !(contraction->hold_ms > 0)) return STATUS_OK;
    const enum status status = grid ? contraction_compile_ramps(&copy, recruitment, grid, why) : STATUS_OK;
    if (status != STATUS_OK) return status;
    hold_ms[0] = copy.ramp_up.ms - contraction_skipped_ms(&copy, grid);
    hold_ms[1] = hold_ms[0] + copy.hold_ms;
    return STATUS_OK;
}

enum status contraction_list_pulses(const struct contraction *list, size_t contractions,
                                    const struct recruitment *recruitment, const struct train_grid *grid,
                                    size_t pulses_max, struct train_pulse **pulses, bool **same_period,
                                    size_t *count, double hold_ms[2], struct message *why)
{
    struct layout layout = {.most = pulses_max};
    uint64_t next_us = 0;
    enum status status = STATUS_OK;
    *pulses = NULL;
    *count = 0;
    if (same_period) *same_period = NULL;
    for (size_t i = 0; i < contractions && status == STATUS_OK; i++) {
        const size_t first = layout.count;
        status = grid ? add_compiled(&layout, &list[i], recruitment, grid, why)
                      : add_exact(&layout, &list[i], recruitment, why);
        if (status == STATUS_OK) status = repeat_pulses(&layout, first, &list[i], next_us, &next_us, why);
    }
    if (status == STATUS_OK && hold_ms && contractions > 0)
        status = first_hold(&list[0], recruitment, grid, hold_ms, why);
    free(layout.segments);
    if (status != STATUS_OK) {
        free(layout.pulses);
        free(layout.same_period);
        return status;
    }
    *pulses = layout.pulses;
    *count = layout.count;
    if (same_period)
        *same_period = layout.same_period;
    else
        free(layout.same_period);
    return STATUS_OK;
}
