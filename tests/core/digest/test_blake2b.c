/* BLAKE2b against RFC 7693. */
#include "core/digest/blake2b.h"
#include "support/near.h"

#include <string.h>

/* RFC 7693, appendix A: BLAKE2b-512 of "abc" */
static void abc_gives_the_digest_of_the_standard(void **state)
{
    (void)state;
    static const uint8_t expected[64] = {
        0xBA, 0x80, 0xA5, 0x3F, 0x98, 0x1C, 0x4D, 0x0D, 0x6A, 0x27, 0x97, 0xB6, 0x9F, 0x12, 0xF6, 0xE9,
        0x4C, 0x21, 0x2F, 0x14, 0x68, 0x5A, 0xC4, 0xB7, 0x4B, 0x12, 0xBB, 0x6F, 0xDB, 0xFF, 0xA2, 0xD1,
        0x7D, 0x87, 0xC5, 0x39, 0x2A, 0xAB, 0x79, 0x2D, 0xC2, 0x52, 0xD5, 0xDE, 0x45, 0x33, 0xCC, 0x95,
        0x18, 0xD3, 0x8A, 0xA8, 0xDB, 0xF1, 0x92, 0x5A, 0xB9, 0x23, 0x86, 0xED, 0xD4, 0x00, 0x99, 0x23};
    uint8_t digest[64];
    blake2b(digest, sizeof digest, "abc", 3);
    assert_memory_equal(digest, expected, sizeof digest);
}

static void adding_in_pieces_gives_the_same(void **state)
{
    (void)state;
    uint8_t data[1000], whole[32], pieces[32];
    for (size_t i = 0; i < sizeof data; i++) data[i] = (uint8_t)(i * 7);
    blake2b(whole, sizeof whole, data, sizeof data);
    for (size_t piece = 1; piece <= 300; piece++) {
        struct blake2b hash;
        blake2b_begin(&hash, sizeof pieces);
        for (size_t at = 0; at < sizeof data; at += piece)
            blake2b_add(&hash, data + at, at + piece > sizeof data ? sizeof data - at : piece);
        blake2b_end(&hash, pieces);
        assert_memory_equal(pieces, whole, sizeof whole);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(abc_gives_the_digest_of_the_standard),
                                       cmocka_unit_test(adding_in_pieces_gives_the_same)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
