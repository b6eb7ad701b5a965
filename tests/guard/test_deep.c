/*
 * tests/guard/test_deep.c - lanes with two flips tried out: what is promised comes back, the rest stays as read
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/deep.h"

#include "spoil.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

enum { TAG_WORD = FIRN_BLOCK_TAG_AT / 8, HASH_WORD = FIRN_BLOCK_HASH_AT / 8 };

static uint8_t written[FIRN_BLOCK_BYTES], block[FIRN_BLOCK_BYTES], before[FIRN_BLOCK_BYTES];
static struct firn_block_tag tag;

static void write_block(struct random *random)
{
    tag = (struct firn_block_tag){
        .version = 1, .kind = FIRN_BLOCK_DATA, .geometry = { 224, 0, 146 }, .data_blocks = 32704
    };
    random_fill(random, tag.id, sizeof tag.id);
    tag.number = random_below(random, 32704);
    random_fill(random, written, FIRN_BLOCK_PAYLOAD_BYTES);
    firn_block_seal(written, &tag);
    memcpy(block, written, sizeof block);
}

/* Flips bit `lane` of `count` distinct words in [from, end), none of them in the tag. */
static void spoil_lane(struct random *random, unsigned lane, unsigned from, unsigned end, unsigned count)
{
    unsigned words[8];

    for (;;) {
        bool in_tag = false;

        random_choose(random, end - from, count, words);
        for (unsigned i = 0; i < count; i++)
            in_tag = in_tag || (words[i] + from >= TAG_WORD && words[i] + from < HASH_WORD);
        if (!in_tag)
            break;
    }
    for (unsigned i = 0; i < count; i++)
        block[8 * (words[i] + from) + lane / 8] ^= (uint8_t)(1U << lane % 8);
}

static void comes_back(void)
{
    const uint32_t trials = firn_deep_trials(block, &tag);

    assert_in_range(trials, 1, FIRN_DEEP_PAIRS * FIRN_DEEP_PAIRS);
    assert_true(firn_deep_mend(block, &tag));
    assert_memory_equal(block, written, sizeof block);
}

/* One or two lanes with two flips, other lanes with one, the tag with any number, since it is known. */
static void two_double_lanes_come_back(void **state)
{
    struct random random = random_start("double lanes");

    (void)state;
    for (unsigned trial = 0; trial < 300; trial++) {
        unsigned lanes[2];

        write_block(&random);
        random_choose(&random, FIRN_LANES, 2, lanes);
        spoil_lane(&random, lanes[0], 0, FIRN_BLOCK_WORDS, 2);
        if (trial % 8 == 0)
            spoil_lane(&random, lanes[1], 0, FIRN_BLOCK_WORDS, 2);
        for (unsigned lane = 0; lane < FIRN_LANES; lane++)
            if (lane != lanes[0] && lane != lanes[1] && random_below(&random, 2) == 0)
                spoil_lane(&random, lane, 0, FIRN_BLOCK_WORDS, 1);
        if (trial % 4 == 0)
            random_fill(&random, block + FIRN_BLOCK_TAG_AT, FIRN_BLOCK_HASH_AT - FIRN_BLOCK_TAG_AT);
        comes_back();
    }
}

/* Two flips in hash and guard words, in every combination of the two kinds. */
static void flips_in_hash_and_guard_words_come_back(void **state)
{
    struct random random = random_start("hash and guard words");

    (void)state;
    for (unsigned first = HASH_WORD; first < FIRN_BLOCK_WORDS; first++)
        for (unsigned second = first + 1; second < FIRN_BLOCK_WORDS; second++) {
            const unsigned lane = random_below(&random, FIRN_LANES);

            write_block(&random);
            block[8 * first + lane / 8] ^= (uint8_t)(1U << lane % 8);
            block[8 * second + lane / 8] ^= (uint8_t)(1U << lane % 8);
            comes_back();
        }
}

static void stays_as_it_was(void)
{
    memcpy(before, block, sizeof before);
    assert_false(firn_deep_mend(block, &tag));
    assert_memory_equal(block, before, sizeof block);
}

/* Three doubtful lanes, or a lane with three flips: beyond the promise. Nothing is changed, the work stays bounded. */
static void beyond_it_nothing_changes(void **state)
{
    struct random random = random_start("beyond");

    (void)state;
    for (unsigned trial = 0; trial < 40; trial++) {
        unsigned lanes[3];

        random_choose(&random, FIRN_LANES, 3, lanes);
        write_block(&random);
        for (unsigned i = 0; i < 3; i++)
            spoil_lane(&random, lanes[i], 0, FIRN_BLOCK_WORDS, 2);
        assert_int_equal(firn_deep_trials(block, &tag), 0);
        stays_as_it_was();
        write_block(&random);
        spoil_lane(&random, lanes[0], 0, TAG_WORD, 3);
        spoil_lane(&random, lanes[1], 0, TAG_WORD, 2);
        assert_true(firn_deep_trials(block, &tag) <= FIRN_DEEP_PAIRS);
        stays_as_it_was();
    }
}

/* Noise has about 32 doubtful lanes, so it is not tried at all; the right block under a wrong tag is not accepted. */
static void noise_and_strangers_are_refused(void **state)
{
    struct random random = random_start("noise");

    (void)state;
    for (unsigned trial = 0; trial < 200; trial++) {
        write_block(&random);
        random_fill(&random, block, sizeof block);
        assert_int_equal(firn_deep_trials(block, &tag), 0);
        stays_as_it_was();
    }
    write_block(&random);
    tag.number ^= 1;
    stays_as_it_was();
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(two_double_lanes_come_back),
        cmocka_unit_test(flips_in_hash_and_guard_words_come_back),
        cmocka_unit_test(beyond_it_nothing_changes),
        cmocka_unit_test(noise_and_strangers_are_refused),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
