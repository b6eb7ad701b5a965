/*
 * tests/container/test_formats.c - records, entries, sums, index and colophon against the vectors of the specification
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/catalogue.h"
#include "container/digest.h"
#include "container/record.h"
#include "base/bytes.h"
#include "container/title.h"
#include "container/title_value.h"
#include "firn/segment.h"
#include "guard/hash.h"

#include "guard/vectors.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdlib.h>

enum { ROOM = 8192 };

static const uint8_t *stream_vector(const char *name, size_t *count)
{
    static uint8_t bytes[ROOM];

    *count = vectors_read("stream.txt", name, bytes, sizeof bytes);
    assert_true(*count > 0);
    return bytes;
}

static const uint8_t *catalogue_vector(const char *name, size_t *count)
{
    static uint8_t bytes[ROOM];

    *count = vectors_read("catalogue.txt", name, bytes, sizeof bytes);
    assert_true(*count > 0);
    return bytes;
}

static const struct header_case { const char *name; struct firn_record record; } headers[] = {
    { "header-title-at-0-body-4096", { FIRN_RECORD_TITLE, 0, 4096 } },
    { "header-segment-at-4160-body-61", { FIRN_RECORD_SEGMENT, 4160, 61 } },
};

static void record_headers(void **state)
{
    for (size_t i = 0; i < sizeof headers / sizeof headers[0]; i++) {
        size_t count;
        const uint8_t *vector = stream_vector(headers[i].name, &count);
        uint8_t made[FIRN_RECORD_HEADER_BYTES];
        struct firn_record read;

        assert_int_equal(count, sizeof made);
        firn_record_put(&headers[i].record, made);
        assert_memory_equal(made, vector, sizeof made);
        assert_true(firn_record_get(vector, headers[i].record.at, &read));
        assert_int_equal(read.type, headers[i].record.type);
        assert_true(read.body_bytes == headers[i].record.body_bytes);
        assert_false(firn_record_get(vector, headers[i].record.at + 32, &read));
        for (size_t bit = 0; bit < 8 * sizeof made; bit++) {
            made[bit / 8] ^= (uint8_t)(1U << bit % 8);
            assert_false(firn_record_get(made, headers[i].record.at, &read));
            made[bit / 8] ^= (uint8_t)(1U << bit % 8);
        }
    }
    (void)state;
}

static void record_spans(void **state)
{
    assert_true(firn_record_span(0) == 32);
    assert_true(firn_record_span(1) == 64);
    assert_true(firn_record_span(32) == 64);
    assert_true(firn_record_span(33) == 96);
    (void)state;
}

static void segment_heads(void **state)
{
    struct firn_catalogue_place place = { .content_at = 123456, .raw_bytes = 37, .body_bytes = 71 },
                                read = { .body_bytes = 71 };
    uint8_t head[FIRN_CATALOGUE_SEGMENT_HEAD_BYTES], hash[FIRN_HASH_BYTES];
    const uint8_t *vector;
    size_t count;

    vector = stream_vector("segment-raw", &count);
    assert_int_equal(count, 37);
    firn_hash_put(vector, count, hash);
    firn_catalogue_put_segment(&place, hash, head);
    vector = stream_vector("segment-head-content-at-123456", &count);
    assert_int_equal(count, sizeof head);
    assert_memory_equal(head, vector, sizeof head);
    assert_int_equal(firn_catalogue_get_segment(head, &read), FIRN_OK);
    assert_true(read.content_at == 123456 && read.raw_bytes == 37);
    (void)state;
}

/* The three entries of catalogue.txt as items. */
static void make_items(struct firn_item items[3], struct firn_item_extent extents[3], uint8_t pax[2][512])
{
    memset(pax, 0, 2 * 512);
    memcpy(pax[1], "d/a.t", 5);
    extents[0] = (struct firn_item_extent){ 0, 37 };
    extents[1] = (struct firn_item_extent){ 0, 4096 };
    extents[2] = (struct firn_item_extent){ 995904, 4096 };
    items[0] = (struct firn_item){ .pax = pax[0], .pax_bytes = 512 };
    items[1] = (struct firn_item){
        .pax = pax[1], .pax_bytes = 512, .has_content = true, .bytes = 37, .extents = extents, .extent_count = 1
    };
    items[2] = (struct firn_item){ .pax = pax[1],
                                   .pax_bytes = 512,
                                   .has_content = true,
                                   .bytes = 1000000,
                                   .extents = extents + 1,
                                   .extent_count = 2 };
}

