/* `pulsewright-bridge sign` and `verify`: a clinician's approval, bound to exactly these pulses. */
#include "bridge/command/commands.h"
#include "bridge/command/plans.h"
#include "bridge/gate/gate.h"
#include "core/plan/plan.h"
#include "core/plan/sheet.h"
#include "core/report/cautions.h"
#include "core/report/json.h"

#include "core/digest/blake2b.h"
#include <math.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

static const struct option sign_options[] = {
    {"--as", "SIGNER", "who signs, a code (needed)"},
    {"-o", "SIGNOFF", "where to (needed; never over an existing file)"},
    {"--key", "FILE", "the signer's secret key (SIGNER.key unless said)"},
    {"--unit", "ID", "the very device, where the stimulator's document names none"},
    {"--starts", "N", "starts allowed for each plan, 1 unless said"},
    {"--sessions", "N", "sessions allowed, 1 unless said"},
    {"--resumes", "N", "resumes after a stop, 3 unless said"},
    {"--hours", "H", "how long it is valid, 24 unless said, at most 168"},
    {"--acknowledge", "FILE", "cautions acknowledged beforehand: their words, one a line"},
    {"--rehearsal", NULL, "for twins only: a key is made now and forgotten, cautions are shown"},
    {"--passphrase-fd", "N", "read the passphrase as a line from this descriptor"},
    PLANS_OPTIONS,
    {NULL, NULL, NULL}};

struct signing {
    const struct arguments *arguments;
    struct plans plans;
    struct signoff signoff;
    struct sheet sheet;
    double starts, sessions, resumes, hours;
};

static enum status read_numbers(struct signing *signing)
{
    const struct arguments *arguments = signing->arguments;
    signing->starts = signing->sessions = 1;
    signing->resumes = 3;
    signing->hours = 24;
    enum status status = argument_number(arguments, "--starts", 1, 1000, &signing->starts);
    if (status == STATUS_OK) status = argument_number(arguments, "--sessions", 1, 1000, &signing->sessions);
    if (status == STATUS_OK) status = argument_number(arguments, "--resumes", 0, 1000, &signing->resumes);
    if (status == STATUS_OK) status = argument_number(arguments, "--hours", 0.01, 168, &signing->hours);
    return status;
}

/* Pulses and charge a channel over one image, by the device's own expansion. */
static void add_doses(struct signoff *signoff, const struct plan *plan, const struct image *image)
{
    const struct train_grid grid = stimulator_grid(&plan->stimulator);
    for (uint32_t i = 0; i + 1 < image->n; i++) {
        struct segment_cursor cursor;
        struct pulse pulse;
        segment_begin(&cursor, &image->segments[i].segment, &grid);
        while (segment_next(&cursor, &pulse))
            for (uint32_t c = 0; c < signoff->channels; c++)
                if (signoff->channel[c].channel == pulse.channel) {
                    signoff->channel[c].pulses++;
                    signoff->channel[c].charge_pc += dose_charge_pc(pulse.current_ua, pulse.duration_us);
                }
    }
}

static enum status add_channels(struct signoff *signoff, const struct plan *plan, struct message *why)
{
    for (size_t i = 0; i < plan->channels; i++) {
        uint32_t c = 0;
        while (c < signoff->channels && signoff->channel[c].channel != plan->channel[i].channel) c++;
        if (c < signoff->channels && strcmp(signoff->channel[c].muscle, plan->channel[i].muscle) == 0)
            continue;
        if (c < signoff->channels)
            return status_fail(why, STATUS_REFUSED, "channel %u drives %s in one plan and %s in another",
                               plan->channel[i].channel, signoff->channel[c].muscle, plan->channel[i].muscle);
        signoff->channel[c].channel = (uint8_t)plan->channel[i].channel;
        memcpy(signoff->channel[c].muscle, plan->channel[i].muscle, sizeof signoff->channel[c].muscle);
        signoff->channels++;
    }
    return STATUS_OK;
}

