/* Contractions: settings -> pulses. Compiles what a person writes (a rate, an opening, ramps, a hold, a trim) into segments
 * on a stimulator's steps, or into exact pulses where there is no stimulator. One grid from the first pulse, never restarted:
 * a pulse belongs to the ramp if t < ramp_up, to the hold if t < ramp_up + hold, else to the ramp down. */
#ifndef PULSEWRIGHT_CORE_TRAIN_CONTRACTION_H
#define PULSEWRIGHT_CORE_TRAIN_CONTRACTION_H
#include "core/muscle/parameters.h"
#include "core/status/status.h"
#include "core/train/segment.h"
#include <stddef.h>

enum ramp_shape { RAMP_LINEAR, RAMP_RAISED_COSINE, RAMP_EXPONENTIAL };
enum { RAMP_PIECES_MAX = 8, CONTRACTION_SEGMENTS_MAX = 2 * RAMP_PIECES_MAX + 2, CONTRACTION_GAPS_MAX = 4096 };

/* A straight piece of a ramp: `pulses` single pulses, settings from .. to (before rounding down to steps). */
struct ramp_piece {
    uint32_t pulses;
    uint32_t from_us, to_us;
    uint32_t from_ua, to_ua;
};

struct ramp {
    enum ramp_shape shape;
    double ms; /* 0: no ramp */
    /* compiled: */
    size_t pieces;
    struct ramp_piece piece[RAMP_PIECES_MAX];
};

/* One contraction as a train or a plan's block states it. */
struct contraction {
    double frequency_pps;  /* pairs a second in a train of pairs */
    unsigned opening;      /* 1 single, 2 doublet, 3 triplet */
    bool pairs;            /* pattern: doublets */
    double opening_gap_ms; /* 5 unless said */
    double duration_us, current_ma;           /* at the start of the hold */
    double trim_duration_us, trim_current_ma; /* at the hold's last pulse; NAN: no trim */
    struct ramp ramp_up, ramp_down;
    double hold_ms;
    double rest_ms; /* from the last pulse to the next first pulse */
    unsigned repeat; /* 1 or more */
    double *gaps_ms; /* free gaps: `gaps` gaps are gaps + 1 pulses; NULL in a regular contraction. Owned by the document. */
    size_t gaps;
};

/* A pulse with exact times and settings, as predict takes it. */
struct train_pulse {
    double time_ms, duration_us, current_ma;
};

/* u of ramp pulse i of n, i = 1..n: u0 = i/(n+1) through the shape. */
double ramp_value(enum ramp_shape shape, unsigned i, unsigned n);

/* period = ceil(10^6 / pps) us. */
uint32_t train_period_us(double frequency_pps);

/* Periods of a regular contraction on its grid (the opening counts as one, a pair as one), and where period k starts. */
struct contraction_periods {
    uint32_t ramp_up, hold, ramp_down;
};
struct contraction_periods contraction_count(const struct contraction *contraction);
double contraction_period_start_ms(const struct contraction *contraction, uint32_t k);
/* How long the grid runs before the first pulse given, in ms: the beginning of a ramp that is below the stimulator's `from` gives no
 * pulse and the contraction starts at the first pulse given, so its hold runs from ramp_up.ms - this. 0 with no stimulator (grid NULL).
 * Of a compiled contraction. */
double contraction_skipped_ms(const struct contraction *contraction, const struct train_grid *grid);

/* Exact pulses of one contraction (no stimulator: settings unrounded, ramps by their formula), the first at 0 ms.
 * `pulses` holds `capacity`; *count is what is needed, also where it is more than capacity (then STATUS_REFUSED). */
enum status contraction_pulses(const struct contraction *contraction, const struct recruitment *recruitment,
                               struct train_pulse *pulses, size_t capacity, size_t *count, struct message *why);

/* Compiles both ramps into their straight pieces (at most RAMP_PIECES_MAX each), written into `contraction`. */
enum status contraction_compile_ramps(struct contraction *contraction, const struct recruitment *recruitment,
                                      const struct train_grid *grid, struct message *why);

/* Pulses of many contractions one after another (each repeated, rest_ms from its last pulse to the next first one), the first at 0 ms.
 * grid NULL: exact, else compiled on the grid (the contractions' ramps are compiled here, on copies). *pulses is malloc'ed; *same_period
 * too (same_period may be NULL): a pulse belongs to the period of the one before it. hold_ms: the first contraction's hold, from and to
 * (NAN for free gaps); may be NULL. More than pulses_max is refused. */
enum status contraction_list_pulses(const struct contraction *list, size_t contractions, const struct recruitment *recruitment,
                                    const struct train_grid *grid, size_t pulses_max, struct train_pulse **pulses,
                                    bool **same_period, size_t *count, double hold_ms[2], struct message *why);

/* Segments of one regular contraction from its pieces; start_us is the first pulse given. Regular: at most CONTRACTION_SEGMENTS_MAX,
 * free gaps: at most gaps + 1. *last_pulse_us is the time of the last pulse given (rest runs from there). */
enum status contraction_segments(const struct contraction *contraction, const struct train_grid *grid, uint64_t start_us,
                                 uint8_t channel, struct segment *segments, size_t capacity, size_t *count,
                                 uint64_t *last_pulse_us, struct message *why);

#endif
