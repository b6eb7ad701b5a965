/*
 * tests/container/test_faults.c - memory that runs out, stores that fail, sources that fail: told, nothing passed off
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/block.h"
#include "firn/reader.h"
#include "firn/readback.h"
#include "firn/writer.h"

#include "help/collection.h"
#include "help/fault_memory.h"
#include "help/fault_store.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <errno.h>
#include <string.h>

static const struct firn_sheet_geometry small_sheet = { .k = 14, .m = 4, .depth = 8 };

enum { ITEMS = 40, SEED = 5 };

static enum firn_status write_collection(const struct firn_memory *memory, struct firn_store *store,
                                         struct firn_store *spool, unsigned threads, struct firn_writer_totals *totals)
{
    struct firn_writer_options options = {
        .store = store, .spool = spool, .memory = memory, .threads = threads, .geometry = small_sheet,
        .effort = FIRN_SEGMENT_EFFORT_QUICK
    };
    struct firn_fault fault;
    struct firn_writer *writer;
    enum firn_status status = firn_writer_make(&options, &fault, &writer);

    if (status == FIRN_OK)
        status = collection_pack(writer, ITEMS, SEED);
    if (status == FIRN_OK)
        status = firn_writer_finish(writer, totals);
    firn_writer_free(writer);
    return status;
}

static enum firn_status count_whole(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    (void)item;
    *(unsigned *)self += outcome->lost_bytes == 0 && (!outcome->sum_known || outcome->sum_right);
    return FIRN_OK;
}

static enum firn_status pass(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes, size_t count)
{
    (void)self, (void)item, (void)at, (void)bytes, (void)count;
    return FIRN_OK;
}

static enum firn_status read_collection(const struct firn_memory *memory, struct firn_store *store, unsigned *whole,
                                        struct firn_reader_damage *damage)
{
    struct firn_reader_options options = { .store = store, .memory = memory, .threads = 1 };
    struct firn_reader_visitor visitor = { .self = whole, .bytes = pass, .end = count_whole, .foresight = true };
    struct firn_reader_walk_report report;
    struct firn_fault fault;
    struct firn_reader *reader;
    enum firn_status status = firn_reader_open(&options, &fault, &reader);

    *whole = 0;
    if (status == FIRN_OK)
        status = firn_reader_walk(reader, &visitor, &fault, &report);
    if (status == FIRN_OK)
        firn_reader_damage_so_far(reader, damage);
    firn_reader_free(reader);
    return status;
}

static void make(struct fault_store *store)
{
    struct firn_writer_totals totals;
    struct fault_store spool;

    fault_store_make(store, NULL, 0);
    fault_store_make(&spool, NULL, 0);
    assert_int_equal(write_collection(firn_memory_system(), &store->store, &spool.store, 1, &totals), FIRN_OK);
    assert_true(totals.container_bytes == store->now.used);
    fault_store_free(&spool);
    fault_store_calm(store);
}

static void writer_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    unsigned fail_at;

    for (fail_at = 1; status != FIRN_OK; fail_at++) {
        struct firn_writer_totals totals;
        struct fault_memory memory;
        struct fault_store store, spool;

        fault_memory_make(&memory, fail_at);
        fault_store_make(&store, NULL, 0);
        fault_store_make(&spool, NULL, 0);
        status = write_collection(&memory.memory, &store.store, &spool.store, 1, &totals);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(memory.outstanding, 0);
        fault_store_free(&store);
        fault_store_free(&spool);
    }
    assert_true(fail_at > 10);
    (void)state;
}

static void reader_without_memory(void **state)
{
    struct fault_store store;
    enum firn_status status = FIRN_NO_MEMORY;
    unsigned fail_at;

    make(&store);
    memset(store.now.bytes + 10 * FIRN_BLOCK_BYTES, 0, FIRN_BLOCK_BYTES);      /* so that a sheet is mended too */
    for (fail_at = 1; status != FIRN_OK; fail_at++) {
        struct firn_reader_damage damage;
        struct fault_memory memory;
        unsigned whole;

        fault_memory_make(&memory, fail_at);
        status = read_collection(&memory.memory, &store.store, &whole, &damage);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(memory.outstanding, 0);
        if (status == FIRN_OK)
            assert_int_equal(whole, ITEMS);
    }
    assert_true(fail_at > 20);
    fault_store_free(&store);
    (void)state;
}

