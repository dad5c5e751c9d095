/* Image: a plan as the wire carries it, proven as it streams. h_n = 0, h_(i-1) = BLAKE2b-128(s_i || h_i),
 * root = BLAKE2b-256(header || limits || identity || n || h_0). Freestanding: shared with the device.
 * Little-endian encodings, fixed sizes. */
#ifndef PULSEWRIGHT_BRIDGE_WIRE_IMAGE_H
#define PULSEWRIGHT_BRIDGE_WIRE_IMAGE_H
#include "core/dose/dose.h"
#include "core/train/segment.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    IMAGE_CHANNELS_MAX = 8,
    IMAGE_LINK_SIZE = 16,
    IMAGE_ROOT_SIZE = 32,
    IMAGE_NAME_SIZE = 32,
    IMAGE_SEGMENTS_MAX = 1 << 20
};
enum image_kind { IMAGE_TIMED = 1, IMAGE_ANGLE = 2, IMAGE_HELD = 3 };
enum signoff_kind { SIGNOFF_CLINICAL = 1, SIGNOFF_REHEARSAL = 2 };

struct image_header {
    uint8_t format;  /* 1 */
    uint8_t kind;    /* enum image_kind */
    uint8_t signoff; /* enum signoff_kind */
    uint8_t channels;
    uint8_t channel[IMAGE_CHANNELS_MAX]; /* 1 .. */
    uint32_t common_period_us;           /* 0: none */
    uint16_t cadence_from_rpm_x10, cadence_to_rpm_x10;
    uint32_t force_cap_mn[IMAGE_CHANNELS_MAX]; /* 0: none */
    uint32_t ease_step_thousandths;            /* held images; else 0 */
    uint64_t person_digest;                    /* first 8 octets of BLAKE2b of the person code */
    uint64_t pulses;                           /* total count over all segments */
};

/* What the device is: in the root, and what `identity` answers. */
struct image_identity {
    char unit[IMAGE_NAME_SIZE]; /* NUL-padded */
    uint8_t channels;
    uint8_t capacitor_balanced;
    uint8_t independent;
    uint32_t current_from_ua, current_to_ua, current_step_ua;
    uint16_t duration_from_us, duration_to_us, duration_step_us;
    uint16_t interphase_us;
    uint32_t recovery_us;
    uint8_t return_group[IMAGE_CHANNELS_MAX]; /* of channel i+1; 0: its own */
};

enum segment_clock { SEGMENT_TIMED = 0, SEGMENT_ANGLE = 1, SEGMENT_END = 2 };
struct image_segment {
    uint32_t index;
    uint8_t clock; /* enum segment_clock; END: the last, start_us its time, everything else 0 */
    struct segment segment;
    uint8_t link[IMAGE_LINK_SIZE]; /* h_i: what the rest must hash to */
};

/* Encodings; each returns the octets written (a constant of the kind). */
enum {
    IMAGE_HEADER_OCTETS = 72,
    IMAGE_LIMITS_OCTETS = 105,
    IMAGE_IDENTITY_OCTETS = 67,
    IMAGE_SEGMENT_OCTETS = 35
};
size_t image_header_encode(const struct image_header *header, uint8_t *out);
size_t image_limits_encode(const struct dose_limits *limits, uint8_t channel, uint8_t *out);
size_t image_identity_encode(const struct image_identity *identity, uint8_t *out);
/* Without the link: what is hashed as s_i. */
size_t image_segment_encode(const struct image_segment *segment, uint8_t *out);
/* false: a field is out of its range (nothing is to be trusted then). */
bool image_header_decode(const uint8_t *in, size_t size, struct image_header *header);
bool image_limits_decode(const uint8_t *in, size_t size, struct dose_limits *limits, uint8_t *channel);
bool image_identity_decode(const uint8_t *in, size_t size, struct image_identity *identity);
bool image_segment_decode(const uint8_t *in, size_t size, struct image_segment *segment);

/* A whole image on the host: arrays are the caller's. segments hold n entries, the last with clock END. */
struct image {
    struct image_header header;
    struct dose_limits limits[IMAGE_CHANNELS_MAX]; /* by the header's channel list */
    struct image_identity identity;
    uint32_t n;
    struct image_segment *segments;
    uint8_t h0[IMAGE_LINK_SIZE];
    uint8_t root[IMAGE_ROOT_SIZE];
};
/* Fills indices, links, h0 and root from segments, header, limits and identity. */
void image_seal(struct image *image);
/* The two hashes by themselves: what the device computes. */
void image_link(const uint8_t *segment_octets, size_t size, const uint8_t next[IMAGE_LINK_SIZE],
                uint8_t link[IMAGE_LINK_SIZE]);
void image_root(const struct image_header *header, const struct dose_limits *limits,
                const struct image_identity *identity, uint32_t n, const uint8_t h0[IMAGE_LINK_SIZE],
                uint8_t root[IMAGE_ROOT_SIZE]);

#endif
