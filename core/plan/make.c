/* Demand -> plan. The goal of this code: one call from documents to a plan that is whole in itself, whether
 * or not the demand can be met. */
#include "core/plan/channel.h"
#include "core/plan/group.h"
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
    if (status == STATUS_OK) status = maker_make(&maker, plan, profile, options, why);
    if (status == STATUS_OK && !plan->feasible) status = would_work_find(&maker, plan, options, why);
    maker_close(&maker);
    return status;
}

/* Several: they need a hookup, a channel each. */
static enum status check_channels(const struct plan *plan, const struct hookup *hookup, struct message *why)
{
    if (!hookup)
        return status_fail(why, STATUS_REFUSED, "several muscles need a hookup: which channel drives which");
    for (size_t a = 0; a < plan->channels; a++)
        for (size_t b = a + 1; b < plan->channels; b++)
            if (plan->channel[a].channel == plan->channel[b].channel)
                return status_fail(why, STATUS_REFUSED, "%s and %s are both on channel %u",
                                   plan->channel[a].muscle, plan->channel[b].muscle,
                                   plan->channel[a].channel);
    return STATUS_OK;
}

static enum status make_several(struct plan *plan, const struct profile *profile,
                                const struct demand *demands, const struct profile_muscle *const *muscles,
                                const struct stimulator *stimulator, const struct plan_options *options,
                                struct message *why)
{
    struct maker *makers = calloc(plan->channels, sizeof *makers);
    if (!makers) return status_fail(why, STATUS_INTERNAL, "out of memory");
    enum status status = STATUS_OK;
    size_t open = 0;
    for (; open < plan->channels && status == STATUS_OK; open++)
        status =
            maker_open(&makers[open], &demands[open], muscles[open], stimulator, &plan->channel[open], why);
    if (status == STATUS_OK) status = group_make(makers, plan->channels, plan, profile, options, why);
    for (size_t i = 0; i < open; i++) maker_close(&makers[i]);
    free(makers);
    if (status == STATUS_OK && !plan->feasible)
        plan_note(plan, "what would work is not searched for several muscles");
    return status;
}

enum status plan_make_group(const struct profile *profile, const struct demand *demands, size_t count,
                            const struct stimulator *stimulator, const struct hookup *hookup,
                            const struct plan_options *options, struct plan *plan, struct message *why)
{
    static const struct plan_options none = {.ensemble = 0};
    const struct profile_muscle *muscles[STIMULATOR_CHANNELS_MAX] = {NULL};
    if (!options) options = &none;
    memset(plan, 0, sizeof *plan);
    if (count == 0 || count > STIMULATOR_CHANNELS_MAX)
        return status_fail(why, STATUS_REFUSED, "%zu demands, 1 to %d can be planned together", count,
                           (int)STIMULATOR_CHANNELS_MAX);
    enum status status = plan_begin(plan, profile, stimulator, count, why);
    for (size_t c = 0; c < count && status == STATUS_OK; c++)
        status = begin_channel(plan, c, profile, &demands[c], stimulator, hookup, options, &muscles[c], why);
    if (status == STATUS_OK) {
        plan->demand = demands[0];
        (void)memcpy(plan->goal, demands[0].goal, sizeof plan->goal);
    }
    if (status == STATUS_OK && count > 1) status = check_channels(plan, hookup, why);
    if (status == STATUS_OK)
        status = count == 1 ? make_one(plan, profile, &demands[0], muscles[0], stimulator, options, why)
                            : make_several(plan, profile, demands, muscles, stimulator, options, why);
    if (status != STATUS_OK) {
        plan_free(plan);
        return status;
    }
    plan->target_n = plan->channel[0].target_n;
    if (plan->feasible) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "%s", plan->verdict);
}
