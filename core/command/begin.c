/* pulsewright begin: every document to start from. The goal of this code: a folder in which each document is
 * valid, says by comments what each key means (from the same tables that read it), and asks for little:
 * limits well below the program's ceilings. What is written is read first, so that nothing invalid is ever
 * given. */
#include "core/command/commands.h"

#include "core/document/demand.h"
#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/recordings.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

static const struct option options[] = {
    {"--person", "CODE", "the person's code, such as P-017; never a name"},
    {"--muscle", "M", "the muscle, such as left-quadriceps"},
    {NULL, NULL, NULL},
};

/* Force and fatigue: published values of able-bodied quadriceps (Ding et al. 2003, in part from memory), to
 * start a fit from. All else is invented: cautious, to be replaced by what is found. */
static void profile_text(struct text_out *out, const char *person, const char *muscle)
{
    text_out_print(
        out,
        "format: pulsewright-profile-1\nperson: %s\nmuscles:\n  - name: %s\n"
        "    force: {A_rest_n_per_ms: 3.009, Km_rest: 0.103, R0_above_Km: 1.04, tau1_rest_ms: 50.957, "
        "tau2_ms: 60, tau_c_ms: 20}\n"
        "    fatigue: {alpha_A_per_ms2: -4.0e-7, alpha_Km_per_ms_n: 1.9e-8, alpha_tau1_per_n: 2.1e-5, "
        "tau_fat_ms: 127000}\n"
        "    recruitment: {law: strength-duration, rheobase_ma: 22, chronaxie_us: 180, spread: 0.25}\n"
        "    tiers: 8\n"
        "    limits: {current_ma: 40, duration_us: 300, frequency_pps: 50, charge_uc: 12, rms_ma: 15, "
        "gap_us: 5000, on_ms: 6000, duty_percent: 40, first_uc: 2, slew_uc_per_s: 20, "
        "session_pulses: 20000, session_charge_mc: 200, session_ms: 1800000, force_n: 100}\n",
        person, muscle);
}

static void demand_text(struct text_out *out, const char *person, const char *muscle)
{
    (void)person;
    text_out_print(out,
                   "format: pulsewright-demand-1\nkind: hold\nmuscle: %s\ntarget_percent: 20\nhold_ms: 2000\n"
                   "rest_ms: 6000\ncontractions: 10\n",
                   muscle);
}

static void stimulator_text(struct text_out *out, const char *person, const char *muscle)
{
    (void)person;
    (void)muscle;
    text_out_print(out, "format: pulsewright-stimulator-1\nname: my-stimulator\nchannels: 1\n"
                        "current_ma: {from: 0, to: 60, step: 1}\nduration_us: {from: 50, to: 400, step: 10}\n"
                        "frequency_pps: {from: 1, to: 60, step: 1}\ngap_us_min: 5000\nphases: symmetric\n"
                        "interphase_us: 100\ncompliance_v: 100\nload_ohm: 1000\n");
}

static void hookup_text(struct text_out *out, const char *person, const char *muscle)
{
    text_out_print(out,
                   "format: pulsewright-hookup-1\nperson: %s\nchannels:\n"
                   "  - {channel: 1, muscle: %s, pad_cm2: 45, return_pad_cm2: 45}\n",
                   person, muscle);
}

static void train_text(struct text_out *out, const char *person, const char *muscle)
{
    (void)person;
    (void)muscle;
    text_out_print(
        out, "format: pulsewright-train-1\ncontractions:\n"
             "  - {frequency_pps: 20, duration_us: 300, current_ma: 35, ramp_up: {shape: raised-cosine, "
             "ms: 1000}, hold_ms: 1000, ramp_down: {shape: linear, ms: 300}, rest_ms: 10000, repeat: 3}\n");
}

static void recordings_text(struct text_out *out, const char *person, const char *muscle)
{
    (void)person;
    text_out_print(out,
                   "format: pulsewright-recordings-1\nmuscle: %s\nrecordings:\n"
                   "  - name: first\n    kind: force\n    pulses: {train: train.yaml}\n"
                   "    signal: {file: first.csv, time: time_s, time_unit: s, value: force_n, unit: N}\n"
                   "    use: fit\n",
                   muscle);
}

/* Reads the short text by its kind's table and writes it whole, commented. */
#define EXPAND(kind, release)                                                                                \
    static enum status expand_##kind(const struct document_bytes *bytes, struct text_out *out,               \
                                     struct message *why)                                                    \
    {                                                                                                        \
        struct kind document;                                                                                \
        const enum status status = kind##_parse(bytes, &document, why);                                      \
        if (status != STATUS_OK) return status;                                                              \
        kind##_print(&document, out);                                                                        \
        release;                                                                                             \
        return STATUS_OK;                                                                                    \
    }
