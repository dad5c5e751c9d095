/* BLAKE2b, unkeyed. The goal of this code: one digest for documents and the wire that runs on host and device
 * alike. Method: RFC 7693 (Saarinen and Aumasson 2015), section 3. Freestanding. */
#include "core/digest/blake2b.h"

#include <string.h>

static const uint64_t initial[8] = {0x6a09e667f3bcc908u, 0xbb67ae8584caa73bu, 0x3c6ef372fe94f82bu,
                                    0xa54ff53a5f1d36f1u, 0x510e527fade682d1u, 0x9b05688c2b3e6c1fu,
                                    0x1f83d9abfb41bd6bu, 0x5be0cd19137e2179u};

static const uint8_t order[10][16] = {{0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15},
                                      {14, 10, 4, 8, 9, 15, 13, 6, 1, 12, 0, 2, 11, 7, 5, 3},
                                      {11, 8, 12, 0, 5, 2, 15, 13, 10, 14, 3, 6, 7, 1, 9, 4},
                                      {7, 9, 3, 1, 13, 12, 11, 14, 2, 6, 5, 10, 4, 0, 15, 8},
                                      {9, 0, 5, 7, 2, 4, 10, 15, 14, 1, 11, 12, 6, 8, 3, 13},
                                      {2, 12, 6, 10, 0, 11, 8, 3, 4, 13, 7, 5, 15, 14, 1, 9},
                                      {12, 5, 1, 15, 14, 13, 4, 10, 0, 7, 6, 3, 9, 2, 8, 11},
                                      {13, 11, 7, 14, 12, 1, 3, 9, 5, 0, 15, 4, 8, 6, 2, 10},
                                      {6, 15, 14, 9, 11, 3, 0, 8, 12, 2, 13, 7, 1, 4, 10, 5},
                                      {10, 2, 8, 4, 7, 6, 1, 5, 15, 11, 9, 14, 3, 12, 13, 0}};

static uint64_t rotate(uint64_t x, unsigned n)
{
    return x >> n | x << (64 - n);
}

static void mix(uint64_t v[16], unsigned a, unsigned b, unsigned c, unsigned d, uint64_t x, uint64_t y)
{
    v[a] += v[b] + x;
    v[d] = rotate(v[d] ^ v[a], 32);
    v[c] += v[d];
    v[b] = rotate(v[b] ^ v[c], 24);
    v[a] += v[b] + y;
    v[d] = rotate(v[d] ^ v[a], 16);
    v[c] += v[d];
    v[b] = rotate(v[b] ^ v[c], 63);
}

static void compress(struct blake2b *state, uint64_t last)
{
    uint64_t v[16], m[16];
    for (unsigned i = 0; i < 16; i++) {
        m[i] = 0;
        for (unsigned j = 8; j-- > 0;) m[i] = m[i] << 8 | state->block[8 * i + j];
    }
    for (unsigned i = 0; i < 8; i++) {
        v[i] = state->h[i];
        v[i + 8] = initial[i];
    }
    v[12] ^= state->counter[0];
    v[13] ^= state->counter[1];
    v[14] ^= last;
    for (unsigned round = 0; round < 12; round++) {
        const uint8_t *s = order[round % 10];
        mix(v, 0, 4, 8, 12, m[s[0]], m[s[1]]);
        mix(v, 1, 5, 9, 13, m[s[2]], m[s[3]]);
        mix(v, 2, 6, 10, 14, m[s[4]], m[s[5]]);
        mix(v, 3, 7, 11, 15, m[s[6]], m[s[7]]);
        mix(v, 0, 5, 10, 15, m[s[8]], m[s[9]]);
        mix(v, 1, 6, 11, 12, m[s[10]], m[s[11]]);
        mix(v, 2, 7, 8, 13, m[s[12]], m[s[13]]);
        mix(v, 3, 4, 9, 14, m[s[14]], m[s[15]]);
    }
    for (unsigned i = 0; i < 8; i++) state->h[i] ^= v[i] ^ v[i + 8];
}

static void count(struct blake2b *state, size_t octets)
{
    state->counter[0] += octets;
    if (state->counter[0] < octets) state->counter[1]++;
}

void blake2b_begin(struct blake2b *state, size_t size)
{
    memset(state, 0, sizeof *state);
    for (unsigned i = 0; i < 8; i++) state->h[i] = initial[i];
    state->h[0] ^= 0x01010000u ^ (uint64_t)size;
    state->size = size;
}

void blake2b_add(struct blake2b *state, const void *data, size_t length)
{
    const uint8_t *octet = data;
    while (length) {
        if (state->filled ==
            sizeof state->block) { /* a full block is kept until more follows: the last is marked */
            count(state, sizeof state->block);
            compress(state, 0);
            state->filled = 0;
        }
        size_t part = sizeof state->block - state->filled;
        if (part > length) part = length;
        memcpy(state->block + state->filled, octet, part);
        state->filled += part;
        octet += part;
        length -= part;
    }
}

void blake2b_end(struct blake2b *state, uint8_t *digest)
{
    count(state, state->filled);
    memset(state->block + state->filled, 0, sizeof state->block - state->filled);
    compress(state, ~(uint64_t)0);
    for (size_t i = 0; i < state->size; i++) digest[i] = (uint8_t)(state->h[i / 8] >> 8 * (i % 8));
}

void blake2b(uint8_t *digest, size_t size, const void *data, size_t length)
{
    struct blake2b state;
    blake2b_begin(&state, size);
    blake2b_add(&state, data, length);
    blake2b_end(&state, digest);
}