/* Compiles one plan and adds it to the statement; its ledger is made anew from the very pulses. */
static enum status add_plan(struct signing *signing, size_t number, const char *unit, struct message *why)
{
    struct signoff *signoff = &signing->signoff;
    struct plan *plan = &signing->plans.plan[number];
    struct image image;
    struct ledger ledger;
    if (number && strcmp(plan->person, signoff->person) != 0)
        return status_fail(why, STATUS_REFUSED, "the plans are for %s and %s", signoff->person, plan->person);
    (void)snprintf(signoff->person, sizeof signoff->person, "%s", plan->person);
    enum status status = plan_ledger(plan, &ledger, why);
    if (status != STATUS_OK) return status;
    const bool within = ledger.within;
    ledger_free(&plan->ledger);
    plan->ledger = ledger; /* the sheet shows what was checked, not the document's copy */
    if (!within)
        return status_fail(why, STATUS_REFUSED, "%s breaks a limit: see `pulsewright check`",
                           signing->plans.bytes[number].path);
    status = image_of_plan(plan, unit, signoff->kind, &image, why);
    if (status != STATUS_OK) return status;
    if (number && strncmp(signoff->unit, image.identity.unit, IMAGE_NAME_SIZE) != 0)
        status = status_fail(why, STATUS_REFUSED, "the plans are for different devices");
    (void)snprintf(signoff->unit, sizeof signoff->unit, "%.31s", image.identity.unit);
    if (status == STATUS_OK) status = add_channels(signoff, plan, why);
    if (status == STATUS_OK) {
        memcpy(signoff->image[number].root, image.root, IMAGE_ROOT_SIZE);
        memcpy(signoff->image[number].plan_digest, signing->plans.bytes[number].digest, DIGEST_SIZE);
        signoff->image[number].starts = (uint32_t)signing->starts;
        signoff->images = (uint32_t)number + 1;
        memcpy(signoff->profile_digest, plan->profile_digest, sizeof signoff->profile_digest);
        memcpy(signoff->stimulator_digest, plan->stimulator_digest, sizeof signoff->stimulator_digest);
        add_doses(signoff, plan, &image);
    }
    image_free(&image);
    return status;
}

static void show_sheet(struct signing *signing)
{
    struct blake2b hash;
    blake2b_begin(&hash, DIGEST_SIZE);
    for (size_t p = 0; p < signing->plans.plans; p++) {
        sheet_of_plan(&signing->plans.plan[p], NOT_SIGNED_TEXT, &signing->sheet);
        for (size_t i = 0; i < signing->sheet.lines; i++) {
            printf("%s%s\n", signing->sheet.line[i].style == SHEET_HEADING ? "\n" : "",
                   signing->sheet.line[i].text);
            blake2b_add(&hash, signing->sheet.line[i].text, strlen(signing->sheet.line[i].text));
            blake2b_add(&hash, "\n", 1);
        }
    }
    blake2b_end(&hash, signing->signoff.sheet_digest);
}

static bool in_file(const struct document_bytes *bytes, const char *id)
{
    const size_t length = strlen(id);
    for (const char *at = bytes->data; (at = strstr(at, id)) != NULL; at++)
        if ((at == bytes->data || at[-1] == '\n') &&
            (at[length] == '\n' || at[length] == '\r' || at[length] == '\0'))
            return true;
    return false;
}

static bool ask_yes(const char *text)
{
    char line[16];
    printf("%s\n  acknowledged? (yes) ", text);
    fflush(stdout);
    return fgets(line, sizeof line, stdin) && strcmp(line, "yes\n") == 0;
}

static enum status take_cautions(struct signing *signing, struct message *why)
{
    const char *path = argument(signing->arguments, "--acknowledge");
    struct document_bytes bytes = {0};
    struct blake2b hash;
    enum status status = path ? document_read_bytes(path, &bytes, why) : STATUS_OK;
    blake2b_begin(&hash, DIGEST_SIZE);
    for (size_t i = 0; status == STATUS_OK && i < cautions_count; i++) {
        const bool asked = signing->signoff.kind == SIGNOFF_CLINICAL;
        if (asked && !(path ? in_file(&bytes, cautions[i].id) : isatty(0) && ask_yes(cautions[i].text)))
            status = status_fail(why, STATUS_REFUSED, "the caution \"%s\" is not acknowledged: %s",
                                 cautions[i].id, cautions[i].text);
        (void)snprintf(signing->signoff.caution[i], SIGNOFF_WORD_SIZE, "%s", cautions[i].id);
        blake2b_add(&hash, cautions[i].text, strlen(cautions[i].text));
        signing->signoff.cautions = (uint32_t)i + 1;
    }
    blake2b_end(&hash, signing->signoff.cautions_digest);
    document_bytes_free(&bytes);
    return status;
}

