/* Chain of a record. The goal of this code: one entry that is changed, taken out, put in or moved breaks the
 * chain at its place. A hash chain over digests, BLAKE2b (RFC 7693). */
#include "bridge/record/chain.h"

#include "bridge/wire/octets.h"
#include "core/digest/blake2b.h"
#include <string.h>

static const char domain[] = "pulsewright-record-1"; /* with its NUL */

const char *record_event_word(unsigned event)
{
    switch (event) {
#define RECORD_WORD(name, number, word, synchronous)                                                         \
    case number: return word;
        RECORD_KIND_TABLE(RECORD_WORD)
#undef RECORD_WORD
    default: return "unknown";
    }
}

void record_digest(const uint8_t salt[RECORD_SALT_SIZE], const void *payload, size_t size,
                   uint8_t digest[RECORD_DIGEST_SIZE])
{
    struct blake2b hash;
    blake2b_begin(&hash, RECORD_DIGEST_SIZE);
    blake2b_add(&hash, salt, RECORD_SALT_SIZE);
    blake2b_add(&hash, payload, size);
    blake2b_end(&hash, digest);
}

void record_link(const uint8_t before[RECORD_DIGEST_SIZE], const struct record_entry *entry,
                 uint8_t chain[RECORD_DIGEST_SIZE])
{
    uint8_t octets[8 + 8 + 1 + 8];
    struct blake2b hash;
    size_t at = octets_put(octets, 0, entry->n, 8);
    at = octets_put(octets, at, entry->session, 8);
    at = octets_put(octets, at, entry->kind, 1);
    at = octets_put(octets, at, entry->at_us, 8);
    blake2b_begin(&hash, RECORD_DIGEST_SIZE);
    blake2b_add(&hash, domain, sizeof domain);
    blake2b_add(&hash, before, RECORD_DIGEST_SIZE);
    blake2b_add(&hash, octets, at);
    blake2b_add(&hash, entry->digest, RECORD_DIGEST_SIZE);
    blake2b_end(&hash, chain);
}

void record_pulse_encode(const struct record_pulse_row *row, uint8_t out[RECORD_PULSE_OCTETS])
{
    size_t at = octets_put(out, 0, row->at_us, 8);
    at = octets_put(out, at, row->channel, 1);
    at = octets_put(out, at, row->duration_us, 2);
    at = octets_put(out, at, row->current_ua, 4);
    (void)octets_put(out, at, row->measured_ua, 4);
}

void record_pulse_decode(const uint8_t in[RECORD_PULSE_OCTETS], struct record_pulse_row *row)
{
    size_t at = 0;
    row->at_us = octets_take(in, &at, 8);
    row->channel = (uint8_t)octets_take(in, &at, 1);
    row->duration_us = (uint16_t)octets_take(in, &at, 2);
    row->current_ua = (uint32_t)octets_take(in, &at, 4);
    row->measured_ua = (uint32_t)octets_take(in, &at, 4);
}

void record_force_encode(const struct record_force_row *row, uint8_t out[RECORD_FORCE_OCTETS])
{
    uint64_t bits = 0;
    _Static_assert(sizeof bits == sizeof row->force_n, "a double is 8 octets");
    memcpy(&bits, &row->force_n, sizeof bits);
    (void)octets_put(out, octets_put(out, 0, row->at_us, 8), bits, 8);
}

void record_force_decode(const uint8_t in[RECORD_FORCE_OCTETS], struct record_force_row *row)
{
    size_t at = 0;
    row->at_us = octets_take(in, &at, 8);
    const uint64_t bits = octets_take(in, &at, 8);
    memcpy(&row->force_n, &bits, sizeof bits);
}

void record_hex(const uint8_t digest[RECORD_DIGEST_SIZE], char text[RECORD_HEAD_SIZE])
{
    static const char digits[] = "0123456789abcdef";
    for (size_t i = 0; i < RECORD_DIGEST_SIZE; i++) {
        text[2 * i] = digits[digest[i] >> 4];
        text[2 * i + 1] = digits[digest[i] & 15];
    }
    text[2 * RECORD_DIGEST_SIZE] = '\0';
}
