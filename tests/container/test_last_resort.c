/*
 * tests/container/test_last_resort.c - containers without one good block: laid out by vote, brought back by rescue
 *
 * Damage is made here, bit by bit and block by block, by code that knows nothing but that blocks have 4096 bytes.
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/block.h"
#include "container/sheets.h"

#include "guard/random.h"
#include "help/collection.h"
#include "help/fault_memory.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <math.h>

/* k = 28, m = 4, 4 rows: 128 blocks a sheet. */
static const struct firn_sheet_geometry small_sheet = { .k = 28, .m = 4, .depth = 4 };

enum { ITEMS = 300 };

static void flip_bits(struct random *random, uint8_t *bytes, size_t count, double rate)
{
    for (double at = 0;; at += 1) {
        double fraction = ((double)(random_next(random) >> 11) + 0.5) / 9007199254740992.0;

        at += floor(log(fraction) / log1p(-rate));
        if (at >= 8.0 * (double)count)
            return;
        bytes[(size_t)at / 8] ^= (uint8_t)(1U << (size_t)at % 8);
    }
}

static void spoil(struct random *random, struct collection *c, double rate)
{
    flip_bits(random, c->buffer.bytes, c->buffer.used, rate);
}

static struct collection *make(struct random *random, unsigned items)
{
    return collection_make(items, random_next(random), &small_sheet, 1);
}

/* The layout that blocks tell, and nothing else; FIRN_OK's worth. */
static enum firn_status layout_of(struct collection *c, struct firn_reader_layout *layout)
{
    struct firn_store store;
    struct firn_sheets_options options = { .store = &store, .memory = firn_memory_system(), .threads = 1 };
    struct firn_sheets *sheets;
    enum firn_status status;

    firn_store_memory(&c->buffer, &store);
    status = firn_sheets_open(&options, NULL, &sheets);
    if (status == FIRN_OK)
        *layout = *firn_sheets_layout(sheets);
    firn_sheets_close(sheets);
    return status;
}

static void assert_same_layout(const struct firn_reader_layout *a, const struct firn_reader_layout *b)
{
    assert_memory_equal(a->id, b->id, sizeof a->id);
    assert_int_equal(a->geometry.k, b->geometry.k);
    assert_int_equal(a->geometry.m, b->geometry.m);
    assert_int_equal(a->geometry.depth, b->geometry.depth);
    assert_int_equal(a->blocks, b->blocks);
    assert_int_equal(a->data_blocks, b->data_blocks);
    assert_int_equal(a->sheets, b->sheets);
    assert_int_equal(a->last_sheet.data_blocks, b->last_sheet.data_blocks);
    assert_int_equal(a->end_known, b->end_known);
}

/* From one sheet that is not full to several, at rates where no tag is right any more, and with an eighth of noise. */
static void layout_is_found_by_vote(void **state)
{
    static const double rates[] = { 1e-3, 5e-3, 8e-3 };
    struct random random = random_start("layout");

    (void)state;
    for (unsigned items = 20; items <= 500; items += 96)
        for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++) {
            struct collection *c = make(&random, items);
            struct firn_reader_layout clean, spoilt;

            assert_int_equal(layout_of(c, &clean), FIRN_OK);
            spoil(&random, c, rates[i]);
            for (uint64_t n = 0; n < clean.blocks - clean.last_sheet.data_blocks; n++)
                if (random_below(&random, 8) == 0)
                    random_fill(&random, c->buffer.bytes + (n + 1) * FIRN_BLOCK_BYTES, FIRN_BLOCK_BYTES);
            assert_int_equal(layout_of(c, &spoilt), FIRN_OK);
            assert_same_layout(&clean, &spoilt);
            collection_free(c);
        }
}

/* One good block among blocks that are not: it must not be taken for the end of the container. */
static void a_good_block_is_not_the_end(void **state)
{
    struct random random = random_start("one good block");
    struct collection *c = make(&random, ITEMS);
    struct firn_reader_layout clean, spoilt;
    uint8_t kept[FIRN_BLOCK_BYTES];

    (void)state;
    assert_int_equal(layout_of(c, &clean), FIRN_OK);
    assert_true(clean.sheets >= 3);
    memcpy(kept, c->buffer.bytes + 6 * FIRN_BLOCK_BYTES, sizeof kept);
    spoil(&random, c, 5e-3);
    memcpy(c->buffer.bytes + 6 * FIRN_BLOCK_BYTES, kept, sizeof kept);
    assert_int_equal(layout_of(c, &spoilt), FIRN_OK);
    assert_same_layout(&clean, &spoilt);
    collection_free(c);
}

static void what_is_no_container_is_none(void **state)
{
    struct random random = random_start("no container");
    struct collection *c = make(&random, 20);
    struct firn_reader_layout layout;

    (void)state;
    random_fill(&random, c->buffer.bytes, c->buffer.used);
    assert_int_equal(layout_of(c, &layout), FIRN_NOT_CONTAINER);
    memset(c->buffer.bytes, 0, c->buffer.used);
    assert_int_equal(layout_of(c, &layout), FIRN_NOT_CONTAINER);
    memset(c->buffer.bytes, 'F', c->buffer.used);
    assert_int_equal(layout_of(c, &layout), FIRN_NOT_CONTAINER);
    collection_free(c);
}

