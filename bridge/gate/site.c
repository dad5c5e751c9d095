/* The site's list of signers. The goal of this code: nobody signs who was not listed by the holder of the
 * site key, and an old list can not come back in place of a newer one. */
#include "bridge/gate/site.h"

#include "core/document/document.h"
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define ROLE_WORD(name, word, clinical) word,
#define ROLE_CLINICAL(name, word, clinical) clinical,
static const char *const words[] = {ROLE_TABLE(ROLE_WORD)};
static const bool clinical[] = {ROLE_TABLE(ROLE_CLINICAL)};
enum { ROLES = sizeof words / sizeof words[0] };

const char *role_word(enum signer_role role)
{
    return (unsigned)role < ROLES ? words[role] : "unknown";
}

bool role_read(const char *word, enum signer_role *role)
{
    for (unsigned i = 0; i < ROLES; i++)
        if (strcmp(words[i], word) == 0) {
            *role = (enum signer_role)i;
            return true;
        }
    return false;
}

bool role_may_sign_clinical(enum signer_role role)
{
    return (unsigned)role < ROLES && clinical[role];
}

const char *site_folder(void)
{
    return PULSEWRIGHT_SITE_DIR;
}

static enum status check_owner(const char *path, struct message *why)
{
    struct stat about;
    if (lstat(path, &about) != 0) return status_fail(why, STATUS_REFUSED, "%s: is not there", path);
    if (about.st_uid != 0 || (about.st_mode & (S_IWGRP | S_IWOTH)) || S_ISLNK(about.st_mode))
        return status_fail(why, STATUS_REFUSED, "%s: may be owned by root and writable by nobody else", path);
    return STATUS_OK;
}

static void path_of(char path[600], const char *folder, const char *name)
{
    (void)snprintf(path, 600, "%.500s/%s", folder, name);
}

static bool hex_read(const char *text, size_t length, uint8_t *out, size_t size)
{
    size_t got = 0;
    const char *end = NULL;
    return length == 2 * size && sodium_hex2bin(out, size, text, length, NULL, &got, &end) == 0 &&
           got == size && end == text + length;
}

/* One line of the list; strict: exactly these words, single spaces. */
static bool read_signer(const char *line, struct signer *signer)
{
    char name[SIGNER_NAME_SIZE], role[32], key[80], state[16], again[256];
    if (sscanf(line, "signer %63s %31s %79s %15s", name, role, key, state) != 4) return false;
    (void)snprintf(again, sizeof again, "signer %s %s %s %s", name, role, key, state);
    if (strcmp(again, line) != 0 || !role_read(role, &signer->role) || signer->role == ROLE_REHEARSAL)
        return false;
    if (!hex_read(key, strlen(key), signer->public_key, sizeof signer->public_key)) return false;
    if (strcmp(state, "listed") != 0 && strcmp(state, "withdrawn") != 0) return false;
    memcpy(signer->name, name, sizeof name);
    signer->withdrawn = strcmp(state, "withdrawn") == 0;
    return true;
}

static enum status parse_list(const char *path, char *text, size_t size, struct site *site,
                              struct message *why)
{
    static const char seal[] = "signature ";
    uint8_t signature[KEY_SIGNATURE_SIZE];
    char *mark = strstr(text, seal);
    if (strlen(text) != size || !mark || (mark > text && mark[-1] != '\n'))
        return status_fail(why, STATUS_REFUSED, "%s: has no signature", path);
    char *hex = mark + sizeof seal - 1;
    const size_t rest = strlen(hex);
    if (rest != 2 * sizeof signature + 1 || hex[rest - 1] != '\n' ||
        !hex_read(hex, rest - 1, signature, sizeof signature))
        return status_fail(why, STATUS_REFUSED, "%s: its signature is malformed", path);
    if (!key_verify(site->public_key, text, (size_t)(mark - text), signature))
        return status_fail(why, STATUS_REFUSED, "%s: was not signed by this site's key", path);
    *mark = '\0';
    char *save = NULL;
    int number = 0;
    for (char *line = strtok_r(text, "\n", &save); line; line = strtok_r(NULL, "\n", &save), number++) {
        char *end = NULL;
        if (number == 0 && strcmp(line, "pulsewright-signers-1") == 0) continue;
        if (number == 1 && strncmp(line, "serial ", 7) == 0) {
            site->serial = strtoul(line + 7, &end, 10);
            if (*end == '\0') continue;
        }
        if (number >= 2 && site->signers < SITE_SIGNERS_MAX &&
            read_signer(line, &site->signer[site->signers])) {
            site->signers++;
            continue;
        }
        return status_fail(why, STATUS_REFUSED, "%s: line %d is malformed", path, number + 1);
    }
    return number >= 2 ? STATUS_OK : status_fail(why, STATUS_REFUSED, "%s: is malformed", path);
}

