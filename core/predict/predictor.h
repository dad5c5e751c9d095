/* What a predictor holds. Internal to core/predict (and to benches that count steps). */
#ifndef PULSEWRIGHT_CORE_PREDICT_PREDICTOR_H
#define PULSEWRIGHT_CORE_PREDICT_PREDICTOR_H
#include "core/predict/engine.h"

struct predictor {
    struct engine engine;
    /* the settings of the last pulse that recruited, and what it recruited: mostly the next one's too */
    double duration_us, current_ma, rho;
};
_Static_assert(sizeof(struct predictor) % 64 == 0, "aligned_alloc takes whole multiples");

#endif
