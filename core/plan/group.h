/* Group: several muscles planned together. */
#ifndef PULSEWRIGHT_CORE_PLAN_GROUP_H
#define PULSEWRIGHT_CORE_PLAN_GROUP_H
#include "core/plan/maker.h"

/* Do any of the plan's channels have to take turns: a stimulator that gives one pulse at a time, or a return
 * they share? */
bool group_takes_turns(const struct plan *plan);
/* Plans open makers (2 or more) together and recounts the plan. */
enum status group_make(struct maker *makers, size_t count, struct plan *plan, const struct profile *profile,
                       const struct plan_options *options, struct message *why);

#endif
