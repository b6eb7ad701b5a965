/*
 * tests/care/test_collate.c - collations of copies spoiled here, by code that shares nothing with what mends them
 *
 * What comes out is the container as it was packed, byte for byte; or no byte of it that it did not have.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/collate.h"

#include "firn/block.h"
#include "guard/random.h"
#include "help/collection.h"
#include "help/fault_memory.h"
#include "help/fault_store.h"
#include "help/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

/* k = 14, m = 4, 8 rows: sheets of 144 blocks. */
static const struct firn_sheet_geometry geometry = { .k = 14, .m = 4, .depth = 8 };
enum { SHEET = 144, SOURCES_MAX = 12, CONTAINERS_MAX = 8 };

static struct collection *packed, *other;      /* never changed */
static struct random dice;

struct bench {
    struct { uint8_t *bytes; size_t used; struct fault_range unreadable; } sources[SOURCES_MAX];
    unsigned source_count;
    struct firn_collate_options options;
    struct firn_collate_container told[CONTAINERS_MAX];
    unsigned containers, shares;
    struct firn_collate_share sum;
    struct firn_collate_source seen[SOURCES_MAX];
    struct firn_fault fault;
    unsigned stops_left;
};

static void note_container(void *self, const struct firn_collate_container *container)
{
    struct bench *bench = self;

    assert_true(bench->containers < CONTAINERS_MAX);
    bench->told[bench->containers++] = *container;
}

static void note_share(void *self, const struct firn_collate_share *share)
{
    struct bench *bench = self;

    bench->shares++;
    bench->sum.found += share->found;
    bench->sum.mended += share->mended;
    bench->sum.reread += share->reread;
}

static bool stop_then(void *self)
{
    struct bench *bench = self;

    return bench->stops_left > 0 && --bench->stops_left == 0;
}

static void bench_make(struct bench *bench)
{
    memset(bench, 0, sizeof *bench);
    (void)remove(scratch_path("out"));
}

static void bench_free(struct bench *bench)
{
    for (unsigned i = 0; i < bench->source_count; i++)
        free(bench->sources[i].bytes);
}

/* A source of so many bytes; what is in it is for the caller to say. */
static uint8_t *add_source(struct bench *bench, size_t count)
{
    uint8_t *bytes = calloc(count + 1, 1);

    assert_non_null(bytes);
    assert_true(bench->source_count < SOURCES_MAX);
    bench->sources[bench->source_count].bytes = bytes;
    bench->sources[bench->source_count++].used = count;
    return bytes;
}

static uint8_t *add_copy(struct bench *bench)
{
    uint8_t *bytes = add_source(bench, packed->buffer.used);

    memcpy(bytes, packed->buffer.bytes, packed->buffer.used);
    return bytes;
}

static enum firn_status collate_with(struct bench *bench, const struct firn_memory *memory)
{
    struct firn_collate *collate;
    enum firn_status status;

    bench->containers = bench->shares = 0;
    memset(&bench->sum, 0, sizeof bench->sum);
    bench->options.memory = memory;
    bench->options.threads = 1;
    bench->options.self = bench;
    bench->options.stop = stop_then;
    bench->options.share = note_share;
    bench->options.container = note_container;
    if (bench->options.output == NULL)
        bench->options.output = scratch_path("out");
    status = firn_collate_open(&bench->options, &collate, &bench->fault);
    for (unsigned i = 0; i < bench->source_count && status == FIRN_OK; i++) {
        struct fault_store store;
        char name[16];

        (void)snprintf(name, sizeof name, "source %u", i);
        fault_store_make(&store, bench->sources[i].bytes, bench->sources[i].used);
        if (bench->sources[i].unreadable.bytes > 0)
            store.ranges[store.range_count++] = bench->sources[i].unreadable;
        status = firn_collate_take(collate, name, &store.store, &bench->seen[i], &bench->fault);
        fault_store_free(&store);
    }
    if (status == FIRN_OK)
        status = firn_collate_finish(collate, &bench->fault);
    firn_collate_free(collate);
    return status;
}

static enum firn_status collate(struct bench *bench)
{
    return collate_with(bench, firn_memory_system());
}

static void output_is(const char *name, const struct collection *wanted)
{
    size_t count;
    uint8_t *bytes = scratch_read(name, &count);

    assert_non_null(bytes);
    assert_int_equal(count, wanted->buffer.used);
    assert_memory_equal(bytes, wanted->buffer.bytes, count);
    free(bytes);
}

