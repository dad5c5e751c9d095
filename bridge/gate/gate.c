/* The gate. The goal of this code: nothing starts that was not approved, for this person, on this device, at
 * this time, this often; all reasons are told at once. It is the only place that reads the wall clock. */
#include "bridge/gate/gate.h"

#include "core/report/option.h"
#include <errno.h>
#include <fcntl.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <time.h>
#include <unistd.h>

enum { RESUME_WITHIN_S = 30 * 60, VALID_S_MAX = 7 * 86400 };

uint64_t gate_clock_s(void)
{
    return (uint64_t)time(NULL);
}

static void utc_text(uint64_t at_s, char text[40])
{
    const time_t at = (time_t)at_s;
    struct tm parts;
    if (!gmtime_r(&at, &parts) || strftime(text, 40, "%Y-%m-%d %H:%M UTC", &parts) == 0)
        (void)snprintf(text, 40, "an unknown time");
}

void gate_state_text(const struct signoff *signoff, bool rehearse, char *text, size_t size)
{
    char until[40];
    if (rehearse || (signoff && signoff->kind == SIGNOFF_REHEARSAL)) {
        (void)snprintf(text, size, "REHEARSAL, TWIN ONLY");
    } else if (!signoff) {
        (void)snprintf(text, size, "%s", NOT_SIGNED_TEXT);
    } else {
        utc_text(signoff->expires_s, until);
        (void)snprintf(text, size, "signed by %s (%s) for %s until %s", signoff->signer, signoff->role,
                       signoff->person, until);
    }
}

struct reasons {
    char text[MESSAGE_SIZE];
};

__attribute__((format(printf, 2, 3))) static void because(struct reasons *reasons, const char *format, ...)
{
    const size_t used = strlen(reasons->text);
    char reason[300];
    va_list list;
    va_start(list, format);
    (void)vsnprintf(reason, sizeof reason, format, list);
    va_end(list);
    (void)snprintf(reasons->text + used, sizeof reasons->text - used, "%s%s", used ? "; " : "", reason);
}

/* What was started under a sign-off: one line a use in an append-only file beside the signers list. */
struct uses {
    unsigned sessions, resumes, starts_of_image;
    uint64_t newest_s, last_use_s;
};

static void uses_path(const struct site *site, char path[600])
{
    (void)snprintf(path, 600, "%.500s/uses", site->folder);
}

static void count_uses(const struct site *site, const struct signoff *signoff,
                       const uint8_t root[IMAGE_ROOT_SIZE], struct uses *uses)
{
    char path[600], line[256], id[2 * SIGNOFF_ID_SIZE + 1], hex[2 * IMAGE_ROOT_SIZE + 1];
    memset(uses, 0, sizeof *uses);
    uses_path(site, path);
    (void)sodium_bin2hex(id, sizeof id, signoff->id, sizeof signoff->id);
    (void)sodium_bin2hex(hex, sizeof hex, root, IMAGE_ROOT_SIZE);
    FILE *in = fopen(path, "re");
    while (in && fgets(line, sizeof line, in)) {
        unsigned long long at_s = 0;
        char of[64], what[16], image[80];
        if (sscanf(line, "%llu %63s %15s %79s", &at_s, of, what, image) != 4) continue;
        if (at_s > uses->newest_s) uses->newest_s = at_s;
        if (strcmp(of, id) != 0) continue;
        if (at_s > uses->last_use_s) uses->last_use_s = at_s;
        if (strcmp(what, "resume") == 0)
            uses->resumes++;
        else
            uses->sessions++;
        if (strcmp(what, "start") == 0 && strcmp(image, hex) == 0) uses->starts_of_image++;
    }
    if (in) (void)fclose(in);
}

static enum status note_use(const struct site *site, const struct gate_request *request, uint64_t now_s,
                            struct message *why)
{
    char path[600], line[256], id[2 * SIGNOFF_ID_SIZE + 1], hex[2 * IMAGE_ROOT_SIZE + 1];
    uses_path(site, path);
    (void)sodium_bin2hex(id, sizeof id, request->signoff->id, SIGNOFF_ID_SIZE);
    (void)sodium_bin2hex(hex, sizeof hex, request->image->root, IMAGE_ROOT_SIZE);
    const int size = snprintf(line, sizeof line, "%llu %s %s %s\n", (unsigned long long)now_s, id,
                              request->resume ? "resume" : "start", hex);
    const int file = open(path, O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0644);
    if (file < 0)
        return status_fail(why, STATUS_REFUSED, "%s: the use can not be written down: %s", path,
                           strerror(errno));
    const bool written =
        flock(file, LOCK_EX) == 0 && write(file, line, (size_t)size) == size && fsync(file) == 0;
    return close(file) == 0 && written
               ? STATUS_OK
               : status_fail(why, STATUS_REFUSED, "%s: the use can not be written down", path);
}

static const struct signoff_image *signed_image(const struct signoff *signoff,
                                                const uint8_t root[IMAGE_ROOT_SIZE])
{
    for (uint32_t i = 0; i < signoff->images; i++)
        if (memcmp(signoff->image[i].root, root, IMAGE_ROOT_SIZE) == 0) return &signoff->image[i];
    return NULL;
}

