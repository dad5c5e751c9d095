/* A plan's pulses as a table. The goal of this code: exports list the pulses by the same expansion that the
 * device runs. */
#include "bridge/command/plan_pulses.h"

#include "core/plan/plan.h"
#include <stdlib.h>

/* All pulses of a plan, as a table with channels. */
enum status export_plan_pulses(const struct plan *plan, struct pulses_table *table, struct message *why)
{
    struct segment *segments = NULL;
    size_t count = 0, room = 0;
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    const enum status status = plan_segments(plan, &segments, &count, why);
    if (status != STATUS_OK) return status;
    for (size_t i = 0; i < count; i++) room += segments[i].count;
    *table = (struct pulses_table){.pulse = calloc(room + 1, sizeof *table->pulse),
                                   .channel = calloc(room + 1, sizeof *table->channel)};
    for (size_t i = 0; table->pulse && table->channel && i < count; i++) {
        struct segment_cursor cursor;
        struct pulse pulse;
        segment_begin(&cursor, &segments[i], &grid);
        while (segment_next(&cursor, &pulse)) {
            table->channel[table->pulses] = pulse.channel;
            table->pulse[table->pulses++] = (struct train_pulse){(double)pulse.at_us / 1e3, pulse.duration_us,
                                                                 (double)pulse.current_ua / 1e3};
        }
    }
    free(segments);
    if (table->pulse && table->channel) return STATUS_OK;
    pulses_free(table);
    return status_fail(why, STATUS_INTERNAL, "no memory");
}

/* Channels under way at once interleave: by time, then by channel. */
struct row {
    struct train_pulse pulse;
    unsigned channel;
};
static int by_time(const void *a, const void *b)
{
    const struct row *left = a, *right = b;
    if (left->pulse.time_ms < right->pulse.time_ms) return -1;
    if (left->pulse.time_ms > right->pulse.time_ms) return 1;
    return (int)left->channel - (int)right->channel;
}

enum status export_sort(struct pulses_table *table, struct message *why)
{
    struct row *rows = calloc(table->pulses + 1, sizeof *rows);
    if (!rows) return status_fail(why, STATUS_INTERNAL, "no memory");
    for (size_t i = 0; i < table->pulses; i++) rows[i] = (struct row){table->pulse[i], table->channel[i]};
    qsort(rows, table->pulses, sizeof *rows, by_time);
    for (size_t i = 0; i < table->pulses; i++) {
        table->pulse[i] = rows[i].pulse;
        table->channel[i] = rows[i].channel;
    }
    free(rows);
    return STATUS_OK;
}
