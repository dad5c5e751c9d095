/* Frames: COBS (Cheshire and Baker 1999) between zero octets; inside, little-endian:
 * version u8 | type u8 | session u32 | sequence u16 | payload | crc u32. CRC-32C over the 8-octet digest of
 * the message table and then the frame, so that two different tables never understand each other; messages of
 * fixed layout are not seeded. Freestanding. */
#ifndef PULSEWRIGHT_BRIDGE_WIRE_FRAME_H
#define PULSEWRIGHT_BRIDGE_WIRE_FRAME_H
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    FRAME_VERSION = 1,
    FRAME_PAYLOAD_MAX = 240,
    FRAME_PAYLOAD_RUNNING_MAX = 96,
    FRAME_RAW_MAX = 8 + FRAME_PAYLOAD_MAX + 4,
    FRAME_WIRE_MAX = FRAME_RAW_MAX + 2 + 2 /* one COBS octet each 254, a delimiter before and after */
};

struct frame {
    uint8_t type; /* enum message_type */
    uint32_t session;
    uint16_t sequence;
    uint8_t size;
    uint8_t payload[FRAME_PAYLOAD_MAX];
};

/* Takes octets one by one. Zero it to begin. */
struct frame_reader {
    uint8_t octets[FRAME_RAW_MAX + 2];
    uint16_t filled;
    bool overlong;
    uint32_t damaged; /* frames dropped so far */
};

uint32_t crc32c(uint32_t crc, const uint8_t *data, size_t size); /* crc: 0 to begin; may be continued */
/* COBS without delimiters; `out` holds size + size/254 + 1. Returns octets written. */
size_t cobs_encode(const uint8_t *in, size_t size, uint8_t *out);
/* In place is allowed. Returns octets written, or (size_t)-1 where the input is not COBS or longer than
 * `most`. */
size_t cobs_decode(const uint8_t *in, size_t size, uint8_t *out, size_t most);
/* A delimiter, the frame, a delimiter. Returns octets written, at most FRAME_WIRE_MAX. */
size_t frame_encode(const struct frame *frame, uint8_t out[FRAME_WIRE_MAX]);
/* True where this octet ends a whole frame: *frame is it. A damaged one is dropped and counted. */
bool frame_reader_take(struct frame_reader *reader, uint8_t octet, struct frame *frame);
/* RFC 1982, 16 bits: is a after b? */
static inline bool sequence_after(uint16_t a, uint16_t b)
{
    const uint16_t distance = (uint16_t)(a - b);
    return distance != 0 && distance < 0x8000;
}

#endif
