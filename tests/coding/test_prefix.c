/*
 * tests/coding/test_prefix.c - optimal lengths against published values and against every code there is
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/prefix.h"

#include "coding/random.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

enum { SYMBOLS_MAX = 32 };

/*
 * Totals. "Huffman": D. A. Huffman, Proc. IRE 40(9), 1952, table II (average length 3.42 for weights that sum to
 * 1.00). "CLRS": Cormen, Leiserson, Rivest, Stein, Introduction to Algorithms, 3rd ed. 2009, section 16.3 (224 bits
 * per 100 characters). "English": letters and space per mille as in Dasgupta, Papadimitriou, Vazirani, Algorithms,
 * problem 5.18. Package-merge rows, limits and the totals of English: recomputed apart from this code, small ones by
 * trying every code.
 */
static const struct cost_case {
    const char *name;
    unsigned limit;
    uint64_t cost;
    size_t symbols;
    uint32_t weights[SYMBOLS_MAX];
} cost_cases[] = {
#define HUFFMAN 13, { 20, 18, 10, 10, 10, 6, 6, 4, 4, 4, 4, 3, 1 }
    { "Huffman 1952", 15, 342, HUFFMAN },
    { "Huffman 1952, limit 5", 5, 342, HUFFMAN },
    { "Huffman 1952, limit 4", 4, 352, HUFFMAN },
    { "CLRS", 15, 224, 6, { 45, 13, 12, 16, 9, 5 } },
#define ENGLISH 27, { 183, 102, 77, 68, 59, 58, 55, 51, 49, 48, 35, 34, 26, 24, 21, 19, 18, 17, 16, 16, 13, 9, 6, \
                      2, 2, 1, 1 }
    { "English", 15, 4201, ENGLISH },
    { "English, limit 8", 8, 4207, ENGLISH },
    { "English, limit 7", 7, 4225, ENGLISH },
    { "English, limit 6", 6, 4277, ENGLISH },
    { "English, limit 5", 5, 4505, ENGLISH },
    { "1 1 2 3 5 8", 15, 45, 6, { 1, 1, 2, 3, 5, 8 } },
    { "1 1 2 3 5 8, limit 4", 4, 46, 6, { 1, 1, 2, 3, 5, 8 } },
    { "1 1 2 3 5 8, limit 3", 3, 47, 6, { 1, 1, 2, 3, 5, 8 } },
#define FIBONACCI_10 10, { 1, 1, 2, 3, 5, 8, 13, 21, 34, 55 }
    { "Fibonacci 10", 15, 363, FIBONACCI_10 },
    { "Fibonacci 10, limit 5", 5, 367, FIBONACCI_10 },
    { "Fibonacci 10, limit 4", 4, 394, FIBONACCI_10 },
#define FIBONACCI_17 17, { 1, 1, 2, 3, 5, 8, 13, 21, 34, 55, 89, 144, 233, 377, 610, 987, 1597 }
    { "Fibonacci 17, limit 15", 15, 10926, FIBONACCI_17 },
    { "Fibonacci 17, limit 8", 8, 10938, FIBONACCI_17 },
    { "Fibonacci 20, limit 8", 8, 46504, 20,
      { 1, 1, 2, 3, 5, 8, 13, 21, 34, 55, 89, 144, 233, 377, 610, 987, 1597, 2584, 4181, 6765 } },
    { "powers of two", 15, 126, 7, { 1, 32, 16, 4, 8, 2, 1 } },
    { "powers of two, limit 5", 5, 128, 7, { 1, 32, 16, 4, 8, 2, 1 } },
    { "powers of two, limit 4", 4, 136, 7, { 1, 32, 16, 4, 8, 2, 1 } },
    { "powers of two, limit 3", 3, 160, 7, { 1, 32, 16, 4, 8, 2, 1 } },
    { "4 3 3 2 2 1", 15, 38, 6, { 4, 3, 3, 2, 2, 1 } },
    { "two symbols", 1, 9, 2, { 4, 5 } },
    { "a lone symbol", 15, 7, 3, { 0, 7, 0 } },
    { "none", 15, 0, 3, { 0, 0, 0 } },
    { "the heaviest there can be", 15, UINT64_C(2) * UINT32_MAX, 2, { UINT32_MAX, UINT32_MAX } }
};

/* Lengths in exactly sized work space, so that the address sanitizer sees a step beside it. */
static enum firn_status lengths_of(const uint32_t *weights, size_t symbols, unsigned limit, uint8_t *lengths)
{
    void *work = malloc(firn_prefix_work_bytes(symbols));
    enum firn_status status;

