/*
 * tests/coding/test_split.c - cuts: the bounds are bounds, and the search with them finds what the search without
 * them finds
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/split.h"

#include "coding/histogram.h"
#include "coding/random.h"
#include "coding/sample.h"
#include "coding/table.h"

#include "firn/prefix.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

static uint8_t raw[FIRN_SEGMENT_RAW_MAX];
static struct firn_split_work pruned, whole;

/* Bytes of changing statistics: parts with alphabets, skews and lengths of their own. */
static void mixed(uint8_t *bytes, size_t count)
{
    for (size_t at = 0; at < count;) {
        size_t part = 1 + random_below(1u << (8 + random_below(9))), end = count - at < part ? count : at + part;
        unsigned kind = random_below(5), base = random_below(256), spread = 1 + random_below(256);

        for (; at < end; at++) {
            unsigned r = random_below(spread);

            bytes[at] = (uint8_t)(base + (kind == 0 ? 0 : kind == 1 ? r : kind == 2 ? r * random_below(spread) / spread
                                          : kind == 3 ? r & random_below(256) : random_below(256)));
        }
    }
}

/* The bound for the words is below what the best code takes, and not far. */
static void floors(void **state)
{
    static uint64_t work[FIRN_SPLIT_PREFIX_WORK_BYTES / 8];
    uint64_t optima = 0, bounds = 0;
    uint32_t counts[256];
    uint8_t lengths[256];

    (void)state;
    random_start();
    assert_true(firn_prefix_work_bytes(256) <= sizeof work);
    for (unsigned round = 0; round < 1000; round++) {
        size_t count = 2 + random_below(1u << (1 + random_below(20)) | 1u);
        uint64_t cost, floor;

        mixed(raw, count);
        raw[0] = (uint8_t)(raw[1] + 1);
        firn_histogram_count(raw, count, counts);
        assert_int_equal(firn_prefix_lengths(counts, 256, FIRN_TABLE_LENGTH_LIMIT, lengths, work), FIRN_OK);
        cost = firn_prefix_cost_bits(counts, lengths, 256);
        floor = firn_split_floor_bits(counts, UINT64_MAX);
        assert_true(floor <= cost);
        assert_true(firn_split_floor_bits(counts, cost / 2) <= floor);
        optima += cost;
        bounds += floor;
    }
    printf("bound %" PRIu64 " of %" PRIu64 " bits\n", bounds, optima);
    assert_true(bounds >= optima / 100 * 98);
}

/* A stretch after the other, none empty, all bytes. */
static void covers(const struct firn_split_work *work, size_t raw_bytes)
{
    size_t at = 0;

    for (size_t s = 0; s < work->stretch_count; s++) {
        assert_int_equal(work->stretches[s].raw_at, at);
        assert_true(work->stretches[s].raw_bytes > 0);
        at += work->stretches[s].raw_bytes;
    }
    assert_int_equal(at, raw_bytes);
}

static void same_cuts(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 40; round++) {
        size_t cell = (size_t)FIRN_SPLIT_CELL_MIN_BYTES << random_below(3);
        size_t count = 1 + random_below(30 * (uint32_t)cell);

        mixed(raw, count);
        firn_split(raw, count, cell, true, &pruned);
        firn_split(raw, count, cell, false, &whole);
        assert_int_equal(pruned.cost_bits, whole.cost_bits);
        assert_int_equal(pruned.stretch_count, whole.stretch_count);
        for (size_t s = 0; s < whole.stretch_count; s++) {
            assert_int_equal(pruned.stretches[s].raw_at, whole.stretches[s].raw_at);
            assert_int_equal(pruned.stretches[s].method, whole.stretches[s].method);
        }
        covers(&whole, count);
        assert_true(pruned.priced <= whole.priced);
    }
}

/* By hand: 64 KiB of one letter, 64 KiB of noise, 64 KiB of eight letters are three stretches of three methods. */
static void finds_the_changes(void **state)
{
    static const struct firn_split_stretch expected[] = {
        { .raw_at = 0, .raw_bytes = 65536, .method = FIRN_SEGMENT_RUN },
        { .raw_at = 65536, .raw_bytes = 65536, .method = FIRN_SEGMENT_STORED },
        { .raw_at = 131072, .raw_bytes = 65536, .method = FIRN_SEGMENT_PREFIX } };

    (void)state;
    random_start();
    for (size_t i = 0; i < 3 * 65536; i++)
        raw[i] = i < 65536 ? 'a' : i < 131072 ? (uint8_t)random_word() : (uint8_t)('a' + random_below(8));
    for (size_t cell = 4096; cell <= 65536; cell *= 2) {
        firn_split(raw, 3 * 65536, cell, true, &pruned);
        assert_int_equal(pruned.stretch_count, 3);
        for (size_t s = 0; s < 3; s++) {
            assert_int_equal(pruned.stretches[s].raw_at, expected[s].raw_at);
            assert_int_equal(pruned.stretches[s].raw_bytes, expected[s].raw_bytes);
            assert_int_equal(pruned.stretches[s].method, expected[s].method);
        }
    }
}

/* Evenly spread bytes are seen as such; a part that is not, or a slight leaning of all of it, is noticed. */
static void samples(void **state)
{
    unsigned even = 0;

    (void)state;
    random_start();
    for (unsigned round = 0; round < 20; round++) {
        for (size_t i = 0; i < sizeof raw; i += 8)
            memcpy(raw + i, &(uint64_t){ random_word() }, 8);
        even += firn_sample_is_even(raw, sizeof raw);
        memset(raw + 100000, 'x', sizeof raw / 32);
        assert_false(firn_sample_is_even(raw, sizeof raw));
    }
    assert_true(even >= 19);           /* 1 in some ten thousand is mistaken, at the cost of time only */
    for (size_t i = 0; i < sizeof raw; i++)
        raw[i] = random_below(20) == 0 ? 'e' : (uint8_t)random_word();
    assert_false(firn_sample_is_even(raw, sizeof raw));
    assert_false(firn_sample_is_even(raw, 65535));
}

static void histograms(void **state)
{
    (void)state;
    random_start();
    for (unsigned round = 0; round < 200; round++) {
        uint32_t counts[256], slow[256] = { 0 };
        size_t count = random_below(3000), start = random_below(16);

        mixed(raw, start + count);
        for (size_t i = 0; i < count; i++)
            slow[raw[start + i]]++;
        firn_histogram_count(raw + start, count, counts);
        assert_memory_equal(counts, slow, sizeof slow);
    }
}

int main(void)
{
    static const struct CMUnitTest tests[] = {
        cmocka_unit_test(floors), cmocka_unit_test(same_cuts),
        cmocka_unit_test(finds_the_changes), cmocka_unit_test(samples), cmocka_unit_test(histograms)
    };

    return cmocka_run_group_tests_name("split", tests, NULL, NULL);
}
