/*
 * tests/guard/test_lanes.c - the lanes against Hamming's code at textbook size, and every error they promise to see
 *
 * Textbook words: [7,4], [12,8], [11,7], [15,11] with data in the positions that are no powers of two, as in Hamming
 * (1950); recomputed by another program, the [12,8] example 10011010 as remembered from textbooks. Weight-4 counts: A4
 * = n(n-1)(n-2)/24 for the extended code of length n.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/lanes.h"

#include "base/bytes.h"
#include "guard/lanes_engine.h"
#include "random.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

enum { BITS = 8 * FIRN_BLOCK_BYTES };

static void flip(uint8_t *block, unsigned word, unsigned lane)
{
    block[8 * word + lane / 8] ^= (uint8_t)(1U << lane % 8);
}

static unsigned bit_of(const uint8_t *block, unsigned word, unsigned lane)
{
    return (unsigned)block[8 * word + lane / 8] >> lane % 8 & 1U;
}

/* A block of random data with its guard words. */
static void make_block(struct random *random, uint8_t *block)
{
    random_fill(random, block, FIRN_BLOCK_BYTES);
    firn_lanes_guard(block);
}

static const struct word_case {
    const char *name;
    const char *data, *word;      /* bits, position 1 first */
} word_cases[] = {
    { "[7,4] 0000", "0000", "0000000" }, { "[7,4] 0001", "0001", "1101001" }, { "[7,4] 0010", "0010", "0101010" },
    { "[7,4] 0011", "0011", "1000011" }, { "[7,4] 0100", "0100", "1001100" }, { "[7,4] 0101", "0101", "0100101" },
    { "[7,4] 0110", "0110", "1100110" }, { "[7,4] 0111", "0111", "0001111" }, { "[7,4] 1000", "1000", "1110000" },
    { "[7,4] 1001", "1001", "0011001" }, { "[7,4] 1010", "1010", "1011010" }, { "[7,4] 1011", "1011", "0110011" },
    { "[7,4] 1100", "1100", "0111100" }, { "[7,4] 1101", "1101", "1010101" }, { "[7,4] 1110", "1110", "0010110" },
    { "[7,4] 1111", "1111", "1111111" }, { "[12,8] 10011010", "10011010", "011100101010" },
    { "[11,7] 1001101", "1001101", "01110010101" }, { "[15,11] 11010110101", "11010110101", "011010100110101" },
};
enum { WORD_CASES = sizeof word_cases / sizeof word_cases[0] };

/* A lane whose data are zeros past the first few is a word of the small code, followed by zeros. */
static void guards_as_the_textbook_does(void **state)
{
    const struct word_case *c = *state;
    const unsigned length = (unsigned)strlen(c->word), lane = length * 3;
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 };
    unsigned ones = 0;

    for (unsigned i = 0; c->data[i] != '\0'; i++)
        if (c->data[i] == '1')
            flip(block, i, lane);
    firn_lanes_guard(block);
    for (unsigned position = 1; position < FIRN_BLOCK_WORDS; position++) {
        unsigned expected = position <= length ? (unsigned)(c->word[position - 1] - '0') : 0;

        ones += expected;
        assert_int_equal(bit_of(block, firn_lanes_word_of(position), lane), expected);
    }
    assert_int_equal(bit_of(block, 511, lane), ones % 2);
}

/* The labels as format-spec/block.md defines them, found from the syndrome of one flipped bit per word. */
static void labels_are_the_integers_in_order(void **state)
{
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 };
    unsigned label = 2;

    (void)state;
    for (unsigned word = 0; word < FIRN_BLOCK_WORDS; word++) {
        uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS];
        unsigned found = 0, expected;

        if (word < FIRN_LANES_DATA_WORDS) {
            do
                label++;
            while ((label & (label - 1)) == 0);
            expected = label;
        } else {
            expected = word == 511 ? 0 : 1U << (word - FIRN_LANES_DATA_WORDS);
        }
        flip(block, word, word % FIRN_LANES);
        firn_lanes_plain.syndrome(block, syndrome);
        flip(block, word, word % FIRN_LANES);
        for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++)
            found |= (unsigned)(syndrome[j] >> word % FIRN_LANES & 1) << j;
        assert_int_equal(found, expected);
        assert_true(syndrome[9] == UINT64_C(1) << word % FIRN_LANES);
        assert_int_equal(firn_lanes_word_of(expected), word);
    }
}

