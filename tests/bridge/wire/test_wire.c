/* Frames, messages and images against published vectors and their own promises. */
#include "bridge/wire/frame.h"
#include "bridge/wire/image.h"
#include "bridge/wire/message.h"
#include "core/digest/blake2b.h"
#include "support/near.h"

#include <sodium.h>
#include <stdlib.h>
#include <string.h>

/* CRC-32C: the check value of "123456789" (as catalogued for Castagnoli's polynomial), and RFC 3720 B.4 (from
 * memory): 32 zeros, 32 ones. */
static void crc_gives_its_check_values(void **state)
{
    (void)state;
    uint8_t block[32];
    assert_int_equal(crc32c(0, (const uint8_t *)"123456789", 9), 0xE3069283u);
    memset(block, 0, sizeof block);
    assert_int_equal(crc32c(0, block, sizeof block), 0x8A9136AAu);
    memset(block, 0xFF, sizeof block);
    assert_int_equal(crc32c(0, block, sizeof block), 0x62A8AB43u);
    assert_int_equal(crc32c(crc32c(0, (const uint8_t *)"1234", 4), (const uint8_t *)"56789", 5), 0xE3069283u);
}

/* Cheshire and Baker 1999: zeros are replaced by the distance to the next; a run of 254 without zero is coded
 * FF. */
static void cobs_codes_as_published(void **state)
{
    (void)state;
    static const uint8_t in[] = {0x45, 0x00, 0x00, 0x2C, 0x4C, 0x79, 0x00, 0x00, 0x40, 0x06, 0x4F, 0x37};
    static const uint8_t coded[] = {0x02, 0x45, 0x01, 0x04, 0x2C, 0x4C, 0x79,
                                    0x01, 0x05, 0x40, 0x06, 0x4F, 0x37};
    uint8_t out[600], back[600];
    assert_int_equal(cobs_encode(in, sizeof in, out), sizeof coded);
    assert_memory_equal(out, coded, sizeof coded);
    for (size_t size = 0; size <= 520; size++) {
        uint8_t data[520];
        for (size_t i = 0; i < size; i++)
            data[i] = (uint8_t)(i % 256 == 0 && size % 3 == 0 ? 0 : i % 255 + 1);
        const size_t made = cobs_encode(data, size, out);
        assert_null(memchr(out, 0, made));
        assert_int_equal(cobs_decode(out, made, back, sizeof back), size);
        assert_memory_equal(back, data, size);
    }
}

static void frame_comes_back_whole_and_any_flip_is_dropped(void **state)
{
    (void)state;
    struct frame frame = {.type = MESSAGE_RENEW, .session = 0x12345678, .sequence = 0xFFFE}, got;
    const struct message_renew renew = {.echo_us = 0x0102030405060700u, .held = 1};
    uint8_t octets[FRAME_WIRE_MAX];
    assert_true(message_encode(&frame, &renew));
    const size_t size = frame_encode(&frame, octets);
    struct frame_reader reader = {0};
    unsigned whole = 0;
    for (size_t i = 0; i < size; i++) whole += frame_reader_take(&reader, octets[i], &got);
    assert_int_equal(whole, 1);
    assert_int_equal(got.session, frame.session);
    assert_int_equal(got.sequence, frame.sequence);
    for (size_t at = 1; at + 1 < size; at++) /* every single bit of the coded frame */
        for (int bit = 0; bit < 8; bit++) {
            struct frame_reader fresh = {0};
            octets[at] ^= (uint8_t)(1 << bit);
            for (size_t i = 0; i < size; i++) assert_false(frame_reader_take(&fresh, octets[i], &got));
            octets[at] ^= (uint8_t)(1 << bit);
        }
}