static void entries(void **state)
{
    static const char *const names[3] = { "entry-folder", "entry-file", "entry-holes" };
    static struct firn_item_extent read_extents[FIRN_ITEM_EXTENTS_MAX];
    struct firn_item items[3], read;
    struct firn_item_extent extents[3];
    uint8_t pax[2][512], made[ROOM];
    struct firn_catalogue_batch batch = { .items = 3, .first_item = 5, .content_at = 1000 };
    struct firn_catalogue_cursor cursor;
    size_t used = 0, count;

    make_items(items, extents, pax);
    for (size_t i = 0; i < 3; i++) {
        const uint8_t *vector = catalogue_vector(names[i], &count);

        assert_int_equal(firn_catalogue_entry_bytes(&items[i]), count);
        firn_catalogue_put_entry(&items[i], made + used);
        assert_memory_equal(made + used, vector, count);
        used += count;
    }
    batch.raw_bytes = (uint32_t)used;
    firn_catalogue_cursor_start(&batch, made, read_extents, &cursor);
    for (size_t i = 0; i < 3; i++) {
        assert_int_equal(firn_catalogue_next(&cursor, &read), FIRN_OK);
        assert_true(read.number == 5 + i && read.bytes == items[i].bytes && read.extent_count == items[i].extent_count);
        assert_true(read.content_at == (i == 2 ? 1037 : 1000));
        assert_memory_equal(read.pax, items[i].pax, 512);
    }
    assert_true(read.stored_bytes == 8192 && read.extents[1].at == 995904);
    assert_int_equal(firn_catalogue_next(&cursor, &read), FIRN_END);
    (void)state;
}

/*
 * An entry whose header lacks its digits, through a batch. The whole header is that of facts known from outside: name
 * "a", mode 0644, size 3, all else zero, has the sum 007341 (recomputed from IEEE Std 1003.1-2001, pax, by hand).
 */
static void headers_are_filled(void **state)
{
    static struct firn_item_extent read_extents[FIRN_ITEM_EXTENTS_MAX];
    uint8_t raw[ROOM], coded[ROOM + 8] = { 0 }, entry[ROOM];
    struct firn_catalogue_batch batch = { .items = 1, .coded = coded };
    struct firn_catalogue_cursor cursor;
    struct firn_item read;
    size_t count;
    const uint8_t *vector = catalogue_vector("entry-slim", &count);
    void *work = malloc(firn_segment_decode_work_bytes());

    assert_non_null(work);
    batch.raw_bytes = (uint32_t)count;
    batch.coded_bytes = 4 + 2 + count;             /* one piece, stored */
    firn_bytes_put32(coded, (uint32_t)(2 + count));
    memcpy(coded + 6, vector, count);
    assert_int_equal(firn_catalogue_decode_batch(&batch, raw, work), FIRN_OK);
    firn_catalogue_cursor_start(&batch, raw, read_extents, &cursor);
    assert_int_equal(firn_catalogue_next(&cursor, &read), FIRN_OK);
    assert_true(read.bytes == 3 && read.pax_bytes == 512);
    assert_string_equal((const char *)read.pax + 124, "00000000003");
    assert_string_equal((const char *)read.pax + 148, "007341");
    firn_catalogue_put_entry(&read, entry);        /* and out again */
    assert_memory_equal(entry, vector, count);
    free(work);
    (void)state;
}

/* Any single field of an entry made absurd: refused. Offsets as in format-spec/catalogue.md, table 2. */
static const struct { const char *what; size_t at; uint8_t byte; } absurd[] = {
    { "entry shorter than its parts", 0, 1 }, { "entry of half a gigabyte", 3, 0x20 }, { "no pax header", 5, 0 },
    { "pax header of 513 bytes", 4, 1 }, { "pax header of 16 MiB", 7, 1 }, { "an extent that is not there", 8, 1 },
    { "16 million extents", 11, 1 }, { "unknown flag", 12, 17 }, { "flag without content", 12, 2 },
    { "content without its flag", 12, 0 }, { "an exbibyte and more", 23, 0x7F }, { "hole of 2^55 bytes", 22, 0x80 },
};

