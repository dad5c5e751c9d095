/* The statement. The goal of this code: one layout for writing and reading, so that they can not differ; any
 * octet changed is found. */
#include "bridge/gate/statement.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

static const char statement_magic[] = "pulsewright-signoff-1"; /* its zero is part of it */
static const char file_magic[24] = "pulsewright-signed-1\n";

/* Goes one way or the other over the same fields. */
struct walk {
    bool writing;
    uint8_t *octets;
    size_t at, size;
    bool failed;
};

static void walk_octets(struct walk *walk, void *data, size_t size)
{
    if (walk->failed || size > walk->size - walk->at) {
        walk->failed = true;
        return;
    }
    if (walk->writing)
        memcpy(walk->octets + walk->at, data, size);
    else
        memcpy(data, walk->octets + walk->at, size);
    walk->at += size;
}

static uint64_t walk_number(struct walk *walk, uint64_t value, unsigned octets, uint64_t least, uint64_t most)
{
    uint8_t wire[8];
    for (unsigned i = 0; i < octets; i++) wire[i] = (uint8_t)(value >> 8 * i);
    walk_octets(walk, wire, octets);
    if (!walk->writing) {
        value = 0;
        for (unsigned i = 0; i < octets; i++) value |= (uint64_t)wire[i] << 8 * i;
    }
    if (value < least || value > most) walk->failed = true;
    return walk->failed ? least : value;
}

/* A word: its length, then its letters; printable, no zero inside. */
static void walk_word(struct walk *walk, char *word, size_t size)
{
    const size_t length = (size_t)walk_number(walk, walk->writing ? strlen(word) : 0, 1, 0, size - 1);
    if (walk->failed) return;
    walk_octets(walk, word, length);
    if (walk->failed) return;
    if (!walk->writing) memset(word + length, 0, size - length);
    for (size_t i = 0; i < length; i++)
        if ((unsigned char)word[i] < 0x20) walk->failed = true;
}

#define NUMBER32(field, least, most)                                                                         \
    signoff->field = (uint32_t)walk_number(walk, signoff->field, 4, least, most)
#define NUMBER64(field) signoff->field = walk_number(walk, signoff->field, 8, 0, UINT64_MAX)
#define WORD(field) walk_word(walk, signoff->field, sizeof signoff->field)
#define OCTETS(field) walk_octets(walk, signoff->field, sizeof signoff->field)

static void walk_statement(struct walk *walk, struct signoff *signoff)
{
    char magic[sizeof statement_magic];
    memcpy(magic, statement_magic, sizeof magic);
    walk_octets(walk, magic, sizeof magic);
    if (memcmp(magic, statement_magic, sizeof magic) != 0) walk->failed = true;
    signoff->kind =
        (enum signoff_kind)walk_number(walk, signoff->kind, 1, SIGNOFF_CLINICAL, SIGNOFF_REHEARSAL);
    NUMBER32(images, 1, SIGNOFF_IMAGES_MAX);
    for (uint32_t i = 0; i < signoff->images && !walk->failed; i++) {
        OCTETS(image[i].root);
        NUMBER32(image[i].starts, 1, 1000);
        OCTETS(image[i].plan_digest);
    }
    NUMBER32(starts_in_all, 1, 64000);
    NUMBER32(sessions, 1, 1000);
    NUMBER32(resumes, 0, 1000);
    NUMBER32(channels, 1, IMAGE_CHANNELS_MAX);
    for (uint32_t i = 0; i < signoff->channels && !walk->failed; i++) {
        signoff->channel[i].channel =
            (uint8_t)walk_number(walk, signoff->channel[i].channel, 1, 1, IMAGE_CHANNELS_MAX);
        WORD(channel[i].muscle);
        NUMBER64(channel[i].pulses);
        NUMBER64(channel[i].charge_pc);
    }
    WORD(profile_digest);
    WORD(stimulator_digest);
    WORD(person);
    WORD(unit);
    WORD(signer);
    WORD(role);
    OCTETS(key_id);
    NUMBER64(created_s);
    NUMBER64(not_before_s);
    NUMBER64(expires_s);
    OCTETS(id);
    NUMBER32(cautions, 0, SIGNOFF_CAUTIONS_MAX);
    for (uint32_t i = 0; i < signoff->cautions && !walk->failed; i++) WORD(caution[i]);
    OCTETS(cautions_digest);
    OCTETS(sheet_digest);
    WORD(program);
}

