/* pulsewright check: is a document sound, and what does it say? The goal of this code: one line on what it
 * is, then what a person has to know before using it. A plan's ledger is check_plan.c's. */
#include "core/command/check_plan.h"
#include "core/command/commands.h"

#include "core/document/demand.h"
#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/recordings.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include "core/report/json.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

/* A profile older than this is warned of: this project's choice, no source. */
enum { PROFILE_DAYS_MAX = 14, NOTES_MAX = 128 };

static const struct option options[] = {
    {"--today", "DATE", "the day to reckon a profile's age from, YYYY-MM-DD (today)"},
    {"--json", NULL, "for machines"},
    {NULL, NULL, NULL},
};

/* What was found: lines that say what it is, and warnings. */
struct findings {
    struct date today;
    char summary[LINE_SIZE];
    size_t warnings;
    char warning[NOTES_MAX][LINE_SIZE];
};

__attribute__((format(printf, 2, 3))) static void warn(struct findings *findings, const char *format, ...)
{
    if (findings->warnings == NOTES_MAX) return;
    va_list list;
    va_start(list, format);
    (void)vsnprintf(findings->warning[findings->warnings++], LINE_SIZE, format, list);
    va_end(list);
}

static void warn_age(struct findings *findings, const char *muscle, const char *what, struct date day)
{
    if (day.year == 0) return;
    const long days = date_days(findings->today) - date_days(day);
    if (days > PROFILE_DAYS_MAX)
        warn(findings, "%s: %s %ld days ago, more than %d: measure again", muscle, what, days,
             PROFILE_DAYS_MAX);
    if (days < 0) warn(findings, "%s: %s on a day to come", muscle, what);
}

static void warn_muscle(struct findings *findings, const struct profile_muscle *muscle)
{
    struct message why = {.text = ""};
    if (profile_muscle_usable(muscle, &why) != STATUS_OK) warn(findings, "%s", why.text);
    if (muscle->has_measured) warn_age(findings, muscle->name, "measured", muscle->measured.on);
    if (!muscle->has_found)
        warn(findings, "%s: no threshold and comfort found yet: titrate first", muscle->name);
    else if (!muscle->found.as_train)
        warn(findings, "%s: comfort was found as: single; a comfortable twitch is not a comfortable train",
             muscle->name);
    if (muscle->has_found) warn_age(findings, muscle->name, "found", muscle->found.on);
    if (isnan(muscle->electrode_area_cm2))
        warn(findings, "%s: electrode_area_cm2 is absent: current density can not be shown", muscle->name);
    if (!muscle->has_limits) warn(findings, "%s: no limits: only the program's ceilings hold", muscle->name);
}

static enum status look_profile(const struct document_bytes *bytes, struct findings *findings,
                                struct message *why)
{
    struct profile profile;
    const enum status status = profile_parse(bytes, &profile, why);
    if (status != STATUS_OK) return status;
    (void)snprintf(findings->summary, LINE_SIZE, "a profile of %s, %zu muscle%s", profile.person,
                   profile.muscles, profile.muscles == 1 ? "" : "s");
    for (size_t i = 0; i < profile.muscles; i++) warn_muscle(findings, &profile.muscle[i]);
    profile_free(&profile);
    return STATUS_OK;
}

static enum status look_demand(const struct document_bytes *bytes, struct findings *findings,
                               struct message *why)
{
    static const char *const units[] = {"N", "N m", "% of the greatest fused force"};
    struct demand demand;
    const enum status status = demand_parse(bytes, &demand, why);
    if (status != STATUS_OK) return status;
    (void)snprintf(findings->summary, LINE_SIZE, "a demand on %s: %u holds of %g s at %g %s, rests of %g s",
                   demand.muscle, demand.contractions, demand.hold_ms / 1000, demand.target,
                   units[demand.target_kind], demand.rest_ms / 1000);
    demand_free(&demand);
    return STATUS_OK;
}

static enum status look_stimulator(const struct document_bytes *bytes, struct findings *findings,
                                   struct message *why)
{
    struct stimulator stimulator;
    const enum status status = stimulator_parse(bytes, &stimulator, why);
    if (status != STATUS_OK) return status;
    (void)snprintf(findings->summary, LINE_SIZE, "a stimulator %s: %u channels, to %g mA, %g us, %g pps, %s",
                   stimulator.name, stimulator.channels, stimulator.current_ma.to, stimulator.duration_us.to,
                   stimulator.frequency_pps.to,
                   stimulator.capacitor_balanced ? "capacitor-balanced" : "symmetric");
    if (!stimulator.unit[0]) warn(findings, "unit is absent: the very device is asked for at signing");
    return STATUS_OK;
}

static enum status look_hookup(const struct document_bytes *bytes, struct findings *findings,
                               struct message *why)
{
    struct hookup hookup;
    const enum status status = hookup_parse(bytes, &hookup, why);
    if (status != STATUS_OK) return status;
    (void)snprintf(findings->summary, LINE_SIZE, "a hookup of %s, %zu channel%s", hookup.person,
                   hookup.channels, hookup.channels == 1 ? "" : "s");
    for (size_t i = 0; i < hookup.channels; i++)
        if (isnan(hookup.channel[i].pad_cm2) || isnan(hookup.channel[i].return_pad_cm2))
            warn(findings, "channel %u: a pad's area is absent: current density can not be shown",
                 hookup.channel[i].channel);
    return STATUS_OK;
}