static void absurd_entries_are_refused(void **state)
{
    static struct firn_item_extent read_extents[FIRN_ITEM_EXTENTS_MAX];

    for (size_t i = 0; i < sizeof absurd / sizeof absurd[0]; i++) {
        struct firn_catalogue_cursor cursor;
        struct firn_item read;
        size_t count;
        uint8_t raw[ROOM];
        struct firn_catalogue_batch batch = { .items = 1 };

        memcpy(raw, catalogue_vector("entry-file", &count), ROOM);
        batch.raw_bytes = (uint32_t)count;
        raw[absurd[i].at] = absurd[i].byte;
        if (absurd[i].at == 22)
            raw[12] = 3;      /* extents are listed, and there are none */
        firn_catalogue_cursor_start(&batch, raw, read_extents, &cursor);
        assert_int_equal(firn_catalogue_next(&cursor, &read), FIRN_BAD_DATA);
    }
    (void)state;
}

static void sums(void **state)
{
    struct firn_catalogue_sum sums[2] = { { .item = 7 }, { .item = 300 } }, read[2];
    uint8_t body[FIRN_CATALOGUE_SUMS_HEAD_BYTES + 2 * FIRN_CATALOGUE_SUM_BYTES];
    struct firn_digest *digest;
    const uint8_t *vector;
    uint32_t number;
    size_t count;

    vector = stream_vector("segment-raw", &count);
    assert_int_equal(firn_digest_make(&digest), FIRN_OK);
    for (size_t i = 0; i < 2; i++) {      /* of the 37 bytes, and of none */
        firn_digest_start(digest);
        firn_digest_add(digest, vector, i == 0 ? count : 0);
        firn_digest_finish(digest, sums[i].sha256);
    }
    firn_digest_free(digest);
    firn_catalogue_put_sums(sums, 2, body);
    vector = catalogue_vector("sums-body-items-7-and-300", &count);
    assert_int_equal(count, sizeof body);
    assert_memory_equal(body, vector, count);
    assert_int_equal(firn_catalogue_count_sums(body, sizeof body, &number), FIRN_OK);
    assert_int_equal(number, 2);
    assert_int_equal(firn_catalogue_get_sums(body, read), FIRN_OK);
    assert_true(read[0].item == 7 && read[1].item == 300);
    assert_memory_equal(read[1].sha256, sums[1].sha256, 32);
    assert_int_equal(firn_catalogue_count_sums(body, sizeof body - 1, &number), FIRN_MISMATCH);
    body[34] ^= 1;
    assert_int_equal(firn_catalogue_count_sums(body, sizeof body, &number), FIRN_MISMATCH);
    assert_int_equal(firn_catalogue_count_sums(body, 31, &number), FIRN_BAD_DATA);
    body[34] = body[35] = 0;      /* the same item twice */
    assert_int_equal(firn_catalogue_get_sums(body, read), FIRN_BAD_DATA);
    (void)state;
}

static void index_parts(void **state)
{
    struct firn_catalogue_index index = {
        .part = 3, .at = 4128, .end = 4320, .segments = 1, .sums_at = 4256, .sums_bytes = 100
    }, read;
    struct firn_catalogue_place place = { .content_at = 123456, .at = 4160, .raw_bytes = 37, .body_bytes = 61 }, told;
    uint8_t place_bytes[FIRN_CATALOGUE_PLACE_BYTES], body[ROOM];
    const uint8_t *vector;
    size_t count;

    vector = catalogue_vector("sums-body-items-7-and-300", &count);
    memcpy(index.sums_seal, vector, sizeof index.sums_seal);
    firn_catalogue_put_place(&place, place_bytes);
    vector = catalogue_vector("place", &count);
    assert_int_equal(count, sizeof place_bytes);
    assert_memory_equal(place_bytes, vector, count);
    index.place_bytes = place_bytes;
    firn_catalogue_put_index(&index, body);
    vector = catalogue_vector("index-body-part-3", &count);
    assert_int_equal(firn_catalogue_index_bytes(&index), count);
    assert_memory_equal(body, vector, count);
    assert_int_equal(firn_catalogue_open_index(body, count, &read), FIRN_OK);
    assert_true(read.part == 3 && read.at == 4128 && read.end == 4320 && read.segments == 1 && read.sums_at == 4256);
    assert_int_equal(firn_catalogue_get_place(read.place_bytes, &told), FIRN_OK);
    assert_true(told.at == 4160 && told.raw_bytes == 37);
    assert_int_equal(firn_catalogue_open_index(body, count - 1, &read), FIRN_MISMATCH);
    (void)state;
}