/* One container, whole, and its counts add up. */
static void comes_out_whole(struct bench *bench)
{
    const struct firn_collate_container *told = &bench->told[0];

    assert_int_equal(collate(bench), FIRN_OK);
    assert_int_equal(bench->containers, 1);
    assert_int_equal(told->lost, 0);
    assert_true(told->end_known);
    assert_int_equal(told->blocks, packed->totals.blocks);
    assert_int_equal(told->found + told->mended + told->reread + told->voted + told->rebuilt, told->blocks);
    assert_int_equal(told->found, bench->sum.found);
    assert_int_equal(told->mended, bench->sum.mended);
    assert_int_equal(told->title, FIRN_COLLATE_TITLE_PROTECTED);
    output_is("out", packed);
}

static void flip_rate(uint8_t *bytes, size_t count, double rate)
{
    uint64_t flips = (uint64_t)((double)count * 8 * rate);

    for (uint64_t i = 0; i < flips; i++) {
        uint64_t bit = random_next(&dice) % (count * 8);

        bytes[bit / 8] ^= (uint8_t)(1U << bit % 8);
    }
}

/* --- */

static void a_sound_copy(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    add_copy(&bench);
    comes_out_whole(&bench);
    assert_int_equal(bench.told[0].found, packed->totals.blocks);
    bench_free(&bench);
}

/* Each lacks another half: far beyond the reserve of either. */
static void two_halves(void **state)
{
    size_t bytes = packed->buffer.used, half = bytes / 2;
    struct bench bench;

    (void)state;
    bench_make(&bench);
    memset(add_copy(&bench), 0xA5, half);
    memset(add_copy(&bench) + half, 0, bytes - half);
    comes_out_whole(&bench);
    assert_int_equal(bench.shares, 2);
    bench_free(&bench);
}

/* No block of any copy is intact, nor can the lanes mend many: 33 flips a block, three copies. */
static void the_vote_of_three(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    for (unsigned i = 0; i < 3; i++)
        flip_rate(add_copy(&bench), packed->buffer.used, 1e-3);
    comes_out_whole(&bench);
    assert_true(bench.told[0].voted > bench.told[0].blocks * 9 / 10);
    bench_free(&bench);
}

/* Two copies: where they differ the lanes tell which one is right. */
static void the_vote_of_two(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    for (unsigned i = 0; i < 2; i++)
        flip_rate(add_copy(&bench), packed->buffer.used, 5e-4);
    comes_out_whole(&bench);
    assert_true(bench.told[0].voted > bench.told[0].blocks / 2);
    bench_free(&bench);
}

/* Lost blocks in every copy, at random, more than half of each: what no copy has comes from the reserve. */
static void copies_full_of_holes(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    for (unsigned i = 0; i < 8; i++) {
        uint8_t *bytes = add_copy(&bench);

        for (size_t at = 0; at < packed->buffer.used; at += 4096)
            if (random_below(&dice, 100) < 55)
                random_fill(&dice, bytes + at, 4096);
        random_fill(&dice, bytes + 20 * 4096, 4096);      /* one that none has, for sure */
    }
    comes_out_whole(&bench);      /* 0.55^8 = 0.84 %: a row of 18 loses more than four of them once in three million */
    assert_true(bench.told[0].rebuilt > 0);
    bench_free(&bench);
}

/* Pieces of odd sizes at odd places, out of order, each a source of its own. */
static void fragments(void **state)
{
    size_t bytes = packed->buffer.used, at = 0, cuts[SOURCES_MAX + 1];
    struct bench bench;

    (void)state;
    bench_make(&bench);
    for (unsigned i = 0; i < SOURCES_MAX; i++, at += bytes / SOURCES_MAX)
        cuts[i] = i == 0 ? 0 : at + random_below(&dice, 3000);
    cuts[SOURCES_MAX] = bytes;
    for (unsigned i = SOURCES_MAX; i-- > 0;) {
        size_t before = random_below(&dice, 5000), length = cuts[i + 1] - cuts[i];
        uint8_t *piece = add_source(&bench, before + length);

        memset(piece, 'F', before);
        memcpy(piece + before, packed->buffer.bytes + cuts[i], length);
    }
    comes_out_whole(&bench);      /* at most one block is torn at each cut */
    assert_in_range(bench.told[0].rebuilt, 0, SOURCES_MAX - 1);
    bench_free(&bench);
}