static enum status load_public(const char *path, struct site *site, struct message *why)
{
    struct document_bytes bytes;
    static const char head[] = "pulsewright-site-1 ";
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return STATUS_REFUSED;
    const size_t size = sizeof head - 1 + 2 * KEY_PUBLIC_SIZE + 1;
    const bool sound =
        bytes.size == size && memcmp(bytes.data, head, sizeof head - 1) == 0 &&
        bytes.data[size - 1] == '\n' &&
        hex_read(bytes.data + sizeof head - 1, 2 * KEY_PUBLIC_SIZE, site->public_key, KEY_PUBLIC_SIZE);
    document_bytes_free(&bytes);
    return sound ? STATUS_OK : status_fail(why, STATUS_REFUSED, "%s: is no site key of this program", path);
}

/* The highest serial seen here is kept beside the list: it never falls. */
static unsigned long serial_seen(const char *folder)
{
    char path[600];
    unsigned long serial = 0;
    path_of(path, folder, "serial");
    FILE *in = fopen(path, "re");
    if (!in) return 0;
    if (fscanf(in, "%lu", &serial) != 1) serial = 0;
    (void)fclose(in);
    return serial;
}

enum status site_load(const char *folder, bool strict, struct site *site, struct message *why)
{
    char list[600], public_path[600];
    struct document_bytes bytes;
    memset(site, 0, sizeof *site);
    (void)snprintf(site->folder, sizeof site->folder, "%s", folder);
    path_of(list, folder, "signers");
    path_of(public_path, folder, "site.public");
    enum status status = STATUS_OK;
    if (strict) status = check_owner(folder, why);
    if (strict && status == STATUS_OK) status = check_owner(list, why);
    if (strict && status == STATUS_OK) status = check_owner(public_path, why);
    if (status == STATUS_OK) status = load_public(public_path, site, why);
    if (status == STATUS_OK && document_read_bytes(list, &bytes, why) != STATUS_OK) return STATUS_REFUSED;
    if (status != STATUS_OK) return status;
    status = parse_list(list, bytes.data, bytes.size, site, why);
    document_bytes_free(&bytes);
    if (status == STATUS_OK && site->serial < serial_seen(folder))
        status = status_fail(why, STATUS_REFUSED,
                             "%s: has serial %lu, but %lu was seen here: an old list was put back", list,
                             site->serial, serial_seen(folder));
    return status;
}

enum status site_load_installed(struct site *site, struct message *why)
{
#ifdef PULSEWRIGHT_TEST_BUILD
    const bool strict = false;
#else
    const bool strict = true;
#endif
    return site_load(site_folder(), strict, site, why);
}

enum status site_save(struct site *site, const struct secret_key *site_key, struct message *why)
{
    struct text_out out = {0};
    char hex[2 * KEY_SIGNATURE_SIZE + 1], path[600], number[32];
    uint8_t signature[KEY_SIGNATURE_SIZE];
    if (memcmp(key_public(site_key), site->public_key, KEY_PUBLIC_SIZE) != 0)
        return status_fail(why, STATUS_REFUSED, "this is not the site's key");
    site->serial++;
    text_out_print(&out, "pulsewright-signers-1\nserial %lu\n", site->serial);
    for (size_t i = 0; i < site->signers; i++) {
        (void)sodium_bin2hex(hex, sizeof hex, site->signer[i].public_key, KEY_PUBLIC_SIZE);
        text_out_print(&out, "signer %s %s %s %s\n", site->signer[i].name, role_word(site->signer[i].role),
                       hex, site->signer[i].withdrawn ? "withdrawn" : "listed");
    }
    key_sign(site_key, out.data, out.size, signature);
    text_out_print(&out, "signature %s\n", sodium_bin2hex(hex, sizeof hex, signature, sizeof signature));
    path_of(path, site->folder, "signers");
    enum status status = document_write_file(path, out.data, out.size, true, why);
    text_out_free(&out);
    if (status != STATUS_OK) return status;
    path_of(path, site->folder, "serial");
    (void)snprintf(number, sizeof number, "%lu\n", site->serial);
    return document_write_file(path, number, strlen(number), true, why);
}

enum status site_begin(const char *folder, const struct secret_key *site_key, struct message *why)
{
    struct site *site = calloc(1, sizeof *site);
    char path[600], text[128], hex[2 * KEY_PUBLIC_SIZE + 1];
    if (!site) return status_fail(why, STATUS_INTERNAL, "no memory");
    (void)snprintf(site->folder, sizeof site->folder, "%s", folder);
    memcpy(site->public_key, key_public(site_key), KEY_PUBLIC_SIZE);
    (void)snprintf(text, sizeof text, "pulsewright-site-1 %s\n",
                   sodium_bin2hex(hex, sizeof hex, site->public_key, KEY_PUBLIC_SIZE));
    path_of(path, folder, "site.public");
    enum status status = document_write_file(path, text, strlen(text), false, why);
    if (status == STATUS_OK) status = site_save(site, site_key, why);
    free(site);
    return status;
}

const struct signer *site_signer(const struct site *site, const char *name)
{
    for (size_t i = 0; i < site->signers; i++)
        if (strcmp(site->signer[i].name, name) == 0) return &site->signer[i];
    return NULL;
}
