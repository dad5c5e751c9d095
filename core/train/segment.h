/* A segment: up to 65,535 pulses of one rate whose settings run straight from one value to another.
 * The one expansion of a segment into pulses, used by predict, recount, pulses, ledger, sign-off and the device.
 * Freestanding: C17, no heap, no floating point; time in us, current in uA. */
#ifndef PULSEWRIGHT_CORE_TRAIN_SEGMENT_H
#define PULSEWRIGHT_CORE_TRAIN_SEGMENT_H
#include <stdbool.h>
#include <stdint.h>

enum segment_pattern { SEGMENT_SINGLES = 0, SEGMENT_PAIRS = 1 };

/* One pulse as the device gives it: biphasic, `duration_us` the first phase, `current_ua` the peak of one phase. */
struct pulse {
    uint64_t at_us; /* from T0 */
    uint32_t current_ua;
    uint16_t duration_us;
    uint8_t channel;
    bool opening_extra; /* the second or third pulse of an opening: not counted by the rate limit */
};

struct segment {
    uint64_t start_us; /* of the first pulse, from T0 */
    uint32_t period_us;
    uint32_t current_from_ua, current_to_ua;
    uint16_t count; /* single pulses, those of the opening included */
    uint16_t opening_gap_us; /* also the gap inside a pair */
    uint16_t duration_from_us, duration_to_us;
    uint8_t channel;
    uint8_t pattern; /* enum segment_pattern */
    uint8_t opening; /* 1 to 3 pulses at the start, opening_gap_us apart, the period runs from the last */
};

/* The stimulator's steps: a value is from + n step; what lies between is rounded down, what is below `from` is no pulse. */
struct train_grid {
    uint32_t current_from_ua, current_step_ua;
    uint16_t duration_from_us, duration_step_us;
};

/* Where an expansion stands. Plain data: may be copied. */
struct segment_cursor {
    struct segment segment;
    struct train_grid grid;
    uint32_t given; /* single pulses passed so far, skipped ones included */
};

/* floor((from (n-1-k) + to k)/(n-1)) for k of n; n = 1 gives `from`. */
uint32_t segment_value(uint32_t from, uint32_t to, uint32_t k, uint32_t n);
/* A value down to the grid; 0 where it is below `from`. A step of 0 rounds nothing. */
uint32_t segment_grid_value(uint32_t value, uint32_t from, uint32_t step);
/* Periods in a segment: the opening counts as one, a pair as one. */
uint32_t segment_periods(const struct segment *segment);
/* Start of period k from T0 (k = 0: the opening). */
uint64_t segment_period_start(const struct segment *segment, uint32_t k);
/* The moment one period after the last period's start: where the next segment of the same grid begins. */
uint64_t segment_next_start(const struct segment *segment);
void segment_begin(struct segment_cursor *cursor, const struct segment *segment, const struct train_grid *grid);
/* Gives the next pulse that is given at all (skipping those below `from`); false at the end. */
bool segment_next(struct segment_cursor *cursor, struct pulse *pulse);

#endif
