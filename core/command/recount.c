/* pulsewright recount: a plan whose blocks were edited by hand, every figure anew. The goal of this code: an
 * edited plan is as honest about itself as one that was searched. Ramps are compiled again from their shape
 * and length, so that they follow what was edited. */
#include "core/command/commands.h"
#include "core/command/plan_output.h"
#include "core/plan/ensemble.h"
#include "core/plan/plan.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const struct option options[] = {
    {"-o", "PLAN2", "write the recounted plan (needed)"},
    {"--replace", NULL, "write over an existing file, keeping the old one as NAME.1"},
    {"--picture", "FILE", "draw the session (.png, .svg, .pdf)"},
    {"--ensemble", "N", "draws of the profile's uncertainty, 0: none (64)"},
    {"--seed", "N", "of the draws (1)"},
    {"--json", NULL, "the result for machines"},
    {NULL, NULL, NULL},
};

/* Numbers and ramps that follow from the blocks as they stand. */
static enum status follow_edits(struct plan *plan, struct message *why)
{
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    for (size_t c = 0; c < plan->channels; c++) {
        unsigned first = 1;
        for (size_t b = 0; b < plan->channel[c].blocks; b++) {
            struct plan_block *block = &plan->channel[c].block[b];
            block->first = first;
            block->settings.repeat = block->count;
            first += block->count;
            if (block->settings.gaps > 0) continue;
            const enum status status =
                contraction_compile_ramps(&block->settings, &plan->channel[c].recruitment, &grid, why);
            if (status != STATUS_OK) return status;
        }
    }
    plan->would_work.largest_target_n =
        (double)NAN; /* nothing was planned: nothing is known of what else would work */
    plan->would_work.longest_hold_ms = (double)NAN;
    plan->would_work.most_contractions = 0;
    return STATUS_OK;
}

static enum status recount(const struct arguments *arguments, const struct plan_options *given,
                           struct plan *plan, struct message *why)
{
    struct profile profile;
    enum status status = plan_load(arguments->positional[0], plan, why);
    if (status != STATUS_OK) return status;
    status = profile_load(arguments->positional[1], &profile, why);
    if (status != STATUS_OK) {
        plan_free(plan);
        return status;
    }
    if (strcmp(profile.person, plan->person) != 0)
        status = status_fail(why, STATUS_REFUSED, "the plan is for %s, the profile is of %s", plan->person,
                             profile.person);
    if (status == STATUS_OK) status = follow_edits(plan, why);
    if (status == STATUS_OK) status = plan_recount(plan, &profile, given, why);
    profile_free(&profile);
    if (status != STATUS_OK) plan_free(plan);
    return status;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {.text = ""};
    struct plan plan = {0};
    struct plan_progress progress;
    double ensemble = ENSEMBLE_DRAWS, seed = 1.0;
    struct plan_options given = {.progress = plan_progress_show, .context = &progress};
    enum status status = plan_output_ready(arguments);
    if (status == STATUS_OK)
        status = argument_number(arguments, "--ensemble", 0.0, ENSEMBLE_DRAWS_MAX, &ensemble);
    if (status == STATUS_OK) status = argument_number(arguments, "--seed", 0.0, 9007199254740992.0, &seed);
    if (status != STATUS_OK) return status;
    given.ensemble = (unsigned)ensemble;
    given.seed = (uint64_t)seed;
    plan_progress_begin(&progress);
    status = recount(arguments, &given, &plan, &why);
    const double seconds = plan_progress_end(&progress);
    if (status == STATUS_OK) status = plan_output_write(arguments, &plan, &why);
    if (status != STATUS_OK) {
        if (plan.channels > 0) plan_free(&plan);
        return command_fail(arguments, status, "%s", why.text);
    }
    if (argument_given(arguments, "--json"))
        plan_output_json(&plan, seconds);
    else
        plan_output_text(&plan);
    fprintf(stderr, "%s\n", NOT_SIGNED_TEXT);
    const bool answer = plan.demand.contractions > 0 ? plan.feasible : plan.ledger.within;
    plan_free(&plan);
    return answer ? STATUS_OK : STATUS_REFUSED;
}

const struct command command_recount = {
    .name = "recount",
    .usage = "PLAN PROFILE -o PLAN2 [--json]",
    .summary = "blocks as edited by hand, every figure anew",
    .help = "Exit 3 where the edited plan does not meet its demand or breaks a limit; it is written all the "
            "same.",
    .options = options,
    .positional_least = 2,
    .positional_most = 2,
    .run = run,
};
