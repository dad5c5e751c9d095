/* `pulsewright-bridge export`: a recorded session as recordings that `fit` reads, or the pulses of a
 * sign-off. */
#include "bridge/command/commands.h"
#include "bridge/command/plan_pulses.h"
#include "bridge/command/session_export.h"
#include "bridge/gate/gate.h"
#include "core/document/table.h"
#include "core/plan/plan.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

static const struct option options[] = {
    {"-o", "DIR", "where to; made if absent (needed)"},
    {"--session", "N", "which session, by its number in `sessions`; the newest unless said"},
    {"--anonymous", NULL, "without person and marks' words"},
    {"--replace", NULL, "existing files are kept as NAME.1 and replaced"},
    {NULL, NULL, NULL}};

static enum status make_folder(const char *path, struct message *why)
{
    return mkdir(path, 0777) == 0 || errno == EEXIST
               ? STATUS_OK
               : status_fail(why, STATUS_USAGE, "%s: %s", path, strerror(errno));
}

static enum status export_signoff(const struct arguments *arguments, const char *folder, struct message *why)
{
    struct signoff_file *file = calloc(1, sizeof *file);
    char state[200], path[PATH_SIZE];
    enum status status = file ? signoff_read(arguments->positional[0], file, why)
                              : status_fail(why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK) gate_state_text(&file->signoff, false, state, sizeof state);
    for (size_t p = 0; status == STATUS_OK && p < file->plans; p++) {
        struct plan plan;
        struct pulses_table table;
        struct text_out out = {0};
        status = plan_parse(&file->plan[p], &plan, why);
        if (status != STATUS_OK) break;
        status = export_plan_pulses(&plan, &table, why);
        if (status == STATUS_OK) status = export_sort(&table, why);
        if (status == STATUS_OK) {
            pulses_print(&table, state, &out);
            (void)snprintf(path, sizeof path, "%.900s/pulses-%zu.csv", folder, p + 1);
            status =
                document_write_file(path, out.data, out.size, argument_given(arguments, "--replace"), why);
            pulses_free(&table);
        }
        text_out_free(&out);
        plan_free(&plan);
        if (status == STATUS_OK) printf("%s\n", path);
    }
    if (file) signoff_file_free(file);
    if (status == STATUS_OK) fprintf(stderr, "%s\n", state);
    free(file);
    return status;
}

/* A record is an SQLite file; its first octets say so. */
static bool is_record(const char *path)
{
    char head[16] = "";
    FILE *in = fopen(path, "re");
    const bool some = in && fread(head, 1, sizeof head, in) == sizeof head;
    if (in) (void)fclose(in);
    return some && memcmp(head, "SQLite format 3", 16) == 0;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {""};
    double session = 0;
    const char *folder = argument(arguments, "-o");
    if (!folder) return command_fail(arguments, STATUS_USAGE, "-o DIR is missing");
    enum status status = argument_number(arguments, "--session", 1, 1e15, &session);
    if (status != STATUS_OK) return status;
    if (keys_begin(&why) != STATUS_OK) return command_fail(arguments, STATUS_INTERNAL, "%s", why.text);
    status = make_folder(folder, &why);
    const struct session_export wanted = {.path = arguments->positional[0],
                                          .folder = folder,
                                          .session = (uint64_t)session,
                                          .anonymous = argument_given(arguments, "--anonymous"),
                                          .replace = argument_given(arguments, "--replace")};
    if (status == STATUS_OK)
        status = is_record(arguments->positional[0]) ? session_export_write(&wanted, &why)
                                                     : export_signoff(arguments, folder, &why);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

const struct command command_export = {
    .name = "export",
    .usage = "(DB | SIGNOFF) -o DIR [--session N] [--anonymous] [--replace]",
    .summary = "a session as recordings that `fit` reads, or the pulses of a sign-off",
    .help = "Of a record: pulses.csv (those that were given), force.csv (what was measured), marks.csv and "
            "recordings.yaml, which names\n"
            "both; the recording is marked as kind force. Of a sign-off: the pulses of each plan, with the "
            "approval on each row.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run};
