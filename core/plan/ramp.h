/* Ramps: which shape and length reach the hold in time, under the slew limit, with the least overshoot. */
#ifndef PULSEWRIGHT_CORE_PLAN_RAMP_H
#define PULSEWRIGHT_CORE_PLAN_RAMP_H
#include "core/plan/solve.h"

struct ramp_choice {
    enum ramp_shape shape;
    double ms;
    bool slew_kept; /* false: no length that was tried keeps the slew limit; `broken` says by what */
    struct dose_verdict broken;
    size_t trials;
    struct plan_ramp_trial trial[PLAN_RAMP_TRIALS_MAX];
};

/* Tries every allowed shape at several lengths, the settings moved along by one step each. few: the short
 * lists of a scan. guard: the channel's memory at start_us. */
enum status ramp_choose(struct attempt_bench *bench, const struct solve_request *request,
                        const struct demand *demand, const struct solve_settings *settings,
                        const struct dose_channel *guard, uint64_t start_us, bool few,
                        struct ramp_choice *choice, struct message *why);

#endif
