/* Keys. The goal of this code: a secret is never on disk in the clear, never in an argument or the
 * environment, never in a core dump, and is wiped when it is done with. Ed25519 (RFC 8032), Argon2id (RFC
 * 9106) and secretbox by libsodium. */
#include "bridge/gate/keys.h"

#include "core/document/document.h"
#include <errno.h>
#include <fcntl.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <termios.h>
#include <unistd.h>

enum { OPS_MAX = 10, MEMORY_MAX = 1 << 30 };

struct secret_key {
    uint8_t secret[KEY_SECRET_SIZE];
    uint8_t public_key[KEY_PUBLIC_SIZE];
};

/* What a key file holds, octet by octet. */
struct key_file {
    char magic[24];
    uint8_t ops[4], memory[4];
    uint8_t salt[crypto_pwhash_SALTBYTES], nonce[crypto_secretbox_NONCEBYTES], public_key[KEY_PUBLIC_SIZE];
    uint8_t box[KEY_SECRET_SIZE + crypto_secretbox_MACBYTES];
};
_Static_assert(sizeof(struct key_file) == 24 + 8 + 16 + 24 + 32 + 80, "no padding in the file");
static const char magic[24] = "pulsewright-key-1\n";

enum status keys_begin(struct message *why)
{
    const struct rlimit none = {0, 0};
    if (sodium_init() < 0) return status_fail(why, STATUS_INTERNAL, "libsodium can not be used");
    if (setrlimit(RLIMIT_CORE, &none) != 0 || prctl(PR_SET_DUMPABLE, 0) != 0)
        return status_fail(why, STATUS_INTERNAL, "core dumps can not be turned off");
    return STATUS_OK;
}

enum status key_make(struct secret_key **key, struct message *why)
{
    *key = sodium_malloc(sizeof **key);
    if (!*key) return status_fail(why, STATUS_INTERNAL, "no locked memory for a key");
    (void)crypto_sign_keypair((*key)->public_key, (*key)->secret);
    return STATUS_OK;
}

void key_free(struct secret_key *key)
{
    if (key) sodium_free(key); /* wipes */
}

const uint8_t *key_public(const struct secret_key *key)
{
    return key->public_key;
}

void key_id(const uint8_t public_key[KEY_PUBLIC_SIZE], uint8_t id[KEY_ID_SIZE])
{
    (void)crypto_generichash(id, KEY_ID_SIZE, public_key, KEY_PUBLIC_SIZE, NULL, 0);
}

void key_sign(const struct secret_key *key, const void *data, size_t size,
              uint8_t signature[KEY_SIGNATURE_SIZE])
{
    (void)crypto_sign_detached(signature, NULL, data, size, key->secret);
}

bool key_verify(const uint8_t public_key[KEY_PUBLIC_SIZE], const void *data, size_t size,
                const uint8_t signature[KEY_SIGNATURE_SIZE])
{
    return crypto_sign_verify_detached(signature, data, size, public_key) == 0;
}

static void put32(uint8_t out[4], uint32_t value)
{
    for (int i = 0; i < 4; i++) out[i] = (uint8_t)(value >> 8 * i);
}

static uint32_t get32(const uint8_t in[4])
{
    return (uint32_t)in[0] | (uint32_t)in[1] << 8 | (uint32_t)in[2] << 16 | (uint32_t)in[3] << 24;
}

static enum status write_new(const char *path, const void *data, size_t size, struct message *why)
{
    const int file = open(path, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC | O_NOFOLLOW, 0600);
    if (file < 0)
        return status_fail(why, STATUS_USAGE, "%s: %s", path,
                           errno == EEXIST ? "is there already; a key is never overwritten"
                                           : strerror(errno));
    const bool written = write(file, data, size) == (ssize_t)size && fsync(file) == 0;
    if (close(file) == 0 && written) return STATUS_OK;
    (void)unlink(path);
    return status_fail(why, STATUS_USAGE, "%s: can not be written", path);
}

enum status key_save(const struct secret_key *key, const char *path, const char *passphrase,
                     enum key_cost cost, struct message *why)
{
    struct key_file file;
    const uint32_t ops = cost == KEY_COST_TEST ? crypto_pwhash_OPSLIMIT_MIN : crypto_pwhash_OPSLIMIT_MODERATE;
    const uint32_t memory =
        cost == KEY_COST_TEST ? crypto_pwhash_MEMLIMIT_MIN : crypto_pwhash_MEMLIMIT_MODERATE;
    if (strlen(passphrase) < 8)
        return status_fail(why, STATUS_USAGE, "a passphrase has at least 8 characters");
    uint8_t *boxing = sodium_malloc(crypto_secretbox_KEYBYTES);
    if (!boxing) return status_fail(why, STATUS_INTERNAL, "no locked memory");
    memcpy(file.magic, magic, sizeof file.magic);
    put32(file.ops, ops);
    put32(file.memory, memory);
    randombytes_buf(file.salt, sizeof file.salt);
    randombytes_buf(file.nonce, sizeof file.nonce);
    memcpy(file.public_key, key->public_key, sizeof file.public_key);
    enum status status = STATUS_OK;
    if (crypto_pwhash(boxing, crypto_secretbox_KEYBYTES, passphrase, strlen(passphrase), file.salt, ops,
                      memory, crypto_pwhash_ALG_ARGON2ID13) != 0)
        status = status_fail(why, STATUS_INTERNAL, "no memory for Argon2id");
    if (status == STATUS_OK) {
        (void)crypto_secretbox_easy(file.box, key->secret, sizeof key->secret, file.nonce, boxing);
        status = write_new(path, &file, sizeof file, why);
    }
    sodium_free(boxing);
    return status;
}