/* The signer's key: from its file under a passphrase, or, for a rehearsal, made now and forgotten after. */
static enum status take_key(struct signing *signing, struct secret_key **key, struct message *why)
{
    const struct arguments *arguments = signing->arguments;
    const char *as = argument(arguments, "--as"), *path = argument(arguments, "--key");
    char own_path[SIGNER_NAME_SIZE + 8], *passphrase = NULL;
    double from = -1;
    if (signing->signoff.kind == SIGNOFF_REHEARSAL && !path) {
        (void)snprintf(signing->signoff.role, sizeof signing->signoff.role, "%s", role_word(ROLE_REHEARSAL));
        return key_make(key, why);
    }
    struct site *site = calloc(1, sizeof *site);
    enum status status =
        site ? site_load_installed(site, why) : status_fail(why, STATUS_INTERNAL, "no memory");
    const struct signer *signer = status == STATUS_OK ? site_signer(site, as) : NULL;
    if (status == STATUS_OK && !signer)
        status = status_fail(why, STATUS_REFUSED, "%s is no signer of this site", as);
    if (status == STATUS_OK && signer->withdrawn)
        status = status_fail(why, STATUS_REFUSED, "%s is withdrawn as a signer", as);
    if (status == STATUS_OK && signing->signoff.kind == SIGNOFF_CLINICAL &&
        !role_may_sign_clinical(signer->role))
        status = status_fail(why, STATUS_REFUSED, "a %s may sign rehearsals only", role_word(signer->role));
    if (status == STATUS_OK)
        (void)snprintf(signing->signoff.role, sizeof signing->signoff.role, "%s", role_word(signer->role));
    (void)snprintf(own_path, sizeof own_path, "%.60s.key", as);
    if (status == STATUS_OK) status = argument_number(arguments, "--passphrase-fd", 0, 1000, &from);
    if (status == STATUS_OK) status = passphrase_read((int)from, "Passphrase: ", &passphrase, why);
    if (status == STATUS_OK) status = key_load(path ? path : own_path, passphrase, key, why);
    if (status == STATUS_OK && memcmp(key_public(*key), signer->public_key, KEY_PUBLIC_SIZE) != 0)
        status = status_fail(why, STATUS_REFUSED, "this is not the key that is listed for %s", as);
    passphrase_free(passphrase);
    free(site);
    return status;
}

static enum status sign(struct signing *signing, struct message *why)
{
    const struct arguments *arguments = signing->arguments;
    struct signoff *signoff = &signing->signoff;
    struct secret_key *key = NULL;
    enum status status = STATUS_OK;
    signoff->kind = argument_given(arguments, "--rehearsal") ? SIGNOFF_REHEARSAL : SIGNOFF_CLINICAL;
    for (int i = 0; i < arguments->positionals && status == STATUS_OK; i++)
        status = plans_add(&signing->plans, arguments->positional[i], arguments, why);
    for (size_t p = 0; p < signing->plans.plans && status == STATUS_OK; p++)
        status = add_plan(signing, p, argument(arguments, "--unit"), why);
    if (status != STATUS_OK) return status;
    signoff->sessions = (uint32_t)signing->sessions;
    signoff->resumes = (uint32_t)signing->resumes;
    signoff->starts_in_all = (uint32_t)(signing->sessions * signing->starts * (double)signing->plans.plans);
    signoff->created_s = signoff->not_before_s = gate_clock_s();
    signoff->expires_s = signoff->created_s + (uint64_t)(signing->hours * 3600);
    (void)snprintf(signoff->program, sizeof signoff->program, "pulsewright " PULSEWRIGHT_VERSION);
    (void)snprintf(signoff->signer, sizeof signoff->signer, "%.63s", argument(arguments, "--as"));
    randombytes_buf(signoff->id, sizeof signoff->id);
    show_sheet(signing);
    status = take_cautions(signing, why);
    if (status == STATUS_OK) status = take_key(signing, &key, why);
    if (status == STATUS_OK) {
        key_id(key_public(key), signoff->key_id);
        status = signoff_write(argument(arguments, "-o"), signoff, key, signing->plans.bytes,
                               signing->plans.plans, why);
    }
    key_free(key);
    return status;
}

static enum status run_sign(const struct arguments *arguments)
{
    struct message why = {""};
    char state[200];
    if (!argument(arguments, "--as") || !argument(arguments, "-o"))
        return command_fail(arguments, STATUS_USAGE, "--as SIGNER and -o SIGNOFF are needed");
    if (keys_begin(&why) != STATUS_OK) return command_fail(arguments, STATUS_INTERNAL, "%s", why.text);
    struct signing *signing = calloc(1, sizeof *signing);
    if (!signing) return command_fail(arguments, STATUS_INTERNAL, "no memory");
    signing->arguments = arguments;
    enum status status = read_numbers(signing);
    if (status == STATUS_OK) {
        status = sign(signing, &why);
        gate_state_text(&signing->signoff, false, state, sizeof state);
        if (status == STATUS_OK)
            printf("\n%s\n%s: %u plan%s, %u session%s, for the unit %s\n", state, argument(arguments, "-o"),
                   signing->signoff.images, signing->signoff.images == 1 ? "" : "s",
                   signing->signoff.sessions, signing->signoff.sessions == 1 ? "" : "s",
                   signing->signoff.unit);
        else
            (void)command_fail(arguments, status, "%s", why.text);
    }
    plans_free(&signing->plans);
    free(signing);
    return status;
}

