/*
 * tests/spec/test_pages.c - what the specification prints, read from its pages, against the library and the carried
 * reader
 *
 * Every number here comes out of format-spec/: the pages are the source, and both programs answer to them.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "carried.h"

#include "firn/block.h"
#include "firn/memory.h"
#include "firn/reserve.h"
#include "firn/segment.h"
#include "pages.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>

#include <cmocka.h>

static char *page(const char *name)
{
    char *text = pages_read(name);

    assert_non_null(text);
    return text;
}

static bool library_decodes(const byte *coded, size_t coded_bytes, byte *raw, size_t raw_bytes)
{
    void *work = aligned_alloc(64, (firn_segment_decode_work_bytes() + 63) / 64 * 64);
    enum firn_status status;

    assert_non_null(work);
    status = firn_segment_decode(coded, coded_bytes, raw, raw_bytes, work);
    free(work);
    return status == FIRN_OK;
}

/* hash.md: every length of vectors/hash.txt */
static void hashes(void **state)
{
    char *text = page("vectors/hash.txt");
    unsigned seen = 0;

    (void)state;
    for (const char *line = text; *line != '\0'; line = strchr(line, '\n') + 1) {
        byte input[8192], hash[16];
        unsigned length;

        if (sscanf(line, "length %u:", &length) != 1)
            continue;
        assert_true(length <= sizeof input);
        assert_int_equal(pages_hex(strchr(line, ':') + 1, hash, sizeof hash), 16);
        for (unsigned i = 0; i < length; i++)
            input[i] = (byte)(i * 7);
        assert_true(hash_is(hash, input, length));
        hash[length % 16] ^= 1;
        assert_false(hash_is(hash, input, length));
        seen++;
    }
    assert_true(seen >= 20);
    free(text);
}

/* hash.md, section 1: the 192 bytes of the secret as printed */
static void secret(void **state)
{
    char *text = page("hash.md");
    byte bytes[32];

    (void)state;
    for (unsigned at = 0; at < 192; at += 32) {
        char label[8];

        snprintf(label, sizeof label, "%3u  ", at);
        assert_int_equal(pages_labelled(text, label, bytes, sizeof bytes), 32);
        assert_memory_equal(bytes, S + at, 32);
    }
    free(text);
}

/* FIPS 180-4's function: the examples "abc" and 448 bits of NIST's SHA256.pdf, and the empty message; from memory */
static void digests(void **state)
{
    static const struct { const char *message, *digest; } cases[] = {
        { "abc", "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad" },
        { "abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq",
          "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1" },
        { "", "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855" }
    };

    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        byte digest[32], expected[32];
        struct sha sha = sha_empty;

        sha_add(&sha, (const byte *)cases[i].message, strlen(cases[i].message));
        sha_end(&sha, digest);
        assert_int_equal(pages_hex(cases[i].digest, expected, 32), 32);
        assert_memory_equal(digest, expected, 32);
    }
}

/* block.md, section 6: the block as printed, put together, is sound, and both programs mend each flipped word of it */
static void block_of_the_page(void **state)
{
    char *text = page("block.md"), *example = strstr(text, "## 6. ");
    byte block[BLOCK], copy[BLOCK];
    struct firn_block_tag found;
    struct tag tag;

    (void)state;
    assert_non_null(example);
    for (unsigned i = 0; i < PAYLOAD; i++)
        block[i] = (byte)(i * 7);
    assert_int_equal(pages_labelled(example, "tag  ", block + 3968, 16), 16);
    assert_int_equal(pages_labelled(strstr(example, "\ntag  ") + 1, "     ", block + 3984, 16), 16);
    assert_int_equal(pages_labelled(example, "hash  ", block + 4000, 16), 16);
    for (unsigned j = 0; j < 9; j++) {
        char label[20];

        snprintf(label, sizeof label, "guard word %u", j);
        assert_int_equal(pages_labelled(example, label, block + 4016 + 8 * j, 8), 8);
    }
    assert_int_equal(pages_labelled(example, "overall", block + 4088, 8), 8);

    memcpy(copy, block, BLOCK);
    assert_int_equal(firn_block_open(copy, true, &found), FIRN_BLOCK_SOUND);
    assert_true(hash_is(block + HASH, block, HASHED));
    assert_false(mend_lanes(copy));
    assert_memory_equal(copy, block, BLOCK);
    assert_true(read_tag(block, &tag));
    assert_int_equal(tag.number, 62000);
    assert_int_equal(tag.full.k, 224);
    assert_int_equal(tag.t, 28672);
    for (unsigned word = 0; word < 512; word++) {
        copy[8 * word + word % 8] ^= (byte)(1U << word % 7);
        assert_true(mend_lanes(copy));
        assert_memory_equal(copy, block, BLOCK);
    }
    free(text);
}