    assert_non_null(work);
    status = firn_prefix_lengths(weights, symbols, limit, lengths, work);
    free(work);
    return status;
}

/* Sum of 2^-length in units of 2^-15 */
static uint32_t kraft(const uint8_t *lengths, size_t symbols)
{
    uint32_t sum = 0;

    for (size_t s = 0; s < symbols; s++)
        sum += lengths[s] == 0 ? 0 : UINT32_C(1) << (15 - lengths[s]);
    return sum;
}

static unsigned longest(const uint8_t *lengths, size_t symbols)
{
    unsigned length = 0;

    for (size_t s = 0; s < symbols; s++)
        length = lengths[s] > length ? lengths[s] : length;
    return length;
}

static void costs(void **state)
{
    const struct cost_case *c = *state;
    uint8_t lengths[SYMBOLS_MAX];

    assert_int_equal(lengths_of(c->weights, c->symbols, c->limit, lengths), FIRN_OK);
    assert_int_equal(firn_prefix_cost_bits(c->weights, lengths, c->symbols), c->cost);
    assert_true(longest(lengths, c->symbols) <= c->limit);
}

/*
 * E. S. Schwartz 1964: of the two optimal length sets, 2 2 2 3 4 4 and 2 2 3 3 3 3, the second has the least
 * variance.
 */
static void least_variance(void **state)
{
    static const uint32_t weights[] = { 4, 3, 3, 2, 2, 1 };
    uint8_t lengths[6];

    (void)state;
    assert_int_equal(lengths_of(weights, 6, 15, lengths), FIRN_OK);
    assert_memory_equal(lengths, ((uint8_t[]){ 2, 2, 3, 3, 3, 3 }), 6);
}

/* Dyadic weights have the lengths of their logarithms; equal weights those of the next whole ones. */
static void exact_lengths(void **state)
{
    uint32_t weights[257];
    uint8_t lengths[257];
    size_t how_many[16] = { 0 };

    (void)state;
    assert_int_equal(lengths_of((uint32_t[]){ 8, 4, 2, 1, 1 }, 5, 15, lengths), FIRN_OK);
    assert_memory_equal(lengths, ((uint8_t[]){ 1, 2, 3, 4, 4 }), 5);
    for (size_t s = 0; s < 257; s++)
        weights[s] = 1000;
    for (unsigned limit = 8; limit <= 15; limit++) {
        assert_int_equal(lengths_of(weights, 256, limit, lengths), FIRN_OK);
        for (size_t s = 0; s < 256; s++)
            assert_int_equal(lengths[s], 8);
    }
    assert_int_equal(lengths_of(weights, 257, 15, lengths), FIRN_OK);
    for (size_t s = 0; s < 257; s++)
        how_many[lengths[s]]++;
    assert_int_equal(how_many[8], 255);
    assert_int_equal(how_many[9], 2);
}

/* n Fibonacci weights make a code n - 1 deep (Katona and Nemetz 1976), so every smaller limit is reached exactly. */
static void reaches_the_limit(void **state)
{
    uint32_t weights[24] = { 1, 1 };
    uint8_t lengths[24];

    (void)state;
    for (size_t s = 2; s < 24; s++)
        weights[s] = weights[s - 1] + weights[s - 2];
    for (size_t n = 3; n <= 24; n++)
        for (unsigned limit = 5; limit <= 15; limit++) {
            unsigned deepest = (unsigned)n - 1 < limit ? (unsigned)n - 1 : limit;

            assert_int_equal(lengths_of(weights, n, limit, lengths), FIRN_OK);
            assert_int_equal(longest(lengths, n), deepest);
            assert_int_equal(kraft(lengths, n), 1 << 15);
        }
}

static void refuses(void **state)
{
    static const uint32_t weights[FIRN_PREFIX_SYMBOLS_MAX + 1] = { 1, 1, 1, 1, 1 };
    static uint8_t lengths[FIRN_PREFIX_SYMBOLS_MAX + 1];

    (void)state;
    assert_int_equal(lengths_of(weights, 5, 0, lengths), FIRN_BAD_ARGUMENT);
    assert_int_equal(lengths_of(weights, 5, 16, lengths), FIRN_BAD_ARGUMENT);
    assert_int_equal(lengths_of(weights, 5, 2, lengths), FIRN_BAD_ARGUMENT);
    assert_int_equal(lengths_of(weights, FIRN_PREFIX_SYMBOLS_MAX + 1, 15, lengths), FIRN_BAD_ARGUMENT);
    assert_int_equal(lengths_of(weights, FIRN_PREFIX_SYMBOLS_MAX, 3, lengths), FIRN_OK);
}

