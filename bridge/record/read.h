/* Reading records: which sessions there are, what is in them, and whether the chain still holds. */
#ifndef PULSEWRIGHT_BRIDGE_RECORD_READ_H
#define PULSEWRIGHT_BRIDGE_RECORD_READ_H
#include "bridge/record/chain.h"

struct record_reader;
/* STATUS_USAGE: not there; STATUS_DOCUMENT: no record. */
enum status record_open(const char *path, struct record_reader **reader, struct message *why);
void record_close(struct record_reader *reader);

/* A session at a glance. Texts are empty where a payload is gone. */
struct record_glance {
    uint64_t session, entries, begun_s, duration_us;
    char person[64], device[64], kind[32], approval[256], program[64], root[RECORD_HEAD_SIZE];
    char ended[32];              /* finished | stop | fault | "not started" | "interrupted" */
    bool closed;                 /* the program wrote its end */
    char head[RECORD_HEAD_SIZE]; /* chain after its newest entry */
};
/* false from `each` ends the walk, which then gives STATUS_OK. */
enum status record_sessions(struct record_reader *reader,
                            bool (*each)(void *context, const struct record_glance *glance), void *context,
                            struct message *why);

struct record_payload {
    const struct record_entry *entry;
    const uint8_t *data; /* NULL: gone */
    size_t size;
};
/* All entries of a session (0: of all) in order. */
enum status record_walk(struct record_reader *reader, uint64_t session,
                        bool (*each)(void *context, const struct record_payload *payload), void *context,
                        struct message *why);
/* A number (true 1, false 0) or text of an event's JSON payload; `otherwise` where it is not there. */
double record_number(struct record_reader *reader, const struct record_payload *payload, const char *key,
                     double otherwise);
void record_text(struct record_reader *reader, const struct record_payload *payload, const char *key,
                 char *text, size_t size);

struct record_findings {
    uint64_t entries, sessions;
    char head[RECORD_HEAD_SIZE];
    bool head_found;  /* of the one asked for */
    uint64_t head_at; /* the entry it belongs to */
};
/* Follows the whole chain. head: one that was noted earlier, NULL: none; it has to stand somewhere in the
 * chain (further sessions come after it). STATUS_REFUSED: broken; why says at which entry and how. */
enum status record_verify(struct record_reader *reader, const char *head, struct record_findings *findings,
                          struct message *why);

#endif
