/* Record: what was planned, sent, delivered and measured in a session, kept in SQLite (WAL) by a writer thread; chained so that it can be audited. */
#ifndef PULSEWRIGHT_BRIDGE_RECORD_RECORD_H
#define PULSEWRIGHT_BRIDGE_RECORD_RECORD_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct record;

enum record_event {
    RECORD_SIGNOFF, RECORD_ARMED, RECORD_START, RECORD_RESUME, RECORD_FAULT, RECORD_STOP, RECORD_FINISHED, /* synchronous FULL */
    RECORD_TALLY, RECORD_DELIVERED, RECORD_SAMPLE, RECORD_EASE, RECORD_MARK, RECORD_NOTE, RECORD_FRAMES
};

/* Opens or makes the database and begins a session. Refused where less than 64 MiB are free. The plan's bytes are kept whole. */
enum status record_begin(const char *path, const char *person, const char *device, const char *kind, const void *plan, size_t plan_size,
                         const uint8_t root[32], struct record **record, struct message *why);
/* Hands an event to the writer (copied; never waits for the disk but for the synchronous kinds). at_us: session time; text: JSON object. */
enum status record_event(struct record *record, enum record_event event, uint64_t at_us, const char *text, struct message *why);
enum status record_pulse(struct record *record, uint64_t at_us, unsigned channel, unsigned duration_us, uint32_t current_ua, uint32_t measured_ua);
enum status record_force(struct record *record, uint64_t at_us, double force_n);
/* Ends the session, writes all, gives the chain's head (hex). */
enum status record_end(struct record *record, char head[65], struct message *why);
void record_abandon(struct record *record);

#endif
