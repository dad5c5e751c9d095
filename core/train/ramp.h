/* Ramps: the settings of each ramp pulse, and the straight pieces that stand for them on a stimulator. Internal to core/train. */
#ifndef PULSEWRIGHT_CORE_TRAIN_RAMP_H
#define PULSEWRIGHT_CORE_TRAIN_RAMP_H
#include "core/train/contraction.h"

/* What a ramp leads to (or from): the hold's settings next to it. */
struct ramp_end {
    double duration_us, current_ma;
    double rho; /* recruited there; 0: the law does not allow a ramp of recruitment, it is one of duration */
};
struct ramp_end ramp_end_of(const struct recruitment *recruitment, double duration_us, double current_ma);
/* Duration of ramp pulse i of n (up: 1 is the weakest; the caller mirrors a ramp down). */
double ramp_duration_us(const struct recruitment *recruitment, const struct ramp_end *end, enum ramp_shape shape, unsigned i,
                        unsigned n);
/* Straight pieces for `count` durations that run in one direction, expanded on the grid as segments are: at most RAMP_PIECES_MAX, the
 * greatest error as small as they allow (half a step where possible). first_pulses, other_pulses: single pulses of the first and of each
 * other period. Returns the number of pieces. */
size_t ramp_pieces(const double *ideal_us, uint32_t count, uint32_t most_us, uint32_t least_us, uint32_t current_ua,
                   uint32_t first_pulses, uint32_t other_pulses, const struct train_grid *grid,
                   struct ramp_piece pieces[RAMP_PIECES_MAX]);

#endif