EXPAND(profile, profile_free(&document))
EXPAND(demand, demand_free(&document))
EXPAND(stimulator, (void)0)
EXPAND(hookup, (void)0)
EXPAND(train, train_free(&document))
EXPAND(recordings, recordings_free(&document))

static const struct start {
    const char *file, *what;
    void (*text)(struct text_out *out, const char *person, const char *muscle);
    enum status (*expand)(const struct document_bytes *bytes, struct text_out *out, struct message *why);
} starts[] = {
    {"profile.yaml",
     "Values to start from, no one's: replace them by what titration and a fit find. Limits are cautious.",
     profile_text, expand_profile},
    {"demand.yaml", "What force is wanted. Invented: a few short holds.", demand_text, expand_demand},
    {"stimulator.yaml", "Invented: replace every number by those of your stimulator.", stimulator_text,
     expand_stimulator},
    {"hookup.yaml", "Which channel drives what. Measure the pads and write their area.", hookup_text,
     expand_hookup},
    {"train.yaml", "Invented: three gentle test contractions.", train_text, expand_train},
    {"recordings.yaml", "One recording of train.yaml, yet to be made: first.csv with its columns.",
     recordings_text, expand_recordings},
};
enum { STARTS = sizeof starts / sizeof starts[0] };

static enum status make(const struct start *start, const char *person, const char *muscle,
                        struct text_out *out, struct message *why)
{
    struct text_out brief = {0};
    start->text(&brief, person, muscle);
    struct document_bytes bytes = {.data = brief.data, .size = brief.size};
    (void)snprintf(bytes.path, sizeof bytes.path, "%s", start->file);
    out->commented = true;
    text_out_print(out, "# %s\n", start->what);
    const enum status status = start->expand(&bytes, out, why);
    text_out_free(&brief);
    return status;
}

static enum status join(const char *folder, const char *file, char path[PATH_SIZE], struct message *why)
{
    const int length = snprintf(path, PATH_SIZE, "%s/%s", folder, file);
    if (length >= 0 && length < PATH_SIZE) return STATUS_OK;
    return status_fail(why, STATUS_USAGE, "%.80s..: is too long a path", folder);
}

/* Everything is made and every name is free before the first file is written. */
static enum status write_all(const char *folder, struct text_out made[STARTS], struct message *why)
{
    char path[PATH_SIZE];
    struct stat about;
    if (mkdir(folder, 0777) != 0 && errno != EEXIST)
        return status_fail(why, STATUS_USAGE, "%s: can not be made: %s", folder, strerror(errno));
    for (int i = 0; i < STARTS; i++) {
        const enum status status = join(folder, starts[i].file, path, why);
        if (status != STATUS_OK) return status;
        if (lstat(path, &about) == 0)
            return status_fail(why, STATUS_USAGE,
                               "%s is there already; begin writes over nothing: give another folder", path);
    }
    for (int i = 0; i < STARTS; i++) {
        enum status status = join(folder, starts[i].file, path, why);
        if (status == STATUS_OK) status = document_write_file(path, made[i].data, made[i].size, false, why);
        if (status != STATUS_OK) return status;
        printf("%s\n", path);
    }
    return STATUS_OK;
}

static enum status run(const struct arguments *arguments)
{
    const char *folder = arguments->positional[0];
    const char *person = argument(arguments, "--person"), *muscle = argument(arguments, "--muscle");
    struct message why = {.text = ""};
    struct text_out made[STARTS] = {0};
    if (!person || !muscle)
        return command_fail(arguments, STATUS_USAGE, "--person CODE and --muscle M are needed");
    enum status status = STATUS_OK;
    for (int i = 0; i < STARTS && status == STATUS_OK; i++)
        status = make(&starts[i], person, muscle, &made[i], &why);
    if (status == STATUS_DOCUMENT) status = STATUS_USAGE; /* only the code and the name came from outside */
    if (status == STATUS_OK) status = write_all(folder, made, &why);
    for (int i = 0; i < STARTS; i++) text_out_free(&made[i]);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    printf("Next: write your stimulator's numbers into stimulator.yaml, then\n"
           "  pulsewright check %s/profile.yaml\n"
           "  pulsewright predict %s/profile.yaml --muscle %s --train %s/train.yaml\n",
           folder, folder, muscle, folder);
    return STATUS_OK;
}

const struct command command_begin = {
    .name = "begin",
    .usage = "DIR --person CODE --muscle M",
    .summary = "every document to start from, commented and valid",
    .help = "Writes profile, demand, stimulator, hookup, train and recordings into DIR; nothing there is "
            "overwritten.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run,
};
