/* The database of records. The goal of this code: what is committed is a chain without a gap, whatever ends
 * the program. SQLite in WAL mode: a commit in FULL is on the disk, one in NORMAL survives the program but
 * not the machine. */
#include "bridge/record/database.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <sys/random.h>
#include <sys/stat.h>
#include <unistd.h>

/* "PWR1" as SQLite's application_id: what kind of file this is. */
enum { APPLICATION_ID = 0x50575231, BUSY_MS = 2000 };
static const char tables[] =
    "CREATE TABLE entry(n INTEGER PRIMARY KEY, session INTEGER NOT NULL, kind INTEGER "
    "NOT NULL, at_us INTEGER NOT NULL, digest BLOB NOT NULL, chain BLOB NOT NULL);"
    "CREATE TABLE payload(n INTEGER PRIMARY KEY, salt BLOB NOT NULL, data BLOB NOT NULL);"
    "PRAGMA application_id = 1347899953;";
_Static_assert(APPLICATION_ID == 1347899953, "one number in both places");

static enum status fail(struct message *why, enum status status, sqlite3 *handle, const char *what)
{
    return status_fail(why, status, "the record: %s: %s", what,
                       handle ? sqlite3_errmsg(handle) : "no memory");
}

static enum status run(sqlite3 *handle, const char *sql, struct message *why)
{
    if (sqlite3_exec(handle, sql, NULL, NULL, NULL) == SQLITE_OK) return STATUS_OK;
    return fail(why, STATUS_REFUSED, handle, "can not be written");
}

static int64_t read_number(sqlite3 *handle, const char *sql, int64_t otherwise)
{
    sqlite3_stmt *statement = NULL;
    int64_t value = otherwise;
    if (sqlite3_prepare_v2(handle, sql, -1, &statement, NULL) == SQLITE_OK &&
        sqlite3_step(statement) == SQLITE_ROW)
        value = sqlite3_column_int64(statement, 0);
    (void)sqlite3_finalize(statement);
    return value;
}

/* SQLite would make the file readable by all; what is in it is about a person's health. */
static enum status make_file(const char *path, struct message *why)
{
    const int file = open(path, O_RDWR | O_CREAT | O_CLOEXEC | O_NOFOLLOW, 0600);
    if (file < 0)
        return status_fail(why, STATUS_REFUSED, "the record %s can not be written: %s", path,
                           strerror(errno));
    struct stat about;
    const bool regular = fstat(file, &about) == 0 && S_ISREG(about.st_mode);
    (void)close(file);
    if (!regular) return status_fail(why, STATUS_USAGE, "the record %s is no plain file", path);
    return STATUS_OK;
}

static enum status prepare(struct database *database, struct message *why)
{
    const struct {
        sqlite3_stmt **statement;
        const char *sql;
    } statements[] = {
        {&database->last, "SELECT n, chain FROM entry ORDER BY n DESC LIMIT 1"},
        {&database->add_entry,
         "INSERT INTO entry(n, session, kind, at_us, digest, chain) VALUES(?,?,?,?,?,?)"},
        {&database->add_payload, "INSERT INTO payload(n, salt, data) VALUES(?,?,?)"},
    };
    for (size_t i = 0; i < sizeof statements / sizeof statements[0]; i++)
        if (sqlite3_prepare_v3(database->handle, statements[i].sql, -1, SQLITE_PREPARE_PERSISTENT,
                               statements[i].statement, NULL) != SQLITE_OK)
            return fail(why, STATUS_DOCUMENT, database->handle, "is no record of this program");
    return STATUS_OK;
}

static enum status open_tables(struct database *database, const char *path, struct message *why)
{
    const bool empty = read_number(database->handle, "SELECT count(*) FROM sqlite_schema", -1) == 0;
    const int64_t id = read_number(database->handle, "PRAGMA application_id", -1);
    if (!empty && id != APPLICATION_ID)
        return status_fail(why, STATUS_DOCUMENT, "%s is no record of this program", path);
    enum status status = run(database->handle, "PRAGMA journal_mode = WAL; PRAGMA foreign_keys = OFF;", why);
    if (status == STATUS_OK && empty) {
        status = run(database->handle, "BEGIN IMMEDIATE", why);
        if (status == STATUS_OK) status = run(database->handle, tables, why);
        if (status == STATUS_OK) status = run(database->handle, "COMMIT", why);
    }
    return status == STATUS_OK ? prepare(database, why) : status;
}

enum status database_open(const char *path, const char *vfs, struct database *database, struct message *why)
{
    memset(database, 0, sizeof *database);
    enum status status = make_file(path, why);
    if (status != STATUS_OK) return status;
    if (sqlite3_open_v2(path, &database->handle, SQLITE_OPEN_READWRITE | SQLITE_OPEN_FULLMUTEX, vfs) !=
        SQLITE_OK)
        status = fail(why, STATUS_REFUSED, database->handle, "can not be opened");
    if (status == STATUS_OK) {
        (void)sqlite3_busy_timeout(database->handle, BUSY_MS);
        status = open_tables(database, path, why);
    }
    if (status != STATUS_OK) database_close(database);
    return status;
}

