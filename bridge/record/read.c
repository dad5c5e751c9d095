/* Reading records. The goal of this code: a record answers for itself; what was changed, taken out or moved
 * is told by its place. */
#include "bridge/record/read.h"

#include "bridge/record/database.h"
#include <ctype.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct record_reader {
    sqlite3 *handle;
    sqlite3_stmt *all, *json;
    char path[1024];
};

static enum status damaged(const struct record_reader *reader, struct message *why)
{
    return status_fail(why, STATUS_REFUSED, "%s: damaged: %s", reader->path, sqlite3_errmsg(reader->handle));
}

enum status record_open(const char *path, struct record_reader **made, struct message *why)
{
    *made = NULL;
    struct record_reader *reader = calloc(1, sizeof *reader);
    if (!reader) return status_fail(why, STATUS_INTERNAL, "no memory");
    (void)snprintf(reader->path, sizeof reader->path, "%s", path);
    enum status status = database_open_to_read(path, &reader->handle, why);
    if (status != STATUS_OK) {
        free(reader);
        return status;
    }
    static const char all[] =
        "SELECT e.n, e.session, e.kind, e.at_us, e.digest, e.chain, p.salt, p.data FROM entry e LEFT JOIN "
        "payload p ON p.n = e.n WHERE ?1 = 0 OR e.session = ?1 ORDER BY e.n";
    static const char json[] = "SELECT CASE WHEN json_valid(?1) THEN json_extract(?1, '$.' || ?2) END";
    if (sqlite3_prepare_v2(reader->handle, all, -1, &reader->all, NULL) != SQLITE_OK ||
        sqlite3_prepare_v2(reader->handle, json, -1, &reader->json, NULL) != SQLITE_OK) {
        status = damaged(reader, why);
        record_close(reader);
        return status;
    }
    *made = reader;
    return STATUS_OK;
}

void record_close(struct record_reader *reader)
{
    if (!reader) return;
    (void)sqlite3_finalize(reader->all);
    (void)sqlite3_finalize(reader->json);
    (void)sqlite3_close(reader->handle);
    free(reader);
}

/* One row of `all`; salt NULL where the payload is not there. false: a column is not what it may be. */
static bool take_row(sqlite3_stmt *all, struct record_entry *entry, const uint8_t **salt,
                     struct record_payload *payload)
{
    const int64_t n = sqlite3_column_int64(all, 0), session = sqlite3_column_int64(all, 1);
    const int64_t kind = sqlite3_column_int64(all, 2), at_us = sqlite3_column_int64(all, 3);
    for (int column = 0; column < 4; column++)
        if (sqlite3_column_type(all, column) != SQLITE_INTEGER) return false;
    if (n < 1 || session < 1 || session > n || kind < 1 || kind > 255 || at_us < 0) return false;
    *entry = (struct record_entry){
        .n = (uint64_t)n, .session = (uint64_t)session, .kind = (unsigned)kind, .at_us = (uint64_t)at_us};
    if (sqlite3_column_bytes(all, 4) != RECORD_DIGEST_SIZE ||
        sqlite3_column_bytes(all, 5) != RECORD_DIGEST_SIZE)
        return false;
    memcpy(entry->digest, sqlite3_column_blob(all, 4), RECORD_DIGEST_SIZE);
    memcpy(entry->chain, sqlite3_column_blob(all, 5), RECORD_DIGEST_SIZE);
    *payload = (struct record_payload){.entry = entry};
    *salt = NULL;
    if (sqlite3_column_type(all, 6) == SQLITE_NULL && sqlite3_column_type(all, 7) == SQLITE_NULL) return true;
    if (sqlite3_column_bytes(all, 6) != RECORD_SALT_SIZE) return false;
    *salt = sqlite3_column_blob(all, 6);
    payload->size = (size_t)sqlite3_column_bytes(all, 7);
    payload->data = payload->size ? sqlite3_column_blob(all, 7) : (const uint8_t *)"";
    return *salt && payload->data;
}

enum status record_walk(struct record_reader *reader, uint64_t session,
                        bool (*each)(void *context, const struct record_payload *payload), void *context,
                        struct message *why)
{
    struct record_entry entry;
    struct record_payload payload;
    const uint8_t *salt = NULL;
    int code = sqlite3_bind_int64(reader->all, 1, (sqlite3_int64)session);
    enum status status = code == SQLITE_OK ? STATUS_OK : damaged(reader, why);
    bool more = true;
    while (status == STATUS_OK && more && (code = sqlite3_step(reader->all)) == SQLITE_ROW) {
        if (take_row(reader->all, &entry, &salt, &payload))
            more = each(context, &payload);
        else
            status = status_fail(why, STATUS_REFUSED, "%s: an entry after %llu is malformed", reader->path,
                                 (unsigned long long)entry.n);
    }
    if (status == STATUS_OK && more && code != SQLITE_DONE) status = damaged(reader, why);
    (void)sqlite3_reset(reader->all);
    return status;
}