/* Tries every code of n words of at most `limit` bits: least cost, and of those the least sum of weight * length^2. */
static void try_all(const uint32_t *weights, unsigned n, unsigned limit, uint64_t *cost, uint64_t *squares)
{
    uint8_t lengths[8];

    *cost = *squares = UINT64_MAX;
    memset(lengths, 1, sizeof lengths);
    for (;;) {
        unsigned s = 0;

        if (kraft(lengths, n) <= 1u << 15) {
            uint64_t c = firn_prefix_cost_bits(weights, lengths, n), q = 0;

            for (unsigned k = 0; k < n; k++)
                q += (uint64_t)weights[k] * lengths[k] * lengths[k];
            if (c < *cost || (c == *cost && q < *squares)) {
                *cost = c;
                *squares = q;
            }
        }
        while (s < n && lengths[s] == limit)
            lengths[s++] = 1;
        if (s == n)
            return;
        lengths[s]++;
    }
}

static void against_every_code(const uint32_t *weights, unsigned n)
{
    unsigned least = 1;

    while (1u << least < n)
        least++;
    for (unsigned limit = least; limit <= n && limit < 6; limit++) {
        uint64_t cost, squares, q = 0;
        uint8_t lengths[8];

        try_all(weights, n, limit, &cost, &squares);
        assert_int_equal(lengths_of(weights, n, limit, lengths), FIRN_OK);
        for (unsigned k = 0; k < n; k++)
            q += (uint64_t)weights[k] * lengths[k] * lengths[k];
        assert_int_equal(firn_prefix_cost_bits(weights, lengths, n), cost);
        assert_int_equal(q, squares);
    }
}

/* All ascending weights from 1 to 4 for 2 to 6 symbols, every limit; then random ones, in any order. */
static void optimal_of_all(void **state)
{
    (void)state;
    for (unsigned n = 2; n <= 6; n++) {
        uint32_t weights[6] = { 1, 1, 1, 1, 1, 1 };

        for (;;) {
            unsigned s = n;

            against_every_code(weights, n);
            while (s > 0 && weights[s - 1] == 4)
                s--;
            if (s == 0)
                break;
            for (uint32_t next = weights[s - 1] + 1; s <= n; s++)
                weights[s - 1] = next;
        }
    }
    random_start();
    for (unsigned round = 0; round < 300; round++) {
        uint32_t weights[6];
        unsigned n = 2 + random_below(5);

        for (unsigned s = 0; s < n; s++)
            weights[s] = 1 + random_below(1u << random_below(12));
        against_every_code(weights, n);
    }
}

/*
 * Random sources, skewed more or less. Kraft 1949: equality. Shannon 1948: entropy <= cost < entropy + 1 per symbol.
 * R. G. Gallager, IEEE Trans. IT-24(6), 1978, pp. 668-674: redundancy <= p1 + 0.0860713 (without a limit: a total
 * below 2584 cannot make a word longer than 15 bits).
 */
static void bounds(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 2000; round++) {
        uint32_t weights[256], greatest = 0, total = 0;
        size_t n = 2 + random_below(255);
        uint8_t lengths[256];
        double entropy = 0, average;

        for (size_t s = 0; s < n; s++) {
            weights[s] = 1 + random_below(1u << random_below(11)) * (total < 400);
            greatest = weights[s] > greatest ? weights[s] : greatest;
            total += weights[s];
        }
        for (size_t s = 0; s < n; s++)
            entropy -= weights[s] * log2((double)weights[s] / total) / total;
        for (unsigned limit = 15; limit >= 8; limit--) {
            assert_int_equal(lengths_of(weights, n, limit, lengths), FIRN_OK);
            assert_int_equal(kraft(lengths, n), 1 << 15);
            assert_true(longest(lengths, n) <= limit);
            average = (double)firn_prefix_cost_bits(weights, lengths, n) / total;
            assert_true(average > entropy - 1e-9);
            if (limit < 15 || total >= 2584)
                continue;
            assert_true(average < entropy + 1);
            assert_true(average - entropy <= (double)greatest / total + 0.0860714);
        }
    }
}

