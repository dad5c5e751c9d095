/* Statement: what a signature stands for, as one canonical run of octets that begins with
 * `pulsewright-signoff-1\0`. A sign-off file holds the statement, the signature, the signer's public key and
 * the plans' own bytes, each once, nothing else. */
#ifndef PULSEWRIGHT_BRIDGE_GATE_STATEMENT_H
#define PULSEWRIGHT_BRIDGE_GATE_STATEMENT_H
#include "bridge/gate/keys.h"
#include "bridge/wire/image.h"
#include "core/document/document.h"
#include "core/status/status.h"

enum {
    SIGNOFF_IMAGES_MAX = 64,
    SIGNOFF_CAUTIONS_MAX = 32,
    SIGNOFF_ID_SIZE = 16,
    SIGNOFF_WORD_SIZE = 64,
    SIGNOFF_STATEMENT_MAX = 32768
};

struct signoff_image {
    uint8_t root[IMAGE_ROOT_SIZE];
    uint32_t starts;
    uint8_t plan_digest[DIGEST_SIZE]; /* of the plan's bytes */
};
struct signoff_channel {
    uint8_t channel;
    char muscle[SIGNOFF_WORD_SIZE];
    uint64_t pulses, charge_pc; /* over all images */
};
struct signoff {
    enum signoff_kind kind;
    uint32_t images;
    struct signoff_image image[SIGNOFF_IMAGES_MAX];
    uint32_t starts_in_all, sessions, resumes;
    uint32_t channels;
    struct signoff_channel channel[IMAGE_CHANNELS_MAX];
    char profile_digest[2 * DIGEST_SIZE + 1],
        stimulator_digest[2 * DIGEST_SIZE + 1]; /* hex, as the plan holds them; may be empty */
    char person[SIGNOFF_WORD_SIZE], unit[SIGNOFF_WORD_SIZE];
    char signer[SIGNOFF_WORD_SIZE], role[SIGNOFF_WORD_SIZE];
    uint8_t key_id[KEY_ID_SIZE];
    uint64_t created_s, not_before_s, expires_s;
    uint8_t id[SIGNOFF_ID_SIZE]; /* random */
    uint32_t cautions;
    char caution[SIGNOFF_CAUTIONS_MAX]
                [SIGNOFF_WORD_SIZE];      /* ids, acknowledged (clinical) or shown (rehearsal) */
    uint8_t cautions_digest[DIGEST_SIZE]; /* of their texts */
    uint8_t sheet_digest[DIGEST_SIZE];    /* of the shown sheet's lines, of all plans in order */
    char program[SIGNOFF_WORD_SIZE];
};

/* Octets written, 0 where it does not fit. */
size_t statement_encode(const struct signoff *signoff, uint8_t out[SIGNOFF_STATEMENT_MAX]);
/* Strict: every length, every range, no octet left over. */
bool statement_decode(const uint8_t *in, size_t size, struct signoff *signoff);

struct signoff_file {
    struct signoff signoff;
    uint8_t statement[SIGNOFF_STATEMENT_MAX];
    size_t statement_size;
    uint8_t signature[KEY_SIGNATURE_SIZE];
    uint8_t public_key[KEY_PUBLIC_SIZE];
    size_t plans;
    struct document_bytes plan[SIGNOFF_IMAGES_MAX]; /* owned */
};
/* Signs and writes a new file (mode 0600 less others: never over an existing one). `plan` are the plans'
 * bytes, in the order of the images. */
enum status signoff_write(const char *path, const struct signoff *signoff, const struct secret_key *key,
                          const struct document_bytes *plan, size_t plans, struct message *why);
/* Reads, and checks all that needs no list of signers: form, signature by the key beside it, that key's id,
 * plans' digests. */
enum status signoff_read(const char *path, struct signoff_file *file, struct message *why);
void signoff_file_free(struct signoff_file *file);

#endif