static void comes_back_whatever_the_thread_count(void **state)
{
    struct random random = random_start("comes back");

    (void)state;
    for (unsigned threads = 1; threads <= 3; threads++) {
        struct collection *c = make(&random, ITEMS);
        struct collection_result r;

        spoil(&random, c, 2e-3);
        r = collection_read(c, threads);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.whole, ITEMS);
        assert_int_equal(r.wrong, 0);
        assert_int_equal(r.damage.lost, 0);
        assert_true(r.damage.rebuilt > r.layout.data_blocks / 2);
        collection_free(c);
    }
}

/* More and more, far beyond what can come back: what is handed out is right, what is lost is told. */
static void beyond_it_nothing_wrong_is_handed_out(void **state)
{
    struct random random = random_start("beyond");
    unsigned lost = 0;

    (void)state;
    for (double rate = 4e-3; rate < 0.3; rate *= 2.2) {
        struct collection *c = make(&random, ITEMS);
        struct collection_result r;

        spoil(&random, c, rate);
        r = collection_read(c, 1);
        if (r.status == FIRN_OK) {
            assert_int_equal(r.wrong, 0);
            assert_true(r.whole == ITEMS || r.damage.lost > 0);
            lost += r.damage.lost > 0;
        } else {
            assert_int_equal(r.status, FIRN_NOT_CONTAINER);
        }
        collection_free(c);
    }
    assert_true(lost >= 2);
}

static enum firn_status mend_all(struct collection *c, const struct firn_memory *memory, bool (*stop)(void *self),
                                 void *self, uint64_t *lost)
{
    struct firn_store store;
    struct firn_sheets_options options = { &store, memory, 2, stop, self };
    struct firn_sheets *sheets;
    enum firn_status status;

    *lost = 0;
    firn_store_memory(&c->buffer, &store);
    status = firn_sheets_open(&options, NULL, &sheets);
    for (uint64_t i = 0; status == FIRN_OK && i < firn_sheets_layout(sheets)->sheets; i++) {
        const enum firn_sheets_finding *findings;
        struct firn_sheet_shape shape;
        const uint8_t *blocks;
        uint64_t first;
        uint32_t missing;

        status = firn_sheets_mend(sheets, i, &blocks, &findings, &missing);
        firn_sheets_shape(sheets, i, &shape, &first);
        for (uint32_t b = 0; status == FIRN_OK && b < shape.data_blocks + shape.reserve_blocks; b++)
            *lost += findings[b] == FIRN_SHEETS_LOST;
    }
    firn_sheets_close(sheets);
    return status;
}

/* Whichever request for memory fails: told, nothing kept, nothing called lost; the next try goes through. */
static void without_memory(void **state)
{
    struct random random = random_start("without memory");
    struct collection *c = make(&random, ITEMS);
    enum firn_status status = FIRN_NO_MEMORY;
    unsigned fail_at;

    (void)state;
    spoil(&random, c, 2e-3);
    for (fail_at = 1; status != FIRN_OK; fail_at++) {
        struct fault_memory memory;
        uint64_t lost;

        fault_memory_make(&memory, fail_at);
        status = mend_all(c, &memory.memory, NULL, NULL, &lost);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(memory.outstanding, 0);
        assert_int_equal(lost, 0);
    }
    assert_true(fail_at > 10);
    collection_free(c);
}

static bool stop_at(void *self)
{
    return --*(int *)self == 0;
}

/* At every question whether to stop, the answer may be yes. */
static void stops_when_asked(void **state)
{
    struct random random = random_start("stops");
    struct collection *c = make(&random, 60);
    enum firn_status status = FIRN_STOPPED;
    int at;

    (void)state;
    spoil(&random, c, 2e-3);
    for (at = 1; status != FIRN_OK; at++) {
        int left = at;
        uint64_t lost;

        status = mend_all(c, firn_memory_system(), stop_at, &left, &lost);
        assert_true(status == FIRN_OK || status == FIRN_STOPPED);
        assert_int_equal(lost, 0);
    }
    assert_true(at > 5);
    collection_free(c);
}

/* Two flips in one lane of a block whose row has four others gone: the lanes bring it back, and the row the others. */
static void deep_repair_helps_the_row(void **state)
{
    struct random random = random_start("deep repair");
    struct collection *c = make(&random, ITEMS);
    struct collection_result r;

    (void)state;
    for (unsigned i = 0; i < 4; i++)      /* column i + 1 of row 0 of sheet 0 */
        random_fill(&random, c->buffer.bytes + (size_t)(4 * (i + 1) + 1) * FIRN_BLOCK_BYTES, FIRN_BLOCK_BYTES);
    c->buffer.bytes[FIRN_BLOCK_BYTES + 100] ^= 1;
    c->buffer.bytes[FIRN_BLOCK_BYTES + 100 + 8 * 77] ^= 1;
    r = collection_read(c, 1);
    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.whole, ITEMS);
    assert_int_equal(r.damage.rebuilt, 4);
    assert_int_equal(r.damage.mended, 1);
    assert_int_equal(r.damage.lost, 0);
    collection_free(c);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(layout_is_found_by_vote),
        cmocka_unit_test(a_good_block_is_not_the_end),
        cmocka_unit_test(what_is_no_container_is_none),
        cmocka_unit_test(comes_back_whatever_the_thread_count),
        cmocka_unit_test(beyond_it_nothing_wrong_is_handed_out),
        cmocka_unit_test(without_memory),
        cmocka_unit_test(stops_when_asked),
        cmocka_unit_test(deep_repair_helps_the_row),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
