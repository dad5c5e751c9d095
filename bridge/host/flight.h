/* Flight recorder: the last frames each way. Private to bridge/host. */
#ifndef PULSEWRIGHT_BRIDGE_HOST_FLIGHT_H
#define PULSEWRIGHT_BRIDGE_HOST_FLIGHT_H
#include "bridge/wire/frame.h"
#include <stdbool.h>
#include <stdio.h>

enum { FLIGHT_FRAMES = 256 };
struct flight {
    struct {
        uint64_t at_us;
        struct frame frame;
    } kept[2][FLIGHT_FRAMES]; /* 0: in, 1: out */
    unsigned count[2];
};
void flight_keep(struct flight *flight, bool out, uint64_t at_us, const struct frame *frame);
void flight_write(const struct flight *flight, FILE *out);

/* Round trips: RFC 6298's estimator, bounded 20 to 100 ms (this link's), and the clocks' distance from the
 * shortest of them. */
struct timing {
    bool any;
    double smoothed_us, variation_us;
    bool clock_known;
    int64_t offset_us; /* device clock minus host clock */
    uint64_t best_us;  /* round trip it was found with */
    uint64_t best_at_us;
};
void timing_round_trip(struct timing *timing, uint64_t taken_us);
uint64_t timing_retry_us(const struct timing *timing, unsigned tries);
void timing_clock(struct timing *timing, uint64_t sent_us, uint64_t got_us, uint64_t device_us);

#endif
