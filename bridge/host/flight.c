/* What the line did: the last frames, and how long it takes. The goal of this code: a fault can be read
 * afterwards, and retries suit the line. Retry timer: RFC 6298 with Karn's rule (no sample from a repeated
 * request). */
#include "bridge/host/flight.h"

#include "bridge/wire/message.h"
#include <math.h>

void flight_keep(struct flight *flight, bool out, uint64_t at_us, const struct frame *frame)
{
    const unsigned slot = flight->count[out]++ % FLIGHT_FRAMES;
    flight->kept[out][slot].at_us = at_us;
    flight->kept[out][slot].frame = *frame;
}

static void write_one(FILE *out, uint64_t at_us, bool to_device, const struct frame *frame)
{
    (void)fprintf(out, "%llu,%s,%s,%u,", (unsigned long long)at_us, to_device ? "out" : "in",
                  message_name(frame->type), frame->sequence);
    for (unsigned i = 0; i < frame->size; i++) (void)fprintf(out, "%02x", frame->payload[i]);
    (void)fputc('\n', out);
}

/* Both rings merged by time. */
void flight_write(const struct flight *flight, FILE *out)
{
    unsigned at[2];
    (void)fputs("time_us,direction,message,sequence,payload\n", out);
    for (int d = 0; d < 2; d++)
        at[d] = flight->count[d] > FLIGHT_FRAMES ? flight->count[d] - FLIGHT_FRAMES : 0;
    while (at[0] < flight->count[0] || at[1] < flight->count[1]) {
        int d = at[0] < flight->count[0] ? 0 : 1;
        if (d == 0 && at[1] < flight->count[1] &&
            flight->kept[1][at[1] % FLIGHT_FRAMES].at_us < flight->kept[0][at[0] % FLIGHT_FRAMES].at_us)
            d = 1;
        const unsigned slot = at[d]++ % FLIGHT_FRAMES;
        write_one(out, flight->kept[d][slot].at_us, d == 1, &flight->kept[d][slot].frame);
    }
}

void timing_round_trip(struct timing *timing, uint64_t taken_us)
{
    const double sample = (double)taken_us;
    if (!timing->any) {
        timing->smoothed_us = sample;
        timing->variation_us = sample / 2;
        timing->any = true;
        return;
    }
    timing->variation_us = 0.75 * timing->variation_us + 0.25 * fabs(timing->smoothed_us - sample);
    timing->smoothed_us = 0.875 * timing->smoothed_us + 0.125 * sample;
}

uint64_t timing_retry_us(const struct timing *timing, unsigned tries)
{
    double wait_us = timing->any ? timing->smoothed_us + fmax(1000, 4 * timing->variation_us) : 100000;
    wait_us = fmin(fmax(wait_us, 20000), 100000);
    for (unsigned i = 0; i < tries; i++) wait_us = fmin(2 * wait_us, 100000);
    return (uint64_t)wait_us;
}

/* The shortest round trip tells the distance best; after 30 s a newer one may replace it, since clocks drift.
 */
void timing_clock(struct timing *timing, uint64_t sent_us, uint64_t got_us, uint64_t device_us)
{
    const uint64_t taken_us = got_us - sent_us;
    const bool stale = got_us - timing->best_at_us > 30000000;
    if (timing->clock_known && !stale && taken_us > timing->best_us) return;
    timing->clock_known = true;
    timing->best_us = taken_us;
    timing->best_at_us = got_us;
    timing->offset_us = (int64_t)(device_us - (sent_us + taken_us / 2));
}