/* The n-th write fails, to the container or to the spool: FIRN_IO and the reason, whatever n. */
static void writes_that_fail(void **state)
{
    for (int in_spool = 0; in_spool < 2; in_spool++) {
        enum firn_status status = FIRN_IO;
        unsigned from;

        for (from = 1; status != FIRN_OK; from++) {
            struct firn_writer_totals totals;
            struct fault_store store, spool;

            fault_store_make(&store, NULL, 0);
            fault_store_make(&spool, NULL, 0);
            (in_spool ? &spool : &store)->rules[FAULT_WRITE] =
                (struct fault_rule){ .from = from, .times = 1, .os_error = ENOSPC, .halfway = from % 2 == 0 };
            status = write_collection(firn_memory_system(), &store.store, &spool.store, 2, &totals);
            assert_true(status == FIRN_OK || status == FIRN_IO);
            fault_store_free(&store);
            fault_store_free(&spool);
        }
        assert_true(from > 3);
    }
    (void)state;
}

/* Sectors that cannot be read: up to the reserve everything comes back, and is counted as unreadable. */
static void reads_that_fail(void **state)
{
    struct firn_reader_damage damage;
    struct fault_store store;
    unsigned whole;

    make(&store);
    for (uint64_t first = 0; first < 100; first += 9) {
        store.ranges[0] = (struct fault_range){ .at = (1 + first) * FIRN_BLOCK_BYTES + 512,
                                                .bytes = 19 * FIRN_BLOCK_BYTES };
        store.range_count = 1;
        assert_int_equal(read_collection(firn_memory_system(), &store.store, &whole, &damage), FIRN_OK);
        assert_int_equal(whole, ITEMS);
        assert_int_equal(damage.lost, 0);
        assert_true(damage.unreadable <= 20 && damage.rebuilt <= 20);
    }
    fault_store_free(&store);
    (void)state;
}

/* The n-th read call fails once: a single block is read again, so nothing is lost. */
static void a_read_that_fails_once(void **state)
{
    struct fault_store store;

    make(&store);
    for (uint64_t from = 1; from < 40; from++) {
        struct firn_reader_damage damage;
        unsigned whole;

        fault_store_calm(&store);
        store.rules[FAULT_READ] = (struct fault_rule){ .from = from, .times = 1, .halfway = true };
        assert_int_equal(read_collection(firn_memory_system(), &store.store, &whole, &damage), FIRN_OK);
        assert_int_equal(whole, ITEMS);
        assert_int_equal(damage.lost, 0);
    }
    fault_store_free(&store);
    (void)state;
}

/* What was written wrongly is caught by reading back: any single byte of the file. */
static void reading_back_sees_every_byte(void **state)
{
    struct fault_store store;
    struct firn_writer_totals totals;
    struct fault_store spool;
    struct firn_reader_options options = { .store = &store.store, .memory = firn_memory_system(), .threads = 1 };
    struct firn_fault fault;

    fault_store_make(&store, NULL, 0);
    fault_store_make(&spool, NULL, 0);
    assert_int_equal(write_collection(firn_memory_system(), &store.store, &spool.store, 1, &totals), FIRN_OK);
    assert_int_equal(firn_readback(&options, &totals, NULL, NULL, &fault), FIRN_OK);
    for (size_t at = 0; at < store.now.used; at += 4099 * 3) {
        store.now.bytes[at] ^= 0x10;
        assert_int_equal(firn_readback(&options, &totals, NULL, NULL, &fault), FIRN_MISMATCH);
        store.now.bytes[at] ^= 0x10;
    }
    store.now.used -= FIRN_BLOCK_BYTES;
    assert_int_equal(firn_readback(&options, &totals, NULL, NULL, &fault), FIRN_MISMATCH);
    fault_store_free(&store);
    fault_store_free(&spool);
    (void)state;
}

