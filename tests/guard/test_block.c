/*
 * tests/guard/test_block.c - a block is sealed as the specification prints it, mends what it promises, and is never
 * taken for good when it is not
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/block.h"

#include "base/bytes.h"
#include "guard/hash.h"
#include "random.h"
#include "vectors.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

static const struct firn_block_tag usual_tag = {
    .version = 1, .kind = FIRN_BLOCK_DATA, .geometry = { 224, 32, 128 }, .id = { 1, 2, 3, 4, 5, 6, 7, 8 },
    .number = 70000, .data_blocks = 28672,
};

static void flip(uint8_t *block, unsigned bit)
{
    block[bit / 8] ^= (uint8_t)(1U << bit % 8);
}

static void assert_same_tag(const struct firn_block_tag *a, const struct firn_block_tag *b)
{
    assert_int_equal(a->version, b->version);
    assert_int_equal(a->kind, b->kind);
    assert_int_equal(a->geometry.k, b->geometry.k);
    assert_int_equal(a->geometry.m, b->geometry.m);
    assert_int_equal(a->geometry.depth, b->geometry.depth);
    assert_memory_equal(a->id, b->id, FIRN_BLOCK_ID_BYTES);
    assert_true(a->number == b->number);
    assert_int_equal(a->data_blocks, b->data_blocks);
}

static void make_block(struct random *random, uint8_t *block)
{
    random_fill(random, block, FIRN_BLOCK_BYTES);
    firn_block_seal(block, &usual_tag);
}

/*
 * The block that format-spec/block.md works through; its tag is in the vectors file, made by another program, in
 * Python.
 */
static void seals_as_the_specification_prints(void **state)
{
    const struct firn_block_tag tag = {
        .version = 1, .kind = FIRN_BLOCK_RESERVE, .geometry = { 224, 32, 128 },
        .id = { 0x10, 0x32, 0x54, 0x76, 0x98, 0xBA, 0xDC, 0xFE }, .number = 62000, .data_blocks = 28672,
    };
    uint8_t block[FIRN_BLOCK_BYTES], expected[80];
    struct firn_block_tag found;

    (void)state;
    for (unsigned i = 0; i < FIRN_BLOCK_PAYLOAD_BYTES; i++)
        block[i] = (uint8_t)(i * 7);
    firn_block_seal(block, &tag);
    assert_int_equal(vectors_read("block.txt", "tag", expected, sizeof expected), 32);
    assert_memory_equal(block + 3968, expected, 32);
    assert_int_equal(vectors_read("block.txt", "hash", expected, sizeof expected), 16);
    assert_memory_equal(block + 4000, expected, 16);
    assert_int_equal(vectors_read("block.txt", "guard words", expected, sizeof expected), 80);
    assert_memory_equal(block + 4016, expected, 80);
    assert_int_equal(firn_block_open(block, true, &found), FIRN_BLOCK_SOUND);
    assert_same_tag(&found, &tag);
}

