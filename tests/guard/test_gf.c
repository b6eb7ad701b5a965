/*
 * tests/guard/test_gf.c - the field against its definition, published code words and recomputed digests of whole tables
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/gf.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>
#include <openssl/sha.h>

#define COUNT(array) (sizeof(array) / sizeof (array)[0])

/* Multiplication by the definition: polynomials over GF(2), modulo 0x11D. */
static uint8_t by_definition(unsigned a, unsigned b)
{
    unsigned product = 0;

    for (unsigned bit = 0; bit < 8; bit++)
        if ((b >> bit & 1) != 0)
            product ^= a << bit;
    for (unsigned bit = 15; bit >= 8; bit--)
        if ((product >> bit & 1) != 0)
            product ^= (unsigned)FIRN_GF_POLYNOMIAL << (bit - 8);
    return (uint8_t)product;
}

static void tables_follow_from_the_polynomial(void **state)
{
    unsigned power = 1;

    (void)state;
    for (unsigned i = 0; i < 255; i++) {
        assert_int_equal(firn_gf_power[i], power);
        assert_int_equal(firn_gf_log[power], i);
        power = by_definition(power, 2);
    }
    assert_int_equal(power, 1);
}

static void multiplies_and_inverts(void **state)
{
    (void)state;
    for (unsigned a = 0; a < 256; a++)
        for (unsigned b = 0; b < 256; b++)
            assert_int_equal(firn_gf_multiply((uint8_t)a, (uint8_t)b), by_definition(a, b));
    for (unsigned a = 1; a < 256; a++)
        assert_int_equal(by_definition(a, firn_gf_inverse((uint8_t)a)), 1);
}

/* Recomputed from the definition by another program, in Python, when this project was planned. */
static void agrees_with_another_program(void **state)
{
    static const uint8_t powers[][2] = { { 8, 29 }, { 16, 76 }, { 25, 3 }, { 50, 5 }, { 85, 214 }, { 100, 17 },
                                         { 127, 204 }, { 128, 133 }, { 170, 215 }, { 200, 28 }, { 223, 9 }, { 240, 44 },
                                         { 254, 142 } };
    static const uint8_t inverses[17] = { 0, 1, 142, 244, 71, 167, 122, 186, 173, 157, 221, 152, 61, 170, 93, 150,
                                          216 };
    static const uint8_t products[][3] = { { 0x80, 2, 0x1D }, { 0x53, 0xCA, 0x8F }, { 0x57, 0x83, 0x31 },
                                           { 0xFF, 0xFF, 0xE2 } };
    static const uint8_t power_digest[] = "\xbd\xc3\x36\xe3\xf0\x40\xe4\xde\xac\x02\xd4\xee\x34\x52\x34\xa3"
                                          "\xae\xec\xd6\x36\xb8\xc9\x44\xc2\x29\xdd\x29\xb0\xa1\x85\x29\x87";
    static const uint8_t inverse_digest[] = "\xb6\x3b\x19\xb9\x4e\xa0\x73\x26\x2a\x0c\xef\x46\x20\x32\x27\x4b"
                                            "\xb8\xb0\x5e\xc0\x41\xd2\xb8\xdc\x94\x9d\xe9\x69\x0d\xb1\x02\x28";
    uint8_t all_inverses[255], digest[32];

    (void)state;
    for (size_t i = 0; i < COUNT(powers); i++)
        assert_int_equal(firn_gf_power[powers[i][0]], powers[i][1]);
    for (unsigned i = 1; i < COUNT(inverses); i++)
        assert_int_equal(firn_gf_inverse((uint8_t)i), inverses[i]);
    for (size_t i = 0; i < COUNT(products); i++)
        assert_int_equal(firn_gf_multiply(products[i][0], products[i][1]), products[i][2]);
    for (unsigned i = 0; i < 255; i++)
        all_inverses[i] = firn_gf_inverse((uint8_t)(i + 1));
    SHA256(firn_gf_power, 255, digest);
    assert_memory_equal(digest, power_digest, 32);
    SHA256(all_inverses, 255, digest);
    assert_memory_equal(digest, inverse_digest, 32);
}

