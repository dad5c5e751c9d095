/* Documents that tests of the planner share, built in C. Every value that is no published one is invented for
 * the tests. */
#ifndef PULSEWRIGHT_TESTS_SUPPORT_PLANS_H
#define PULSEWRIGHT_TESTS_SUPPORT_PLANS_H
#include "core/plan/plan.h"

/* One muscle, "left-quadriceps": the project's default composition (support/muscles.h), alike tiers, dormant,
 * with the limits and comfort of the design's sample profile. `muscle` is the profile's storage. */
struct profile plans_profile(struct profile_muscle *muscle);
/* The design's sample stimulator. */
struct stimulator plans_stimulator(void);
/* A hold of 100 N for 2 s, ramps and rests as the design's sample, frequency and duration and current free.
 */
struct demand plans_demand(unsigned contractions);
/* No ensemble, no progress, no date. */
struct plan_options plans_options(void);
/* Every pulse of a plan in order of time, all channels; malloc'ed. */
struct pulse *plans_pulses(const struct plan *plan, size_t *count);

#endif