/* --- sources that fail --- */

struct withdrawal { uint64_t bytes, given; bool traceless; };

static const struct withdrawal withdrawals[] = {
    { 1000, 0, true }, { 1000, 999, true }, { 300000, 200000, true }, { 3000000, 2999999, true },
    { 30000000, 20000000, false }, { 9000000, 8999999, false },
};

struct seen { unsigned items, whole, wrong; uint64_t lost; enum firn_reader_loss why; };

static enum firn_status see_gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                                enum firn_reader_loss why, uint64_t container_at)
{
    struct seen *seen = self;

    (void)item, (void)at, (void)container_at;
    seen->lost += count;
    seen->why = why;
    return FIRN_OK;
}

static enum firn_status see_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                  size_t count)
{
    struct seen *seen = self;

    (void)at;
    for (size_t i = 0; i < count; i++)
        seen->wrong += bytes[i] != item->pax[0];
    return FIRN_OK;
}

static enum firn_status see_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct seen *seen = self;

    (void)item;
    seen->items++;
    seen->whole += outcome->lost_bytes == 0 && outcome->sum_known && outcome->sum_right;
    return FIRN_OK;
}

static void give(struct firn_writer *writer, uint8_t letter, uint64_t announced, uint64_t given, bool withdraw,
                 bool *traceless)
{
    static uint8_t bytes[65536];
    uint8_t pax[512];
    struct firn_item_extent extent = { 0, announced };
    struct firn_item item = { .pax = pax,
                              .pax_bytes = sizeof pax,
                              .has_content = true,
                              .bytes = announced,
                              .extents = &extent,
                              .extent_count = 1 };

    memset(pax, letter, sizeof pax);
    memset(bytes, letter, sizeof bytes);
    assert_int_equal(firn_writer_item(writer, &item), FIRN_OK);
    while (given > 0) {
        size_t step = given < sizeof bytes ? (size_t)given : sizeof bytes;

        assert_int_equal(firn_writer_content(writer, bytes, step), FIRN_OK);
        given -= step;
    }
    if (withdraw)
        assert_int_equal(firn_writer_withdraw(writer, traceless), FIRN_OK);
    else
        assert_int_equal(firn_writer_end(writer, NULL), FIRN_OK);
}

/* An item is withdrawn between two others: they are whole, and it is gone or told of as never written. */
static void withdrawn_items_are_never_taken_for_whole(void **state)
{
    for (size_t i = 0; i < sizeof withdrawals / sizeof withdrawals[0]; i++) {
        const struct withdrawal *w = &withdrawals[i];
        struct fault_store store, spool;
        struct firn_writer_options options = {
            .store = &store.store, .spool = &spool.store, .memory = firn_memory_system(), .threads = 2,
            .geometry = { .k = 224, .m = 32, .depth = 8 }, .effort = FIRN_SEGMENT_EFFORT_QUICK
        };
        struct firn_writer_totals totals;
        struct seen seen = { 0 };
        struct firn_reader_visitor visitor = { .self = &seen, .bytes = see_bytes, .gap = see_gap, .end = see_end };
        struct firn_reader_options reading = { .store = &store.store, .memory = firn_memory_system(), .threads = 2 };
        struct firn_reader_walk_report report;
        struct firn_fault fault;
        struct firn_writer *writer;
        struct firn_reader *reader;
        bool traceless = false;

        fault_store_make(&store, NULL, 0);
        fault_store_make(&spool, NULL, 0);
        assert_int_equal(firn_writer_make(&options, &fault, &writer), FIRN_OK);
        give(writer, 'a', 5000, 5000, false, NULL);
        give(writer, 'b', w->bytes, w->given, true, &traceless);
        give(writer, 'c', 700000, 700000, false, NULL);
        give(writer, 'd', 3, 3, false, NULL);
        assert_int_equal(firn_writer_finish(writer, &totals), FIRN_OK);
        firn_writer_free(writer);
        assert_int_equal(traceless, w->traceless);
        assert_int_equal(firn_reader_open(&reading, &fault, &reader), FIRN_OK);
        assert_int_equal(firn_reader_walk(reader, &visitor, &fault, &report), FIRN_OK);
        firn_reader_free(reader);
        assert_int_equal(seen.items, w->traceless ? 3 : 4);
        assert_int_equal(seen.whole, 3);
        assert_int_equal(seen.wrong, 0);
        if (!w->traceless) {
            assert_true(seen.lost > 0 && seen.lost <= w->bytes);
            assert_int_equal(seen.why, FIRN_READER_LOSS_WITHDRAWN);
        }
        fault_store_free(&store);
        fault_store_free(&spool);
    }
    (void)state;
}

