/* tests/container/test_bad_input.c - files that are no container, strange ones, two in one */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/block.h"

#include "help/collection.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdlib.h>
#include <string.h>

static const struct firn_sheet_geometry small_sheet = { .k = 14, .m = 4, .depth = 8 };

static struct collection_result read_bytes(uint8_t *bytes, size_t count)
{
    struct collection collection = { .buffer = { .bytes = bytes, .capacity = count, .used = count } };

    return collection_read(&collection, 1);
}

static void what_is_no_container(void **state)
{
    enum { SIZE = 200000 };
    uint8_t *bytes = calloc(1, SIZE);
    const size_t sizes[] = { 0, 1, 4095, 4096, 8191, 8192, SIZE };

    for (size_t i = 0; i < sizeof sizes / sizeof sizes[0]; i++)
        assert_int_equal(read_bytes(bytes, sizes[i]).status, FIRN_NOT_CONTAINER);
    for (size_t i = 0; i < SIZE; i++)
        bytes[i] = (uint8_t)(i * 2654435761U >> 13);
    assert_int_equal(read_bytes(bytes, SIZE).status, FIRN_NOT_CONTAINER);
    free(bytes);
    (void)state;
}

/* A container of a later format: every hash is right, and nothing is guessed. */
static void a_foreign_version(void **state)
{
    uint8_t *bytes = calloc(6, FIRN_BLOCK_BYTES);

    for (uint64_t n = 0; n < 5; n++) {
        struct firn_block_tag tag = {
            .version = 2, .kind = FIRN_BLOCK_DATA, .geometry = small_sheet, .number = n, .data_blocks = 112
        };

        firn_block_seal(bytes + (n + 1) * FIRN_BLOCK_BYTES, &tag);
    }
    assert_int_equal(read_bytes(bytes, 6 * FIRN_BLOCK_BYTES).status, FIRN_FOREIGN_FORMAT);
    free(bytes);
    (void)state;
}

/* Blocks that are sound in themselves and hold no records: nothing to list, and no end known. */
static void blocks_without_records(void **state)
{
    uint8_t *bytes = calloc(30, FIRN_BLOCK_BYTES);
    struct collection_result r;

    for (uint64_t n = 0; n < 20; n++) {
        struct firn_block_tag tag = { .version = 1,
                                      .kind = FIRN_BLOCK_DATA,
                                      .geometry = { .k = 20, .m = 0, .depth = 1 },
                                      .number = n,
                                      .data_blocks = 20 };

        firn_block_seal(bytes + (n + 1) * FIRN_BLOCK_BYTES, &tag);
    }
    r = read_bytes(bytes, 21 * FIRN_BLOCK_BYTES);
    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.items, 0);
    assert_true(r.report.cut_short);
    assert_false(r.layout.end_known);
    free(bytes);
    (void)state;
}

/* A second container behind the first: the first is read, the other is said to be foreign bytes. */
static void two_in_one_file(void **state)
{
    struct collection *one = collection_make(30, 1, &small_sheet, 1), *two = collection_make(50, 2, &small_sheet, 1);
    size_t both = one->buffer.used + two->buffer.used;
    uint8_t *bytes = malloc(both);
    struct collection joined = { .buffer = { .bytes = bytes, .capacity = both, .used = both }, .seed = 1 };
    struct collection_result r;

    memcpy(bytes, one->buffer.bytes, one->buffer.used);
    memcpy(bytes + one->buffer.used, two->buffer.bytes, two->buffer.used);
    r = collection_read(&joined, 1);
    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.items, 30);
    assert_int_equal(r.whole, 30);
    assert_int_equal(r.wrong, 0);
    assert_true(r.layout.foreign_bytes == two->buffer.used);
    assert_memory_equal(r.layout.id, one->totals.id, 8);
    assert_memory_not_equal(one->totals.id, two->totals.id, 8);
    free(bytes);
    collection_free(one);
    collection_free(two);
    (void)state;
}

/* Bytes behind the end, and a piece of a block: no harm, and told. */
static void bytes_behind_the_end(void **state)
{
    for (size_t extra = 1; extra < 20000; extra = extra * 7 + 1) {
        struct collection *c = collection_make(20, 4, &small_sheet, 1);
        struct collection_result r;

        memset(c->buffer.bytes + c->buffer.used, 'x', extra);
        c->buffer.used += extra;
        r = collection_read(c, 1);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.whole, 20);
        assert_true(r.layout.foreign_bytes == extra);
        collection_free(c);
    }
    (void)state;
}

/* A block of another container in the place of one of ours is damage like any other. */
static void a_block_of_another_container(void **state)
{
    struct collection *one = collection_make(30, 1, &small_sheet, 1), *two = collection_make(30, 2, &small_sheet, 1);
    struct collection_result r;

    memcpy(one->buffer.bytes + 7 * FIRN_BLOCK_BYTES, two->buffer.bytes + 7 * FIRN_BLOCK_BYTES, 3 * FIRN_BLOCK_BYTES);
    memcpy(one->buffer.bytes + 20 * FIRN_BLOCK_BYTES, one->buffer.bytes + 21 * FIRN_BLOCK_BYTES, FIRN_BLOCK_BYTES);
    r = collection_read(one, 1);
    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.whole, 30);
    assert_int_equal(r.wrong, 0);
    assert_int_equal(r.damage.rebuilt, 4);
    collection_free(one);
    collection_free(two);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_is_no_container), cmocka_unit_test(a_foreign_version),
        cmocka_unit_test(blocks_without_records), cmocka_unit_test(two_in_one_file),
        cmocka_unit_test(bytes_behind_the_end), cmocka_unit_test(a_block_of_another_container),
    };

    return cmocka_run_group_tests_name("bad_input", tests, NULL, NULL);
}