static void two_containers_in_one_image(void **state)
{
    size_t one = packed->buffer.used, two = other->buffer.used;
    char name[32];
    struct bench bench;
    uint8_t *image;

    (void)state;
    bench_make(&bench);
    image = add_source(&bench, one + two + 9999);
    random_fill(&dice, image, one + two + 9999);
    memcpy(image + 1234, packed->buffer.bytes, one);
    memcpy(image + 1234 + one + 77, other->buffer.bytes, two);
    assert_int_equal(collate(&bench), FIRN_BAD_ARGUMENT);      /* one file for two */
    assert_int_equal(scratch_entries(), 0);
    bench.options.output = scratch_path("");
    bench.options.into_folder = true;
    assert_int_equal(collate(&bench), FIRN_OK);
    assert_int_equal(bench.containers, 2);
    for (unsigned i = 0; i < 2; i++) {
        const struct collection *wanted = i == 0 ? packed : other;

        for (unsigned j = 0; j < 8; j++)
            (void)snprintf(name + 2 * j, sizeof name - 2 * j, "%02x", wanted->totals.id[j]);
        strcpy(name + 16, ".firn");
        assert_memory_equal(bench.told[i].id, wanted->totals.id, 8);
        output_is(name, wanted);
        assert_int_equal(remove(scratch_path(name)), 0);
    }
    bench.options.output = scratch_path("out");
    bench.options.into_folder = false;
    bench.options.only_id = other->totals.id;
    assert_int_equal(collate(&bench), FIRN_OK);
    output_is("out", other);
    bench_free(&bench);
}

/* Sheet 1 is gone from the only copy: all else is as it was, and the holes are told of. */
static void as_much_as_exists(void **state)
{
    struct bench bench;
    size_t count;
    uint8_t *bytes;

    (void)state;
    bench_make(&bench);
    memset(add_copy(&bench) + 4096 * (1 + SHEET), 0, SHEET * 4096);
    assert_int_equal(collate(&bench), FIRN_OK);
    assert_int_equal(bench.told[0].lost, SHEET);
    assert_int_equal(bench.told[0].found, packed->totals.blocks - SHEET);
    bytes = scratch_read("out", &count);
    assert_non_null(bytes);
    assert_int_equal(count, packed->buffer.used);
    for (size_t i = 0; i < count; i++)
        assert_int_equal(bytes[i], i / 4096 < 1 + SHEET || i / 4096 >= 1 + 2 * SHEET ? packed->buffer.bytes[i] : 0);
    free(bytes);
    bench_free(&bench);
}

/* The end of the file is lost but can be rebuilt; or cannot, and is a hole up to where the container ends. */
static void a_lost_end(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    add_copy(&bench);
    bench.sources[0].used -= 5 * 4096 + 17;
    comes_out_whole(&bench);
    assert_int_equal(bench.told[0].rebuilt, 6);
    bench_free(&bench);
}

static void sectors_that_cannot_be_read(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    add_copy(&bench);
    bench.sources[0].unreadable = (struct fault_range){ .at = 30 * 4096, .bytes = 20 * 4096 };
    comes_out_whole(&bench);
    assert_int_equal(bench.told[0].rebuilt, 20);
    assert_int_equal(bench.seen[0].unreadable_bytes, 20 * 4096);
    bench_free(&bench);
}

/* No source has a right title page, and its record is lost with the sheet that it is in: a page is taken unproved. */
static void a_title_page_without_proof(void **state)
{
    struct bench bench;
    uint8_t *copy;
    size_t count;
    uint8_t *bytes;

    (void)state;
    bench_make(&bench);
    copy = add_copy(&bench);
    memset(copy + 2 * 4096, 0, (SHEET - 1) * 4096);      /* block 0 stays; block 1 has the rest of the page */
    assert_int_equal(collate(&bench), FIRN_OK);
    assert_int_equal(bench.told[0].title, FIRN_COLLATE_TITLE_UNPROTECTED);
    bytes = scratch_read("out", &count);
    assert_non_null(bytes);
    assert_memory_equal(bytes, packed->buffer.bytes, 2 * 4096);
    free(bytes);
    bench_free(&bench);
}

static void nothing_to_find(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    random_fill(&dice, add_source(&bench, 100000), 100000);
    add_source(&bench, 0);
    assert_int_equal(collate(&bench), FIRN_NOT_CONTAINER);
    assert_int_equal(scratch_entries(), 0);
    bench_free(&bench);
}

/* One copy with a bit in fifty wrong: beyond all repair. Nothing, or what is known to be lost, but never success. */
static void beyond_repair(void **state)
{
    struct bench bench;

    (void)state;
    bench_make(&bench);
    flip_rate(add_copy(&bench), packed->buffer.used, 0.02);
    memcpy(bench.sources[0].bytes + 40 * 4096 + 3968, packed->buffer.bytes + 40 * 4096 + 3968, 128);
    memcpy(bench.sources[0].bytes + 41 * 4096 + 3968, packed->buffer.bytes + 41 * 4096 + 3968, 128);
    assert_int_equal(collate(&bench), FIRN_OK);      /* two tags are whole, and lead to all the others */
    assert_int_equal(bench.containers, 1);
    assert_true(bench.seen[0].damaged > packed->totals.blocks * 3 / 4);
    assert_true(bench.told[0].path == NULL || bench.told[0].lost > packed->totals.blocks * 3 / 4);
    assert_int_equal(scratch_entries(), bench.told[0].path != NULL);
    bench_free(&bench);
}