/* Leaves the statement on its row; the caller resets it. */
static bool find_member(struct record_reader *reader, const struct record_payload *payload, const char *key)
{
    sqlite3_stmt *json = reader->json;
    return payload->data && payload->size <= RECORD_TEXT_MAX &&
           sqlite3_bind_text(json, 1, (const char *)payload->data, (int)payload->size, SQLITE_TRANSIENT) ==
               SQLITE_OK &&
           sqlite3_bind_text(json, 2, key, -1, SQLITE_TRANSIENT) == SQLITE_OK &&
           sqlite3_step(json) == SQLITE_ROW && sqlite3_column_type(json, 0) != SQLITE_NULL;
}

double record_number(struct record_reader *reader, const struct record_payload *payload, const char *key,
                     double otherwise)
{
    const double value =
        find_member(reader, payload, key) ? sqlite3_column_double(reader->json, 0) : otherwise;
    (void)sqlite3_reset(reader->json);
    return value;
}

void record_text(struct record_reader *reader, const struct record_payload *payload, const char *key,
                 char *text, size_t size)
{
    const bool found = find_member(reader, payload, key);
    (void)snprintf(text, size, "%s", found ? (const char *)sqlite3_column_text(reader->json, 0) : "");
    (void)sqlite3_reset(reader->json);
    for (char *at = text; *at; at++) /* what is shown on a terminal stays text */
        if (iscntrl((unsigned char)*at)) *at = ' ';
}

/* Sessions may overlap where two programs wrote at once: each is walked by itself. */
struct glancing {
    struct record_reader *reader;
    struct record_glance glance;
};

static bool glance_at(void *context, const struct record_payload *payload)
{
    struct glancing *glancing = context;
    struct record_glance *glance = &glancing->glance;
    struct record_reader *reader = glancing->reader;
    const struct record_entry *entry = payload->entry;
    char number[32];
    glance->entries++;
    if (entry->at_us > glance->duration_us) glance->duration_us = entry->at_us;
    record_hex(entry->chain, glance->head);
    switch (entry->kind) {
    case RECORD_BEGIN:
        record_text(reader, payload, "person", glance->person, sizeof glance->person);
        record_text(reader, payload, "device", glance->device, sizeof glance->device);
        record_text(reader, payload, "kind", glance->kind, sizeof glance->kind);
        record_text(reader, payload, "approval", glance->approval, sizeof glance->approval);
        record_text(reader, payload, "program", glance->program, sizeof glance->program);
        record_text(reader, payload, "root", glance->root, sizeof glance->root);
        record_text(reader, payload, "begun_s", number, sizeof number);
        glance->begun_s = strtoull(number, NULL, 10);
        break;
    case RECORD_START:
    case RECORD_RESUME: (void)snprintf(glance->ended, sizeof glance->ended, "interrupted"); break;
    case RECORD_FAULT:
    case RECORD_STOP:
    case RECORD_FINISHED:
        (void)snprintf(glance->ended, sizeof glance->ended, "%s", record_event_word(entry->kind));
        break;
    case RECORD_END: glance->closed = true; break;
    default: break;
    }
    return true;
}

enum status record_sessions(struct record_reader *reader,
                            bool (*each)(void *context, const struct record_glance *glance), void *context,
                            struct message *why)
{
    sqlite3_stmt *list = NULL;
    if (sqlite3_prepare_v2(reader->handle, "SELECT DISTINCT session FROM entry ORDER BY session", -1, &list,
                           NULL) != SQLITE_OK)
        return damaged(reader, why);
    enum status status = STATUS_OK;
    bool more = true;
    int code = SQLITE_DONE;
    while (status == STATUS_OK && more && (code = sqlite3_step(list)) == SQLITE_ROW) {
        struct glancing glancing = {.reader = reader};
        glancing.glance.session = (uint64_t)sqlite3_column_int64(list, 0);
        (void)snprintf(glancing.glance.ended, sizeof glancing.glance.ended, "not started");
        status = record_walk(reader, glancing.glance.session, glance_at, &glancing, why);
        if (status == STATUS_OK) more = each(context, &glancing.glance);
    }
    if (status == STATUS_OK && more && code != SQLITE_DONE) status = damaged(reader, why);
    (void)sqlite3_finalize(list);
    return status;
}

