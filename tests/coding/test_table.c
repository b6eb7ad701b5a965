/*
 * tests/coding/test_table.c - coded code lengths: there and back, by hand, and damaged
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/table.h"

#include "coding/random.h"

#include "firn/prefix.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

enum { ROOM_BYTES = (FIRN_TABLE_COST_MAX_BITS + 7) / 8 };

/* "101 0000" and so on into bytes; returns them. */
static size_t bits_of(const char *text, uint8_t *bytes)
{
    struct firn_bits_writer writer = { bytes, 0 };

    for (; *text != '\0'; text++)
        if (*text != ' ')
            firn_bits_put(&writer, *text == '1', 1);
    return firn_bits_end(&writer);
}

/*
 * By hand from format-spec/segment.md: the lengths of tokens 0 .. 13 in three bits each, then the tokens. A token
 * code with the words of tokens 1 (0), 2 (10) and 12 (11), or 1 (0) and 13 (1), and so on.
 */
#define NONE "000"
#define TOKENS_1_2_12 NONE "001 010" NONE NONE NONE NONE NONE NONE NONE NONE NONE "010" NONE
#define TOKENS_1_2 NONE "001 001" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE
#define TOKENS_1_13 NONE "001" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "001"
#define TOKENS_8_13 NONE NONE NONE NONE NONE NONE NONE NONE "001" NONE NONE NONE NONE "001"
#define TOKENS_1_12 NONE "001" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "001" NONE

static const struct hand_case {
    const char *name, *bits;
    enum firn_status status;
    struct { uint8_t symbol, length; } some[4];        /* of length 0: none */
} hand_cases[] = {
    { "two symbols of length 1", NONE "001" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "0 0", FIRN_OK,
      { { 0, 1 }, { 1, 1 } } },
    { "1, three absent, 2, 2", TOKENS_1_2_12 "0 11 010 10 10", FIRN_OK, { { 0, 1 }, { 4, 2 }, { 5, 2 } } },
    { "256 of length 8, as 1 and 254 more and 1", TOKENS_8_13 "0 1 000000011111101 0", FIRN_OK,
      { { 0, 8 }, { 255, 8 } } },
    { "256 of length 8, as 1 and 255 more", TOKENS_8_13 "0 1 000000011111110", FIRN_OK, { { 0, 8 }, { 255, 8 } } },
    { "over-full: 1, 2, 1", TOKENS_1_2 "0 1 0", FIRN_BAD_DATA, { { 0, 0 } } },
    { "over-full by a repetition: 1, 1, 1", TOKENS_1_13 "0 1 1", FIRN_BAD_DATA, { { 0, 0 } } },
    { "under-full: 1, then 255 absent", TOKENS_1_12 "0 1 000000011111110", FIRN_BAD_DATA, { { 0, 0 } } },
    { "more than 256 symbols: 1, then 256 absent", TOKENS_1_12 "0 1 000000011111111", FIRN_BAD_DATA, { { 0, 0 } } },
    { "a repetition of nothing", TOKENS_1_13 "1 1 0 0", FIRN_BAD_DATA, { { 0, 0 } } },
    { "a repetition of an absent symbol",
      NONE "010" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "010 001" "10 11 1 0 1",
      FIRN_BAD_DATA, { { 0, 0 } } },
    { "a token code that is over-full", "001 001 001" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "0 0 0 0",
      FIRN_BAD_DATA, { { 0, 0 } } },
    { "a token code that is under-full",
      NONE "010 010 010" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "00 01 01",
      FIRN_BAD_DATA, { { 0, 0 } } },
    { "a token code without tokens", NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "0 0 0 0",
      FIRN_BAD_DATA, { { 0, 0 } } },
    { "the word that a lone token leaves over",
      NONE "001" NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE NONE "1 1", FIRN_BAD_DATA, { { 0, 0 } } }
};

static void by_hand(void **state)
{
    const struct hand_case *c = *state;
    uint8_t bytes[32] = { 0 }, lengths[FIRN_TABLE_SYMBOLS];
    struct firn_bits_reader reader = { bytes, bits_of(c->bits, bytes), 0 };

    assert_int_equal(firn_table_read(&reader, lengths), c->status);
    for (size_t k = 0; k < 4 && c->some[k].length != 0; k++)
        assert_int_equal(lengths[c->some[k].symbol], c->some[k].length);
    if (c->status == FIRN_OK)
        assert_int_equal(firn_bits_close(&reader), reader.byte_count);
}

