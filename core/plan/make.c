/* Demand -> plan. The goal of this code: one call from documents to a plan that is whole in itself, whether
 * or not the demand can be met. */
#include "core/plan/channel.h"
#include "core/plan/maker.h"
#include "core/plan/recount.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static enum status begin_channel(struct plan *plan, size_t c, const struct profile *profile,
                                 const struct demand *demand, const struct stimulator *stimulator,
                                 const struct hookup *hookup, const struct plan_options *options,
                                 const struct profile_muscle **muscle, struct message *why)
{
    *muscle = profile_muscle(profile, demand->muscle, why);
    if (!*muscle) return STATUS_REFUSED;
    enum status status = profile_muscle_usable(*muscle, why);
    if (status == STATUS_OK) status = plan_channel_begin(&plan->channel[c], *muscle, stimulator, hookup, why);
    if (status != STATUS_OK) return status;
    plan_note_profile(plan, *muscle, options->today);
    if (options->ensemble > 0 && (*muscle)->uncertainties == 0)
        plan_note(plan,
                  "the profile of %s says nothing of its uncertainty: caps are checked on its middle only",
                  (*muscle)->name);
    if ((*muscle)->has_measured && (*muscle)->measured.as_torque)
        plan_note(plan, "%s was measured as torque: what is given in N is N*m", (*muscle)->name);
    return STATUS_OK;
}

enum status plan_make(const struct profile *profile, const struct demand *demand,
                      const struct stimulator *stimulator, const struct hookup *hookup,
                      const struct plan_options *options, struct plan *plan, struct message *why)
{
    return plan_make_group(profile, demand, 1, stimulator, hookup, options, plan, why);
}

static enum status make_one(struct plan *plan, const struct profile *profile, const struct demand *demand,
                            const struct profile_muscle *muscle, const struct stimulator *stimulator,
                            const struct plan_options *options, struct message *why)
{
    struct maker maker;
    enum status status = maker_open(&maker, demand, muscle, stimulator, &plan->channel[0], why);
    if (status == STATUS_OK) {
        plan->target_n = plan->channel[0].target_n;
        status = maker_make(&maker, plan, profile, options, why);
    }
    if (status == STATUS_OK && !plan->feasible) status = would_work_find(&maker, plan, options, why);
    maker_close(&maker);
    return status;
}

enum status plan_make_group(const struct profile *profile, const struct demand *demands, size_t count,
                            const struct stimulator *stimulator, const struct hookup *hookup,
                            const struct plan_options *options, struct plan *plan, struct message *why)
{
    static const struct plan_options none = {.ensemble = 0};
    if (!options) options = &none;
    memset(plan, 0, sizeof *plan);
    if (count != 1)
        return status_fail(why, STATUS_REFUSED,
                           "two muscles on one stimulator need a common period: not planned yet");
    enum status status = plan_begin(plan, profile, stimulator, count, why);
    const struct profile_muscle *muscle = NULL;
    if (status == STATUS_OK) {
        plan->demand = demands[0];
        (void)memcpy(plan->goal, demands[0].goal, sizeof plan->goal);
        status = begin_channel(plan, 0, profile, &demands[0], stimulator, hookup, options, &muscle, why);
    }
    if (status == STATUS_OK) status = make_one(plan, profile, &demands[0], muscle, stimulator, options, why);
    if (status != STATUS_OK) {
        plan_free(plan);
        return status;
    }
    if (plan->feasible) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "%s", plan->verdict);
}
