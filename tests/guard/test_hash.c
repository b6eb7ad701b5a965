/*
 * tests/guard/test_hash.c - XXH3-128 against the xxHash repository's own check values
 *
 * Source: xxHash, cli/xsum_sanity_check.c, commit b2e9dbb0 of 15 October 2024; length 2099 recomputed with Debian's
 * libxxhash 0.8.1 only.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/hash.h"

#include "base/bytes.h"
#include "vectors.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>

#include <cmocka.h>

static uint8_t buffer[2400];

static const struct hash_case {
    const char *name;
    size_t count;
    uint64_t high, low;
} cases[] = {
    { "0", 0, 0x99AA06D3014798D8, 0x6001C324468D497F },
    { "1", 1, 0xA6CD5E9392000F6A, 0xC44BDFF4074EECDB },
    { "6", 6, 0x082AFE0B8162D12A, 0x3E7039BDDA43CFC6 },
    { "12", 12, 0x6E3EFD8FC7802B18, 0x061A192713F69AD9 },
    { "24", 24, 0x0CE966E4678D3761, 0x1E7044D28B1B901D },
    { "48", 48, 0xA002AC4E5478227E, 0xF942219AED80F67B },
    { "81", 81, 0x4952F58181AB0042, 0x5E8BAFB9F95FB803 },
    { "222", 222, 0x337E09641B948717, 0xF1AEBD597CEC6B3A },
    { "403", 403, 0x1B6DE21E332DD73D, 0xCDEB804D65C6DEA4 },
    { "512", 512, 0x18D2D110DCC9BCA1, 0x617E49599013CB6B },
    { "2048", 2048, 0xF736557FD47073A5, 0xDD59E2C3A5F038E0 },
    { "2099", 2099, 0xAD48AE0A0951DC52, 0xC6B9D9B3FC9AC765 },
    { "2240", 2240, 0xCCB134FBFA7CE49D, 0x6E73A90539CF2948 },
    { "2367", 2367, 0xE89C0F6FF369B427, 0xCB37AEB9E5D361ED },
};

/*
 * The repository's generator. Its multiplier ends in CA8D; it is not the library's first 64-bit prime, which ends in
 * CA87.
 */
static int make_buffer(void **state)
{
    uint64_t generator = 2654435761U;

    (void)state;
    for (size_t i = 0; i < sizeof buffer; i++) {
        buffer[i] = (uint8_t)(generator >> 56);
        generator *= UINT64_C(0x9E3779B185EBCA8D);
    }
    return 0;
}

static void hashes(void **state)
{
    const struct hash_case *c = *state;
    uint8_t hash[FIRN_HASH_BYTES];

    firn_hash_put(buffer, c->count, hash);
    assert_true(firn_bytes_get64(hash) == c->low);
    assert_true(firn_bytes_get64(hash + 8) == c->high);
    assert_true(firn_hash_low(buffer, c->count) == c->low);
    assert_true(firn_hash_matches(buffer, c->count, hash));
    for (unsigned bit = 0; bit < 8 * FIRN_HASH_BYTES; bit++) {
        hash[bit / 8] ^= (uint8_t)(1U << bit % 8);
        assert_false(firn_hash_matches(buffer, c->count, hash));
        hash[bit / 8] ^= (uint8_t)(1U << bit % 8);
    }
}

/* "abc", recomputed with Debian's libxxhash 0.8.1: 128 bits = 06b05ab6733a6185 78af5f94892f3950. */
static void stands_low_half_first(void **state)
{
    static const uint8_t abc[] = { 'a', 'b', 'c' };
    static const uint8_t expected[] = { 0x50, 0x39, 0x2f, 0x89, 0x94, 0x5f, 0xaf, 0x78,
                                        0x85, 0x61, 0x3a, 0x73, 0xb6, 0x5a, 0xb0, 0x06 };
    uint8_t hash[FIRN_HASH_BYTES];

    (void)state;
    firn_hash_put(abc, sizeof abc, hash);
    assert_memory_equal(hash, expected, sizeof expected);
}

/* Made by a program that knows nothing but format-spec/hash.md. */
static void hashes_as_the_specification_prints(void **state)
{
    static const size_t lengths[] = { 0, 1, 2, 3, 4, 8, 9, 16, 17, 32, 33, 64, 96, 128, 129, 160, 240, 241, 1024, 1025,
                                      1088, 1089, 2048, 4000 };
    uint8_t bytes[4000], hash[FIRN_HASH_BYTES], expected[FIRN_HASH_BYTES];
    char name[40];

    (void)state;
    for (size_t i = 0; i < sizeof bytes; i++)
        bytes[i] = (uint8_t)(i * 7);
    for (size_t i = 0; i < sizeof lengths / sizeof lengths[0]; i++) {
        snprintf(name, sizeof name, "length %zu", lengths[i]);
        assert_int_equal(vectors_read("hash.txt", name, expected, sizeof expected), sizeof expected);
        firn_hash_put(bytes, lengths[i], hash);
        assert_memory_equal(hash, expected, sizeof expected);
    }
}

int main(void)
{
    enum { CASES = sizeof cases / sizeof cases[0] };
    struct CMUnitTest tests[CASES + 2] = { cmocka_unit_test(stands_low_half_first),
                                           cmocka_unit_test(hashes_as_the_specification_prints) };

    for (size_t i = 0; i < CASES; i++)
        tests[i + 2] = (struct CMUnitTest){ cases[i].name, hashes, NULL, NULL, (void *)&cases[i] };
    return cmocka_run_group_tests_name("hash", tests, make_buffer, NULL);
}