static void what_is_there_stays_there(void **state)
{
    struct bench bench;
    size_t count;
    uint8_t *bytes;

    (void)state;
    bench_make(&bench);
    add_copy(&bench);
    scratch_write("out", "ledger", 6, 0644);
    assert_int_equal(collate(&bench), FIRN_EXISTS);
    bytes = scratch_read("out", &count);
    assert_int_equal(count, 6);
    assert_memory_equal(bytes, "ledger", 6);
    free(bytes);
    bench.options.replace = true;
    comes_out_whole(&bench);
    bench_free(&bench);
}

/* A block whose number is beyond every limit is not believed, however right its hash is. */
static void absurd_numbers_are_left_alone(void **state)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = FIRN_BLOCK_DATA, .geometry = geometry, .data_blocks = 112,
        .number = UINT64_C(144) << 50
    };
    struct bench bench;

    (void)state;
    bench_make(&bench);
    memcpy(tag.id, packed->totals.id, sizeof tag.id);
    firn_block_seal(add_source(&bench, 4096), &tag);
    tag.geometry = (struct firn_sheet_geometry){ 1, 4, 1 };      /* sheets of five blocks, two million of them */
    tag.data_blocks = 1;
    tag.number = UINT64_C(5) << 21;
    firn_block_seal(add_source(&bench, 4096), &tag);
    add_copy(&bench);
    comes_out_whole(&bench);
    bench_free(&bench);
}

/* Good blocks that contradict good ones: the first stays, and it is told. */
static void contradictions_are_told(void **state)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = FIRN_BLOCK_DATA, .geometry = geometry, .data_blocks = 112,
        .number = 5
    };
    struct bench bench;

    (void)state;
    bench_make(&bench);
    add_copy(&bench);
    memcpy(tag.id, packed->totals.id, sizeof tag.id);
    firn_block_seal(add_source(&bench, 4096), &tag);
    comes_out_whole(&bench);
    assert_int_equal(bench.told[0].contradicting, 1);
    bench_free(&bench);
}

static void stops_without_a_trace(void **state)
{
    struct bench bench;

    (void)state;
    for (unsigned calls = 1; calls < 60; calls += 3) {
        enum firn_status status;

        bench_make(&bench);
        flip_rate(add_copy(&bench), packed->buffer.used, 1e-4);
        flip_rate(add_copy(&bench), packed->buffer.used, 1e-4);
        bench.stops_left = calls;
        status = collate(&bench);
        assert_true(status == FIRN_STOPPED || status == FIRN_OK);
        assert_int_equal(scratch_entries(), status == FIRN_OK);
        bench_free(&bench);
    }
}

static void lives_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    unsigned fail_at = 0;

    (void)state;
    while (status != FIRN_OK) {
        struct fault_memory fault;
        struct bench bench;

        bench_make(&bench);
        memset(add_copy(&bench) + 50 * 4096, 0, 10 * 4096);
        flip_rate(bench.sources[0].bytes, packed->buffer.used, 3e-5);
        fault_memory_make(&fault, ++fail_at);
        status = collate_with(&bench, &fault.memory);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(fault.outstanding, 0);
        assert_int_equal(scratch_entries(), status == FIRN_OK);
        bench_free(&bench);
    }
    assert_true(fail_at > 10);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_sound_copy),
        cmocka_unit_test(two_halves),
        cmocka_unit_test(the_vote_of_three),
        cmocka_unit_test(the_vote_of_two),
        cmocka_unit_test(copies_full_of_holes),
        cmocka_unit_test(fragments),
        cmocka_unit_test(two_containers_in_one_image),
        cmocka_unit_test(as_much_as_exists),
        cmocka_unit_test(a_lost_end),
        cmocka_unit_test(sectors_that_cannot_be_read),
        cmocka_unit_test(a_title_page_without_proof),
        cmocka_unit_test(nothing_to_find),
        cmocka_unit_test(beyond_repair),
        cmocka_unit_test(what_is_there_stays_there),
        cmocka_unit_test(absurd_numbers_are_left_alone),
        cmocka_unit_test(contradictions_are_told),
        cmocka_unit_test(stops_without_a_trace),
        cmocka_unit_test(lives_without_memory),
    };
    int failed;

    dice = random_start("test_collate");
    scratch_make();
    packed = collection_make(30, 1931, &geometry, 1);
    other = collection_make(12, 1932, &geometry, 1);
    failed = cmocka_run_group_tests_name("care: collations", tests, NULL, NULL);
    collection_free(packed);
    collection_free(other);
    scratch_remove();
    return failed;
}
