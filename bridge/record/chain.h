/* Chain of a record: what an entry's digest and its link are made of. */
#ifndef PULSEWRIGHT_BRIDGE_RECORD_CHAIN_H
#define PULSEWRIGHT_BRIDGE_RECORD_CHAIN_H
#include "bridge/record/record.h"

enum { RECORD_SALT_SIZE = 16, RECORD_PULSE_OCTETS = 19, RECORD_FORCE_OCTETS = 16 };

struct record_entry {
    uint64_t n;       /* 1 .. without a gap, over the whole database */
    uint64_t session; /* the n of its begin */
    unsigned kind;    /* enum record_event */
    uint64_t at_us;
    uint8_t digest[RECORD_DIGEST_SIZE]; /* of salt and payload */
    uint8_t chain[RECORD_DIGEST_SIZE];  /* of the chain before and all of the above */
};
/* The salt keeps a short payload (a person's code) from being guessed from its digest. */
void record_digest(const uint8_t salt[RECORD_SALT_SIZE], const void *payload, size_t size,
                   uint8_t digest[RECORD_DIGEST_SIZE]);
/* chain = BLAKE2b-256("pulsewright-record-1" 0 || before || n || session || kind || at_us || digest), numbers
 * u64, u64, u8, u64 little-endian; before the first entry 32 zeros. Gives entry->chain's right value. */
void record_link(const uint8_t before[RECORD_DIGEST_SIZE], const struct record_entry *entry,
                 uint8_t chain[RECORD_DIGEST_SIZE]);

/* Rows of PULSES and FORCE payloads. */
struct record_pulse_row {
    uint64_t at_us;
    uint8_t channel;
    uint16_t duration_us;
    uint32_t current_ua, measured_ua;
};
struct record_force_row {
    uint64_t at_us;
    double force_n;
};
void record_pulse_encode(const struct record_pulse_row *row, uint8_t out[RECORD_PULSE_OCTETS]);
void record_pulse_decode(const uint8_t in[RECORD_PULSE_OCTETS], struct record_pulse_row *row);
void record_force_encode(const struct record_force_row *row, uint8_t out[RECORD_FORCE_OCTETS]);
void record_force_decode(const uint8_t in[RECORD_FORCE_OCTETS], struct record_force_row *row);
void record_hex(const uint8_t digest[RECORD_DIGEST_SIZE], char text[RECORD_HEAD_SIZE]);

#endif