const struct command command_sign = {.name = "sign",
                                     .usage =
                                         "(PLAN|TRAIN|DIR)... --as SIGNER -o SIGNOFF [--starts N] [--resumes "
                                         "N] [--sessions N] [--hours H] [--acknowledge FILE] [--rehearsal]",
                                     .summary = "a signer's approval of exactly these pulses",
                                     .help = "Shows each plan's sheet, asks for each caution, then for the "
                                             "passphrase, and writes the sign-off: a statement of what was\n"
                                             "approved, the signature, and the plans themselves. The device "
                                             "proves limits, order and lease; it does not check the\n"
                                             "signature: the gate does, on this computer, before anything is "
                                             "armed. A rehearsal's key is made now and forgotten;\n"
                                             "what it signs plays on twins only.",
                                     .options = sign_options,
                                     .positional_least = 1,
                                     .positional_most = 64,
                                     .run = run_sign};

static const struct option verify_options[] = {{"--person", "CODE", "the person, typed again"},
                                               {"--json", NULL, "for machines"},
                                               PLANS_OPTIONS,
                                               {NULL, NULL, NULL}};

static enum status verify_one(const struct signoff_file *file, const struct site *site,
                              const struct document_bytes *bytes, const struct plan *plan,
                              const struct arguments *arguments, struct message *why)
{
    struct image image;
    enum status status = image_of_plan(plan, file->signoff.unit, file->signoff.kind, &image, why);
    if (status != STATUS_OK) return status;
    const struct gate_request request = {.image = &image,
                                         .plan_digest = bytes->digest,
                                         .signoff = &file->signoff,
                                         .person = argument(arguments, "--person")};
    status = gate_may_start(&request, site, gate_clock_s(), false, why);
    image_free(&image);
    return status;
}

static enum status run_verify(const struct arguments *arguments)
{
    struct message why = {""};
    char state[200];
    if (keys_begin(&why) != STATUS_OK) return command_fail(arguments, STATUS_INTERNAL, "%s", why.text);
    struct signoff_file *file = calloc(1, sizeof *file);
    struct site *site = calloc(1, sizeof *site);
    struct plans *plans = calloc(1, sizeof *plans);
    struct message no_site = {""};
    enum status status =
        file && site && plans ? signoff_read(arguments->positional[0], file, &why) : STATUS_INTERNAL;
    const bool has_site = status == STATUS_OK && site_load_installed(site, &no_site) == STATUS_OK;
    for (int i = 1; status == STATUS_OK && i < arguments->positionals; i++)
        status = plans_add(plans, arguments->positional[i], arguments, &why);
    for (size_t p = 0; status == STATUS_OK && p < plans->plans; p++)
        status = verify_one(file, has_site ? site : NULL, &plans->bytes[p], &plans->plan[p], arguments, &why);
    if (status == STATUS_OK) gate_state_text(&file->signoff, false, state, sizeof state);
    if (argument_given(arguments, "--json") && (status == STATUS_OK || status == STATUS_REFUSED)) {
        struct json json;
        json_begin(&json, stdout);
        json_bool(&json, "valid", status == STATUS_OK);
        json_text(&json, "state", status == STATUS_OK ? state : NULL);
        json_text(&json, "why", status == STATUS_OK ? NULL : why.text);
        json_end(&json);
    } else if (status == STATUS_OK) {
        printf("%s\n", state);
    }
    if (status != STATUS_OK) (void)command_fail(arguments, status, "%s", why.text);
    if (plans) plans_free(plans);
    if (file) signoff_file_free(file);
    free(plans);
    free(site);
    free(file);
    return status;
}

const struct command command_verify = {
    .name = "verify",
    .usage = "SIGNOFF PLAN... [--person CODE] [--json]",
    .summary = "whether these plans may start under this sign-off now, and why not",
    .options = verify_options,
    .positional_least = 2,
    .positional_most = 65,
    .run = run_verify};
