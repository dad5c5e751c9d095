/* Record: what was planned, sent, delivered and measured in a session, kept in SQLite (WAL) by a writer
 * thread; chained so that it can be audited. A session is a run of entries in one chain over the whole
 * database; each entry's payload stands apart under a salted digest, so that payloads may be left out
 * (anonymous export) and the chain still verifies. The record reads no wall clock: times are handed in. */
#ifndef PULSEWRIGHT_BRIDGE_RECORD_RECORD_H
#define PULSEWRIGHT_BRIDGE_RECORD_RECORD_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* kind, its number on disk (for ever), word, synchronous: the call returns when it is on the disk.
 * Payloads are JSON objects but for PLAN (the document's bytes), PULSES and FORCE (rows of octets). Keys that
 * export reads:
 *   START, RESUME  {"first": index of the first segment played, 1 ..}
 *   EASE           {"channel": 1 .. or 255 for all, "thousandths": 0 .. 1000}
 *   TALLY          {"channel": c, "pulses": given, "skipped": skipped, "charge_pc": q}
 *   FAULT, STOP, FINISHED {"why": words, "exact": true where the device's own counters were read}
 *   MARK           {"mark": spasm | pain | blood pressure | skin | note, "text": words} */
#define RECORD_KIND_TABLE(X)                                                                                 \
    X(RECORD_BEGIN, 1, "begin", true)                                                                        \
    X(RECORD_PLAN, 2, "plan", true)                                                                          \
    X(RECORD_SIGNOFF, 3, "signoff", true)                                                                    \
    X(RECORD_ARMED, 4, "armed", true)                                                                        \
    X(RECORD_START, 5, "start", true)                                                                        \
    X(RECORD_RESUME, 6, "resume", true)                                                                      \
    X(RECORD_FAULT, 7, "fault", true)                                                                        \
    X(RECORD_STOP, 8, "stop", true)                                                                          \
    X(RECORD_FINISHED, 9, "finished", true)                                                                  \
    X(RECORD_END, 10, "end", true)                                                                           \
    X(RECORD_TALLY, 20, "tally", false)                                                                      \
    X(RECORD_DELIVERED, 21, "delivered", false)                                                              \
    X(RECORD_SAMPLE, 22, "sample", false)                                                                    \
    X(RECORD_EASE, 23, "ease", false)                                                                        \
    X(RECORD_MARK, 24, "mark", false)                                                                        \
    X(RECORD_NOTE, 25, "note", false)                                                                        \
    X(RECORD_FRAMES, 26, "frames", false)                                                                    \
    X(RECORD_PULSES, 27, "pulses", false)                                                                    \
    X(RECORD_FORCE, 28, "force", false)

enum record_event {
#define RECORD_ENUM(name, number, word, synchronous) name = number,
    RECORD_KIND_TABLE(RECORD_ENUM)
#undef RECORD_ENUM
};
const char *record_event_word(unsigned event); /* "unknown" where there is none of that number */

enum {
    RECORD_DIGEST_SIZE = 32,
    RECORD_HEAD_SIZE = 2 * RECORD_DIGEST_SIZE + 1,
    RECORD_COMMIT_MS = 250,
    RECORD_FREE_MIB_LEAST = 64,
    RECORD_TEXT_MAX = 1 << 20
};

/* What a session is of; everything is copied. */
struct record_session {
    const char *person;   /* a code */
    const char *device;   /* what the device said it is */
    const char *kind;     /* "clinical" | "rehearsal" */
    const char *approval; /* gate_state_text */
    const char *program;  /* name and version; NULL: none */
    const void *plan;     /* the document's bytes, kept whole; NULL: none */
    size_t plan_size;
    const uint8_t *root; /* 32 octets; NULL: none */
    uint64_t begun_s;    /* wall clock, of the gate */
};

/* What tests hand in instead of the machine's own; all zero: the machine's own. */
struct record_means {
    uint64_t (*free_octets)(const char *path, void *context); /* room on the disk of that file */
    void *context;
    const char *vfs; /* of SQLite */
};

struct record;
/* Opens or makes the database (mode 0600) and begins a session; on the disk when it returns. Refused where
 * less than 64 MiB are free (STATUS_REFUSED) or nothing can be written. */
enum status record_begin(const char *path, const struct record_session *session, struct record **record,
                         struct message *why);
enum status record_begin_by(const struct record_means *means, const char *path,
                            const struct record_session *session, struct record **record,
                            struct message *why);
/* Hands an event to the writer: copied, never waits for the disk but for the synchronous kinds, which are on
 * the disk when it returns STATUS_OK. at_us: image time; text: a JSON object. Any thread. */
enum status record_event(struct record *record, enum record_event event, uint64_t at_us, const char *text,
                         struct message *why);
enum status record_pulse(struct record *record, uint64_t at_us, unsigned channel, unsigned duration_us,
                         uint32_t current_ua, uint32_t measured_ua);
enum status record_force(struct record *record, uint64_t at_us, double force_n);
/* false: something could not be written; streaming to a person has to stop. `why` says what. */
bool record_is_sound(struct record *record, struct message *why);
/* Ends the session, writes all, gives the chain's head (hex). Frees the record in every case. */
enum status record_end(struct record *record, char head[RECORD_HEAD_SIZE], struct message *why);
/* Writes what is pending and closes; the session has no end and is shown as interrupted. NULL is none. */
void record_abandon(struct record *record);

#endif