static enum status open_box(const struct key_file *file, const char *path, const char *passphrase,
                            struct secret_key *key, struct message *why)
{
    const uint32_t ops = get32(file->ops), memory = get32(file->memory);
    uint8_t *boxing = sodium_malloc(crypto_secretbox_KEYBYTES);
    if (!boxing) return status_fail(why, STATUS_INTERNAL, "no locked memory");
    enum status status = STATUS_OK;
    if (crypto_pwhash(boxing, crypto_secretbox_KEYBYTES, passphrase, strlen(passphrase), file->salt, ops,
                      memory, crypto_pwhash_ALG_ARGON2ID13) != 0)
        status = status_fail(why, STATUS_INTERNAL, "%s: no memory for Argon2id", path);
    else if (crypto_secretbox_open_easy(key->secret, file->box, sizeof file->box, file->nonce, boxing) != 0)
        status = status_fail(why, STATUS_REFUSED, "%s: wrong passphrase, or the file was changed", path);
    else if (crypto_sign_ed25519_sk_to_pk(key->public_key, key->secret) != 0 ||
             memcmp(key->public_key, file->public_key, sizeof key->public_key) != 0)
        status = status_fail(why, STATUS_REFUSED, "%s: its public part is not that of its secret", path);
    sodium_free(boxing);
    return status;
}

enum status key_load(const char *path, const char *passphrase, struct secret_key **made, struct message *why)
{
    struct document_bytes bytes;
    struct key_file file;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    if (bytes.size == sizeof file) memcpy(&file, bytes.data, sizeof file);
    const bool sound = bytes.size == sizeof file && memcmp(file.magic, magic, sizeof magic) == 0 &&
                       get32(file.ops) >= crypto_pwhash_OPSLIMIT_MIN && get32(file.ops) <= OPS_MAX &&
                       get32(file.memory) >= crypto_pwhash_MEMLIMIT_MIN && get32(file.memory) <= MEMORY_MAX;
    document_bytes_free(&bytes);
    if (!sound) return status_fail(why, STATUS_DOCUMENT, "%s: is no key file of this program", path);
    struct secret_key *key = sodium_malloc(sizeof *key);
    if (!key) return status_fail(why, STATUS_INTERNAL, "no locked memory for a key");
    status = open_box(&file, path, passphrase, key, why);
    if (status == STATUS_OK)
        *made = key;
    else
        key_free(key);
    return status;
}

/* Takes one line, octet by octet, so that nothing of it stays in a buffer of the library. One that is too
 * long gives none: cut short it would box a key under less than was typed. */
static bool read_line(int from, char *line)
{
    size_t count = 0;
    char octet = 0;
    for (;;) {
        const ssize_t got = read(from, &octet, 1);
        if (got < 0 && errno == EINTR) continue;
        if (got <= 0 || octet == '\n') break;
        if (count == PASSPHRASE_MAX - 1) return false;
        line[count++] = octet;
    }
    line[count] = '\0';
    return count > 0;
}

enum status passphrase_read(int from, const char *prompt, char **passphrase, struct message *why)
{
    struct termios before, silent;
    char *line = sodium_malloc(PASSPHRASE_MAX);
    if (!line) return status_fail(why, STATUS_INTERNAL, "no locked memory for a passphrase");
    bool some = false;
    if (from >= 0) {
        some = read_line(from, line);
    } else {
        const int terminal = open("/dev/tty", O_RDWR | O_NOCTTY | O_CLOEXEC);
        if (terminal >= 0 && tcgetattr(terminal, &before) == 0) {
            silent = before;
            silent.c_lflag &= ~(tcflag_t)ECHO;
            (void)tcsetattr(terminal, TCSAFLUSH, &silent);
            if (write(terminal, prompt, strlen(prompt)) >= 0) some = read_line(terminal, line);
            (void)tcsetattr(terminal, TCSAFLUSH, &before);
            if (write(terminal, "\n", 1) < 0) some = false;
        }
        if (terminal >= 0) (void)close(terminal);
    }
    if (some) {
        *passphrase = line;
        return STATUS_OK;
    }
    sodium_free(line);
    return status_fail(
        why, STATUS_USAGE,
        "no passphrase: there is no terminal, --passphrase-fd gave none, or it is longer than %d octets",
        PASSPHRASE_MAX - 1);
}

void passphrase_free(char *passphrase)
{
    if (passphrase) sodium_free(passphrase);
}
