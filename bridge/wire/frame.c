/* Frames. The goal of this code: a damaged frame is never acted on. COBS: Cheshire and Baker 1999; CRC-32C:
 * Castagnoli et al. 1993, reflected 0x1EDC6F41, register starts at all ones. Freestanding. */
#include "bridge/wire/frame.h"

#include "bridge/wire/message.h"
#include <string.h>

uint32_t crc32c(uint32_t crc, const uint8_t *data, size_t size)
{
    crc = ~crc;
    for (size_t i = 0; i < size; i++) {
        crc ^= data[i];
        for (int bit = 0; bit < 8; bit++) crc = crc >> 1 ^ (0x82F63B78u & (0u - (crc & 1u)));
    }
    return ~crc;
}

size_t cobs_encode(const uint8_t *in, size_t size, uint8_t *out)
{
    size_t code_at = 0, put = 1;
    uint8_t code = 1;
    for (size_t i = 0; i < size; i++) {
        if (in[i] != 0) {
            out[put++] = in[i];
            code++;
        }
        if (in[i] != 0 && (code != 0xFF || i + 1 == size)) continue;
        out[code_at] = code;
        code_at = put++;
        code = 1;
    }
    out[code_at] = code;
    return put;
}

size_t cobs_decode(const uint8_t *in, size_t size, uint8_t *out, size_t most)
{
    size_t put = 0;
    for (size_t at = 0; at < size;) {
        const uint8_t code = in[at++];
        if (code == 0 || at + code - 1u > size || put + code - 1u > most) return (size_t)-1;
        for (uint8_t i = 1; i < code; i++) {
            if (in[at] == 0) return (size_t)-1;
            out[put++] = in[at++];
        }
        if (code == 0xFF || at >= size) continue;
        if (put >= most) return (size_t)-1;
        out[put++] = 0;
    }
    return put;
}

static uint32_t frame_crc(uint8_t type, const uint8_t *raw, size_t size)
{
    const uint32_t seed = message_is_fixed(type) ? 0 : crc32c(0, message_table_digest(), 8);
    return crc32c(seed, raw, size);
}

static void put32(uint8_t *out, uint32_t value)
{
    for (unsigned i = 0; i < 4; i++) out[i] = (uint8_t)(value >> 8 * i);
}

static uint32_t get32(const uint8_t *in)
{
    return (uint32_t)in[0] | (uint32_t)in[1] << 8 | (uint32_t)in[2] << 16 | (uint32_t)in[3] << 24;
}

size_t frame_encode(const struct frame *frame, uint8_t out[FRAME_WIRE_MAX])
{
    uint8_t raw[FRAME_RAW_MAX];
    raw[0] = FRAME_VERSION;
    raw[1] = frame->type;
    put32(raw + 2, frame->session);
    raw[6] = (uint8_t)frame->sequence;
    raw[7] = (uint8_t)(frame->sequence >> 8);
    memcpy(raw + 8, frame->payload, frame->size);
    const size_t size = 8u + frame->size;
    put32(raw + size, frame_crc(frame->type, raw, size));
    out[0] = 0;
    const size_t coded = cobs_encode(raw, size + 4, out + 1);
    out[1 + coded] = 0;
    return coded + 2;
}

static bool open_frame(struct frame_reader *reader, struct frame *frame)
{
    uint8_t raw[FRAME_RAW_MAX];
    const size_t size = cobs_decode(reader->octets, reader->filled, raw, sizeof raw);
    if (size == (size_t)-1 || size < 12 || raw[0] != FRAME_VERSION) return false;
    if (frame_crc(raw[1], raw, size - 4) != get32(raw + size - 4)) return false;
    frame->type = raw[1];
    frame->session = get32(raw + 2);
    frame->sequence = (uint16_t)(raw[6] | raw[7] << 8);
    frame->size = (uint8_t)(size - 12);
    memcpy(frame->payload, raw + 8, frame->size);
    return true;
}

bool frame_reader_take(struct frame_reader *reader, uint8_t octet, struct frame *frame)
{
    if (octet != 0) {
        if (reader->filled < sizeof reader->octets)
            reader->octets[reader->filled++] = octet;
        else
            reader->overlong = true;
        return false;
    }
    const bool some = reader->filled > 0;
    const bool whole = some && !reader->overlong && open_frame(reader, frame);
    if (some && !whole) reader->damaged++;
    reader->filled = 0;
    reader->overlong = false;
    return whole;
}
