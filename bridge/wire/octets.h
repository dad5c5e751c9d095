/* Octets: little-endian numbers put one after another and taken again, for fixed encodings. Freestanding. */
#ifndef PULSEWRIGHT_BRIDGE_WIRE_OCTETS_H
#define PULSEWRIGHT_BRIDGE_WIRE_OCTETS_H
#include <stddef.h>
#include <stdint.h>
#include <string.h>

/* The caller's buffer holds what is put: sizes are static asserts of the encodings. */
static inline size_t octets_put(uint8_t *out, size_t at, uint64_t value, unsigned octets)
{
    for (unsigned i = 0; i < octets; i++) out[at + i] = (uint8_t)(value >> 8 * i);
    return at + octets;
}

static inline uint64_t octets_take(const uint8_t *in, size_t *at, unsigned octets)
{
    uint64_t value = 0;
    for (unsigned i = 0; i < octets; i++) value |= (uint64_t)in[*at + i] << 8 * i;
    *at += octets;
    return value;
}

#endif
