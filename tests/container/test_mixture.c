/*
 * tests/container/test_mixture.c - items of all sizes, holes, withdrawals, at random: what was ended comes back,
 * whatever was around it
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/reader.h"
#include "firn/writer.h"

#include "help/fault_store.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { ITEMS_MAX = 400, EXTENTS_MAX = 6 };

/* What was given to the writer, so that the reader's side can be held against it. */
struct given {
    bool content, withdrawn, traceless;
    uint64_t bytes, seed, stored;
    struct firn_item_extent extents[EXTENTS_MAX];
    size_t extent_count;
};

struct mixture {
    struct given given[ITEMS_MAX];
    size_t count, expected[ITEMS_MAX], expected_count;      /* given[] in the order of item numbers */
    uint64_t random;
    unsigned whole, lost, wrong;
    uint64_t good, gaps;
    bool steady;                       /* nothing is withdrawn, so contents are moved where that pays */
    uint64_t content_at;               /* of the item before */
    unsigned moved;                    /* items whose content lies before that of an earlier item */
};

static uint64_t below(struct mixture *m, uint64_t limit)
{
    return fault_random(&m->random) % limit;
}

static uint8_t byte_of(const struct given *g, uint64_t at)
{
    uint64_t x = (g->seed + at / 16) * UINT64_C(0x9E3779B97F4A7C15);

    return g->seed % 3 == 0   ? (uint8_t)(x >> 59)
           : g->seed % 3 == 1 ? (uint8_t)('a' + at % 7)
                              : (uint8_t)(x >> (at % 8 * 8));
}

static uint64_t some_size(struct mixture *m)
{
    switch (below(m, 12)) {
    case 0:  return 0;
    case 1:  return 100000 + below(m, 500000);
    case 2:  return (1 << 20) - 2 + below(m, 5);                 /* about a segment */
    case 3:  return (256 << 10) - 2 + below(m, 5);               /* about the size that has segments of its own */
    case 4:  return below(m, 40) == 0 ? (8 << 20) - 3 + below(m, 7) : below(m, 3000);      /* about a window */
    default: return 1 + below(m, 9000);
    }
}

static void make_given(struct mixture *m, struct given *g)
{
    uint64_t at = 0;

    *g = (struct given){ .content = below(m, 8) > 0, .seed = fault_random(&m->random) % 1000003 };
    if (!g->content)
        return;
    g->bytes = some_size(m);
    if (below(m, 4) > 0 || g->bytes < 100) {
        g->extent_count = g->bytes > 0;
        g->extents[0] = (struct firn_item_extent){ 0, g->bytes };
    } else {
        while (g->extent_count < EXTENTS_MAX && at + 20 < g->bytes) {
            uint64_t hole = below(m, 1 + g->bytes / 8), left;

            if (at + hole >= g->bytes)
                break;
            left = g->bytes - at - hole;
            g->extents[g->extent_count].at = at + hole;
            g->extents[g->extent_count].bytes = 1 + below(m, left < 1 + g->bytes / 4 ? left : 1 + g->bytes / 4);
            at = g->extents[g->extent_count].at + g->extents[g->extent_count].bytes;
            g->extent_count++;
        }
    }
    for (size_t i = 0; i < g->extent_count; i++)
        g->stored += g->extents[i].bytes;
    g->withdrawn = g->stored > 0 && below(m, 10) == 0 && !m->steady;
}

/* Gives `stored` bytes of the item, in pieces of random size. */
static void give_content(struct mixture *m, struct firn_writer *writer, const struct given *g, uint64_t stored)
{
    static uint8_t piece[70000];

    for (size_t i = 0; i < g->extent_count; i++)
        for (uint64_t done = 0; done < g->extents[i].bytes && stored > 0;) {
            uint64_t left = g->extents[i].bytes - done, step = 1 + below(m, sizeof piece);

            step = step < left ? step : left;
            step = step < stored ? step : stored;
            for (uint64_t j = 0; j < step; j++)
                piece[j] = byte_of(g, g->extents[i].at + done + j);
            assert_int_equal(firn_writer_content(writer, piece, (size_t)step), FIRN_OK);
            done += step;
            stored -= step;
        }
}

static void pack_mixture(struct mixture *m, struct firn_writer *writer)
{
    for (size_t i = 0; i < m->count; i++) {
        struct given *g = &m->given[i];
        uint8_t pax[512];
        struct firn_item item = { .pax = pax, .pax_bytes = sizeof pax };

        make_given(m, g);
        memset(pax, 0, sizeof pax);
        snprintf((char *)pax, sizeof pax, "%zu", i);
        item.has_content = g->content;
        item.bytes = g->bytes;
        item.extents = g->extents;
        item.extent_count = g->extent_count;
        assert_int_equal(firn_writer_item(writer, &item), FIRN_OK);
        give_content(m, writer, g, g->withdrawn ? below(m, g->stored) : g->stored);
        if (g->withdrawn)
            assert_int_equal(firn_writer_withdraw(writer, &g->traceless), FIRN_OK);
        else
            assert_int_equal(firn_writer_end(writer, NULL), FIRN_OK);
        if (!g->traceless)
            m->expected[m->expected_count++] = i;
    }
}

