/* The database of records: its tables, opened and appended to. One writer at a time; several processes may
 * take turns, each transaction reads the chain's end anew. */
#ifndef PULSEWRIGHT_BRIDGE_RECORD_DATABASE_H
#define PULSEWRIGHT_BRIDGE_RECORD_DATABASE_H
#include "bridge/record/chain.h"
#include <sqlite3.h>

struct database {
    sqlite3 *handle;
    sqlite3_stmt *last, *add_entry, *add_payload;
    bool in_transaction;
    uint64_t n;                        /* of the newest entry, while in a transaction */
    uint8_t chain[RECORD_DIGEST_SIZE]; /* its chain */
};

/* Makes the file (mode 0600) and its tables where they are not there. STATUS_DOCUMENT: another kind of file.
 */
enum status database_open(const char *path, const char *vfs, struct database *database, struct message *why);
/* Opens one that is there, for reading; STATUS_USAGE where it is not there. */
enum status database_open_to_read(const char *path, sqlite3 **handle, struct message *why);
void database_close(struct database *database);
/* synchronous: its commit is on the disk when it returns, and so is all that came before. */
enum status database_begin(struct database *database, bool synchronous, struct message *why);
/* Appends an entry: fills n, digest and chain; session 0: the entry begins one, and it is its own number. */
enum status database_append(struct database *database, struct record_entry *entry, const void *payload,
                            size_t size, struct message *why);
enum status database_commit(struct database *database, struct message *why);
void database_roll_back(struct database *database);

#endif
