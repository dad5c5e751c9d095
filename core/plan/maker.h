/* Maker: one channel of a plan while it is made. From demand and profile to a problem that the search can
 * run, and from the best policy to the plan's blocks. */
#ifndef PULSEWRIGHT_CORE_PLAN_MAKER_H
#define PULSEWRIGHT_CORE_PLAN_MAKER_H
#include "core/plan/search.h"

struct maker {
    const struct demand *demand;
    const struct profile_muscle *muscle;
    const struct stimulator *stimulator;
    struct plan_channel *channel; /* the plan's; begun already */
    struct session_work work;
    struct session_problem problem;
    struct settings_space whole; /* before a current was chosen once */
    struct predictor *rested, *awake;
    struct session_contraction *contraction; /* problem.contractions of them */
    struct search_result found;
    struct session_policy near; /* what would.c searches about, once known */
    bool near_known;
};

/* Resolves the target, the space of settings and the muscle. STATUS_REFUSED where nothing can be planned.
 * maker_close in any case. */
enum status maker_open(struct maker *maker, const struct demand *demand, const struct profile_muscle *muscle,
                       const struct stimulator *stimulator, struct plan_channel *channel,
                       struct message *why);
void maker_close(struct maker *maker);
/* Carries maker->found.policy through the whole demand and writes the channel's blocks (those it had are
 * freed). */
enum status maker_fill(struct maker *maker, struct message *why);
/* Searches and fills; then, where the upper edge of the force is over a cap, aims lower until it is not.
 * `plan` is recounted. */
enum status maker_make(struct maker *maker, struct plan *plan, const struct profile *profile,
                       const struct plan_options *options, struct message *why);
/* The target in the profile's unit of force: from N, N*m or percent of the greatest fused force within the
 * limits. */
enum status maker_target(struct maker *maker, double *target_n, struct message *why);

/* would.c: what would work where the demand does not: largest target, longest hold, most contractions; each
 * verified by planning it. */
enum status would_work_find(struct maker *maker, struct plan *plan, const struct plan_options *options,
                            struct message *why);

#endif