/* FIPS 180-2, appendix B.1 and B.3 (from memory; recomputed with coreutils): "abc", and a million times "a" */
static void digests(void **state)
{
    static const uint8_t abc[32] = {
        0xba, 0x78, 0x16, 0xbf, 0x8f, 0x01, 0xcf, 0xea, 0x41, 0x41, 0x40, 0xde, 0x5d, 0xae, 0x22, 0x23,
        0xb0, 0x03, 0x61, 0xa3, 0x96, 0x17, 0x7a, 0x9c, 0xb4, 0x10, 0xff, 0x61, 0xf2, 0x00, 0x15, 0xad
    };
    static const uint8_t million[32] = {
        0xcd, 0xc7, 0x6e, 0x5c, 0x99, 0x14, 0xfb, 0x92, 0x81, 0xa1, 0xc7, 0xe2, 0x84, 0xd7, 0x3e, 0x67,
        0xf1, 0x80, 0x9a, 0x48, 0xa4, 0x97, 0x20, 0x0e, 0x04, 0x6d, 0x39, 0xcc, 0xc7, 0x11, 0x2c, 0xd0
    };
    struct firn_digest *digest;
    uint8_t found[32], zeros_one[32], zeros_two[32];
    static uint8_t zeros[200000];

    assert_int_equal(firn_digest_make(&digest), FIRN_OK);
    firn_digest_start(digest);
    firn_digest_add(digest, (const uint8_t *)"abc", 3);
    firn_digest_finish(digest, found);
    assert_memory_equal(found, abc, 32);
    firn_digest_start(digest);
    for (int i = 0; i < 100000; i++)
        firn_digest_add(digest, (const uint8_t *)"aaaaaaaaaa", 10);
    firn_digest_finish(digest, found);
    assert_memory_equal(found, million, 32);
    firn_digest_start(digest);
    firn_digest_add(digest, zeros, sizeof zeros);
    firn_digest_finish(digest, zeros_one);
    firn_digest_start(digest);
    firn_digest_add_zeros(digest, sizeof zeros);
    firn_digest_finish(digest, zeros_two);
    assert_memory_equal(zeros_one, zeros_two, 32);
    firn_digest_free(digest);
    (void)state;
}

static void title_pages(void **state)
{
    const struct firn_sheet_geometry geometry = { .k = 224, .m = 32, .depth = 128 };
    struct firn_writer_title title = {
        .accession = "MQ 1931/7",
        .title = "Ledgers of Marrow Quay, with the letters of the harbour master and all that was "
                 "found in the loft of the old customs house",
        .date = 0
    };
    const struct firn_title_texts texts = { 100000, 70000 };
    uint8_t page[FIRN_TITLE_PAGE_BYTES + 1] = { 0 };
    const char *wrong;
    size_t columns = 0;

    assert_int_equal(firn_title_write(&title, &geometry, NULL, page, &wrong), FIRN_OK);
    assert_true(firn_title_looks_right(page));
    for (size_t i = 0; i < FIRN_TITLE_PAGE_BYTES; i++) {
        columns = page[i] == '\n' ? 0 : columns + 1;
        assert_true(columns <= 80);
        assert_true(page[i] == '\n' || (page[i] >= 0x20 && page[i] < 0x7F));
    }
    assert_non_null(strstr((char *)page, "\n  accession   MQ 1931/7\n"));
    assert_non_null(strstr((char *)page, "\n  packed on   1970-01-01T00:00:00Z\n"));
    assert_non_null(strstr((char *)page, "k = 224 data and m = 32 reserve"));
    title.custodian = title.note = title.title;
    assert_int_equal(firn_title_write(&title, &geometry, &texts, page, &wrong), FIRN_OK);
    for (size_t i = 0; i < FIRN_TITLE_PAGE_BYTES; i++) {
        columns = page[i] == '\n' ? 0 : columns + 1;
        assert_true(columns <= 80);
    }
    /* the body of SPEC begins at 4128 + 32; 100 000 bytes of it and READER's header end at 104 192, 3256 times 32 */
    assert_non_null(strstr((char *)page, "skip=130 | head -c 100000 >specification.txt\n"));
    assert_non_null(strstr((char *)page, "skip=3256 | head -c 70000 >reader.c\n"));
    assert_non_null(strstr((char *)page, "while [ $n -lt 44 ]"));       /* (104 192 + 70 000) / 3968, rounded up */
    title.note = "bell \a";
    assert_int_equal(firn_title_write(&title, &geometry, NULL, page, &wrong), FIRN_BAD_ARGUMENT);
    assert_string_equal(wrong, "note");
    title.note = "no utf-8 \xE9";
    assert_int_equal(firn_title_write(&title, &geometry, NULL, page, &wrong), FIRN_BAD_ARGUMENT);
    (void)state;
}