static enum firn_status begin(void *self, const struct firn_item *item, uint64_t foreseen)
{
    struct mixture *m = self;

    (void)foreseen;
    m->good = m->gaps = 0;
    assert_true(item->number < m->expected_count);
    assert_int_equal(strtoul((const char *)item->pax, NULL, 10), m->expected[item->number]);
    assert_true(item->bytes == m->given[m->expected[item->number]].bytes);
    if (item->stored_bytes > 0) {
        m->moved += item->content_at < m->content_at;
        m->content_at = item->content_at;
    }
    return FIRN_OK;
}

static enum firn_status bytes_come(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    struct mixture *m = self;

    for (size_t i = 0; i < count; i++)
        m->wrong += bytes[i] != byte_of(&m->given[m->expected[item->number]], at + i);
    m->good += count;
    return FIRN_OK;
}

static enum firn_status gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                            enum firn_reader_loss why, uint64_t container_at)
{
    struct mixture *m = self;

    (void)at, (void)container_at;
    assert_true(m->given[m->expected[item->number]].withdrawn);
    assert_int_equal(why, FIRN_READER_LOSS_WITHDRAWN);
    m->gaps += count;
    return FIRN_OK;
}

static enum firn_status end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct mixture *m = self;
    const struct given *g = &m->given[m->expected[item->number]];

    assert_true(m->good + m->gaps == g->stored && outcome->lost_bytes == m->gaps);
    if (g->withdrawn)
        assert_true(m->gaps > 0);
    else if (g->content)
        assert_true(outcome->sum_known && outcome->sum_right);
    m->whole += m->gaps == 0;
    m->lost += m->gaps > 0;
    return FIRN_OK;
}

static void read_mixture(struct mixture *m, struct firn_store *store, unsigned threads)
{
    struct firn_reader_options options = { .store = store, .memory = firn_memory_system(), .threads = threads };
    struct firn_reader_visitor visitor = { .self = m, .begin = begin, .bytes = bytes_come, .gap = gap, .end = end };
    struct firn_reader_walk_report report;
    struct firn_fault fault;
    struct firn_reader *reader;

    assert_int_equal(firn_reader_open(&options, &fault, &reader), FIRN_OK);
    assert_int_equal(firn_reader_walk(reader, &visitor, &fault, &report), FIRN_OK);
    firn_reader_free(reader);
    assert_true(report.items == m->expected_count && report.items_unknown == 0);
    assert_int_equal(m->wrong, 0);
    assert_true(m->whole + m->lost == m->expected_count);
}

static void mixtures_come_back(void **state)
{
    const char *words = getenv("FIRN_SEED");
    uint64_t seed = words != NULL ? strtoull(words, NULL, 10) : 20261201;

    print_message("FIRN_SEED=%llu\n", (unsigned long long)seed);
    for (unsigned round = 0; round < 5; round++) {
        struct mixture *m = calloc(1, sizeof *m);
        struct fault_store store, spool;
        struct firn_writer_options options = {
            .store = &store.store, .spool = &spool.store, .memory = firn_memory_system(), .threads = 1 + round % 3,
            .geometry = { .k = 56, .m = 8, .depth = 16 }, .effort = FIRN_SEGMENT_EFFORT_QUICK
        };
        struct firn_writer_totals totals;
        struct firn_fault fault;
        struct firn_writer *writer;

        m->random = seed + round;
        m->steady = round >= 3;
        m->count = 100 + below(m, ITEMS_MAX - 100);
        fault_store_make(&store, NULL, 0);
        fault_store_make(&spool, NULL, 0);
        assert_int_equal(firn_writer_make(&options, &fault, &writer), FIRN_OK);
        pack_mixture(m, writer);
        assert_int_equal(firn_writer_finish(writer, &totals), FIRN_OK);
        firn_writer_free(writer);
        assert_true(totals.items == m->expected_count);
        read_mixture(m, &store.store, 1 + round % 2);
        assert_true(!m->steady || m->moved > 0);
        fault_store_free(&store);
        fault_store_free(&spool);
        free(m);
    }
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = { cmocka_unit_test(mixtures_come_back) };

    return cmocka_run_group_tests_name("mixture", tests, NULL, NULL);
}