size_t statement_encode(const struct signoff *signoff, uint8_t out[SIGNOFF_STATEMENT_MAX])
{
    struct signoff copy = *signoff;
    struct walk walk = {.writing = true, .octets = out, .size = SIGNOFF_STATEMENT_MAX};
    walk_statement(&walk, &copy);
    return walk.failed ? 0 : walk.at;
}

bool statement_decode(const uint8_t *in, size_t size, struct signoff *signoff)
{
    struct walk walk = {.writing = false, .size = size};
    uint8_t *copy = malloc(size + 1);
    if (!copy) return false;
    memcpy(copy, in, size);
    memset(signoff, 0, sizeof *signoff);
    walk.octets = copy;
    walk_statement(&walk, signoff);
    free(copy);
    return !walk.failed && walk.at == size;
}

static void append(struct text_out *out, const void *data, size_t size)
{
    if (out->size + size + 1 > out->capacity) {
        out->capacity = 2 * (out->size + size + 1);
        char *grown = realloc(out->data, out->capacity);
        if (!grown) abort(); /* as text_out does */
        out->data = grown;
    }
    memcpy(out->data + out->size, data, size);
    out->size += size;
}

static void append32(struct text_out *out, size_t value)
{
    const uint8_t octets[4] = {(uint8_t)value, (uint8_t)(value >> 8), (uint8_t)(value >> 16),
                               (uint8_t)(value >> 24)};
    append(out, octets, sizeof octets);
}

enum status signoff_write(const char *path, const struct signoff *signoff, const struct secret_key *key,
                          const struct document_bytes *plan, size_t plans, struct message *why)
{
    static uint8_t statement[SIGNOFF_STATEMENT_MAX];
    uint8_t signature[KEY_SIGNATURE_SIZE];
    struct text_out out = {0};
    const size_t size = statement_encode(signoff, statement);
    if (size == 0 || plans != signoff->images)
        return status_fail(why, STATUS_INTERNAL, "the statement can not be written down");
    key_sign(key, statement, size, signature);
    append(&out, file_magic, sizeof file_magic);
    append32(&out, size);
    append(&out, statement, size);
    append(&out, signature, sizeof signature);
    append(&out, key_public(key), KEY_PUBLIC_SIZE);
    append32(&out, plans);
    for (size_t i = 0; i < plans; i++) {
        append32(&out, plan[i].size);
        append(&out, plan[i].data, plan[i].size);
    }
    const int file = open(path, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC | O_NOFOLLOW, 0600);
    enum status status = STATUS_OK;
    if (file < 0)
        status = status_fail(why, STATUS_USAGE, "%s: %s", path,
                             errno == EEXIST ? "is there already; a sign-off is never overwritten"
                                             : strerror(errno));
    else if (write(file, out.data, out.size) != (ssize_t)out.size || fsync(file) != 0)
        status = status_fail(why, STATUS_USAGE, "%s: can not be written: %s", path, strerror(errno));
    if (file >= 0) (void)close(file);
    if (file >= 0 && status != STATUS_OK) (void)unlink(path);
    text_out_free(&out);
    return status;
}

struct taking {
    const uint8_t *data;
    size_t at, size;
};

static const uint8_t *take(struct taking *taking, size_t size)
{
    if (size > taking->size - taking->at) return NULL;
    const uint8_t *start = taking->data + taking->at;
    taking->at += size;
    return start;
}

static bool take32(struct taking *taking, size_t *value)
{
    const uint8_t *octets = take(taking, 4);
    if (octets)
        *value =
            (size_t)octets[0] | (size_t)octets[1] << 8 | (size_t)octets[2] << 16 | (size_t)octets[3] << 24;
    return octets != NULL;
}

