/* Engine: carries a muscle's state through the time between pulses. Internal to core/predict.
 * C and S go in closed form; force, fatigue and potentiation by an explicit Runge-Kutta pair with error
 * control, eight lanes at once. */
#ifndef PULSEWRIGHT_CORE_PREDICT_ENGINE_H
#define PULSEWRIGHT_CORE_PREDICT_ENGINE_H
#include "core/muscle/lanes.h"
#include "core/muscle/muscle.h"
#include "core/predict/predict.h"

struct engine {
    struct muscle muscle;
    struct muscle_state state;
    LANE_ALIGNED double derivative[LANE_VARIABLES][LANES_MAX]; /* of the state now, where `fresh` */
    LANE_ALIGNED double
        scale[LANES_MAX]; /* greatest phi each lane has had: what its error is measured against */
    double time_ms;
    double step_ms;     /* what the last step's error suggests; 0: ask the state */
    double tolerance;   /* of a step, relative */
    double first_share; /* first step after a pulse, of the time in which x changes by itself */
    bool fresh;         /* the derivatives are those of the state */
    bool given;         /* a pulse has been given */
    bool standing;      /* a state stands on its bound */
    double quiet_ms;    /* activation can not have died away before this */
    double quiet_wait_ms;
    double step_most_ms; /* while activation lives */
    double fastest; /* greatest relative rate of x where `fresh`, 1/ms: what a first step is chosen from */
    const struct motion *motion;
    double motion_end_ms; /* of the straight piece of motion now; infinity without */
    size_t motion_piece;
    unsigned long steps, rejected; /* for benches */
};

void engine_init(struct engine *engine, const struct muscle *muscle, bool exact, const struct motion *motion);
/* Another tolerance of a step than the two of engine_init (benches). */
void engine_tolerate(struct engine *engine, double tolerance);
/* Takes one accepted step, at most to `to_ms`. */
void engine_step(struct engine *engine, double to_ms);
void engine_advance(struct engine *engine, double to_ms);
/* One pulse now. */
void engine_pulse(struct engine *engine, double rho);
double engine_force_n(const struct engine *engine); /* F, no tone */
double engine_force_slope(struct engine *engine);   /* dF/dt, N/ms */

/* L V of a motion at a time; the end of the straight piece that holds the time (time itself excluded). */
double motion_factor(const struct motion *motion, double time_ms);
double motion_piece_end_ms(const struct motion *motion, double time_ms);

#endif
