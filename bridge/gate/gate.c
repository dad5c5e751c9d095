/* The gate. The goal of this code: nothing starts that was not approved, for this person, on this device, at
 * this time, this often; all reasons are told at once. It is the only place that reads the wall clock. */
#include "bridge/gate/gate.h"

#include "core/digest/blake2b.h"
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

/* What was started under a sign-off: one line a use in an append-only file beside the signers list. A line
 * ends with a link, BLAKE2b-128 of the link before and its own text: one that was changed or taken out is
 * found; lines cut off at the end are not. */
enum { LINK_SIZE = 16 };
struct uses {
    unsigned sessions, starts, resumes; /* of the sign-off; sessions: first starts but those of held images */
    unsigned starts_of_image;
    bool under_way;             /* this image was begun and has not finished */
    uint64_t newest_s, since_s; /* since_s: its last line, a stop where one was written */
    uint8_t link[LINK_SIZE];    /* of the newest line */
    int file;                   /* locked; -1: none there yet */
    char path[600];
};

static enum status open_uses(const struct site *site, bool writing, struct uses *uses, struct message *why)
{
    memset(uses, 0, sizeof *uses);
    (void)snprintf(uses->path, sizeof uses->path, "%.500s/uses", site->folder);
    const int flags = writing ? O_RDWR | O_CREAT | O_APPEND : O_RDONLY;
    uses->file = open(uses->path, flags | O_CLOEXEC | O_NOFOLLOW, 0660);
    if (uses->file < 0 && errno == ENOENT && !writing) return STATUS_OK;
    if (uses->file >= 0 && flock(uses->file, writing ? LOCK_EX : LOCK_SH) == 0) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "%s: the uses can not be counted: %s", uses->path,
                       strerror(errno));
}

static void close_uses(struct uses *uses)
{
    if (uses->file >= 0) (void)close(uses->file);
}

/* Text and link of the line after the newest. */
static int make_line(const struct uses *uses, unsigned long long at_s, const char *id, const char *what,
                     const char *root, char line[256], uint8_t link[LINK_SIZE])
{
    char hex[2 * LINK_SIZE + 1];
    struct blake2b hash;
    const int size = snprintf(line, 200, "%llu %.32s %.15s %.64s", at_s, id, what, root);
    blake2b_begin(&hash, LINK_SIZE);
    blake2b_add(&hash, uses->link, LINK_SIZE);
    blake2b_add(&hash, line, (size_t)size);
    blake2b_end(&hash, link);
    (void)sodium_bin2hex(hex, sizeof hex, link, LINK_SIZE);
    return size + snprintf(line + size, 256 - (size_t)size, " %s\n", hex);
}

/* One line counted; false: it is not the one that was written there. */
static bool count_line(struct uses *uses, const char *line, const char *own_id, const char *own_root)
{
    unsigned long long at_s = 0;
    uint8_t link[LINK_SIZE];
    char id[64], what[16], root[80], again[256];
    if (sscanf(line, "%llu %63s %15s %79s", &at_s, id, what, root) != 4) return false;
    (void)make_line(uses, at_s, id, what, root, again, link);
    if (strcmp(again, line) != 0) return false;
    memcpy(uses->link, link, sizeof link);
    const bool start = strcmp(what, "start") == 0, held = strcmp(what, "held") == 0;
    const bool resume = strcmp(what, "resume") == 0, stopped = strcmp(what, "stopped") == 0;
    if (at_s > uses->newest_s) uses->newest_s = at_s;
    if (strcmp(id, own_id) != 0) return true;
    uses->sessions += start ? 1 : 0;
    uses->starts += start || held ? 1 : 0;
    uses->resumes += resume ? 1 : 0;
    if (strcmp(root, own_root) != 0) return true;
    uses->starts_of_image += start || held ? 1 : 0;
    uses->under_way = start || held || resume || (stopped && uses->under_way);
    uses->since_s = at_s;
    return true;
}

static enum status count_uses(const struct signoff *signoff, const uint8_t root[IMAGE_ROOT_SIZE],
                              struct uses *uses, struct message *why)
{
    char line[256], id[2 * SIGNOFF_ID_SIZE + 1], hex[2 * IMAGE_ROOT_SIZE + 1];
    (void)sodium_bin2hex(id, sizeof id, signoff->id, sizeof signoff->id);
    (void)sodium_bin2hex(hex, sizeof hex, root, IMAGE_ROOT_SIZE);
    const int copy = uses->file >= 0 ? dup(uses->file) : -1; /* shares the lock */
    FILE *in = copy >= 0 ? fdopen(copy, "r") : NULL;
    unsigned number = 1;
    if (uses->file >= 0 && !in) return status_fail(why, STATUS_REFUSED, "%s: can not be read", uses->path);
    enum status status = STATUS_OK;
    for (; in && status == STATUS_OK && fgets(line, sizeof line, in); number++)
        if (!count_line(uses, line, id, hex))
            status = status_fail(why, STATUS_REFUSED,
                                 "%s: line %u is damaged: how often was started is not known, so nothing may "
                                 "start until the site's keeper has looked at it",
                                 uses->path, number);
    if (in) (void)fclose(in);
    return status;
}

