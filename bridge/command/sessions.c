/* `pulsewright-bridge sessions`: what was done, and whether the record of it still holds. */
#include "bridge/command/commands.h"
#include "bridge/record/read.h"
#include "core/report/json.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

static const struct option options[] = {
    {"--verify", NULL, "follow the whole chain; exit 3 where it is broken, with the place"},
    {"--head", "H", "a head that was noted earlier: it has to stand in the chain (with --verify)"},
    {"--json", NULL, "for machines"},
    {NULL, NULL, NULL}};

struct listing {
    struct json json;
    bool as_json;
    unsigned count;
};

static void day_text(uint64_t at_s, char text[32])
{
    const time_t at = (time_t)at_s;
    struct tm parts;
    if (!gmtime_r(&at, &parts) || strftime(text, 32, "%Y-%m-%d %H:%M UTC", &parts) == 0)
        (void)snprintf(text, 32, "an unknown time");
}

static bool list_one(void *context, const struct record_glance *glance)
{
    struct listing *listing = context;
    char begun[32];
    day_text(glance->begun_s, begun);
    listing->count++;
    if (!listing->as_json) {
        printf("%llu  %s  %s on %s, %s, %.1f s, %s\n   %s\n   head %s\n", (unsigned long long)glance->session,
               begun, glance->person[0] ? glance->person : "(person left out)", glance->device, glance->kind,
               (double)glance->duration_us / 1e6, glance->ended, glance->approval, glance->head);
        return true;
    }
    json_object(&listing->json, NULL);
    json_number(&listing->json, "session", (double)glance->session);
    json_text(&listing->json, "begun", begun);
    json_text(&listing->json, "person", glance->person);
    json_text(&listing->json, "device", glance->device);
    json_text(&listing->json, "kind", glance->kind);
    json_text(&listing->json, "approval", glance->approval);
    json_text(&listing->json, "ended", glance->ended);
    json_bool(&listing->json, "closed", glance->closed);
    json_number(&listing->json, "duration_s", (double)glance->duration_us / 1e6);
    json_number(&listing->json, "entries", (double)glance->entries);
    json_text(&listing->json, "head", glance->head);
    json_object_end(&listing->json);
    return true;
}

static enum status verify(struct record_reader *reader, const char *head, struct listing *listing,
                          struct message *why)
{
    struct record_findings findings = {0};
    enum status status = record_verify(reader, head, &findings, why);
    if (status == STATUS_OK && head && !findings.head_found)
        status = status_fail(why, STATUS_REFUSED, "the head %s stands nowhere in this record", head);
    if (listing->as_json) {
        json_bool(&listing->json, "valid", status == STATUS_OK);
        json_text(&listing->json, "why", status == STATUS_OK ? NULL : why->text);
        json_text(&listing->json, "head", findings.head);
    } else if (status == STATUS_OK) {
        printf("the chain holds: %llu entries, %llu sessions, head %s\n",
               (unsigned long long)findings.entries, (unsigned long long)findings.sessions, findings.head);
    }
    return status;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {""};
    struct record_reader *reader = NULL;
    struct listing listing = {.as_json = argument_given(arguments, "--json")};
    if (argument_given(arguments, "--head") && !argument_given(arguments, "--verify"))
        return command_fail(arguments, STATUS_USAGE, "--head goes with --verify");
    enum status status = record_open(arguments->positional[0], &reader, &why);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    if (listing.as_json) {
        json_begin(&listing.json, stdout);
        json_array(&listing.json, "sessions");
    }
    status = record_sessions(reader, list_one, &listing, &why);
    if (listing.as_json) json_array_end(&listing.json);
    if (status == STATUS_OK && argument_given(arguments, "--verify"))
        status = verify(reader, argument(arguments, "--head"), &listing, &why);
    if (listing.as_json) json_end(&listing.json);
    record_close(reader);
    if (status == STATUS_OK && listing.count == 0) fprintf(stderr, "no session yet\n");
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

const struct command command_sessions = {
    .name = "sessions",
    .usage = "DB [--verify [--head H]] [--json]",
    .summary = "the sessions that a record keeps; whether its chain still holds",
    .help = "The head that `stream` prints at a session's end, noted elsewhere, shows later that nothing was "
            "taken out or changed.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run};