static void the_writers_contract_is_held(void **state)
{
    struct fault_store store, spool;
    struct firn_writer_options options = { .store = &store.store,
                                           .spool = &spool.store,
                                           .memory = firn_memory_system(),
                                           .threads = 1,
                                           .geometry = small_sheet };
    uint8_t pax[512] = { 0 };
    struct firn_item_extent extent = { 0, 10 };
    struct firn_item item = {
        .pax = pax, .pax_bytes = 512, .has_content = true, .bytes = 10, .extents = &extent, .extent_count = 1
    };
    struct firn_writer_totals totals;
    struct firn_fault fault;
    struct firn_writer *writer;

    fault_store_make(&store, NULL, 0);
    fault_store_make(&spool, NULL, 0);
    assert_int_equal(firn_writer_make(&options, &fault, &writer), FIRN_OK);
    assert_int_equal(firn_writer_end(writer, NULL), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_writer_item(writer, &item), FIRN_OK);
    assert_int_equal(firn_writer_item(writer, &item), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_writer_content(writer, pax, 11), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_writer_content(writer, pax, 9), FIRN_OK);
    assert_int_equal(firn_writer_end(writer, NULL), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_writer_finish(writer, &totals), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_writer_content(writer, pax, 1), FIRN_OK);
    assert_int_equal(firn_writer_end(writer, NULL), FIRN_OK);
    item.pax_bytes = 511;
    assert_int_equal(firn_writer_item(writer, &item), FIRN_OVER_LIMIT);
    item.pax_bytes = 512;
    extent.at = 1;
    assert_int_equal(firn_writer_item(writer, &item), FIRN_OVER_LIMIT);
    assert_int_equal(firn_writer_finish(writer, &totals), FIRN_OK);
    firn_writer_free(writer);
    options.title.title = "a\nb";
    assert_int_equal(firn_writer_make(&options, &fault, &writer), FIRN_BAD_ARGUMENT);
    assert_string_equal(fault.what, "title");
    options.title.title = NULL;
    options.geometry.m = 3;
    assert_int_equal(firn_writer_make(&options, &fault, &writer), FIRN_BAD_ARGUMENT);
    fault_store_free(&store);
    fault_store_free(&spool);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(writer_without_memory), cmocka_unit_test(reader_without_memory),
        cmocka_unit_test(writes_that_fail), cmocka_unit_test(reads_that_fail), cmocka_unit_test(a_read_that_fails_once),
        cmocka_unit_test(reading_back_sees_every_byte), cmocka_unit_test(withdrawn_items_are_never_taken_for_whole),
        cmocka_unit_test(the_writers_contract_is_held),
    };

    return cmocka_run_group_tests_name("faults", tests, NULL, NULL);
}
