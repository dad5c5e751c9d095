/* Documents: what all kinds share. Each kind is read and written through one schema table over libfyaml; an
 * error is one line, `file:line:column: key: what it holds, what it may hold`, status STATUS_DOCUMENT, and
 * nothing is half loaded. Text fields are bounded; arrays are owned by the document and freed by its
 * NAME_free. A number that may be left out is NAN where left out. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_DOCUMENT_H
#define PULSEWRIGHT_CORE_DOCUMENT_DOCUMENT_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { NAME_SIZE = 64, LINE_SIZE = 256, PATH_SIZE = 1024, DIGEST_SIZE = 32 };

enum document_kind {
    DOCUMENT_PROFILE,
    DOCUMENT_DEMAND,
    DOCUMENT_STIMULATOR,
    DOCUMENT_HOOKUP,
    DOCUMENT_TRAIN,
    DOCUMENT_RECORDINGS,
    DOCUMENT_PLAN,
    DOCUMENT_KINDS
};

/* A day, YYYY-MM-DD; year 0: absent. */
struct date {
    int year, month, day;
};
bool date_read(const char *text, struct date *date);
long date_days(struct date date); /* days since 1970-01-01 */

/* A file read whole, once, with its digest (BLAKE2b-256 of its bytes). Free with document_bytes_free. */
struct document_bytes {
    char path[PATH_SIZE];
    char *data; /* NUL after the last */
    size_t size;
    uint8_t digest[DIGEST_SIZE];
};
enum status document_read_bytes(const char *path, struct document_bytes *bytes, struct message *why);
void document_bytes_digest(
    struct document_bytes *bytes); /* fills the digest, where bytes were made otherwise */
void document_bytes_free(struct document_bytes *bytes);
/* Which kind a file says it is by its `format:` line. */
enum status document_kind_of(const struct document_bytes *bytes, enum document_kind *kind,
                             struct message *why);
const char *document_kind_format(enum document_kind kind); /* "pulsewright-profile-1" */

/* Writes a whole file: never over an existing one without `replace`; the old one is kept as PATH.1.
 * Temporary, synced, renamed. */
enum status document_write_file(const char *path, const void *data, size_t size, bool replace,
                                struct message *why);
/* Text being made, grows as needed. */
struct text_out {
    char *data;
    size_t size, capacity;
    bool commented; /* documents are written with what their keys mean, as `begin` does */
};
__attribute__((format(printf, 2, 3))) void text_out_print(struct text_out *out, const char *format, ...);
void text_out_free(struct text_out *out);
/* The shortest decimal that reads back as the same double (at most 17 digits). Returns buffer. */
char *number_text(double value, char buffer[32]);

#endif
