/* Recount: every figure of a plan computed again from its final quantised pulses by the exact engine; nothing
 * is carried from a search. plan_recount itself is in plan.h. */
#ifndef PULSEWRIGHT_CORE_PLAN_RECOUNT_H
#define PULSEWRIGHT_CORE_PLAN_RECOUNT_H
#include "core/plan/attempt.h"

/* One contraction of a plan, as the session strip shows it. */
struct plan_contraction {
    unsigned number; /* from 1, warm-ups included */
    size_t block;
    bool warm_up;
    double start_ms; /* of its first pulse, from T0 */
    double ramp_up_ms, hold_ms;
    struct hold_measures hold;
    double capacity, potentiation, remaining_20, remaining_50; /* at its last pulse */
    struct plan_why miss;                                      /* WHY_NONE: met, or nothing was asked */
};

/* Every contraction of one channel; *contraction is malloc'ed. exact: the 1e-7 engine, else the ordinary one
 * (for a draft). */
enum status plan_contractions(const struct plan *plan, size_t channel, const struct profile *profile,
                              bool exact, struct plan_contraction **contraction, size_t *count,
                              struct message *why);
/* The one-line verdict, from what the plan holds. */
void plan_verdict(struct plan *plan);

#endif