/* sheet.md, section 2: each row of the table of shapes */
static void shapes(void **state)
{
    char *text = page("sheet.md");
    unsigned seen = 0;

    (void)state;
    for (const char *line = text; *line != '\0'; line = strchr(line, '\n') + 1) {
        long n[9];
        struct firn_sheet_geometry geometry;
        struct firn_sheet_shape shape;

        if (pages_row(line, n, 9) != 8 || n[0] < 1 || n[7] < 0)
            continue;
        geometry = (struct firn_sheet_geometry){ (uint8_t)n[0], (uint8_t)n[1], (uint16_t)n[2] };
        assert_int_equal(firn_sheet_shape_of(&geometry, (uint32_t)n[3], &shape), FIRN_OK);
        assert_int_equal(shape.k, n[4]);
        assert_int_equal(shape.m, n[5]);
        assert_int_equal(shape.rows, n[6]);
        assert_int_equal(shape.reserve_blocks, n[7]);
        struct shape own = { (unsigned)n[0], (unsigned)n[1], (unsigned)n[2] };
        own = shape_of(own, (uint64_t)n[3]);
        assert_int_equal(own.k, n[4]);
        assert_int_equal(own.m, n[5]);
        assert_int_equal(own.depth, n[6]);
        seen++;
    }
    assert_true(seen >= 15);
    free(text);
}

/* A row of the vectors: every set of m lost blocks that begins at `from` comes back, by Lagrange's formula */
static void check_row(byte rows[][8], unsigned k, unsigned m, size_t bytes)
{
    for (unsigned from = 0; from + m <= k + m; from++) {
        byte *there[256] = { NULL }, lost[256], payload[8];

        for (unsigned point = 0; point < k + m; point++)
            if (point < from || point >= from + m)
                there[point] = rows[point];
        for (unsigned i = 0; i < m; i++)
            lost[i] = (byte)(from + i);
        for (unsigned i = 0; i < m; i++) {
            row_value(there, lost, m, lost[i], payload, bytes);
            assert_memory_equal(payload, rows[lost[i]], bytes);
        }
    }
}

static void rows_of_the_vectors(void **state)
{
    char *text = page("vectors/sheet.txt");
    static const struct { unsigned k, m; size_t bytes; } cases[] = { { 3, 4, 4 }, { 12, 8, 6 } };

    (void)state;
    for (size_t c = 0; c < 2; c++) {
        byte rows[32][8];
        uint8_t *reserve[8], made[8][8];
        const uint8_t *data[12];
        void *work = aligned_alloc(64, (firn_reserve_work_bytes() + 63) / 64 * 64);

        for (unsigned i = 0; i < cases[c].k; i++)
            for (unsigned b = 0; b < cases[c].bytes; b++)
                rows[cases[c].m + i][b] = (byte)(17 * i + 5 * b + 1);
        for (unsigned i = 0; i < cases[c].k + cases[c].m; i++) {
            char label[40];
            bool is_data = i >= cases[c].m;

            snprintf(label, sizeof label, "row %u+%u %s %u:", cases[c].k, cases[c].m, is_data ? "data" : "reserve",
                     is_data ? i - cases[c].m : i);
            if (!is_data || c == 0)
                assert_int_equal(pages_labelled(text, label, rows[i], 8), cases[c].bytes);
        }
        check_row(rows, cases[c].k, cases[c].m, cases[c].bytes);
        for (unsigned i = 0; i < cases[c].k; i++)
            data[i] = rows[cases[c].m + i];
        for (unsigned j = 0; j < cases[c].m; j++)
            reserve[j] = made[j];
        assert_int_equal(firn_reserve_encode(cases[c].k, cases[c].m, data, reserve, cases[c].bytes, work), FIRN_OK);
        for (unsigned j = 0; j < cases[c].m; j++)
            assert_memory_equal(made[j], rows[j], cases[c].bytes);
        free(work);
    }
    free(text);
}