static void noise_between_frames_costs_only_itself(void **state)
{
    (void)state;
    struct frame frame = {.type = MESSAGE_STOP, .session = 7}, got;
    const struct message_stop stop = {0};
    uint8_t octets[FRAME_WIRE_MAX];
    assert_true(message_encode(&frame, &stop));
    const size_t size = frame_encode(&frame, octets);
    struct frame_reader reader = {0};
    srand(5);
    for (int i = 0; i < 5000; i++) (void)frame_reader_take(&reader, (uint8_t)(rand() % 256), &got);
    bool whole = false;
    for (size_t i = 0; i < size; i++) whole |= frame_reader_take(&reader, octets[i], &got);
    assert_true(whole);
    assert_int_equal(got.type, MESSAGE_STOP);
}

/* RFC 1982, 3.2, for 16 bits */
static void sequences_compare_round_the_corner(void **state)
{
    (void)state;
    assert_true(sequence_after(1, 0));
    assert_true(sequence_after(0, 0xFFFF));
    assert_true(sequence_after(5, 0xFFF0));
    assert_false(sequence_after(0, 0));
    assert_false(sequence_after(0xFFFF, 0));
    assert_false(sequence_after(0x8000, 0));
}

static void message_with_a_wrong_length_or_value_is_refused(void **state)
{
    (void)state;
    union message_any message;
    struct frame frame = {.type = MESSAGE_EASE};
    struct message_ease ease = {.channel = 255, .thousandths = 1000};
    assert_true(message_encode(&frame, &ease));
    assert_true(message_decode(&frame, &message));
    frame.size++;
    assert_false(message_decode(&frame, &message));
    frame.size = (uint8_t)(frame.size - 2);
    assert_false(message_decode(&frame, &message));
    ease.thousandths = 1001;
    assert_false(message_encode(&frame, &ease));
    frame.type = 200;
    assert_false(message_decode(&frame, &message));
}

/* Whatever octets come, decoding a message stays inside its bounds and its ranges. Seed 20261201. */
static void any_payload_is_decoded_in_range_or_refused(void **state)
{
    (void)state;
    srand(20261201);
    unsigned taken = 0;
    for (int i = 0; i < 200000; i++) {
        union message_any message;
        struct frame frame = {.type = (uint8_t)(rand() % 80),
                              .size = (uint8_t)(rand() % (FRAME_PAYLOAD_MAX + 1))};
        for (int k = 0; k < frame.size; k++) frame.payload[k] = (uint8_t)rand();
        if (!message_decode(&frame, &message)) continue;
        taken++;
        if (frame.type == MESSAGE_EASE) assert_true(message.ease.thousandths <= EASE_FULL);
        if (frame.type == MESSAGE_DONE) assert_true(message.done.size <= MESSAGE_DETAIL_MAX);
    }
    assert_true(taken > 100);
}

/* BLAKE2b of this project against libsodium's, over lengths and digest sizes. */
static void digest_agrees_with_libsodium(void **state)
{
    (void)state;
    uint8_t data[700], mine[64], theirs[64];
    for (size_t i = 0; i < sizeof data; i++) data[i] = (uint8_t)(i * 31 + 7);
    for (size_t size = 0; size <= sizeof data; size += 13)
        for (size_t digest = 16; digest <= 64; digest += 16) {
            blake2b(mine, digest, data, size);
            assert_int_equal(crypto_generichash(theirs, digest, data, size, NULL, 0), 0);
            assert_memory_equal(mine, theirs, digest);
        }
}

