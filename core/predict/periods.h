/* Periods: where the pulses of a train repeat, and what force does in each. Internal to core/predict. */
#ifndef PULSEWRIGHT_CORE_PREDICT_PERIODS_H
#define PULSEWRIGHT_CORE_PREDICT_PERIODS_H
#include "core/predict/engine.h"
#include "core/train/contraction.h"
#include <stddef.h>

/* Force over a stretch of time, gathered step by step from values and slopes at both ends (a cubic through
 * them). */
struct gather {
    double integral; /* N ms */
    double least, greatest, greatest_at_ms;
};
struct gather gather_empty(void);
void gather_add(struct gather *gather, const struct gather *more);
/* Advances the engine to to_ms, gathering. */
void gather_advance(struct gather *gather, struct engine *engine, double to_ms);

#endif
