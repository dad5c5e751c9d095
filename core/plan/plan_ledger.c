/* A plan's dose. The goal of this code: the ledger comes from the pulses the plan stands for, played through
 * the device's guard, never from the document's own copy; limits that a document states are never weaker than
 * the device's and the program's. */
#include "core/plan/channel.h"
#include "core/plan/plan.h"

#include <stdlib.h>

struct dose_limits plan_channel_limits(const struct plan *plan, size_t channel)
{
    const struct dose_device device = stimulator_dose_device(&plan->stimulator);
    const char *source[DOSE_FIGURES];
    struct dose_limits outer;
    limits_effective(&device, NULL, &outer, source);
    outer.slew_memory_ms = dose_program_limits().slew_memory_ms; /* a person's, not a device's */
    return dose_stricter(&plan->channel[channel].limits, &outer);
}

enum status plan_ledger(const struct plan *plan, struct ledger *ledger, struct message *why)
{
    struct ledger_channel channels[STIMULATOR_CHANNELS_MAX];
    struct segment *segments = NULL;
    size_t count = 0;
    if (plan->channels == 0 || plan->channels > STIMULATOR_CHANNELS_MAX)
        return status_fail(why, STATUS_DOCUMENT, "channels: holds %zu, it may hold 1 to %d", plan->channels,
                           (int)STIMULATOR_CHANNELS_MAX);
    plan_ledger_channels(plan, channels);
    for (size_t c = 0; c < plan->channels; c++) channels[c].limits = plan_channel_limits(plan, c);
    enum status status = plan_segments(plan, &segments, &count, why);
    if (status != STATUS_OK) return status;
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    status = ledger_make(segments, count, &grid, channels, plan->channels, ledger, why);
    free(segments);
    return status;
}