/* sheet.md, section 5: the row as printed, and the products of the table add up */
static void row_of_the_page(void **state)
{
    char *text = page("sheet.md"), *example = strstr(text, "## 5. ");
    byte rows[7][8];

    (void)state;
    assert_non_null(example);
    for (unsigned i = 0; i < 7; i++) {
        char label[20];
        const char *at;

        snprintf(label, sizeof label, i < 4 ? "reserve %u  " : "data %u  ", i < 4 ? i : i - 4);
        at = strstr(example, label);
        assert_non_null(at);
        assert_true(pages_hex(at + strlen(label), rows[i], 4) >= 4);
    }
    check_row(rows, 3, 4, 4);
    assert_int_equal(gf_times(0x80, 2), 0x1D);
    assert_int_equal(gf_times(0x53, 0xCA), 0x8F);
    free(text);
}

/* stream.md: the headers of vectors/stream.txt name their own place and satisfy their hash */
static void record_headers(void **state)
{
    char *text = page("vectors/stream.txt");
    byte header[32], raw[100], head[32];

    (void)state;
    assert_int_equal(pages_labelled(text, "header-segment-at-4160-body-61:", header, 32), 32);
    assert_memory_equal(header, "FREC", 4);
    assert_int_equal(get(header + 4, 2), SEGMENT);
    assert_int_equal(get(header + 8, 8), 61);
    assert_int_equal(get(header + 16, 8), 4160);
    assert_true(get(header + 24, 8) == hash_of(header, 24).low);
    size_t count = pages_labelled(text, "segment-raw:", raw, sizeof raw);
    assert_int_equal(pages_labelled(text, "segment-head-content-at-123456:", head, 32), 32);
    assert_int_equal(get(head, 4), count);
    assert_true(hash_is(head + 16, raw, count));
    free(text);
}

/* catalogue.md: entries, sums and index of vectors/catalogue.txt as the carried reader takes them */
static void catalogue(void **state)
{
    static const struct { const char *label; uint64_t size, stored; unsigned extents; } cases[] = {
        { "entry-folder:", 0, 0, 0 },
        { "entry-file:", 37, 37, 1 },
        { "entry-holes:", 1000000, 8192, 2 },
        { "entry-slim:", 3, 3, 1 }
    };
    char *text = page("vectors/catalogue.txt");
    byte bytes[2048], index[2048];

    (void)state;
    for (size_t i = 0; i < 4; i++) {
        size_t count = pages_labelled(text, cases[i].label, bytes, sizeof bytes);
        struct item item = { 0 };

        assert_true(count > 512);
        assert_int_equal(read_entry(bytes, count, &item), count);
        assert_int_equal(item.has_content, i > 0);
        assert_int_equal(item.size, cases[i].size);
        assert_int_equal(item.stored, cases[i].stored);
        assert_int_equal(item.extent_count, cases[i].extents);
        assert_int_equal(read_entry(bytes, count - 1, &item), 0);
    }
    size_t sums = pages_labelled(text, "sums-body-items-7-and-300:", bytes, sizeof bytes);
    size_t body = pages_labelled(text, "index-body-part-3:", index, sizeof index);
    assert_int_equal(sums, 32 + 2 * 34);
    assert_true(hash_is(bytes, bytes + 16, sums - 16));
    assert_true(hash_is(index, index + 16, body - 16));
    assert_memory_equal(index + 64, bytes, 16);
    free(text);
}

/* segment.md: every line of vectors/segment.txt; a "bad" one must be refused by both */
static void segments(void **state)
{
    char *text = page("vectors/segment.txt");
    static byte raw[1 << 17], coded[1 << 17], got[1 << 17];
    size_t raw_bytes = 0;
    unsigned good = 0, bad = 0;

    (void)state;
    for (const char *line = text; *line != '\0'; line = strchr(line, '\n') + 1) {
        const char *kind = strchr(line, '.'), *colon = strchr(line, ':');
        size_t count;
        bool wanted;

        if (*line == '#' || kind == NULL || colon == NULL || colon > strchr(line, '\n'))
            continue;
        count = pages_hex(colon + 1, coded, sizeof coded);
        if (strncmp(kind, ".raw:", 5) == 0) {
            memcpy(raw, coded, raw_bytes = count);
            continue;
        }
        wanted = strncmp(kind, ".bad:", 5) != 0;
        for (int library = 0; library < 2; library++) {
            bool decoded = (library ? library_decodes : decode_segment)(coded, count, got, raw_bytes);

            if (decoded != wanted)
                print_message("%.*s\n", (int)(colon - line), line);
            assert_int_equal(decoded, wanted);
            if (wanted)
                assert_memory_equal(got, raw, raw_bytes);
        }
        good += wanted;
        bad += !wanted;
    }
    assert_true(good >= 8);
    assert_true(bad >= 20);
    free(text);
}