static void every_single_flip_is_mended(void **state)
{
    struct random random = random_start("single flips");
    uint8_t block[FIRN_BLOCK_BYTES], copy[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;

    (void)state;
    make_block(&random, block);
    assert_true(firn_lanes_check(block));
    memcpy(copy, block, sizeof copy);
    for (unsigned bit = 0; bit < BITS; bit++) {
        flip(copy, bit / 64, bit % 64);
        assert_false(firn_lanes_check(copy));
        assert_int_equal(firn_lanes_mend(copy, &report), FIRN_OK);
        assert_true(report.mended == 1 && report.clean == 63 && report.beyond == 0);
        assert_memory_equal(copy, block, sizeof copy);
    }
}

/* Bit `start` of the block on, `length` of them; the block is seen as one string of bits, low bits first. */
static void flip_run(uint8_t *block, unsigned start, unsigned length)
{
    for (unsigned at = start / 64; 64 * at < start + length; at++) {
        unsigned from = 64 * at < start ? start - 64 * at : 0;
        unsigned to = start + length - 64 * at < 64 ? start + length - 64 * at : 64;
        uint64_t mask = (to == 64 ? 0 : UINT64_C(1) << to) - (UINT64_C(1) << from);

        firn_bytes_put64(block + 8 * at, firn_bytes_get64(block + 8 * at) ^ mask);
    }
}

static void every_run_of_64_is_mended(void **state)
{
    struct random random = random_start("runs");
    uint8_t block[FIRN_BLOCK_BYTES], copy[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;

    (void)state;
    make_block(&random, block);
    memcpy(copy, block, sizeof copy);
    for (unsigned start = 0; start < BITS; start++)
        for (unsigned length = 1; length <= 64 && start + length <= BITS; length++) {
            flip_run(copy, start, length);
            if (firn_lanes_mend(copy, &report) != FIRN_OK || report.mended != length
                || memcmp(copy, block, sizeof copy) != 0)
                fail_msg("run of %u bits at %u", length, start);
        }
}

/* All pairs within one lane, in place: found, counted, and left as they were. */
static void pairs_are_noticed(uint8_t *block, unsigned lane)
{
    uint8_t found[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;

    for (unsigned a = 0; a < FIRN_BLOCK_WORDS; a++)
        for (unsigned b = a + 1; b < FIRN_BLOCK_WORDS; b++) {
            flip(block, a, lane);
            flip(block, b, lane);
            memcpy(found, block, sizeof found);
            if (firn_lanes_check(block) || firn_lanes_mend(block, &report) != FIRN_BEYOND_REPAIR || report.beyond != 1
                || report.clean != 63 || memcmp(block, found, sizeof found) != 0)
                fail_msg("flips in words %u and %u of lane %u", a, b, lane);
            flip(block, a, lane);
            flip(block, b, lane);
        }
}

static void every_pair_in_a_lane_is_noticed(void **state)
{
    struct random random = random_start("pairs");
    uint8_t block[FIRN_BLOCK_BYTES];

    (void)state;
    make_block(&random, block);
    pairs_are_noticed(block, random_below(&random, FIRN_LANES));
}

/* Clean, single and double errors in different lanes of one block do not disturb each other. */
static void lanes_are_independent(void **state)
{
    struct random random = random_start("mixed lanes");
    uint8_t block[FIRN_BLOCK_BYTES], hurt[FIRN_BLOCK_BYTES], expected[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;

    (void)state;
    for (unsigned round = 0; round < 2000; round++) {
        unsigned counts[3] = { 0, 0, 0 };

        make_block(&random, block);
        memcpy(hurt, block, sizeof hurt);
        memcpy(expected, block, sizeof expected);
        for (unsigned lane = 0; lane < FIRN_LANES; lane++) {
            unsigned words[2], errors = random_below(&random, 3);

            counts[errors]++;
            random_choose(&random, FIRN_BLOCK_WORDS, errors, words);
            for (unsigned i = 0; i < errors; i++) {
                flip(hurt, words[i], lane);
                if (errors == 2)
                    flip(expected, words[i], lane);
            }
        }
        assert_int_equal(firn_lanes_mend(hurt, &report), counts[2] == 0 ? FIRN_OK : FIRN_BEYOND_REPAIR);
        assert_true(report.clean == counts[0] && report.mended == counts[1] && report.beyond == counts[2]);
        assert_memory_equal(hurt, expected, sizeof hurt);
    }
}

/* Weight-4 words among the words whose labels are below n: sets of four labels whose XOR is 0. */
static uint64_t count_weight_4(unsigned n)
{
    uint64_t count = 0;

    for (unsigned a = 0; a < n; a++)
        for (unsigned b = a + 1; b < n; b++)
            for (unsigned c = b + 1; c < n; c++)
                count += (a ^ b ^ c) > c && (a ^ b ^ c) < n;
    return count;
}

static void weight_4_words_are_as_many_as_the_formula_says(void **state)
{
    static const uint64_t published[] = { 14, 140, 1240, 10416, 85344, 690880, 5559680 };      /* n = 8 .. 512 */
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 };

    (void)state;
    for (unsigned r = 3; r <= 9; r++) {
        uint64_t n = UINT64_C(1) << r;

        assert_true(count_weight_4((unsigned)n) == published[r - 3]);
        assert_true(n * (n - 1) * (n - 2) / 24 == published[r - 3]);
    }
    for (unsigned a = 0; a < 16; a++)      /* and such a set is a word indeed: all of length 16, in the real lanes */
        for (unsigned b = a + 1; b < 16; b++)
            for (unsigned c = b + 1; c < 16; c++)
                for (unsigned d = c + 1; d < 16; d++) {
                    const unsigned labels[4] = { a, b, c, d };

                    for (unsigned i = 0; i < 4; i++)
                        flip(block, firn_lanes_word_of(labels[i]), 5);
                    assert_int_equal(firn_lanes_check(block), (a ^ b ^ c ^ d) == 0);
                    for (unsigned i = 0; i < 4; i++)
                        flip(block, firn_lanes_word_of(labels[i]), 5);
                }
}

/* Four random flips in a lane pass as clean with probability 1/(n - 3), here 1/509: within six standard deviations. */
static void four_flips_pass_as_seldom_as_the_formula_says(void **state)
{
    enum { BLOCKS = 6000 };
    struct random random = random_start("four flips");
    uint8_t block[FIRN_BLOCK_BYTES], hurt[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;
    const double lanes = (double)BLOCKS * FIRN_LANES, expected = lanes / 509;
    double clean = 0;

    (void)state;
    make_block(&random, block);
    for (unsigned i = 0; i < BLOCKS; i++) {
        memcpy(hurt, block, sizeof hurt);
        for (unsigned lane = 0; lane < FIRN_LANES; lane++) {
            unsigned words[4];

            random_choose(&random, FIRN_BLOCK_WORDS, 4, words);
            for (unsigned j = 0; j < 4; j++)
                flip(hurt, words[j], lane);
        }
        (void)firn_lanes_mend(hurt, &report);
        assert_int_equal(report.mended, 0);
        clean += report.clean;
    }
    printf("%.0f of %.0f lanes passed as clean, %.0f expected\n", clean, lanes, expected);
    assert_true(fabs(clean - expected) < 6 * sqrt(expected));
}

static void engines_agree(void **state)
{
    struct random random = random_start("lanes engines");
    uint8_t bytes[FIRN_BLOCK_BYTES + 64];

    (void)state;
    for (unsigned e = 0; firn_lanes_engines[e] != NULL; e++) {
        const struct firn_lanes_engine *engine = firn_lanes_engines[e];

        if (!engine->usable()) {
            printf("engine %s: skipped, not usable here\n", engine->name);
            continue;
        }
        for (unsigned round = 0; round < 640; round++) {
            uint64_t expected[FIRN_LANES_SYNDROME_WORDS], found[FIRN_LANES_SYNDROME_WORDS];

            random_fill(&random, bytes, sizeof bytes);
            firn_lanes_plain.syndrome(bytes + round % 64, expected);
            engine->syndrome(bytes + round % 64, found);
            assert_memory_equal(found, expected, sizeof found);
        }
        printf("engine %s: agrees\n", engine->name);
    }
}

int main(void)
{
    const struct CMUnitTest others[] = {
        cmocka_unit_test(labels_are_the_integers_in_order),
        cmocka_unit_test(every_single_flip_is_mended),
        cmocka_unit_test(every_run_of_64_is_mended),
        cmocka_unit_test(every_pair_in_a_lane_is_noticed),
        cmocka_unit_test(lanes_are_independent),
        cmocka_unit_test(weight_4_words_are_as_many_as_the_formula_says),
        cmocka_unit_test(four_flips_pass_as_seldom_as_the_formula_says),
        cmocka_unit_test(engines_agree),
    };
    enum { OTHERS = sizeof others / sizeof others[0] };
    struct CMUnitTest tests[WORD_CASES + OTHERS];

    for (size_t i = 0; i < WORD_CASES; i++)
        tests[i] = (struct CMUnitTest){ word_cases[i].name, guards_as_the_textbook_does, NULL, NULL,
                                        (void *)&word_cases[i] };
    memcpy(tests + WORD_CASES, others, sizeof others);
    return cmocka_run_group_tests_name("lanes", tests, NULL, NULL);
}