enum status database_open_to_read(const char *path, sqlite3 **handle, struct message *why)
{
    struct stat about;
    if (stat(path, &about) != 0) return status_fail(why, STATUS_USAGE, "%s: %s", path, strerror(errno));
    /* one that was left by a killed program has to be recovered, which writes; only where that is not allowed
     * it is read as it stands */
    int code = sqlite3_open_v2(path, handle, SQLITE_OPEN_READWRITE, NULL);
    if (code != SQLITE_OK || read_number(*handle, "PRAGMA application_id", -1) < 0) {
        (void)sqlite3_close(*handle);
        char *uri = sqlite3_mprintf("file:%s?immutable=1", path);
        code =
            uri ? sqlite3_open_v2(uri, handle, SQLITE_OPEN_READONLY | SQLITE_OPEN_URI, NULL) : SQLITE_NOMEM;
        sqlite3_free(uri);
    }
    if (code == SQLITE_OK && read_number(*handle, "PRAGMA application_id", -1) == APPLICATION_ID) {
        (void)sqlite3_busy_timeout(*handle, BUSY_MS);
        return STATUS_OK;
    }
    (void)sqlite3_close(*handle);
    *handle = NULL;
    return status_fail(why, STATUS_DOCUMENT, "%s is no record of this program, or its first page is damaged",
                       path);
}

void database_close(struct database *database)
{
    database_roll_back(database);
    (void)sqlite3_finalize(database->last);
    (void)sqlite3_finalize(database->add_entry);
    (void)sqlite3_finalize(database->add_payload);
    (void)sqlite3_close(database->handle);
    memset(database, 0, sizeof *database);
}

enum status database_begin(struct database *database, bool synchronous, struct message *why)
{
    enum status status = run(database->handle,
                             synchronous ? "PRAGMA synchronous = FULL; BEGIN IMMEDIATE"
                                         : "PRAGMA synchronous = NORMAL; BEGIN IMMEDIATE",
                             why);
    if (status != STATUS_OK) return status;
    database->in_transaction = true;
    database->n = 0;
    memset(database->chain, 0, sizeof database->chain);
    const int code = sqlite3_step(database->last);
    if (code == SQLITE_ROW && sqlite3_column_bytes(database->last, 1) == RECORD_DIGEST_SIZE) {
        database->n = (uint64_t)sqlite3_column_int64(database->last, 0);
        memcpy(database->chain, sqlite3_column_blob(database->last, 1), RECORD_DIGEST_SIZE);
    } else if (code != SQLITE_DONE) {
        status = fail(why, STATUS_REFUSED, database->handle, "the end of its chain can not be read");
    }
    (void)sqlite3_reset(database->last);
    if (status != STATUS_OK) database_roll_back(database);
    return status;
}

static bool add_payload(struct database *database, const struct record_entry *entry, const uint8_t *salt,
                        const void *payload, size_t size)
{
    sqlite3_stmt *add = database->add_payload;
    bool done = sqlite3_bind_int64(add, 1, (sqlite3_int64)entry->n) == SQLITE_OK &&
                sqlite3_bind_blob(add, 2, salt, RECORD_SALT_SIZE, SQLITE_TRANSIENT) == SQLITE_OK &&
                sqlite3_bind_blob64(add, 3, size ? payload : "", size, SQLITE_STATIC) == SQLITE_OK;
    done = done && sqlite3_step(add) == SQLITE_DONE;
    (void)sqlite3_reset(add);
    (void)sqlite3_clear_bindings(add);
    return done;
}

static bool add_entry(struct database *database, const struct record_entry *entry)
{
    sqlite3_stmt *add = database->add_entry;
    bool done = sqlite3_bind_int64(add, 1, (sqlite3_int64)entry->n) == SQLITE_OK &&
                sqlite3_bind_int64(add, 2, (sqlite3_int64)entry->session) == SQLITE_OK &&
                sqlite3_bind_int(add, 3, (int)entry->kind) == SQLITE_OK &&
                sqlite3_bind_int64(add, 4, (sqlite3_int64)entry->at_us) == SQLITE_OK &&
                sqlite3_bind_blob(add, 5, entry->digest, RECORD_DIGEST_SIZE, SQLITE_STATIC) == SQLITE_OK &&
                sqlite3_bind_blob(add, 6, entry->chain, RECORD_DIGEST_SIZE, SQLITE_STATIC) == SQLITE_OK;
    done = done && sqlite3_step(add) == SQLITE_DONE;
    (void)sqlite3_reset(add);
    (void)sqlite3_clear_bindings(add);
    return done;
}

enum status database_append(struct database *database, struct record_entry *entry, const void *payload,
                            size_t size, struct message *why)
{
    uint8_t salt[RECORD_SALT_SIZE];
    if (getrandom(salt, sizeof salt, 0) != (ssize_t)sizeof salt)
        return status_fail(why, STATUS_INTERNAL, "no random numbers for the record");
    if (entry->at_us > INT64_MAX) return status_fail(why, STATUS_INTERNAL, "a time that no record can hold");
    entry->n = database->n + 1;
    if (entry->session == 0) entry->session = entry->n;
    record_digest(salt, payload, size, entry->digest);
    record_link(database->chain, entry, entry->chain);
    if (!add_entry(database, entry) || !add_payload(database, entry, salt, payload, size))
        return fail(why, STATUS_REFUSED, database->handle, "can not be written");
    database->n = entry->n;
    memcpy(database->chain, entry->chain, sizeof database->chain);
    return STATUS_OK;
}

enum status database_commit(struct database *database, struct message *why)
{
    const enum status status = run(database->handle, "COMMIT", why);
    if (status == STATUS_OK) database->in_transaction = false;
    return status;
}

void database_roll_back(struct database *database)
{
    if (!database->in_transaction) return;
    (void)sqlite3_exec(database->handle, "ROLLBACK", NULL, NULL, NULL);
    database->in_transaction = false;
}
