/* BLAKE2b (RFC 7693), unkeyed, for documents and the wire. Freestanding. */
#ifndef PULSEWRIGHT_CORE_DIGEST_BLAKE2B_H
#define PULSEWRIGHT_CORE_DIGEST_BLAKE2B_H
#include <stddef.h>
#include <stdint.h>

struct blake2b {
    uint64_t h[8], counter[2];
    uint8_t block[128];
    size_t filled, size;
};

/* size: 1 to 64 octets of digest. */
void blake2b_begin(struct blake2b *state, size_t size);
void blake2b_add(struct blake2b *state, const void *data, size_t length);
void blake2b_end(struct blake2b *state, uint8_t *digest);
/* In one call. */
void blake2b(uint8_t *digest, size_t size, const void *data, size_t length);

#endif