static enum status look_train(const struct document_bytes *bytes, struct findings *findings,
                              struct message *why)
{
    struct train train;
    const enum status status = train_parse(bytes, &train, why);
    if (status != STATUS_OK) return status;
    unsigned long contractions = 0;
    for (size_t i = 0; i < train.contractions; i++) contractions += train.contraction[i].repeat;
    (void)snprintf(findings->summary, LINE_SIZE, "a train of %lu contraction%s", contractions,
                   contractions == 1 ? "" : "s");
    train_free(&train);
    return STATUS_OK;
}

static enum status look_recordings(const struct document_bytes *bytes, struct findings *findings,
                                   struct message *why)
{
    struct recordings recordings;
    const enum status status = recordings_parse(bytes, &recordings, why);
    if (status != STATUS_OK) return status;
    size_t held_out = 0;
    for (size_t i = 0; i < recordings.recordings; i++) held_out += recordings.recording[i].hold_out ? 1 : 0;
    (void)snprintf(findings->summary, LINE_SIZE, "recordings of %s: %zu, of them %zu held out",
                   recordings.muscle, recordings.recordings, held_out);
    if (held_out == 0)
        warn(findings, "no recording is held out: a fit can not be tested on one it has not seen");
    recordings_free(&recordings);
    return STATUS_OK;
}

static enum status (*const looks[DOCUMENT_KINDS])(const struct document_bytes *, struct findings *,
                                                  struct message *) = {
    [DOCUMENT_PROFILE] = look_profile,       [DOCUMENT_DEMAND] = look_demand,
    [DOCUMENT_STIMULATOR] = look_stimulator, [DOCUMENT_HOOKUP] = look_hookup,
    [DOCUMENT_TRAIN] = look_train,           [DOCUMENT_RECORDINGS] = look_recordings,
};

static void print_findings(const struct findings *findings, const char *path)
{
    printf("%s: sound; %s\n", path, findings->summary);
    for (size_t i = 0; i < findings->warnings; i++) printf("  warning: %s\n", findings->warning[i]);
}

static void print_json(const struct findings *findings, enum document_kind kind)
{
    struct json json;
    json_begin(&json, stdout);
    json_text(&json, "document", document_kind_format(kind));
    json_bool(&json, "within", true);
    json_text(&json, "summary", findings->summary);
    json_array(&json, "figures");
    json_array_end(&json);
    json_array(&json, "warnings");
    for (size_t i = 0; i < findings->warnings; i++) json_text(&json, NULL, findings->warning[i]);
    json_array_end(&json);
    json_text(&json, "approval", NOT_SIGNED_TEXT);
    json_end(&json);
}

/* --today, else the clock: the one place of this command that reads it. */
static enum status read_today(const struct arguments *arguments, struct date *today)
{
    const char *text = argument(arguments, "--today");
    if (text) {
        if (date_read(text, today)) return STATUS_OK;
        return command_fail(arguments, STATUS_USAGE, "--today holds %s, may hold a day as YYYY-MM-DD", text);
    }
    const time_t now = time(NULL);
    struct tm parts;
    if (!localtime_r(&now, &parts))
        return command_fail(arguments, STATUS_INTERNAL, "the clock can not be read");
    *today = (struct date){parts.tm_year + 1900, parts.tm_mon + 1, parts.tm_mday};
    return STATUS_OK;
}

static enum status check_bytes(const struct arguments *arguments, const struct document_bytes *bytes,
                               struct findings *findings)
{
    struct message why = {.text = ""};
    enum document_kind kind = DOCUMENT_KINDS;
    enum status status = document_kind_of(bytes, &kind, &why);
    if (status == STATUS_OK && kind == DOCUMENT_PLAN) return check_plan(arguments, bytes);
    if (status == STATUS_OK) status = looks[kind](bytes, findings, &why);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    if (argument_given(arguments, "--json"))
        print_json(findings, kind);
    else
        print_findings(findings, bytes->path);
    fprintf(stderr, "%s\n", NOT_SIGNED_TEXT);
    return STATUS_OK;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {.text = ""};
    struct document_bytes bytes;
    struct findings findings = {.summary = ""};
    enum status status = read_today(arguments, &findings.today);
    if (status != STATUS_OK) return status;
    status = document_read_bytes(arguments->positional[0], &bytes, &why);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    status = check_bytes(arguments, &bytes, &findings);
    document_bytes_free(&bytes);
    return status;
}

const struct command command_check = {
    .name = "check",
    .usage = "DOCUMENT [--today DATE] [--json]",
    .summary = "any document: is it sound; for a plan the dose ledger",
    .help = "Exit 3 where a plan breaks a limit, 4 where a document is bad: then one line says where, what "
            "it holds and "
            "what it may hold.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run,
};