/* Any one flip; in the guard words it goes unnoticed unless they are asked for. */
static void every_single_flip_is_mended(void **state)
{
    struct random random = random_start("block flips");
    uint8_t block[FIRN_BLOCK_BYTES], copy[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag;

    (void)state;
    make_block(&random, block);
    memcpy(copy, block, sizeof copy);
    for (unsigned bit = 0; bit < 8 * FIRN_BLOCK_BYTES; bit++) {
        const bool guarded = bit < 64 * FIRN_LANES_DATA_WORDS;

        flip(copy, bit);
        if (!guarded) {
            assert_int_equal(firn_block_open(copy, false, &tag), FIRN_BLOCK_SOUND);
            assert_memory_not_equal(copy, block, sizeof copy);
        }
        assert_int_equal(firn_block_open(copy, !guarded, &tag), FIRN_BLOCK_MENDED);
        assert_memory_equal(copy, block, sizeof copy);
    }
    assert_same_tag(&tag, &usual_tag);
}

/* Guard words are made anew from what the hash vouches for, however many of their bits are wrong. */
static void ruined_guard_words_are_made_anew(void **state)
{
    struct random random = random_start("guard words");
    uint8_t block[FIRN_BLOCK_BYTES], copy[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag;

    (void)state;
    make_block(&random, block);
    memcpy(copy, block, sizeof copy);
    random_fill(&random, copy + 8 * FIRN_LANES_DATA_WORDS, 80);
    assert_int_equal(firn_block_open(copy, true, &tag), FIRN_BLOCK_MENDED);
    assert_memory_equal(copy, block, sizeof copy);
    flip(copy, 64 * 100 + 9);               /* one flip in a lane of its own is mended, */
    flip(copy, 64 * 503 + 10);              /* and two flips in another lane hurt guard words only */
    flip(copy, 64 * 507 + 10);
    assert_int_equal(firn_block_open(copy, false, &tag), FIRN_BLOCK_MENDED);
    assert_memory_equal(copy, block, sizeof copy);
}

/* The lanes take three flips in a lane for one, and "mend" a fourth bit: the hash sees it, and nothing is changed. */
static void three_flips_are_miscorrected_but_caught(void **state)
{
    struct random random = random_start("three flips");
    uint8_t block[FIRN_BLOCK_BYTES], hurt[FIRN_BLOCK_BYTES], copy[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;
    struct firn_block_tag tag;

    (void)state;
    make_block(&random, block);
    for (unsigned round = 0; round < 3000; round++) {
        unsigned words[3], lane = random_below(&random, FIRN_LANES);

        memcpy(hurt, block, sizeof hurt);
        random_choose(&random, FIRN_BLOCK_WORDS, 3, words);
        for (unsigned i = 0; i < 3; i++)
            flip(hurt, 64 * words[i] + lane);
        memcpy(copy, hurt, sizeof copy);
        assert_int_equal(firn_lanes_mend(copy, &report), FIRN_OK);
        assert_int_equal(report.mended, 1);
        assert_true(firn_lanes_check(copy));
        assert_memory_not_equal(copy, block, sizeof copy);
        if (words[0] >= FIRN_LANES_DATA_WORDS)
            continue;                       /* guard words only: the hash is right as it stands */
        memcpy(copy, hurt, sizeof copy);
        if (firn_block_open(copy, true, &tag) == FIRN_BLOCK_MENDED) {
            assert_memory_equal(copy, block, sizeof copy);      /* two of the three were guard words, luckily */
            assert_true(words[1] >= FIRN_LANES_DATA_WORDS);
        } else {
            assert_memory_equal(copy, hurt, sizeof copy);
        }
    }
}

/* Random bytes, zeros, and blocks with a torn half are gone, and are left alone. */
static void rubbish_is_gone(void **state)
{
    struct random random = random_start("rubbish");
    uint8_t block[FIRN_BLOCK_BYTES], copy[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag;

    (void)state;
    for (unsigned round = 0; round < 300; round++) {
        make_block(&random, block);
        switch (round % 3) {
        case 0: random_fill(&random, block, sizeof block); break;
        case 1: memset(block, round % 2 == 0 ? 0 : 0xFF, sizeof block); break;
        case 2: memset(block + 512 * (round % 7), 0, 512); break;
        }
        memcpy(copy, block, sizeof copy);
        assert_int_equal(firn_block_open(copy, round % 2 == 0, &tag), FIRN_BLOCK_GONE);
        assert_memory_equal(copy, block, sizeof copy);
    }
}

/* A tag changed at one place, with hash and guard words to match. Offsets: format-spec/block.md, table 2. */
static const struct tag_case {
    const char *name;
    unsigned at, bytes;
    uint64_t value;
    enum firn_block_state state;
} tag_cases[] = {
    { "as it was", 5, 1, 1, FIRN_BLOCK_SOUND },
    { "no magic", 0, 4, 0, FIRN_BLOCK_FOREIGN },
    { "version 0", 4, 1, 0, FIRN_BLOCK_FOREIGN },
    { "version 2", 4, 1, 2, FIRN_BLOCK_FOREIGN },
    { "kind 0", 5, 1, 0, FIRN_BLOCK_FOREIGN },
    { "kind reserve on a data block", 5, 1, 2, FIRN_BLOCK_FOREIGN },
    { "kind 3", 5, 1, 3, FIRN_BLOCK_FOREIGN },
    { "k 0", 6, 1, 0, FIRN_BLOCK_FOREIGN },
    { "k + m above 256", 6, 1, 225, FIRN_BLOCK_FOREIGN },
    { "m no power of two", 7, 1, 31, FIRN_BLOCK_FOREIGN },
    { "m 2", 7, 1, 2, FIRN_BLOCK_FOREIGN },
    { "another id", 8, 8, UINT64_MAX, FIRN_BLOCK_SOUND },
    { "number of a data block", 16, 8, 65536 + 28671, FIRN_BLOCK_SOUND },
    { "number of a reserve block", 16, 8, 65536 + 28672, FIRN_BLOCK_FOREIGN },
    { "the last number", 16, 8, UINT64_MAX - 65535, FIRN_BLOCK_SOUND },
    { "t 0", 24, 4, 0, FIRN_BLOCK_FOREIGN },
    { "t below the block's index", 24, 4, 4464, FIRN_BLOCK_FOREIGN },
    { "t just above the block's index", 24, 4, 4465, FIRN_BLOCK_SOUND },
    { "t more than k * depth", 24, 4, 28673, FIRN_BLOCK_FOREIGN },
    { "t absurd", 24, 4, UINT32_MAX, FIRN_BLOCK_FOREIGN },
    { "depth 0", 28, 2, 0, FIRN_BLOCK_FOREIGN },
    { "depth 257", 28, 2, 257, FIRN_BLOCK_FOREIGN },
    { "depth absurd", 28, 2, 65535, FIRN_BLOCK_FOREIGN },
    { "not zero", 30, 2, 1, FIRN_BLOCK_FOREIGN },
};
enum { TAG_CASES = sizeof tag_cases / sizeof tag_cases[0] };

static void judges_a_tag(void **state)
{
    const struct tag_case *c = *state;
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 }, copy[FIRN_BLOCK_BYTES], value[8];
    struct firn_block_tag tag;

    firn_block_seal(block, &usual_tag);
    firn_bytes_put64(value, c->value);
    memcpy(block + FIRN_BLOCK_TAG_AT + c->at, value, c->bytes);
    firn_hash_put(block, FIRN_BLOCK_HASH_AT, block + FIRN_BLOCK_HASH_AT);
    firn_lanes_guard(block);
    memcpy(copy, block, sizeof copy);
    assert_int_equal(firn_block_open(copy, true, &tag), c->state);
    assert_int_equal(tag.version, block[FIRN_BLOCK_TAG_AT + 4]);
    flip(copy, 12345);                     /* and the same when it must be mended first */
    assert_int_equal(firn_block_open(copy, true, &tag), c->state == FIRN_BLOCK_SOUND ? FIRN_BLOCK_MENDED : c->state);
    flip(block, 12345);
    assert_true((memcmp(copy, block, sizeof copy) == 0) == (c->state == FIRN_BLOCK_FOREIGN));
}

/*
 * The last reserve block of a short sheet is the last block there is: 1000 data blocks have 160 (format-spec/sheet.md).
 */
static void a_short_sheet_ends_where_its_reserve_ends(void **state)
{
    struct firn_block_tag tag = usual_tag, found;
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 };

    (void)state;
    tag.kind = FIRN_BLOCK_RESERVE;
    tag.data_blocks = 1000;
    tag.number = 2 * 32768 + 1159;
    firn_block_seal(block, &tag);
    assert_int_equal(firn_block_open(block, true, &found), FIRN_BLOCK_SOUND);
    tag.number++;
    firn_block_seal(block, &tag);
    assert_int_equal(firn_block_open(block, true, &found), FIRN_BLOCK_FOREIGN);
}

int main(void)
{
    const struct CMUnitTest others[] = {
        cmocka_unit_test(seals_as_the_specification_prints),
        cmocka_unit_test(every_single_flip_is_mended),
        cmocka_unit_test(ruined_guard_words_are_made_anew),
        cmocka_unit_test(three_flips_are_miscorrected_but_caught),
        cmocka_unit_test(rubbish_is_gone),
        cmocka_unit_test(a_short_sheet_ends_where_its_reserve_ends),
    };
    enum { OTHERS = sizeof others / sizeof others[0] };
    struct CMUnitTest tests[TAG_CASES + OTHERS];

    for (size_t i = 0; i < TAG_CASES; i++)
        tests[i] = (struct CMUnitTest){ tag_cases[i].name, judges_a_tag, NULL, NULL, (void *)&tag_cases[i] };
    memcpy(tests + TAG_CASES, others, sizeof others);
    return cmocka_run_group_tests_name("block", tests, NULL, NULL);
}
