/* Solve: the iso-force inner step. For one state of the muscle, one frequency, opening and ramp: the settings
 * on the stimulator's grid, trim included, whose predicted mean in the hold is nearest the target while the
 * hold's quarters stay level. */
#ifndef PULSEWRIGHT_CORE_PLAN_SOLVE_H
#define PULSEWRIGHT_CORE_PLAN_SOLVE_H
#include "core/plan/attempt.h"

/* The moving knob at the start and at the end of the hold, and what stands still in the block (us and uA on
 * the grid). */
struct solve_settings {
    uint32_t from, to; /* the knob: us (KNOB_DURATION) or uA (KNOB_CURRENT); KNOB_NONE: the duration twice */
    uint32_t other;    /* uA, or us */
};

/* How force answers recruitment: the logarithm of the mean (l) and the slope over the hold (s), by level (l)
 * and slope (s) of recruitment. */
struct solve_slopes {
    double ll, ls, sl, ss;
};

struct solve_request {
    struct contraction
        frame; /* frequency, opening, pattern, ramps' shapes and lengths, hold, rest: all but the settings */
    const struct predictor *before;
    double start_ms;
    const struct contraction_aim *aim;
    bool has_guess;
    struct solve_settings guess; /* the settings of the contraction before */
    struct solve_slopes slopes;  /* and what was learned there */
    const struct attempt_result
        *known; /* what the guess gives from `before` in this frame; NULL: not run yet */
};

struct solve_result {
    struct solve_settings settings;
    struct contraction contraction; /* compiled */
    struct attempt_result attempt;
    struct solve_slopes slopes;
    bool spent; /* no allowed setting reaches the target */
    bool floor; /* the least allowed setting gives more than the target */
};

/* Share of the tolerance within which a mean is as good as on target (this project's choice: it makes blocks
 * that a person can read). */
extern const double solve_keep_share;

enum status solve_settings(struct attempt_bench *bench, const struct solve_request *request,
                           struct solve_result *result, struct message *why);
/* The contraction of given settings, run once (no search). */
enum status solve_at(struct attempt_bench *bench, const struct solve_request *request,
                     const struct solve_settings *settings, struct solve_result *result, struct message *why);
/* The contraction of settings moved one step towards the target by request->slopes: two runs. */
enum status solve_step(struct attempt_bench *bench, const struct solve_request *request,
                       const struct solve_settings *settings, struct solve_result *result,
                       struct message *why);
/* The strongest settings at the bench's rate. */
struct solve_settings solve_strongest(const struct attempt_bench *bench);

#endif