/* The chain by its definition, with libsodium: h_n = 0, h_(i-1) = BLAKE2b-128(s_i || h_i). */
static void image_chain_is_as_defined(void **state)
{
    (void)state;
    struct image_segment segments[5];
    struct image image = {.segments = segments, .n = 5};
    uint8_t next[IMAGE_LINK_SIZE] = {0};
    memset(segments, 0, sizeof segments);
    for (int i = 0; i < 5; i++)
        segments[i] = (struct image_segment){.clock = i == 4 ? SEGMENT_END : SEGMENT_TIMED,
                                             .segment = {.start_us = 1000u * (unsigned)i,
                                                         .period_us = 20000,
                                                         .count = i == 4 ? 0 : 3,
                                                         .duration_from_us = 300,
                                                         .duration_to_us = 310,
                                                         .current_from_ua = 40000,
                                                         .current_to_ua = 41000,
                                                         .channel = i == 4 ? 0 : 1,
                                                         .opening = i == 4 ? 0 : 1,
                                                         .opening_gap_us = 5000}};
    image_seal(&image);
    for (int i = 5; i-- > 0;) {
        uint8_t octets[IMAGE_SEGMENT_OCTETS + IMAGE_LINK_SIZE];
        assert_memory_equal(segments[i].link, next, sizeof next);
        assert_int_equal(image_segment_encode(&segments[i], octets), IMAGE_SEGMENT_OCTETS);
        memcpy(octets + IMAGE_SEGMENT_OCTETS, next, sizeof next);
        assert_int_equal(crypto_generichash(next, sizeof next, octets, sizeof octets, NULL, 0), 0);
    }
    assert_memory_equal(image.h0, next, sizeof next);
}

static void encodings_come_back_and_have_their_sizes(void **state)
{
    (void)state;
    uint8_t octets[128], channel = 0;
    struct dose_limits limits = dose_program_limits(), limits_back = {0};
    limits.load_ohm = 1000;
    assert_int_equal(image_limits_encode(&limits, 3, octets), IMAGE_LIMITS_OCTETS);
    assert_true(image_limits_decode(octets, IMAGE_LIMITS_OCTETS, &limits_back, &channel));
    assert_memory_equal(&limits, &limits_back, sizeof limits);
    assert_int_equal(channel, 3);
    limits.rms_ua = 0; /* a figure that is not stated */
    (void)image_limits_encode(&limits, 3, octets);
    assert_false(image_limits_decode(octets, IMAGE_LIMITS_OCTETS, &limits_back, &channel));
    const struct image_header header = {.format = 1,
                                        .kind = IMAGE_TIMED,
                                        .signoff = SIGNOFF_CLINICAL,
                                        .channels = 2,
                                        .channel = {2, 5},
                                        .force_cap_mn = {100000, 0},
                                        .person_digest = 99,
                                        .pulses = 12345};
    struct image_header back;
    assert_int_equal(image_header_encode(&header, octets), IMAGE_HEADER_OCTETS);
    assert_true(image_header_decode(octets, IMAGE_HEADER_OCTETS, &back));
    assert_memory_equal(&header, &back, sizeof back);
    octets[5] = 2; /* the same channel twice */
    assert_false(image_header_decode(octets, IMAGE_HEADER_OCTETS, &back));
    const struct image_identity identity = {.unit = "A-003",
                                            .channels = 6,
                                            .current_to_ua = 110000,
                                            .current_step_ua = 500,
                                            .duration_to_us = 800,
                                            .duration_step_us = 5,
                                            .return_group = {1, 1, 2, 2}};
    struct image_identity identity_back;
    assert_int_equal(image_identity_encode(&identity, octets), IMAGE_IDENTITY_OCTETS);
    assert_true(image_identity_decode(octets, IMAGE_IDENTITY_OCTETS, &identity_back));
    assert_memory_equal(&identity, &identity_back, sizeof identity);
}

int main(void)
{
    if (sodium_init() < 0) return 1;
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(crc_gives_its_check_values),
        cmocka_unit_test(cobs_codes_as_published),
        cmocka_unit_test(frame_comes_back_whole_and_any_flip_is_dropped),
        cmocka_unit_test(noise_between_frames_costs_only_itself),
        cmocka_unit_test(sequences_compare_round_the_corner),
        cmocka_unit_test(message_with_a_wrong_length_or_value_is_refused),
        cmocka_unit_test(any_payload_is_decoded_in_range_or_refused),
        cmocka_unit_test(digest_agrees_with_libsodium),
        cmocka_unit_test(image_chain_is_as_defined),
        cmocka_unit_test(encodings_come_back_and_have_their_sizes),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