/* One step along the chain. */
static enum status follow(const struct record_reader *reader, const struct record_entry *entry,
                          const uint8_t *salt, const struct record_payload *payload, uint64_t before_n,
                          const uint8_t before[RECORD_DIGEST_SIZE], struct message *why)
{
    uint8_t digest[RECORD_DIGEST_SIZE], chain[RECORD_DIGEST_SIZE];
    const unsigned long long n = entry->n, session = entry->session;
    const char *word = record_event_word(entry->kind);
    if (entry->n != before_n + 1)
        return status_fail(why, STATUS_REFUSED, "%s: entry %llu is missing", reader->path,
                           (unsigned long long)before_n + 1);
    record_link(before, entry, chain);
    if (memcmp(chain, entry->chain, sizeof chain) != 0)
        return status_fail(why, STATUS_REFUSED,
                           "%s: the chain breaks at entry %llu (%s of session %llu): it was changed, or what "
                           "stood before it was",
                           reader->path, n, word, session);
    if ((entry->kind == RECORD_BEGIN) != (entry->session == entry->n))
        return status_fail(why, STATUS_REFUSED, "%s: entry %llu (%s) says it is of session %llu",
                           reader->path, n, word, session);
    if (!payload->data)
        return status_fail(why, STATUS_REFUSED, "%s: entry %llu (%s of session %llu): what it holds is gone",
                           reader->path, n, word, session);
    record_digest(salt, payload->data, payload->size, digest);
    if (memcmp(digest, entry->digest, sizeof digest) != 0)
        return status_fail(why, STATUS_REFUSED,
                           "%s: entry %llu (%s of session %llu): what it holds was changed", reader->path, n,
                           word, session);
    return STATUS_OK;
}

/* Payloads without an entry, and damage that no entry shows. */
static enum status check_rest(const struct record_reader *reader, struct message *why)
{
    static const char *const questions[] = {
        "SELECT 'payload ' || n || ' belongs to no entry' FROM payload WHERE n NOT IN (SELECT n FROM entry) "
        "LIMIT 1",
        "SELECT * FROM pragma_integrity_check(1) WHERE integrity_check <> 'ok'",
        "SELECT 'unknown ' || type || ' ' || name FROM sqlite_schema WHERE name NOT IN ('entry', 'payload') "
        "LIMIT 1"};
    for (size_t i = 0; i < sizeof questions / sizeof questions[0]; i++) {
        sqlite3_stmt *ask = NULL;
        int code = sqlite3_prepare_v2(reader->handle, questions[i], -1, &ask, NULL);
        if (code == SQLITE_OK) code = sqlite3_step(ask);
        enum status status = STATUS_OK;
        if (code == SQLITE_ROW)
            status = status_fail(why, STATUS_REFUSED, "%s: damaged: %s", reader->path,
                                 (const char *)sqlite3_column_text(ask, 0));
        else if (code != SQLITE_DONE)
            status = damaged(reader, why);
        (void)sqlite3_finalize(ask);
        if (status != STATUS_OK) return status;
    }
    return STATUS_OK;
}

static enum status follow_all(struct record_reader *reader, const char *head,
                              struct record_findings *findings, struct message *why)
{
    uint8_t chain[RECORD_DIGEST_SIZE] = {0};
    struct record_entry entry;
    struct record_payload payload;
    const uint8_t *salt = NULL;
    enum status status = STATUS_OK;
    int code = SQLITE_DONE;
    while (status == STATUS_OK && (code = sqlite3_step(reader->all)) == SQLITE_ROW) {
        if (!take_row(reader->all, &entry, &salt, &payload))
            return status_fail(why, STATUS_REFUSED, "%s: the entry after %llu is malformed", reader->path,
                               (unsigned long long)findings->entries);
        status = follow(reader, &entry, salt, &payload, findings->entries, chain, why);
        if (status != STATUS_OK) return status;
        memcpy(chain, entry.chain, sizeof chain);
        findings->entries++;
        if (entry.kind == RECORD_BEGIN) findings->sessions++;
        record_hex(chain, findings->head);
        if (head && strcmp(head, findings->head) == 0) {
            findings->head_found = true;
            findings->head_at = entry.n;
        }
    }
    return code == SQLITE_DONE ? STATUS_OK : damaged(reader, why);
}

enum status record_verify(struct record_reader *reader, const char *head, struct record_findings *findings,
                          struct message *why)
{
    memset(findings, 0, sizeof *findings);
    (void)sqlite3_bind_int64(reader->all, 1, 0);
    enum status status = follow_all(reader, head, findings, why);
    (void)sqlite3_reset(reader->all);
    if (status == STATUS_OK) status = check_rest(reader, why);
    if (status == STATUS_OK && head && !findings->head_found)
        status =
            status_fail(why, STATUS_REFUSED,
                        "%s: no entry of its %llu has the head %s: what was recorded up to it is not in this "
                        "file, or not as it was",
                        reader->path, (unsigned long long)findings->entries, head);
    return status;
}