/* The product over i < degree of (x - 2^i), highest coefficient (1) first. */
static void make_generator(unsigned degree, uint8_t generator[32])
{
    memset(generator, 0, 32);
    generator[0] = 1;
    for (unsigned i = 0; i < degree; i++)
        for (unsigned c = i + 1; c > 0; c--)
            generator[c] ^= firn_gf_multiply(generator[c - 1], firn_gf_power[i]);
}

/*
 * ISO/IEC 18004, Annex I ("01234567", version 1-M): six independent public test files give these words and name the
 * annex. "HELLO WORLD", 1-M: as widely published. Both recomputed by another program.
 */
static const struct word_case {
    const char *name;
    uint8_t data[16], checks[10];
} word_cases[] = {
    { "ISO/IEC 18004 Annex I", { 16, 32, 12, 86, 97, 128, 236, 17, 236, 17, 236, 17, 236, 17, 236, 17 },
      { 165, 36, 212, 193, 237, 54, 199, 135, 44, 85 } },
    { "HELLO WORLD 1-M", { 32, 91, 11, 120, 209, 114, 220, 77, 67, 64, 236, 17, 236, 17, 236, 17 },
      { 196, 35, 39, 119, 235, 215, 231, 226, 93, 23 } },
};

static void makes_published_check_bytes(void **state)
{
    uint8_t generator[32], rest[26] = { 0 };

    (void)state;
    make_generator(10, generator);
    for (size_t c = 0; c < COUNT(word_cases); c++) {
        memcpy(rest, word_cases[c].data, 16);
        memset(rest + 16, 0, 10);
        for (unsigned i = 0; i < 16; i++) {
            const uint8_t lead = rest[i];

            for (unsigned j = 0; j <= 10; j++)
                rest[i + j] ^= firn_gf_multiply(generator[j], lead);
        }
        assert_memory_equal(rest + 16, word_cases[c].checks, 10);
    }
}

/* ISO/IEC 18004, Annex A, as exponents of 2 from the second coefficient on: as published in several test files. */
static void makes_published_generators(void **state)
{
    static const struct { unsigned degree; uint8_t exponents[13]; } cases[] = {
        { 7, { 87, 229, 146, 149, 238, 102, 21 } },
        { 10, { 251, 67, 46, 61, 118, 70, 64, 94, 32, 45 } },
        { 13, { 74, 152, 176, 100, 86, 100, 106, 104, 130, 218, 206, 140, 78 } },
    };
    uint8_t generator[32];

    (void)state;
    for (size_t c = 0; c < COUNT(cases); c++) {
        make_generator(cases[c].degree, generator);
        for (unsigned i = 0; i < cases[c].degree; i++)
            assert_int_equal(firn_gf_log[generator[i + 1]], cases[c].exponents[i]);
    }
}

/* Why the reserve is no block of powers: the rows of exponents 0 and 3 agree in the columns 0 and 85. */
static void a_block_of_powers_can_be_singular(void **state)
{
    uint8_t a = firn_gf_power[0], b = firn_gf_power[0], c = firn_gf_power[0], d = firn_gf_power[3 * 85 % 255];

    (void)state;
    assert_int_equal(firn_gf_multiply(a, d) ^ firn_gf_multiply(b, c), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(tables_follow_from_the_polynomial),
        cmocka_unit_test(multiplies_and_inverts),
        cmocka_unit_test(agrees_with_another_program),
        cmocka_unit_test(makes_published_check_bytes),
        cmocka_unit_test(makes_published_generators),
        cmocka_unit_test(a_block_of_powers_can_be_singular),
    };

    return cmocka_run_group_tests_name("gf", tests, NULL, NULL);
}
