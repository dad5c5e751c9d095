/* pulsewright plan: demand -> plan. The goal of this code: documents in, one plan out, the verdict first; a
 * plan is written also where the demand can not be met, and the exit code says so. */
#include "core/plan/plan.h"
#include "core/command/commands.h"
#include "core/command/plan_output.h"
#include "core/plan/ensemble.h"

#include <stdio.h>
#include <string.h>

enum { DEMANDS_MAX = STIMULATOR_CHANNELS_MAX };

static const struct option options[] = {
    {"--stimulator", "S", "what the device can give (needed)"},
    {"--hookup", "H", "which channel drives what; without it channel 1"},
    {"-o", "PLAN", "write the plan (needed)"},
    {"--replace", NULL, "write over existing files, keeping the old ones as NAME.1"},
    {"--picture", "FILE",
     "draw the session: mean and remaining force of every contraction (.png, .svg, .pdf)"},
    {"--ensemble", "N", "draws of the profile's uncertainty, 0: none (64)"},
    {"--seed", "N", "of the draws (1)"},
    {"--today", "DATE", "YYYY-MM-DD, for the profile's age; else the clock's"},
    {"--json", NULL, "the result for machines"},
    {NULL, NULL, NULL},
};

/* Everything that is read. */
struct input {
    struct document_bytes profile_bytes, demand_bytes[DEMANDS_MAX], stimulator_bytes;
    struct profile profile;
    struct demand demand[DEMANDS_MAX];
    struct stimulator stimulator;
    struct hookup hookup;
    size_t demands;
    bool has_profile, has_hookup;
};

static void input_free(struct input *input)
{
    document_bytes_free(&input->profile_bytes);
    document_bytes_free(&input->stimulator_bytes);
    for (size_t i = 0; i < DEMANDS_MAX; i++) document_bytes_free(&input->demand_bytes[i]);
    if (input->has_profile) profile_free(&input->profile);
    for (size_t i = 0; i < input->demands; i++) demand_free(&input->demand[i]);
}

static enum status load_profile(const char *path, struct input *input, struct message *why)
{
    enum status status = document_read_bytes(path, &input->profile_bytes, why);
    if (status == STATUS_OK) status = profile_parse(&input->profile_bytes, &input->profile, why);
    input->has_profile = status == STATUS_OK;
    return status;
}

static enum status load_demand(const char *path, struct input *input, struct message *why)
{
    const size_t at = input->demands;
    if (at == DEMANDS_MAX) return status_fail(why, STATUS_USAGE, "more than %d demands", (int)DEMANDS_MAX);
    enum status status = document_read_bytes(path, &input->demand_bytes[at], why);
    if (status == STATUS_OK) status = demand_parse(&input->demand_bytes[at], &input->demand[at], why);
    if (status == STATUS_OK) input->demands++;
    return status;
}

static enum status load_hookup(const char *path, struct input *input, struct message *why)
{
    if (!path) return STATUS_OK;
    const enum status status = hookup_load(path, &input->hookup, why);
    if (status != STATUS_OK) return status;
    input->has_hookup = true;
    if (strcmp(input->hookup.person, input->profile.person) != 0)
        return status_fail(why, STATUS_REFUSED, "%s is for %s, the profile is of %s", path,
                           input->hookup.person, input->profile.person);
    return STATUS_OK;
}

static enum status load(const struct arguments *arguments, struct input *input, struct message *why)
{
    enum status status = load_profile(arguments->positional[0], input, why);
    for (int i = 1; i < arguments->positionals && status == STATUS_OK; i++)
        status = load_demand(arguments->positional[i], input, why);
    if (status == STATUS_OK)
        status = document_read_bytes(argument(arguments, "--stimulator"), &input->stimulator_bytes, why);
    if (status == STATUS_OK) status = stimulator_parse(&input->stimulator_bytes, &input->stimulator, why);
    if (status == STATUS_OK) status = load_hookup(argument(arguments, "--hookup"), input, why);
    return status;
}

static void hex(const uint8_t digest[DIGEST_SIZE], char text[2 * DIGEST_SIZE + 1])
{
    static const char digits[] = "0123456789abcdef";
    for (size_t i = 0; i < DIGEST_SIZE; i++) {
        text[2 * i] = digits[digest[i] >> 4];
        text[2 * i + 1] = digits[digest[i] & 15];
    }
    text[2 * DIGEST_SIZE] = '\0';
}

static enum status make(const struct arguments *arguments, struct input *input,
                        const struct plan_options *options_given, struct plan *plan, struct message *why)
{
    enum status status = load(arguments, input, why);
    if (status != STATUS_OK) return status;
    status = plan_make_group(&input->profile, input->demand, input->demands, &input->stimulator,
                             input->has_hookup ? &input->hookup : NULL, options_given, plan, why);
    if (plan->channels == 0) return status;
    hex(input->profile_bytes.digest, plan->profile_digest);
    hex(input->demand_bytes[0].digest, plan->demand_digest);
    hex(input->stimulator_bytes.digest, plan->stimulator_digest);
    return status;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {.text = ""};
    struct input input = {0};
    struct plan plan = {0};
    struct plan_progress progress;
    double ensemble = ENSEMBLE_DRAWS, seed = 1.0;
    struct plan_options given = {.progress = plan_progress_show, .context = &progress};
    if (!argument(arguments, "--stimulator"))
        return command_fail(arguments, STATUS_USAGE, "--stimulator S is needed");
    enum status status = plan_output_ready(arguments);
    if (status == STATUS_OK)
        status = argument_number(arguments, "--ensemble", 0.0, ENSEMBLE_DRAWS_MAX, &ensemble);
    if (status == STATUS_OK) status = argument_number(arguments, "--seed", 0.0, 9007199254740992.0, &seed);
    if (status == STATUS_OK) status = plan_output_today(arguments, &given.today);
    if (status != STATUS_OK) return status;
    given.ensemble = (unsigned)ensemble;
    given.seed = (uint64_t)seed;
    plan_progress_begin(&progress);
    status = make(arguments, &input, &given, &plan, &why);
    const double seconds = plan_progress_end(&progress);
    input_free(&input);
    if (plan.channels == 0) return command_fail(arguments, status, "%s", why.text);
    struct message write_why = {.text = ""};
    const enum status written = plan_output_write(arguments, &plan, &write_why);
    if (written == STATUS_OK) {
        if (argument_given(arguments, "--json"))
            plan_output_json(&plan, seconds);
        else
            plan_output_text(&plan);
        fprintf(stderr, "%s\n", NOT_SIGNED_TEXT);
    }
    plan_free(&plan);
    return written == STATUS_OK ? status : command_fail(arguments, written, "%s", write_why.text);
}

const struct command command_plan = {
    .name = "plan",
    .usage = "PROFILE DEMAND... --stimulator S [--hookup H] -o PLAN [--picture FILE] [--json]",
    .summary = "the pulses that give a demanded force as long as can be, within every limit",
    .help = "Chooses frequency, opening, recruitment and ramp, block by block, and counts every figure again "
            "from the final pulses.\n"
            "Where the demand can not be met in full the plan is written all the same, the first line says "
            "how far it goes and what\n"
            "binds, and the exit code is 3.",
    .options = options,
    .positional_least = 2,
    .positional_most = 1 + DEMANDS_MAX,
    .run = run,
};
