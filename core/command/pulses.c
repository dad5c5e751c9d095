/* pulsewright pulses: every pulse a document stands for. The goal of this code:
 * what a plan or a train will give, pulse by pulse, through the one expansion
 * that the device runs; not signed, and it says so on every row. */
#include "core/command/commands.h"

#include "core/command/muscle_input.h"
#include "core/plan/plan.h"
#include "core/report/json.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const struct option options[] = {
    {"-o", "PULSES.csv", "write the pulses (needed)"},
    {"--replace", NULL, "write over an existing file, keeping the old one as NAME.1"},
    {"--profile", "PROFILE", "for a train: whose ramps of recruitment these are"},
    {"--muscle", "M", "for a train: the muscle (may be left out where the profile has one)"},
    {"--stimulator", "FILE",
     "for a train: compile it on this stimulator's steps; without it nothing "
     "is rounded"},
    {"--hookup", "FILE", "for a train: the muscle's channel"},
    {"--json", NULL, "counts for machines"},
    {NULL, NULL, NULL},
};

/* A pulse of a plan with its channel, so that they can be put in order
 * together. */
struct placed {
    struct pulse pulse;
    size_t order;
};

static int compare(const void *a, const void *b)
{
    const struct placed *left = a, *right = b;
    if (left->pulse.at_us != right->pulse.at_us) return left->pulse.at_us < right->pulse.at_us ? -1 : 1;
    return left->order < right->order ? -1 : 1;
}

static const char *muscle_of(const struct plan *plan, unsigned channel)
{
    for (size_t i = 0; i < plan->channels; i++)
        if (plan->channel[i].channel == channel) return plan->channel[i].muscle;
    return "";
}

/* Expands all segments into one list in order of time; malloc'ed. */
static struct placed *expand(const struct segment *segments, size_t count, const struct train_grid *grid,
                             size_t *pulses)
{
    size_t most = 1;
    for (size_t i = 0; i < count; i++) most += segments[i].count;
    struct placed *list = malloc(most * sizeof *list);
    *pulses = 0;
    for (size_t i = 0; i < count && list; i++) {
        struct segment_cursor cursor;
        segment_begin(&cursor, &segments[i], grid);
        while (segment_next(&cursor, &list[*pulses].pulse)) {
            list[*pulses].order = *pulses;
            (*pulses)++;
        }
    }
    if (list) qsort(list, *pulses, sizeof *list, compare);
    return list;
}

static enum status table_of_plan(const struct document_bytes *bytes, struct pulses_table *table,
                                 struct message *why)
{
    struct plan plan;
    struct segment *segments = NULL;
    size_t count = 0, pulses = 0;
    enum status status = plan_parse(bytes, &plan, why);
    if (status != STATUS_OK) return status;
    status = plan_segments(&plan, &segments, &count, why);
    if (status != STATUS_OK) {
        plan_free(&plan);
        return status;
    }
    const struct train_grid grid = stimulator_grid(&plan.stimulator);
    struct placed *list = expand(segments, count, &grid, &pulses);
    const bool several = plan.channels > 1;
    table->pulse = malloc((pulses + 1) * sizeof *table->pulse);
    table->channel = several ? malloc((pulses + 1) * sizeof *table->channel) : NULL;
    table->muscle = several ? malloc((pulses + 1) * sizeof *table->muscle) : NULL;
    if (!list || !table->pulse || (several && (!table->channel || !table->muscle))) {
        status = status_fail(why, STATUS_INTERNAL, "out of memory");
        pulses = 0;
    }
    for (size_t i = 0; i < pulses; i++) {
        const struct pulse *pulse = &list[i].pulse;
        table->pulse[i] = (struct train_pulse){.time_ms = (double)pulse->at_us / 1000,
                                               .duration_us = pulse->duration_us,
                                               .current_ma = pulse->current_ua / 1000.0};
        if (!several) continue;
        table->channel[i] = pulse->channel;
        (void)snprintf(table->muscle[i], sizeof table->muscle[i], "%s", muscle_of(&plan, pulse->channel));
    }
    table->pulses = pulses;
    free(list);
    free(segments);
    plan_free(&plan);
    return status;
}

static enum status table_of_train(const struct arguments *arguments, const char *path,
                                  struct pulses_table *table, struct message *why)
{
    struct muscle_input input;
    const char *profile = argument(arguments, "--profile");
    if (!profile)
        return status_fail(why, STATUS_USAGE, "a train needs --profile PROFILE (ramps are of recruitment)");
    enum status status = muscle_input_muscle(arguments, profile, &input, why);
    if (status == STATUS_OK) status = muscle_input_train(arguments, path, &input, why);
    if (status == STATUS_OK) {
        table->pulse = input.pulses;
        table->pulses = input.count;
        input.pulses = NULL; /* the table owns them now */
    }
    muscle_input_free(&input);
    return status;
}

static enum status write_table(const struct arguments *arguments, const struct pulses_table *table,
                               struct message *why)
{
    struct text_out out = {0};
    pulses_print(table, NOT_SIGNED_TEXT, &out);
    const enum status status = document_write_file(argument(arguments, "-o"), out.data, out.size,
                                                   argument_given(arguments, "--replace"), why);
    text_out_free(&out);
    if (status != STATUS_OK) return status;
    const double last_ms = table->pulses ? table->pulse[table->pulses - 1].time_ms : 0;
    fprintf(stderr, "%s\n", NOT_SIGNED_TEXT);
    if (argument_given(arguments, "--json")) {
        struct json json;
        json_begin(&json, stdout);
        json_number(&json, "pulses", (double)table->pulses);
        json_number(&json, "last_ms", last_ms);
        json_text(&json, "file", argument(arguments, "-o"));
        json_text(&json, "approval", NOT_SIGNED_TEXT);
        json_end(&json);
    } else {
        printf("%zu pulses over %.3f s written to %s\n", table->pulses, last_ms / 1000,
               argument(arguments, "-o"));
    }
    return STATUS_OK;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {.text = ""};
    struct document_bytes bytes;
    struct pulses_table table = {0};
    enum document_kind kind = DOCUMENT_KINDS;
    const char *path = arguments->positional[0];
    if (!argument_given(arguments, "-o"))
        return command_fail(arguments, STATUS_USAGE, "-o PULSES.csv is needed");
    enum status status = document_read_bytes(path, &bytes, &why);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    status = document_kind_of(&bytes, &kind, &why);
    if (status == STATUS_OK && kind == DOCUMENT_PLAN)
        status = table_of_plan(&bytes, &table, &why);
    else if (status == STATUS_OK && kind == DOCUMENT_TRAIN)
        status = table_of_train(arguments, path, &table, &why);
    else if (status == STATUS_OK)
        status = status_fail(&why, STATUS_DOCUMENT, "%s: format: holds \"%s\", it may hold a plan or a train",
                             path, document_kind_format(kind));
    document_bytes_free(&bytes);
    if (status == STATUS_OK) status = write_table(arguments, &table, &why);
    pulses_free(&table);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

const struct command command_pulses = {
    .name = "pulses",
    .usage = "PLAN|TRAIN -o PULSES.csv [--profile PROFILE --muscle M] "
             "[--stimulator S] [--hookup H]",
    .summary = "every pulse a document stands for",
    .help = "CSV with time_ms,duration_us,current_ma (channel,muscle where "
            "there are several) and, as the last column, its approval.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run,
};
