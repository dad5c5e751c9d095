/* `pulsewright-bridge twin`: a virtual stimulator on a virtual muscle, behind a pseudo-terminal. */
#include "bridge/command/commands.h"
#include "bridge/command/twin_options.h"

#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/random.h>

enum status twin_documents_read(const struct arguments *arguments, struct twin_documents *documents,
                                struct message *why)
{
    const char *profile = argument(arguments, "--profile"), *hookup = argument(arguments, "--hookup"),
               *stimulator = argument(arguments, "--stimulator");
    enum status status = STATUS_OK;
    memset(documents, 0, sizeof *documents);
    if (profile) status = profile_load(profile, &documents->profile, why);
    if (status == STATUS_OK && hookup) status = hookup_load(hookup, &documents->hookup, why);
    if (status == STATUS_OK && stimulator) status = stimulator_load(stimulator, &documents->stimulator, why);
    documents->options = (struct twin_options){.profile = profile ? &documents->profile : NULL,
                                               .muscle = argument(arguments, "--muscle"),
                                               .hookup = hookup ? &documents->hookup : NULL,
                                               .stimulator = stimulator ? &documents->stimulator : NULL,
                                               .faults_path = argument(arguments, "--faults"),
                                               .log_path = argument(arguments, "--log")};
    if (getrandom(&documents->options.seed, sizeof documents->options.seed, 0) < 0)
        status = status_fail(why, STATUS_INTERNAL, "no random numbers");
    if (status != STATUS_OK) twin_documents_free(documents);
    return status;
}

void twin_documents_free(struct twin_documents *documents)
{
    profile_free(&documents->profile);
}

static volatile sig_atomic_t ended;

static void end(int signal_number)
{
    (void)signal_number;
    ended = 1;
}

static void announce(void *context, const char *address)
{
    (void)context;
    printf("%s\n", address);
    fflush(stdout);
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {""};
    struct twin_documents *documents = malloc(sizeof *documents);
    enum status status = documents ? twin_documents_read(arguments, documents, &why)
                                   : status_fail(&why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK) {
        (void)signal(SIGINT, end);
        (void)signal(SIGTERM, end);
        (void)signal(SIGHUP, end);
        status = twin_run(&documents->options, announce, NULL, &ended, &why);
        twin_documents_free(documents);
    }
    free(documents);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

static const struct option options[] = {
    {"--profile", "P", "whose muscle answers; without it the twin is a resistor"},
    {"--muscle", "M", "which muscle, on every channel"},
    {"--hookup", "H", "or: which muscle on which channel"},
    {"--stimulator", "S", "what it says it is; without it a built-in bench device"},
    {"--faults", "FILE", "what goes wrong, CSV: at_ms,direction,action,argument"},
    {"--log", "CSV", "every pulse given: time_us,channel,duration_us,current_ua"},
    {NULL, NULL, NULL}};
const struct command command_twin = {
    .name = "twin",
    .usage = "[--profile P (--muscle M | --hookup H)] [--stimulator S] [--faults FILE] [--log CSV]",
    .summary = "a virtual stimulator on a virtual muscle; its first line is its address",
    .help = "The twin runs the device's own code. It plays until it is ended. Times in the log are of the "
            "monotonic clock.\n"
            "Actions of a fault schedule: drop, corrupt, duplicate, delay (argument ms), cut, stall "
            "(argument ms), reset, interlock;\n"
            "direction in (from the host) or out.",
    .options = options,
    .run = run};
