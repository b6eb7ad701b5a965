/*
 * tests/container/test_container.c - writer and reader together, in memory: what went in comes out, whatever is damaged
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/block.h"
#include "firn/reader.h"
#include "firn/writer.h"

#include "help/collection.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdlib.h>
#include <string.h>

/* A small sheet (k = 14, m = 4, 8 rows: 144 blocks) makes many sheets of a small collection. */
static const struct firn_sheet_geometry small_sheet = { .k = 14, .m = 4, .depth = 8 };

static struct collection_result read_all(struct collection *collection, unsigned threads)
{
    return collection_read(collection, threads);
}

static void comes_back(void **state)
{
    for (unsigned threads = 1; threads <= 3; threads++) {
        struct collection *c = collection_make(300, 7, &small_sheet, threads);
        struct collection_result r = read_all(c, threads);

        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.items, 300);
        assert_int_equal(r.whole, 300);
        assert_int_equal(r.damage.lost + r.damage.mended + r.damage.rebuilt, 0);
        assert_true(r.layout.title_sound && r.layout.colophon_found && r.layout.end_known);
        collection_free(c);
    }
    (void)state;
}

static void same_bytes_for_any_thread_count(void **state)
{
    struct collection *one = collection_make(200, 11, &small_sheet, 1);

    for (unsigned threads = 2; threads <= 4; threads++) {
        struct collection *more = collection_make(200, 11, &small_sheet, threads);

        assert_int_equal(one->buffer.used, more->buffer.used);
        assert_memory_equal(one->buffer.bytes, more->buffer.bytes, one->buffer.used);
        collection_free(more);
    }
    collection_free(one);
    (void)state;
}

static void nothing_packed_is_a_container_too(void **state)
{
    struct collection *c = collection_make(0, 1, &small_sheet, 1);
    struct collection_result r = read_all(c, 1);

    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.items, 0);
    assert_true(r.layout.colophon_found);
    collection_free(c);
    (void)state;
}

/* Every single block, one after the other, is overwritten: all comes back, from the reserve. */
static void any_block_may_go(void **state)
{
    struct collection *c = collection_make(120, 3, &small_sheet, 1);
    size_t blocks = c->buffer.used / FIRN_BLOCK_BYTES - 1;
    uint8_t kept[FIRN_BLOCK_BYTES];

    for (size_t n = 0; n < blocks; n++) {
        uint8_t *block = c->buffer.bytes + (n + 1) * FIRN_BLOCK_BYTES;
        struct collection_result r;

        memcpy(kept, block, sizeof kept);
        memset(block, 0x5A, sizeof kept);
        r = read_all(c, 1);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.whole, 120);
        assert_int_equal(r.damage.lost, 0);
        memcpy(block, kept, sizeof kept);
    }
    collection_free(c);
    (void)state;
}

/*
 * A run as long as the reserve of a full sheet, m * D = 32 blocks, at starts all over the full sheets and across their
 * borders.
 */
static void any_run_up_to_the_reserve_may_go(void **state)
{
    struct collection *c = collection_make(60, 5, &small_sheet, 1);
    size_t full_blocks = c->buffer.used / FIRN_BLOCK_BYTES / 144 * 144, run = 32;
    uint8_t *kept = malloc(run * FIRN_BLOCK_BYTES);

    assert_true(full_blocks >= 2 * 144);
    for (size_t n = 0; n + run <= full_blocks; n += 5) {
        uint8_t *at = c->buffer.bytes + (n + 1) * FIRN_BLOCK_BYTES;
        struct collection_result r;

        memcpy(kept, at, run * FIRN_BLOCK_BYTES);
        memset(at, 0, run * FIRN_BLOCK_BYTES);
        r = read_all(c, 1);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.whole, 60);
        memcpy(at, kept, run * FIRN_BLOCK_BYTES);
    }
    free(kept);
    collection_free(c);
    (void)state;
}