/* A full code for random weights of one of several kinds. */
static void some_lengths(uint8_t lengths[FIRN_TABLE_SYMBOLS])
{
    static uint64_t work[4096];
    uint32_t weights[FIRN_TABLE_SYMBOLS];
    unsigned spread = random_below(20), gaps = random_below(300), run = 0;

    assert_true(firn_prefix_work_bytes(FIRN_TABLE_SYMBOLS) <= sizeof work);
    for (size_t s = 0; s < FIRN_TABLE_SYMBOLS; s++) {
        run = run > 0 ? run - 1 : random_below(256) < gaps ? random_below(40) : 0;
        weights[s] = run > 0 ? 0 : 1 + random_below(1u << spread);
    }
    weights[random_below(100)] |= 1;
    weights[100 + random_below(156)] |= 1;
    assert_int_equal(firn_prefix_lengths(weights, FIRN_TABLE_SYMBOLS, FIRN_TABLE_LENGTH_LIMIT, lengths, work), FIRN_OK);
}

static void there_and_back(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 3000; round++) {
        uint8_t lengths[FIRN_TABLE_SYMBOLS], again[FIRN_TABLE_SYMBOLS], bytes[ROOM_BYTES];
        struct firn_bits_writer writer = { bytes, 0 };
        struct firn_bits_reader reader = { bytes, 0, 0 };
        unsigned cost;

        some_lengths(lengths);
        cost = firn_table_cost_bits(lengths);
        assert_true(cost >= FIRN_TABLE_COST_MIN_BITS && cost <= FIRN_TABLE_COST_MAX_BITS);
        firn_table_write(&writer, lengths);
        assert_int_equal(writer.at_bits, cost);
        reader.byte_count = firn_bits_end(&writer);
        assert_int_equal(firn_table_read(&reader, again), FIRN_OK);
        assert_memory_equal(again, lengths, sizeof lengths);
        assert_int_equal(reader.at_bits, cost);
        assert_int_equal(firn_bits_close(&reader), reader.byte_count);
    }
}

/* Cut short, a table is never taken for whole. */
static void cut_short(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 200; round++) {
        uint8_t lengths[FIRN_TABLE_SYMBOLS], bytes[ROOM_BYTES];
        struct firn_bits_writer writer = { bytes, 0 };

        some_lengths(lengths);
        firn_table_write(&writer, lengths);
        for (size_t cut = 0; cut < firn_bits_end(&writer); cut++) {
            struct firn_bits_reader reader = { bytes, cut, 0 };

            if (firn_table_read(&reader, lengths) == FIRN_OK)
                assert_true(firn_bits_close(&reader) == SIZE_MAX);
        }
    }
}

/* What garbage is taken for a table is one: a full code. */
static void garbage(void **state)
{
    uint16_t words[FIRN_TABLE_SYMBOLS];
    unsigned taken = 0;

    (void)state;
    random_start();
    for (unsigned round = 0; round < 200000; round++) {
        uint8_t bytes[64], lengths[FIRN_TABLE_SYMBOLS];
        struct firn_bits_reader reader = { bytes, sizeof bytes, 0 };

        for (size_t k = 0; k < sizeof bytes; k++)
            bytes[k] = (uint8_t)random_word();
        bytes[0] &= 0x49;              /* short token lengths, or hardly any would get past the token code */
        bytes[1] &= 0x24;
        if (firn_table_read(&reader, lengths) != FIRN_OK)
            continue;
        taken++;
        assert_int_equal(firn_prefix_assign(lengths, FIRN_TABLE_SYMBOLS, words), FIRN_OK);
    }
    printf("%u of 200000 were tables\n", taken);
}

int main(void)
{
    enum { HANDS = sizeof hand_cases / sizeof *hand_cases };
    static const struct CMUnitTest others[] = { cmocka_unit_test(there_and_back), cmocka_unit_test(cut_short),
                                                cmocka_unit_test(garbage) };
    struct CMUnitTest rows[HANDS];

    for (size_t i = 0; i < HANDS; i++)
        rows[i] = (struct CMUnitTest){ hand_cases[i].name, by_hand, NULL, NULL, (void *)(uintptr_t)&hand_cases[i] };
    return cmocka_run_group_tests_name("table rows", rows, NULL, NULL) +
           cmocka_run_group_tests_name("table", others, NULL, NULL);
}