/* segment.md, "Small examples": each row of the table */
static void small_examples(void **state)
{
    char *text = page("segment.md"), *line = strstr(text, "\n## Small examples\n");
    unsigned seen = 0;

    (void)state;
    assert_non_null(line);
    line = strstr(line, "\n| stored |");
    assert_non_null(line);
    for (line++; *line == '|'; line = strchr(line, '\n') + 1) {
        byte raw[16], coded[64], got[16];
        char *first = strchr(line, '`'), *second = strchr(strchr(first + 1, '`') + 1, '`');
        size_t raw_bytes = pages_hex(first + 1, raw, sizeof raw);
        size_t coded_bytes = pages_hex(second + 1, coded, sizeof coded);

        for (int library = 0; library < 2; library++) {
            memset(got, 0, sizeof got);
            assert_true((library ? library_decodes : decode_segment)(coded, coded_bytes, got, raw_bytes));
            assert_memory_equal(got, raw, raw_bytes);
            assert_false((library ? library_decodes : decode_segment)(coded, coded_bytes - 1, got, raw_bytes));
        }
        seen++;
    }
    assert_int_equal(seen, 4);
    free(text);
}

/* segment.md, "An example of stretches": the bytes as printed */
static void segment_of_the_page(void **state)
{
    char *text = page("segment.md"), *example = strstr(text, "## An example of stretches");
    byte coded[100], raw[60];

    (void)state;
    assert_non_null(example);
    example = strstr(example, "```\n");
    assert_int_equal(pages_hex(example + 4, coded, sizeof coded), 32);
    for (int library = 0; library < 2; library++) {
        memset(raw, 0, sizeof raw);
        assert_true((library ? library_decodes : decode_segment)(coded, 32, raw, sizeof raw));
        for (unsigned i = 0; i < 5; i++)
            assert_memory_equal(raw + 12 * i, "abracadabra ", 12);
    }
    free(text);
}

/* segment.md, Matched: the tables of bases and extra bits, column by column */
static void tables_of_the_page(void **state)
{
    char *text = page("segment.md");
    const char *run = strstr(text, "\n| run code |"), *length = strstr(text, "\n| length code |");
    unsigned checked = 0;

    (void)state;
    for (int which = 0; which < 2; which++) {
        const char *line = (which == 0 ? run : length) + 1;
        long code[40], base[40], extra[40];
        size_t columns = pages_row(line, code, 40);

        line = strchr(strchr(line, '\n') + 1, '\n') + 1;
        assert_int_equal(pages_row(line, base, 40), columns);
        assert_int_equal(pages_row(strchr(line, '\n') + 1, extra, 40), columns);
        for (size_t i = 1; i < columns; i++) {
            long last = i + 1 < columns ? code[i + 1] : which == 0 ? 16 : 32;

            for (long c = code[i]; c < last; c++, checked++) {
                const byte zeros[4] = { 0 }, *own = which == 0 ? run_extra : copy_extra;
                struct bits b = { zeros, sizeof zeros, 0, false };

                assert_int_equal(value_of_code(&b, own, (unsigned)c, which == 0 ? 0 : 2), base[i] + (c - code[i]));
                assert_int_equal(b.at, extra[i]);
                assert_int_equal(own[c], extra[i]);
            }
        }
    }
    assert_int_equal(checked, 48);
    free(text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(hashes), cmocka_unit_test(secret), cmocka_unit_test(digests),
        cmocka_unit_test(block_of_the_page), cmocka_unit_test(shapes), cmocka_unit_test(rows_of_the_vectors),
        cmocka_unit_test(row_of_the_page), cmocka_unit_test(record_headers), cmocka_unit_test(catalogue),
        cmocka_unit_test(segments), cmocka_unit_test(small_examples),
        cmocka_unit_test(segment_of_the_page), cmocka_unit_test(tables_of_the_page),
    };

    return cmocka_run_group_tests_name("the specification", tests, NULL, NULL);
}
