/* A muscle and its pulses from the command line. The goal of this code:
 * predict, curves and pulses read the same documents the same way. */
#include "core/command/muscle_input.h"
#include "core/muscle/recruitment.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum status muscle_input_muscle(const struct arguments *arguments, const char *profile_path,
                                struct muscle_input *input, struct message *why)
{
    memset(input, 0, sizeof *input);
    input->hold_ms[0] = input->hold_ms[1] = (double)NAN;
    input->channel = 1;
    const enum status status = profile_load(profile_path, &input->profile, why);
    if (status != STATUS_OK) {
        memset(&input->profile, 0, sizeof input->profile);
        return status;
    }
    input->muscle = profile_muscle(&input->profile, argument(arguments, "--muscle"), why);
    if (!input->muscle) return STATUS_USAGE;
    return profile_muscle_usable(input->muscle, why);
}

/* --stimulator's grid. *given is false without one. */
static enum status load_grid(const struct arguments *arguments, struct train_grid *grid, bool *given,
                             struct message *why)
{
    struct stimulator stimulator;
    *given = argument_given(arguments, "--stimulator");
    if (!*given) return STATUS_OK;
    const enum status status = stimulator_load(argument(arguments, "--stimulator"), &stimulator, why);
    if (status == STATUS_OK) *grid = stimulator_grid(&stimulator);
    return status;
}

static enum status load_hookup(const struct arguments *arguments, struct muscle_input *input,
                               struct message *why)
{
    struct hookup hookup;
    const char *path = argument(arguments, "--hookup");
    if (!path) return STATUS_OK;
    const enum status status = hookup_load(path, &hookup, why);
    if (status != STATUS_OK) return status;
    for (size_t i = 0; i < hookup.channels; i++) {
        if (strcmp(hookup.channel[i].muscle, input->muscle->name) != 0) continue;
        input->channel = hookup.channel[i].channel;
        return STATUS_OK;
    }
    return status_fail(why, STATUS_REFUSED, "%s has no channel for %s", path, input->muscle->name);
}

enum status muscle_input_train(const struct arguments *arguments, const char *path,
                               struct muscle_input *input, struct message *why)
{
    struct train train;
    struct train_grid grid;
    bool compiled;
    enum status status = load_grid(arguments, &grid, &compiled, why);
    if (status == STATUS_OK) status = load_hookup(arguments, input, why);
    if (status == STATUS_OK)
        status = train_load_for(path, &input->muscle->parameters.recruitment, &train, why);
    if (status != STATUS_OK) return status;
    status =
        contraction_list_pulses(train.contraction, train.contractions, &input->muscle->parameters.recruitment,
                                compiled ? &grid : NULL, TRAIN_PULSES_MAX, &input->pulses,
                                &input->same_period, &input->count, input->hold_ms, why);
    train_free(&train);
    return status;
}

/* Of a file with several muscles only this one's pulses. */
static enum status load_pulses(const char *path, struct muscle_input *input, struct message *why)
{
    struct pulses_table table;
    const enum status status = pulses_load(path, &table, why);
    if (status != STATUS_OK) return status;
    const struct recruitment *law = &input->muscle->parameters.recruitment;
    for (size_t i = 0; i < table.pulses; i++) {
        const bool other =
            table.muscle && table.muscle[i][0] != '\0' && strcmp(table.muscle[i], input->muscle->name) != 0;
        struct message reason;
        if (other || recruitment_takes_current(law, table.pulse[i].current_ma, &reason) == STATUS_OK)
            continue;
        const size_t line = table.line[i];
        pulses_free(&table);
        return status_fail(why, STATUS_DOCUMENT, "%s:%zu:3: current_ma: %.600s", path, line, reason.text);
    }
    input->pulses = malloc((table.pulses + 1) * sizeof *input->pulses);
    for (size_t i = 0; i < table.pulses && input->pulses; i++) {
        const bool other =
            table.muscle && table.muscle[i][0] != '\0' && strcmp(table.muscle[i], input->muscle->name) != 0;
        if (!other) input->pulses[input->count++] = table.pulse[i];
    }
    const size_t rows = table.pulses;
    pulses_free(&table);
    if (!input->pulses) return status_fail(why, STATUS_INTERNAL, "out of memory");
    if (rows > 0 && input->count == 0)
        return status_fail(why, STATUS_DOCUMENT, "%s has no pulse of %s", path, input->muscle->name);
    return STATUS_OK;
}

enum status muscle_input_load(const struct arguments *arguments, struct muscle_input *input,
                              struct message *why)
{
    enum status status = muscle_input_muscle(arguments, arguments->positional[0], input, why);
    if (status != STATUS_OK) return status;
    if (argument_given(arguments, "--train"))
        status = muscle_input_train(arguments, argument(arguments, "--train"), input, why);
    else
        status = load_pulses(argument(arguments, "--pulses"), input, why);
    if (status == STATUS_OK && argument_given(arguments, "--motion")) {
        status = motion_load(argument(arguments, "--motion"), &input->motion, why);
        input->has_motion = status == STATUS_OK;
    }
    return status;
}

void muscle_input_free(struct muscle_input *input)
{
    free(input->pulses);
    free(input->same_period);
    if (input->has_motion) motion_free(&input->motion);
    profile_free(&input->profile);
    memset(input, 0, sizeof *input);
}