/* What was written on a page comes back, long values put together again; nothing is found where nothing was given. */
static void title_values(void **state)
{
    const struct firn_sheet_geometry geometry = { .k = 224, .m = 32, .depth = 128 };
    char longest[513] = "";
    struct firn_writer_title title = {
        .accession = "MQ 1931/7",
        .title = "Ledgers of Marrow Quay, with the letters of the harbour master, \xC3\xA9t\xC3\xA9 1931, and all that "
                 "was found in the loft  of the old customs house",
        .note = longest, .date = 86400
    };
    uint8_t page[FIRN_TITLE_PAGE_BYTES];
    char value[FIRN_TITLE_VALUE_ROOM];
    const char *wrong;

    for (size_t i = 0; i < 512; i++)
        longest[i] = i % 80 == 7 ? ' ' : (char)('a' + i % 26);
    assert_int_equal(firn_title_write(&title, &geometry, NULL, page, &wrong), FIRN_OK);
    assert_int_equal(firn_title_value_read(page, "accession", value), FIRN_OK);
    assert_string_equal(value, title.accession);
    assert_int_equal(firn_title_value_read(page, "title", value), FIRN_OK);
    assert_string_equal(value, title.title);
    assert_int_equal(firn_title_value_read(page, "note", value), FIRN_OK);
    assert_string_equal(value, longest);
    assert_int_equal(firn_title_value_read(page, "packed on", value), FIRN_OK);
    assert_string_equal(value, "1970-01-02T00:00:00Z");
    assert_int_equal(firn_title_value_read(page, "custodian", value), FIRN_END);
    assert_string_equal(value, "");
    assert_int_equal(firn_title_value_read(page, "pack", value), FIRN_END);
    (void)state;
}

/* A page as a broken medium gives it: no value runs away, and none carries a control character out. */
static void title_values_of_broken_pages(void **state)
{
    uint8_t page[FIRN_TITLE_PAGE_BYTES];
    char value[FIRN_TITLE_VALUE_ROOM];

    memset(page, 'x', sizeof page);
    assert_int_equal(firn_title_value_read(page, "title", value), FIRN_END);
    memset(page, ' ', sizeof page);
    assert_int_equal(firn_title_value_read(page, "title", value), FIRN_END);
    for (size_t i = 0; i + 80 <= sizeof page; i += 80)
        memcpy(page + i, i == 0 ? "\n  title       \x1B[2J\xFF" : "\n              more", 20);
    page[sizeof page - 1] = '\n';
    assert_int_equal(firn_title_value_read(page, "title", value), FIRN_NO_ROOM);
    assert_memory_equal(value, "?[2J?", 5);
    assert_int_equal(strlen(value), FIRN_TITLE_VALUE_ROOM - 1);
    memcpy(page, "HOW IT IS LAID OUT\n", 19);
    assert_int_equal(firn_title_value_read(page, "title", value), FIRN_END);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(record_headers), cmocka_unit_test(record_spans), cmocka_unit_test(segment_heads),
        cmocka_unit_test(entries), cmocka_unit_test(headers_are_filled),
        cmocka_unit_test(absurd_entries_are_refused), cmocka_unit_test(sums),
        cmocka_unit_test(index_parts), cmocka_unit_test(digests), cmocka_unit_test(title_pages),
        cmocka_unit_test(title_values), cmocka_unit_test(title_values_of_broken_pages),
    };

    return cmocka_run_group_tests_name("formats", tests, NULL, NULL);
}