static enum status take_plans(struct taking *taking, const char *path, struct signoff_file *file,
                              struct message *why)
{
    size_t plans = 0, size = 0;
    if (!take32(taking, &plans) || plans != file->signoff.images)
        return status_fail(why, STATUS_REFUSED, "%s: does not hold the plans it says", path);
    for (size_t i = 0; i < plans; i++) {
        const uint8_t *data = take32(taking, &size) ? take(taking, size) : NULL;
        struct document_bytes *plan = &file->plan[i];
        if (!data) return status_fail(why, STATUS_REFUSED, "%s: ends inside plan %zu", path, i + 1);
        plan->data = malloc(size + 1);
        if (!plan->data) return status_fail(why, STATUS_INTERNAL, "%s: no memory", path);
        memcpy(plan->data, data, size);
        plan->data[size] = '\0';
        plan->size = size;
        (void)snprintf(plan->path, sizeof plan->path, "%.900s#%zu", path, i + 1);
        document_bytes_digest(plan);
        file->plans = i + 1;
        if (memcmp(plan->digest, file->signoff.image[i].plan_digest, DIGEST_SIZE) != 0)
            return status_fail(why, STATUS_REFUSED, "%s: plan %zu is not the one that was signed", path,
                               i + 1);
    }
    return taking->at == taking->size
               ? STATUS_OK
               : status_fail(why, STATUS_REFUSED, "%s: holds more than a sign-off", path);
}

static enum status take_file(const struct document_bytes *bytes, struct signoff_file *file,
                             struct message *why)
{
    struct taking taking = {(const uint8_t *)bytes->data, 0, bytes->size};
    uint8_t id[KEY_ID_SIZE];
    const uint8_t *magic = take(&taking, sizeof file_magic);
    if (!magic || memcmp(magic, file_magic, sizeof file_magic) != 0)
        return status_fail(why, STATUS_REFUSED, "%s: is no sign-off of this program", bytes->path);
    const uint8_t *statement =
        take32(&taking, &file->statement_size) && file->statement_size <= SIGNOFF_STATEMENT_MAX
            ? take(&taking, file->statement_size)
            : NULL;
    const uint8_t *signature = statement ? take(&taking, KEY_SIGNATURE_SIZE) : NULL;
    const uint8_t *public_key = signature ? take(&taking, KEY_PUBLIC_SIZE) : NULL;
    if (!public_key) return status_fail(why, STATUS_REFUSED, "%s: ends too early", bytes->path);
    memcpy(file->statement, statement, file->statement_size);
    memcpy(file->signature, signature, KEY_SIGNATURE_SIZE);
    memcpy(file->public_key, public_key, KEY_PUBLIC_SIZE);
    if (!key_verify(file->public_key, file->statement, file->statement_size, file->signature))
        return status_fail(why, STATUS_REFUSED,
                           "%s: the signature does not fit: something was changed after it was signed",
                           bytes->path);
    if (!statement_decode(file->statement, file->statement_size, &file->signoff))
        return status_fail(why, STATUS_REFUSED, "%s: its statement is malformed", bytes->path);
    key_id(file->public_key, id);
    if (memcmp(id, file->signoff.key_id, sizeof id) != 0)
        return status_fail(why, STATUS_REFUSED, "%s: is signed by another key than it says", bytes->path);
    return take_plans(&taking, bytes->path, file, why);
}

enum status signoff_read(const char *path, struct signoff_file *file, struct message *why)
{
    struct document_bytes bytes;
    memset(file, 0, sizeof *file);
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = take_file(&bytes, file, why);
    document_bytes_free(&bytes);
    if (status != STATUS_OK) signoff_file_free(file);
    return status;
}

void signoff_file_free(struct signoff_file *file)
{
    for (size_t i = 0; i < file->plans; i++) document_bytes_free(&file->plan[i]);
    for (size_t i = file->plans; i < SIGNOFF_IMAGES_MAX; i++) document_bytes_free(&file->plan[i]);
    file->plans = 0;
}