/* The signer is on the list, with this key, this role, and the role may sign this. */
static void check_signer(const struct signoff *signoff, const struct site *site, struct reasons *reasons)
{
    uint8_t id[KEY_ID_SIZE];
    if (signoff->kind == SIGNOFF_REHEARSAL) return;
    const struct signer *signer = site ? site_signer(site, signoff->signer) : NULL;
    if (!signer) return because(reasons, "%s is no signer of this site", signoff->signer);
    key_id(signer->public_key, id);
    if (memcmp(id, signoff->key_id, sizeof id) != 0)
        because(reasons, "it is not signed with the key that is listed for %s", signoff->signer);
    if (signer->withdrawn) because(reasons, "%s is withdrawn as a signer", signoff->signer);
    if (strcmp(role_word(signer->role), signoff->role) != 0)
        because(reasons, "%s is listed as %s, not as %s", signoff->signer, role_word(signer->role),
                signoff->role);
    if (!role_may_sign_clinical(signer->role))
        because(reasons, "a %s may sign rehearsals only", role_word(signer->role));
}

static void check_time(const struct signoff *signoff, uint64_t now_s, const struct uses *uses,
                       struct reasons *reasons)
{
    char text[40];
    utc_text(signoff->expires_s, text);
    if (now_s < signoff->not_before_s) because(reasons, "it is not valid yet");
    if (now_s >= signoff->expires_s) because(reasons, "it ended at %s", text);
    if (signoff->expires_s > signoff->created_s + VALID_S_MAX)
        because(reasons, "it asks for more than 7 days");
    if (now_s < uses->newest_s)
        because(reasons, "this computer's clock is earlier than the newest use that was written down here");
}

static void check_counts(const struct gate_request *request, const struct signoff_image *image,
                         const struct uses *uses, uint64_t now_s, struct reasons *reasons)
{
    const struct signoff *signoff = request->signoff;
    if (request->resume) {
        if (uses->resumes >= signoff->resumes)
            because(reasons, "its %u resumes are used up", signoff->resumes);
        if (uses->last_use_s == 0 || now_s > uses->last_use_s + RESUME_WITHIN_S)
            because(reasons, "a resume has to come within 30 minutes of the stop");
        return;
    }
    if (uses->sessions >= signoff->sessions)
        because(reasons, "its %u session%s used up", signoff->sessions,
                signoff->sessions == 1 ? " is" : "s are");
    if (uses->sessions >= signoff->starts_in_all)
        because(reasons, "its %u starts are used up", signoff->starts_in_all);
    if (image && uses->starts_of_image >= image->starts)
        because(reasons, "the starts of this plan are used up");
}

static void check_signoff(const struct gate_request *request, const struct site *site, uint64_t now_s,
                          struct reasons *reasons)
{
    const struct signoff *signoff = request->signoff;
    const struct signoff_image *image = signed_image(signoff, request->image->root);
    struct uses uses = {0};
    if (site && signoff->kind == SIGNOFF_CLINICAL) count_uses(site, signoff, request->image->root, &uses);
    if (signoff->kind != (enum signoff_kind)request->image->header.signoff)
        because(reasons, "the pulses were compiled for another kind of sign-off");
    if (!image) because(reasons, "these pulses are not among those that were signed");
    if (image && request->plan_digest && memcmp(image->plan_digest, request->plan_digest, DIGEST_SIZE) != 0)
        because(reasons, "the plan is not the one that was signed");
    check_signer(signoff, site, reasons);
    check_time(signoff, now_s, &uses, reasons);
    if (signoff->kind == SIGNOFF_CLINICAL) check_counts(request, image, &uses, now_s, reasons);
    if (request->person && strcmp(request->person, signoff->person) != 0)
        because(reasons, "it is for %s, not for %s", signoff->person, request->person);
    if (!request->person && signoff->kind == SIGNOFF_CLINICAL && request->unit_said)
        because(reasons, "the person's code has to be typed again (--person)");
    if (request->unit_said && strncmp(request->unit_said, signoff->unit, IMAGE_NAME_SIZE - 1) != 0)
        because(reasons, "it is for the unit %s, this is %.32s", signoff->unit, request->unit_said);
}

enum status gate_may_start(const struct gate_request *request, const struct site *site, uint64_t now_s,
                           bool consume, struct message *why)
{
    struct reasons reasons = {""};
    const bool rehearsal =
        request->rehearse || (request->signoff && request->signoff->kind == SIGNOFF_REHEARSAL);
    if (rehearsal && request->link_is_real) because(&reasons, "a rehearsal never plays on a real port");
    if (rehearsal && request->unit_said && !request->device_is_twin)
        because(&reasons, "a rehearsal plays on a twin only, and the device does not say it is one");
    if (request->rehearse && request->image->header.signoff != SIGNOFF_REHEARSAL)
        because(&reasons, "these pulses were not compiled for a rehearsal");
    if (!request->rehearse && !request->signoff)
        because(&reasons, "there is no sign-off (--signoff FILE, or --rehearse on a twin)");
    if (request->link_is_real && !request->has_record)
        because(&reasons, "a real port is never driven without a record (--record DB)");
    if (!request->rehearse && request->signoff) check_signoff(request, site, now_s, &reasons);
    if (reasons.text[0]) return status_fail(why, STATUS_REFUSED, "%s", reasons.text);
    if (!consume || rehearsal) return STATUS_OK;
    return note_use(site, request, now_s, why);
}
