/* Plans, trains and folders. The goal of this code: whatever is signed or streamed is one plan document, read
 * once into memory. */
#include "bridge/command/plans.h"

#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include "core/plan/plan.h"
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

static enum status compile_with(const struct train *train, const struct arguments *arguments,
                                struct plan *plan, struct message *why)
{
    struct profile profile;
    struct stimulator stimulator;
    struct hookup hookup;
    const char *profile_path = argument(arguments, "--profile"),
               *stimulator_path = argument(arguments, "--stimulator"),
               *hookup_path = argument(arguments, "--hookup");
    if (!profile_path || !stimulator_path)
        return status_fail(why, STATUS_USAGE,
                           "a train needs --profile P and --stimulator S (and --muscle M)");
    enum status status = profile_load(profile_path, &profile, why);
    if (status != STATUS_OK) return status;
    status = stimulator_load(stimulator_path, &stimulator, why);
    if (status == STATUS_OK && hookup_path) status = hookup_load(hookup_path, &hookup, why);
    const struct plan_options options = {.ensemble = 0};
    if (status == STATUS_OK)
        status = plan_of_train(train, &profile, argument(arguments, "--muscle"), &stimulator,
                               hookup_path ? &hookup : NULL, &options, plan, why);
    profile_free(&profile);
    return status;
}

/* A train becomes a plan document in memory: these octets are what is signed. */
static enum status add_train(struct plans *plans, struct document_bytes *train_bytes,
                             const struct arguments *arguments, struct message *why)
{
    struct train train;
    struct text_out out = {0};
    struct plan made;
    enum status status = train_parse(train_bytes, &train, why);
    if (status != STATUS_OK) return status;
    status = compile_with(&train, arguments, &made, why);
    train_free(&train);
    if (status != STATUS_OK) return status;
    plan_print(&made, &out);
    plan_free(&made);
    struct document_bytes *bytes = &plans->bytes[plans->plans];
    *bytes = (struct document_bytes){.data = out.data, .size = out.size};
    memcpy(bytes->path, train_bytes->path, sizeof bytes->path);
    document_bytes_digest(bytes);
    status = plan_parse(bytes, &plans->plan[plans->plans], why);
    if (status == STATUS_OK)
        plans->plans++;
    else
        document_bytes_free(bytes);
    return status;
}

static enum status add_file(struct plans *plans, const char *path, const struct arguments *arguments,
                            struct message *why)
{
    struct document_bytes bytes;
    enum document_kind kind;
    if (plans->plans == PLANS_MAX)
        return status_fail(why, STATUS_USAGE, "%s is one too many, may be %d", path, PLANS_MAX);
    enum status status = document_read_bytes(path, &bytes, why);
    if (status == STATUS_OK) status = document_kind_of(&bytes, &kind, why);
    if (status == STATUS_OK && kind == DOCUMENT_TRAIN) {
        status = add_train(plans, &bytes, arguments, why);
        document_bytes_free(&bytes);
        return status;
    }
    if (status == STATUS_OK && kind != DOCUMENT_PLAN)
        status = status_fail(why, STATUS_USAGE, "%s is a %s, may be a plan or a train", path,
                             document_kind_format(kind));
    if (status == STATUS_OK) status = plan_parse(&bytes, &plans->plan[plans->plans], why);
    if (status == STATUS_OK)
        plans->bytes[plans->plans++] = bytes;
    else
        document_bytes_free(&bytes);
    return status;
}

static int is_document(const struct dirent *entry)
{
    const char *ending = strrchr(entry->d_name, '.');
    return ending && strcmp(ending, ".yaml") == 0;
}

enum status plans_add(struct plans *plans, const char *path, const struct arguments *arguments,
                      struct message *why)
{
    struct stat about;
    struct dirent **entry = NULL;
    if (stat(path, &about) != 0 || !S_ISDIR(about.st_mode)) return add_file(plans, path, arguments, why);
    const int count = scandir(path, &entry, is_document, alphasort);
    enum status status =
        count > 0 ? STATUS_OK : status_fail(why, STATUS_USAGE, "%s: holds no documents (*.yaml)", path);
    for (int i = 0; i < count; i++) {
        char file[PATH_SIZE];
        struct document_bytes bytes;
        enum document_kind kind = DOCUMENT_KINDS;
        struct message unused;
        (void)snprintf(file, sizeof file, "%.700s/%.255s", path, entry[i]->d_name);
        if (status == STATUS_OK && document_read_bytes(file, &bytes, why) == STATUS_OK) {
            const bool known = document_kind_of(&bytes, &kind, &unused) == STATUS_OK;
            document_bytes_free(&bytes);
            if (known && (kind == DOCUMENT_PLAN || kind == DOCUMENT_TRAIN))
                status = add_file(plans, file, arguments, why);
        }
        free(entry[i]);
    }
    free(entry);
    if (status == STATUS_OK && plans->plans == 0)
        status = status_fail(why, STATUS_USAGE, "%s: holds no plan and no train", path);
    return status;
}

void plans_free(struct plans *plans)
{
    for (size_t i = 0; i < plans->plans; i++) {
        document_bytes_free(&plans->bytes[i]);
        plan_free(&plans->plan[i]);
    }
    plans->plans = 0;
}
