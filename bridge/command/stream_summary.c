/* What a streaming came to. The goal of this code: planned and delivered side by side, in words and for
 * machines. */
#include "bridge/command/stream.h"
#include "core/report/json.h"

#include <math.h>
#include <stdio.h>

/* Pulses of the image on a channel from the first segment that was played, by the one expansion. */
static uint64_t planned_pulses(const struct stream *stream, unsigned channel)
{
    const struct train_grid grid = stimulator_grid(&stream->plan->stimulator);
    uint64_t count = 0;
    for (uint32_t i = stream->first - 1; i + 1 < stream->image.n; i++) {
        struct segment_cursor cursor;
        struct pulse pulse;
        if (stream->image.segments[i].segment.channel != channel) continue;
        segment_begin(&cursor, &stream->image.segments[i].segment, &grid);
        while (segment_next(&cursor, &pulse)) count++;
    }
    return count;
}

static void summary_json(const struct stream *stream, const struct host *host)
{
    struct json json;
    json_begin(&json, stdout);
    json_text(&json, "end", host_phase_text(host_phase(host)));
    json_text(&json, "why", host_end_text(host));
    json_bool(&json, "output_known_zero", host_output_known_zero(host));
    json_bool(&json, "exact", host_totals_exact(host));
    json_array(&json, "channels");
    for (unsigned i = 0; i < stream->image.header.channels; i++) {
        const unsigned channel = stream->image.header.channel[i];
        const struct host_totals totals = host_totals(host, channel);
        json_object(&json, NULL);
        json_number(&json, "channel", channel);
        json_number(&json, "planned", (double)planned_pulses(stream, channel));
        json_number(&json, "delivered", totals.pulses);
        json_number(&json, "skipped", totals.skipped);
        json_number(&json, "charge_uc", (double)totals.charge_pc / 1e6);
        json_object_end(&json);
    }
    json_array_end(&json);
    json_number(&json, "peak_n", stream->force_known ? stream->peak_n : (double)NAN);
    json_number(&json, "round_trip_ms", host_round_trip_ms(host));
    json_number(&json, "clock_uncertainty_ms", host_clock_uncertainty_ms(host));
    json_number(&json, "retries", host_retries(host));
    json_end(&json);
}

void stream_summary(const struct stream *stream, const struct host *host)
{
    if (argument_given(stream->arguments, "--json")) {
        summary_json(stream, host);
        return;
    }
    printf("%s: %s\n", host_phase_text(host_phase(host)), host_end_text(host));
    for (unsigned i = 0; i < stream->image.header.channels; i++) {
        const unsigned channel = stream->image.header.channel[i];
        const struct host_totals totals = host_totals(host, channel);
        printf("channel %u: %lu of %llu pulses given%s, %lu skipped, %.1f uC\n", channel,
               (unsigned long)totals.pulses, (unsigned long long)planned_pulses(stream, channel),
               host_totals_exact(host) ? "" : " at least", (unsigned long)totals.skipped,
               (double)totals.charge_pc / 1e6);
    }
    if (stream->force_known) printf("greatest force measured: %.1f N\n", stream->peak_n);
    printf("line: round trip %.1f ms, %u frames asked again, clocks known to %.1f ms\n",
           host_round_trip_ms(host), host_retries(host), host_clock_uncertainty_ms(host));
    if (!host_output_known_zero(host)) printf("OUTPUT IS UNKNOWN: use the hardware stop\n");
}