/* Beyond the reserve: what is handed out is right, what is not is told of, and every item is met. */
static void beyond_the_reserve_nothing_wrong_is_handed_out(void **state)
{
    struct collection *c = collection_make(150, 9, &small_sheet, 1);
    size_t blocks = c->buffer.used / FIRN_BLOCK_BYTES - 1;

    for (size_t n = 0; n + 60 < blocks; n += 47) {
        uint8_t *kept = malloc(60 * FIRN_BLOCK_BYTES), *at = c->buffer.bytes + (n + 1) * FIRN_BLOCK_BYTES;
        struct collection_result r;

        memcpy(kept, at, 60 * FIRN_BLOCK_BYTES);
        memset(at, 0xFF, 60 * FIRN_BLOCK_BYTES);
        r = read_all(c, 2);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.wrong, 0);
        assert_true(r.whole + r.gapped + r.report.items_unknown >= 150 || r.report.cut_short);
        memcpy(at, kept, 60 * FIRN_BLOCK_BYTES);
        free(kept);
    }
    collection_free(c);
    (void)state;
}

/* Cut anywhere: every item that lies wholly before the cut comes back. */
static void cut_short_gives_back_what_lies_before(void **state)
{
    struct collection *c = collection_make(150, 13, &small_sheet, 1);
    size_t whole = c->buffer.used;
    unsigned before = 0;

    for (size_t cut = FIRN_BLOCK_BYTES; cut < whole; cut += 20 * FIRN_BLOCK_BYTES + 1234) {
        struct collection_result r;

        c->buffer.used = cut;
        r = read_all(c, 1);
        if (r.status == FIRN_NOT_CONTAINER) {
            assert_true(cut < 3 * FIRN_BLOCK_BYTES);
            continue;
        }
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.wrong, 0);
        assert_true(r.whole >= before);
        before = r.whole;
    }
    assert_true(before >= 120);
    c->buffer.used = whole;
    assert_int_equal(read_all(c, 1).whole, 150);
    collection_free(c);
    (void)state;
}

/* One flipped bit anywhere in a container: mended on read, from the block itself. */
static void one_flipped_bit_is_mended(void **state)
{
    struct collection *c = collection_make(10, 21, &small_sheet, 1);
    size_t blocks = c->buffer.used / FIRN_BLOCK_BYTES - 1;

    for (size_t n = 0; n < blocks; n++)
        c->buffer.bytes[(n + 1) * FIRN_BLOCK_BYTES + (n * 997) % FIRN_BLOCK_BYTES] ^= (uint8_t)(1U << n % 8);
    assert_int_equal(read_all(c, 1).whole, 10);
    assert_int_equal(read_all(c, 1).damage.rebuilt, 0);
    assert_true(read_all(c, 1).damage.mended > 0);
    collection_free(c);
    (void)state;
}

/* Page 0, the colophon and the whole index may go: the catalogue is put together from the stream. */
static void without_index_and_colophon(void **state)
{
    struct collection *c = collection_make(150, 17, &(struct firn_sheet_geometry){ .k = 14, .m = 0, .depth = 8 }, 1);
    size_t blocks = c->buffer.used / FIRN_BLOCK_BYTES - 1;
    struct collection_result whole = read_all(c, 1), r;

    assert_int_equal(whole.whole, 150);
    memset(c->buffer.bytes, 0, FIRN_BLOCK_BYTES);
    for (size_t gone = 1; gone < 8; gone++) {      /* from the end: colophon, then index records */
        memset(c->buffer.bytes + (blocks - gone + 1) * FIRN_BLOCK_BYTES, 0, FIRN_BLOCK_BYTES);
        r = read_all(c, 1);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.wrong, 0);
        assert_int_equal(r.items, 150);
        assert_false(r.layout.title_sound);
        assert_false(r.layout.colophon_found);
    }
    collection_free(c);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(comes_back),
        cmocka_unit_test(same_bytes_for_any_thread_count),
        cmocka_unit_test(nothing_packed_is_a_container_too),
        cmocka_unit_test(any_block_may_go),
        cmocka_unit_test(any_run_up_to_the_reserve_may_go),
        cmocka_unit_test(beyond_the_reserve_nothing_wrong_is_handed_out),
        cmocka_unit_test(cut_short_gives_back_what_lies_before),
        cmocka_unit_test(one_flipped_bit_is_mended),
        cmocka_unit_test(without_index_and_colophon),
    };

    return cmocka_run_group_tests_name("container", tests, NULL, NULL);
}
