/*
 * tests/container/test_hostile.c - catalogues that lead in circles, contradict themselves or claim the absurd: read to
 * an end
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/bytes.h"
#include "container/catalogue.h"
#include "container/press.h"
#include "container/record.h"
#include "firn/reader.h"
#include "firn/segment.h"
#include "guard/hash.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { ROOM = 4 << 20 };

/* A container made record by record: blocks and record headers are right, what is in them is up to the test. */
struct forge {
    struct firn_store_buffer buffer;
    struct firn_store store;
    struct firn_threads *threads;
    struct firn_press *press;
};

static void forge_begin(struct forge *forge)
{
    static const struct firn_sheet_geometry geometry = { .k = 14, .m = 4, .depth = 8 };
    static const uint8_t page[4096], nonce[16];

    *forge = (struct forge){ .buffer = { .bytes = malloc(ROOM), .capacity = ROOM } };
    firn_store_memory(&forge->buffer, &forge->store);
    assert_int_equal(firn_threads_make(firn_memory_system(), 1, &forge->threads), FIRN_OK);
    assert_int_equal(firn_press_make(&(struct firn_press_options){ .store = &forge->store,
                                                                   .memory = firn_memory_system(),
                                                                   .threads = forge->threads,
                                                                   .geometry = geometry,
                                                                   .nonce = nonce,
                                                                   .page = page },
                                     &forge->press),
                     FIRN_OK);
}

static uint64_t forge_record(struct forge *forge, unsigned type, const uint8_t *body, size_t count)
{
    struct firn_record record = { .type = type, .at = firn_press_at(forge->press), .body_bytes = count };
    uint8_t header[FIRN_RECORD_HEADER_BYTES];

    firn_record_put(&record, header);
    assert_int_equal(firn_press_put(forge->press, header, sizeof header, NULL), FIRN_OK);
    assert_int_equal(firn_press_put(forge->press, body, count, NULL), FIRN_OK);
    assert_int_equal(
        firn_press_put_zeros(forge->press, (size_t)(firn_record_span(count) - sizeof header - count), NULL), FIRN_OK);
    return record.at;
}

static void forge_end(struct forge *forge)
{
    struct firn_press_totals totals;

    assert_int_equal(firn_press_finish(forge->press, NULL, &totals), FIRN_OK);
    firn_press_free(forge->press);
    firn_threads_free(forge->threads);
}

static void forge_free(struct forge *forge)
{
    forge->store.close(forge->store.self);
    free(forge->buffer.bytes);
}

/* A BATCH body of `items` items that claim `bytes` bytes each. */
static size_t make_batch(uint8_t *body, uint32_t items, uint64_t first_item, uint64_t bytes)
{
    uint8_t entries[8192], pax[512] = "invented", *at = entries;
    struct firn_catalogue_batch batch = { .items = items, .first_item = first_item };
    void *work;
    size_t coded;

    for (uint32_t i = 0; i < items; i++) {
        struct firn_item_extent extent = { 0, bytes };
        struct firn_item item = {
            .pax = pax, .pax_bytes = sizeof pax, .has_content = true, .bytes = bytes, .extents = &extent,
            .extent_count = bytes > 0
        };

        firn_catalogue_put_entry(&item, at);
        at += firn_catalogue_entry_bytes(&item);
    }
    assert_int_equal(posix_memalign(&work, 64, firn_segment_encode_work_bytes()), 0);
    assert_int_equal(firn_segment_encode(entries, (size_t)(at - entries), FIRN_SEGMENT_EFFORT_NONE,
                                         body + FIRN_CATALOGUE_BATCH_HEAD_BYTES + 4, &coded, work), FIRN_OK);
    free(work);
    firn_bytes_put32(body + FIRN_CATALOGUE_BATCH_HEAD_BYTES, (uint32_t)coded);
    batch.raw_bytes = (uint32_t)(at - entries);
    batch.coded_bytes = 4 + coded;
    firn_catalogue_seal_batch(&batch, body);
    return FIRN_CATALOGUE_BATCH_HEAD_BYTES + batch.coded_bytes;
}

