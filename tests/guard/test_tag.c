/*
 * tests/guard/test_tag.c - tags in bytes: as the specification has them, as many damaged ones elect them
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/tag.h"

#include "spoil.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

/* format-spec/block.md, section 6 */
static const uint8_t example[FIRN_TAG_BYTES] = {
    0x46, 0x49, 0x52, 0x4E, 0x01, 0x02, 0xE0, 0x20, 0x10, 0x32, 0x54, 0x76, 0x98, 0xBA, 0xDC, 0xFE,
    0x30, 0xF2, 0x00, 0x00, 0x00, 0x00, 0x00, 0x00, 0x00, 0x70, 0x00, 0x00, 0x80, 0x00, 0x00, 0x00
};

static const struct firn_block_tag example_tag = {
    1, FIRN_BLOCK_RESERVE, { 224, 32, 128 }, { 0x10, 0x32, 0x54, 0x76, 0x98, 0xBA, 0xDC, 0xFE }, 62000, 28672
};

static void the_example_of_the_specification(void **state)
{
    uint8_t bytes[FIRN_TAG_BYTES];
    struct firn_block_tag tag;

    (void)state;
    firn_tag_put(&example_tag, bytes);
    assert_memory_equal(bytes, example, sizeof bytes);
    assert_true(firn_tag_get(example, &tag));
    assert_int_equal(tag.kind, example_tag.kind);
    assert_int_equal(tag.number, example_tag.number);
    assert_int_equal(tag.data_blocks, example_tag.data_blocks);
    assert_int_equal(tag.geometry.depth, 128);
    assert_memory_equal(tag.id, example_tag.id, sizeof tag.id);
}

/* Fields are read whatever they hold, and every flip of a bit that a writer never sets is noticed. */
static void damaged_tags_are_read_all_the_same(void **state)
{
    struct firn_block_tag tag;
    uint8_t bytes[FIRN_TAG_BYTES];

    (void)state;
    for (unsigned bit = 0; bit < 8 * FIRN_TAG_BYTES; bit++) {
        memcpy(bytes, example, sizeof bytes);
        bytes[bit / 8] ^= (uint8_t)(1U << bit % 8);
        assert_int_equal(firn_tag_distance(bytes, example), 1);
        if (bit / 8 < 6 || bit / 8 >= 30)
            assert_false(firn_tag_get(bytes, &tag));
        else
            (void)firn_tag_get(bytes, &tag);
        if (bit / 8 >= 8)      /* another byte: the sizes are read as they were */
            assert_int_equal(tag.geometry.k, 224);
    }
}

/* 300 tags with the same fixed fields and numbers of their own, one bit in 20 wrong, among 100 pieces of noise. */
static void damaged_tags_elect_what_was_written(void **state)
{
    struct random random = random_start("votes");
    struct firn_tag_votes votes = { .count = 0 };
    struct firn_block_tag tag = example_tag;
    uint8_t bytes[FIRN_TAG_BYTES], elected[FIRN_TAG_BYTES];

    (void)state;
    for (unsigned i = 0; i < 300; i++) {
        tag.number = 30000 + i;
        firn_tag_put(&tag, bytes);
        (void)spoil_bits(&random, bytes, sizeof bytes, 0.05);
        (void)firn_tag_vote(&votes, bytes);
        if (i % 3 == 0) {
            random_fill(&random, bytes, sizeof bytes);
            assert_false(firn_tag_vote(&votes, bytes));
        }
    }
    assert_in_range(votes.count, 280, 300);      /* more than 8 of 62 bits wrong: one in 200 */
    firn_tag_elect(&votes, elected);
    assert_memory_equal(elected, example, 16);
    assert_memory_equal(elected + 24, example + 24, 8);
}

static void blocks_of_one_byte_value_have_no_vote(void **state)
{
    uint8_t bytes[FIRN_TAG_BYTES];

    (void)state;
    for (unsigned value = 0; value < 256; value++) {
        struct firn_tag_votes votes = { .count = 0 };

        memset(bytes, (int)value, sizeof bytes);
        assert_false(firn_tag_vote(&votes, bytes));
        assert_int_equal(votes.count, 0);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_example_of_the_specification),
        cmocka_unit_test(damaged_tags_are_read_all_the_same),
        cmocka_unit_test(damaged_tags_elect_what_was_written),
        cmocka_unit_test(blocks_of_one_byte_value_have_no_vote),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