static enum status note_use(const struct uses *uses, const struct gate_request *request, const char *what,
                            uint64_t now_s, struct message *why)
{
    char line[256], id[2 * SIGNOFF_ID_SIZE + 1], hex[2 * IMAGE_ROOT_SIZE + 1];
    (void)sodium_bin2hex(id, sizeof id, request->signoff->id, SIGNOFF_ID_SIZE);
    (void)sodium_bin2hex(hex, sizeof hex, request->image->root, IMAGE_ROOT_SIZE);
    uint8_t link[LINK_SIZE];
    const int size = make_line(uses, now_s, id, what, hex, line, link);
    if (write(uses->file, line, (size_t)size) == size && fsync(uses->file) == 0) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "%s: the use can not be written down: %s", uses->path,
                       strerror(errno));
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
        if (!uses->under_way)
            because(reasons, "there is nothing to resume: these pulses were not begun, or they finished");
        else if (now_s > uses->since_s + RESUME_WITHIN_S)
            because(reasons, "a resume has to come within 30 minutes of the stop");
        return;
    }
    if (request->image->header.kind != IMAGE_HELD && uses->sessions >= signoff->sessions)
        because(reasons, "its %u session%s used up", signoff->sessions,
                signoff->sessions == 1 ? " is" : "s are");
    if (uses->starts >= signoff->starts_in_all)
        because(reasons, "its %u starts are used up", signoff->starts_in_all);
    if (image && uses->starts_of_image >= image->starts)
        because(reasons, "the starts of this plan are used up");
}

static void check_signoff(const struct gate_request *request, const struct site *site, uint64_t now_s,
                          const struct uses *uses, bool starting, struct reasons *reasons)
{
    const struct signoff *signoff = request->signoff;
    const struct signoff_image *image = signed_image(signoff, request->image->root);
    if (signoff->kind != (enum signoff_kind)request->image->header.signoff)
        because(reasons, "the pulses were compiled for another kind of sign-off");
    if (!image) because(reasons, "these pulses are not among those that were signed");
    if (image && request->plan_digest && memcmp(image->plan_digest, request->plan_digest, DIGEST_SIZE) != 0)
        because(reasons, "the plan is not the one that was signed");
    check_signer(signoff, site, reasons);
    check_time(signoff, now_s, uses, reasons);
    if (signoff->kind == SIGNOFF_CLINICAL) check_counts(request, image, uses, now_s, reasons);
    if (request->person && strcmp(request->person, signoff->person) != 0)
        because(reasons, "it is for %s, not for %s", signoff->person, request->person);
    if (!request->person && signoff->kind == SIGNOFF_CLINICAL && (request->unit_said || starting))
        because(reasons, "the person's code has to be typed again (--person)");
    if (!request->unit_said && starting) because(reasons, "the device has not said which one it is");
    if (request->unit_said && strncmp(request->unit_said, signoff->unit, IMAGE_NAME_SIZE - 1) != 0)
        because(reasons, "it is for the unit %s, this is %.32s", signoff->unit, request->unit_said);
}

/* Is it counted? Without a site nobody is listed either, and it is refused for that. */
static bool is_counted(const struct gate_request *request, const struct site *site)
{
    return site && !request->rehearse && request->signoff && request->signoff->kind == SIGNOFF_CLINICAL;
}

enum status gate_may_start(const struct gate_request *request, const struct site *site, uint64_t now_s,
                           bool consume, struct message *why)
{
    struct reasons reasons = {""};
    struct uses uses = {.file = -1};
    const bool counted = is_counted(request, site);
    enum status status = counted ? open_uses(site, consume, &uses, why) : STATUS_OK;
    if (counted && status == STATUS_OK)
        status = count_uses(request->signoff, request->image->root, &uses, why);
    if (status != STATUS_OK) because(&reasons, "%s", why->text);
    const bool rehearsal =
        request->rehearse || (request->signoff && request->signoff->kind == SIGNOFF_REHEARSAL);
    if (rehearsal && request->link_is_real) because(&reasons, "a rehearsal never plays on a real port");
    if (rehearsal && (request->unit_said || consume) && !request->device_is_twin)
        because(&reasons, "a rehearsal plays on a twin only, and the device does not say it is one");
    if (request->rehearse && request->image->header.signoff != SIGNOFF_REHEARSAL)
        because(&reasons, "these pulses were not compiled for a rehearsal");
    if (!request->rehearse && !request->signoff)
        because(&reasons, "there is no sign-off (--signoff FILE, or --rehearse on a twin)");
    if (request->link_is_real && !request->has_record)
        because(&reasons, "a real port is never driven without a record (--record DB)");
    if (!request->rehearse && request->signoff) check_signoff(request, site, now_s, &uses, consume, &reasons);
    status = reasons.text[0] ? status_fail(why, STATUS_REFUSED, "%s", reasons.text) : STATUS_OK;
    if (status == STATUS_OK && consume && counted)
        status = note_use(&uses, request,
                          request->resume                             ? "resume"
                          : request->image->header.kind == IMAGE_HELD ? "held"
                                                                      : "start",
                          now_s, why);
    close_uses(&uses);
    return status;
}

enum status gate_note_end(const struct gate_request *request, const struct site *site, uint64_t now_s,
                          bool finished, struct message *why)
{
    struct uses uses = {.file = -1};
    if (!is_counted(request, site)) return STATUS_OK;
    enum status status = open_uses(site, true, &uses, why);
    if (status == STATUS_OK) status = count_uses(request->signoff, request->image->root, &uses, why);
    /* a clock that was set back meanwhile does not make the end older than the start */
    if (status == STATUS_OK)
        status = note_use(&uses, request, finished ? "finished" : "stopped",
                          now_s < uses.newest_s ? uses.newest_s : now_s, why);
    close_uses(&uses);
    return status;
}