static void forge_colophon(struct forge *forge, uint64_t index_at)
{
    char words[1024];
    uint8_t hash[FIRN_HASH_BYTES];
    int used = snprintf(words, sizeof words, "firn colophon, format 1\nitems: 9\nwithdrawn: 0\ncontent-bytes: 0\n"
                        "stored-bytes: 0\nsegments: 0\nsegment-bytes: 0\nparts: 1\ntitle-at: 0\nindex-at: %llu\n"
                        "catalogue-sha256: %064d\nxxh3-128-of-the-above: ", (unsigned long long)index_at, 0);

    firn_hash_put((const uint8_t *)words, (size_t)used, hash);
    for (size_t i = 0; i < sizeof hash; i++)
        used += snprintf(words + used, sizeof words - (size_t)used, "%02x", (unsigned)hash[i]);
    used += snprintf(words + used, sizeof words - (size_t)used, "\n");
    forge_record(forge, FIRN_RECORD_COLOPHON, (const uint8_t *)words, (size_t)used);
}

struct seen { uint64_t items, good, lost; };

static enum firn_status see_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                  size_t count)
{
    (void)item, (void)at, (void)bytes;
    ((struct seen *)self)->good += count;
    return FIRN_OK;
}

static enum firn_status see_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    (void)item;
    ((struct seen *)self)->items++;
    ((struct seen *)self)->lost += outcome->lost_bytes;
    return FIRN_OK;
}

static struct seen read_forged(struct forge *forge, enum firn_status expected)
{
    struct seen seen = { 0 };
    struct firn_reader_options options = { .store = &forge->store, .memory = firn_memory_system(), .threads = 1 };
    struct firn_reader_visitor visitor = { .self = &seen, .bytes = see_bytes, .end = see_end };
    struct firn_reader_walk_report report;
    struct firn_fault fault;
    struct firn_reader *reader;

    assert_int_equal(firn_reader_open(&options, &fault, &reader), FIRN_OK);
    assert_int_equal(firn_reader_walk(reader, &visitor, &fault, &report), expected);
    firn_reader_free(reader);
    return seen;
}

/* INDEX parts that point at each other, at themselves, backwards, and with the same number twice. */
static const struct circle { const char *name; uint64_t part[3], at[3], end[3]; } circles[] = {
    { "all at the start", { 0, 1, 2 }, { 0, 0, 0 }, { 0, 0, 0 } },
    { "backwards", { 0, 1, 2 }, { 8192, 4128, 0 }, { 8192, 4128, 0 } },
    { "the same number", { 0, 0, 0 }, { 0, 0, 0 }, { 4096, 4096, 4096 } },
    { "numbers that go down", { 2, 1, 0 }, { 4128, 4128, 4128 }, { 4128, 4128, 4128 } },
    { "beyond the end", { 0, 5, 9 }, { 0, UINT64_MAX / 8, UINT64_MAX / 4 }, { 0, UINT64_MAX / 8, UINT64_MAX / 4 } },
};

static void catalogues_that_lead_in_circles(void **state)
{
    for (size_t i = 0; i < sizeof circles / sizeof circles[0]; i++) {
        uint8_t *body = malloc(65536), *batch = malloc(65536);
        struct forge forge;
        uint64_t index_at = 0;
        size_t count = make_batch(batch, 3, 0, 0);

        forge_begin(&forge);
        forge_record(&forge, FIRN_RECORD_BATCH, batch, count);
        for (size_t j = 0; j < 3; j++) {
            struct firn_catalogue_index index = {
                .part = circles[i].part[j], .at = circles[i].at[j], .end = circles[i].end[j], .batch = batch,
                .batch_bytes = (uint32_t)count
            };
            uint64_t at;

            firn_catalogue_put_index(&index, body);
            at = forge_record(&forge, FIRN_RECORD_INDEX, body, firn_catalogue_index_bytes(&index));
            index_at = j == 0 ? at : index_at;
        }
        forge_colophon(&forge, index_at);
        forge_end(&forge);
        assert_true(read_forged(&forge, FIRN_OK).items <= 12);
        forge_free(&forge);
        free(body);
        free(batch);
    }
    (void)state;
}

