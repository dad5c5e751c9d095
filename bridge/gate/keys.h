/* Keys: Ed25519 (libsodium). Secret keys rest in files, boxed under a passphrase (Argon2id), and live in
 * locked memory only. */
#ifndef PULSEWRIGHT_BRIDGE_GATE_KEYS_H
#define PULSEWRIGHT_BRIDGE_GATE_KEYS_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    KEY_PUBLIC_SIZE = 32,
    KEY_SECRET_SIZE = 64,
    KEY_SIGNATURE_SIZE = 64,
    KEY_ID_SIZE = 16,
    PASSPHRASE_MAX = 256
};

struct secret_key; /* in locked memory */
enum key_cost { KEY_COST_MODERATE, KEY_COST_TEST };

/* To be called first by a program that touches keys: libsodium ready, no core dumps. */
enum status keys_begin(struct message *why);
enum status key_make(struct secret_key **key, struct message *why);
void key_free(struct secret_key *key); /* wiped */
const uint8_t *key_public(const struct secret_key *key);
void key_id(const uint8_t public_key[KEY_PUBLIC_SIZE], uint8_t id[KEY_ID_SIZE]); /* BLAKE2b-128 of it */
void key_sign(const struct secret_key *key, const void *data, size_t size,
              uint8_t signature[KEY_SIGNATURE_SIZE]);
bool key_verify(const uint8_t public_key[KEY_PUBLIC_SIZE], const void *data, size_t size,
                const uint8_t signature[KEY_SIGNATURE_SIZE]);
/* Files: made new only (O_EXCL), mode 0600. What a file asks for is bounded: 1 GiB, 10 passes. */
enum status key_save(const struct secret_key *key, const char *path, const char *passphrase,
                     enum key_cost cost, struct message *why);
enum status key_load(const char *path, const char *passphrase, struct secret_key **key, struct message *why);

/* A passphrase in locked memory: a line from descriptor `from` (0 or more), or from the terminal without echo
 * (-1). Free with passphrase_free. */
enum status passphrase_read(int from, const char *prompt, char **passphrase, struct message *why);
void passphrase_free(char *passphrase);

#endif