/* A tighter limit never costs less, and symbols of greater weight never get longer words. */
static void in_order(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 300; round++) {
        uint32_t weights[FIRN_PREFIX_SYMBOLS_MAX];
        size_t n = 2 + random_below(FIRN_PREFIX_SYMBOLS_MAX - 1);
        uint8_t lengths[FIRN_PREFIX_SYMBOLS_MAX];
        uint64_t before = 0;

        for (size_t s = 0; s < n; s++)
            weights[s] = random_below(1u << random_below(32));
        for (unsigned limit = 15; limit >= 10; limit--) {
            uint64_t cost;

            assert_int_equal(lengths_of(weights, n, limit, lengths), FIRN_OK);
            cost = firn_prefix_cost_bits(weights, lengths, n);
            assert_true(cost >= before);
            before = cost;
            for (size_t k = 0; k < n; k++) {
                size_t a = random_below((uint32_t)n), b = random_below((uint32_t)n);

                assert_int_equal(lengths[a] == 0, weights[a] == 0);
                if (weights[a] > weights[b] && weights[b] > 0)
                    assert_true(lengths[a] <= lengths[b]);
            }
        }
    }
}

/*
 * Row 1: RFC 1951 (1996), section 3.2.2, the alphabet ABCDEFGH. Row 2: the lengths of Huffman's table II under the
 * same rule.
 */
static const struct assign_case {
    const char *name;
    size_t symbols;
    uint8_t lengths[13];
    enum firn_status status;
    uint16_t words[13];
} assign_cases[] = {
    { "RFC 1951", 8, { 3, 3, 3, 3, 3, 2, 4, 4 }, FIRN_OK, { 2, 3, 4, 5, 6, 0, 14, 15 } },
    { "Huffman 1952, canonical", 13, { 2, 3, 3, 3, 3, 4, 5, 5, 5, 5, 5, 6, 6 }, FIRN_OK,
      { 0, 2, 3, 4, 5, 12, 26, 27, 28, 29, 30, 62, 63 } },
    { "one symbol", 3, { 0, 1, 0 }, FIRN_OK, { 0, 0, 0 } },
    { "no symbol", 3, { 0, 0, 0 }, FIRN_OK, { 0, 0, 0 } },
    { "over-full", 3, { 1, 1, 1 }, FIRN_BAD_LENGTHS, { 0 } },
    { "over-full by the longest word", 4, { 1, 2, 2, 15 }, FIRN_BAD_LENGTHS, { 0 } },
    { "under-full", 3, { 2, 2, 2 }, FIRN_BAD_LENGTHS, { 0 } },
    { "under-full, one symbol", 1, { 2 }, FIRN_BAD_LENGTHS, { 0 } },
    { "a length of 16", 3, { 1, 2, 16 }, FIRN_BAD_LENGTHS, { 0 } }
};

static void assigns(void **state)
{
    const struct assign_case *c = *state;
    uint16_t words[13] = { 0 };

    assert_int_equal(firn_prefix_assign(c->lengths, c->symbols, words), c->status);
    assert_memory_equal(words, c->words, sizeof words);
}

/* No word is the beginning of another. */
static void prefix_free(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 50; round++) {
        uint32_t weights[64];
        uint16_t words[64];
        uint8_t lengths[64];

        for (size_t s = 0; s < 64; s++)
            weights[s] = random_below(1u << random_below(16));
        assert_int_equal(lengths_of(weights, 64, 11, lengths), FIRN_OK);
        assert_int_equal(firn_prefix_assign(lengths, 64, words), FIRN_OK);
        for (size_t a = 0; a < 64; a++)
            for (size_t b = 0; b < 64; b++)
                if (a != b && lengths[a] != 0 && lengths[b] >= lengths[a])
                    assert_true(words[b] >> (lengths[b] - lengths[a]) != words[a]);
    }
}

int main(void)
{
    enum { COSTS = sizeof cost_cases / sizeof *cost_cases, ASSIGNS = sizeof assign_cases / sizeof *assign_cases };
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(least_variance), cmocka_unit_test(exact_lengths), cmocka_unit_test(reaches_the_limit),
        cmocka_unit_test(refuses),        cmocka_unit_test(optimal_of_all), cmocka_unit_test(bounds),
        cmocka_unit_test(in_order),       cmocka_unit_test(prefix_free)
    };
    struct CMUnitTest rows[COSTS + ASSIGNS];

    for (size_t i = 0; i < COSTS; i++)
        rows[i] = (struct CMUnitTest){ cost_cases[i].name, costs, NULL, NULL, (void *)(uintptr_t)&cost_cases[i] };
    for (size_t i = 0; i < ASSIGNS; i++)
        rows[COSTS + i] = (struct CMUnitTest){ assign_cases[i].name, assigns, NULL, NULL,
                                               (void *)(uintptr_t)&assign_cases[i] };
    return cmocka_run_group_tests_name("prefix rows", rows, NULL, NULL) +
           cmocka_run_group_tests_name("prefix", others, NULL, NULL);
}