/* Segments that overlap, come backwards, repeat: every byte of an item is handed out or told of once. */
static void segments_out_of_order(void **state)
{
    static const uint64_t places[][4] = {
        { 0, 0, 0, 0 }, { 300, 200, 100, 0 }, { 0, 50, 100, 150 }, { 900, 0, 900, 400 }
    };

    for (size_t i = 0; i < sizeof places / sizeof places[0]; i++) {
        uint8_t body[FIRN_CATALOGUE_SEGMENT_HEAD_BYTES + 102], raw[100], hash[FIRN_HASH_BYTES], batch[8192];
        struct forge forge;
        struct seen seen;

        forge_begin(&forge);
        forge_record(&forge, FIRN_RECORD_BATCH, batch, make_batch(batch, 2, 0, 450));
        memset(raw, 'q', sizeof raw);
        firn_hash_put(raw, sizeof raw, hash);
        for (size_t j = 0; j < 4; j++) {
            struct firn_catalogue_place place = { .content_at = places[i][j], .raw_bytes = sizeof raw };

            firn_catalogue_put_segment(&place, hash, body);
            body[FIRN_CATALOGUE_SEGMENT_HEAD_BYTES] = FIRN_SEGMENT_STORED;
            body[FIRN_CATALOGUE_SEGMENT_HEAD_BYTES + 1] = 0;
            memcpy(body + FIRN_CATALOGUE_SEGMENT_HEAD_BYTES + 2, raw, sizeof raw);
            forge_record(&forge, FIRN_RECORD_SEGMENT, body, sizeof body);
        }
        forge_end(&forge);
        seen = read_forged(&forge, FIRN_OK);
        assert_int_equal(seen.items, 2);
        assert_true(seen.good + seen.lost == 900);
        assert_true(seen.good <= 400);
        forge_free(&forge);
    }
    (void)state;
}

/* Items that claim what no disk holds: told of as lost, at once. */
static void items_of_absurd_size(void **state)
{
    uint8_t batch[8192];
    struct forge forge;
    struct seen seen;

    forge_begin(&forge);
    forge_record(&forge, FIRN_RECORD_BATCH, batch, make_batch(batch, 3, 0, UINT64_C(1) << 60));
    forge_end(&forge);
    seen = read_forged(&forge, FIRN_OK);
    assert_int_equal(seen.items, 3);
    assert_true(seen.lost == UINT64_C(3) << 60);
    forge_free(&forge);
    (void)state;
}

/* A colophon that points at itself, at the start, between records. */
static void colophons_that_mislead(void **state)
{
    static const uint64_t places[] = { 0, 32, 4096, 100000 };

    for (size_t i = 0; i < sizeof places / sizeof places[0]; i++) {
        uint8_t batch[8192];
        struct forge forge;

        forge_begin(&forge);
        forge_record(&forge, FIRN_RECORD_BATCH, batch, make_batch(batch, 2, 0, 0));
        forge_colophon(&forge, places[i]);
        forge_end(&forge);
        assert_true(read_forged(&forge, FIRN_OK).items <= 2);
        forge_free(&forge);
    }
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(catalogues_that_lead_in_circles), cmocka_unit_test(segments_out_of_order),
        cmocka_unit_test(items_of_absurd_size), cmocka_unit_test(colophons_that_mislead),
    };

    return cmocka_run_group_tests_name("hostile", tests, NULL, NULL);
}
