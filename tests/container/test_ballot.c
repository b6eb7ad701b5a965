/*
 * tests/container/test_ballot.c - one block out of damaged copies: what the hash accepts is what was written
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "container/ballot.h"

#include "guard/random.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

enum { BYTES = FIRN_BLOCK_BYTES, BITS = 8 * BYTES };

static struct random dice;

static void make_block(uint8_t *block)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = FIRN_BLOCK_DATA, .geometry = { 14, 4, 8 },
        .id = "MQ 1931", .number = 17, .data_blocks = 112
    };

    random_fill(&dice, block, FIRN_BLOCK_PAYLOAD_BYTES);
    firn_block_seal(block, &tag);
}

static void flip(uint8_t *block, unsigned bit)
{
    block[bit / 8] ^= (uint8_t)(1U << bit % 8);
}

static void flip_some(uint8_t *block, unsigned count)
{
    for (unsigned i = 0; i < count; i++)
        flip(block, random_below(&dice, BITS));
}

/* Decides, and holds it to its word: good means right. Returns whether it was. */
static bool decides(uint8_t (*copies)[BYTES], size_t count, const uint8_t *good)
{
    const uint8_t *list[FIRN_BALLOT_COPIES_MAX];
    uint8_t block[BYTES];
    struct firn_block_tag tag;
    enum firn_block_state state;

    for (size_t i = 0; i < count; i++)
        list[i] = copies[i];
    state = firn_ballot_decide(list, count, block, &tag);
    if (state == FIRN_BLOCK_GONE)
        return false;
    assert_true(state == FIRN_BLOCK_SOUND || state == FIRN_BLOCK_MENDED);
    assert_memory_equal(block, good, BYTES);
    assert_int_equal(tag.number, 17);
    return true;
}

static void one_copy_is_as_good_as_its_lanes(void **state)
{
    uint8_t copies[1][BYTES], good[BYTES];

    (void)state;
    make_block(good);
    memcpy(copies[0], good, BYTES);
    assert_true(decides(copies, 1, good));
    flip(copies[0], 77);
    assert_true(decides(copies, 1, good));
    flip(copies[0], 77 + 64);
    assert_false(decides(copies, 1, good));
}

static void one_good_copy_is_enough(void **state)
{
    uint8_t copies[5][BYTES], good[BYTES];

    (void)state;
    make_block(good);
    random_fill(&dice, copies[0], sizeof copies);
    memcpy(copies[3], good, BYTES);
    assert_true(decides(copies, 5, good));
}

/* Three copies, a hundred flips in each, at different places: the majority is right everywhere. */
static void the_majority_of_three(void **state)
{
    (void)state;
    for (unsigned round = 0; round < 50; round++) {
        uint8_t copies[3][BYTES], good[BYTES];

        make_block(good);
        for (unsigned i = 0; i < 3; i++)
            memcpy(copies[i], good, BYTES);
        for (unsigned i = 0; i < 300; i++)      /* bit i * 100 + 0 .. 99: no two copies at the same place */
            flip(copies[i % 3], i * 100 + random_below(&dice, 100));
        assert_true(decides(copies, 3, good));
    }
}

/*
 * Two copies only: a bit that differs is right in one of them, and the lanes tell in which. Thirty flips in each of 64
 * lanes are a flip a lane; two of a lane in one copy are beyond the lanes alone.
 */
static void two_copies_and_their_lanes(void **state)
{
    unsigned decided = 0;

    (void)state;
    for (unsigned round = 0; round < 100; round++) {
        uint8_t copies[2][BYTES], good[BYTES];

        make_block(good);
        for (unsigned i = 0; i < 2; i++) {
            memcpy(copies[i], good, BYTES);
            flip_some(copies[i], 30);
            flip(copies[i], 5 + 64 * i);      /* and two in a lane for sure */
            flip(copies[i], 5 + 64 * (i + 9));
        }
        decided += decides(copies, 2, good);
    }
    assert_in_range(decided, 95, 100);
}

/* The same three flips in one lane of two copies of three: two errors that look right. The hash says no to them. */
static void equal_errors_do_not_win(void **state)
{
    (void)state;
    for (unsigned round = 0; round < 50; round++) {
        uint8_t copies[3][BYTES], good[BYTES];
        unsigned lane = random_below(&dice, 64), words[3];

        make_block(good);
        random_choose(&dice, 502, 3, words);
        for (unsigned i = 0; i < 3; i++)
            memcpy(copies[i], good, BYTES);
        for (unsigned i = 0; i < 6; i++)
            flip(copies[i % 2], 64 * words[i / 2] + lane);
        flip(copies[2], 3);      /* the third has a fault of its own, in two lanes twice */
        flip(copies[2], 3 + 640);
        flip(copies[2], 4 + 64);
        flip(copies[2], 4 + 6400);
        assert_true(decides(copies, 3, good));
    }
}

/* However much is wrong, in however many copies: what is accepted is right (decides() insists). */
static void never_accepts_what_is_wrong(void **state)
{
    static const unsigned flips[] = { 50, 100, 300, 1000, 5000 };
    unsigned refused = 0;

    (void)state;
    for (unsigned round = 0; round < 60; round++) {
        uint8_t copies[6][BYTES], good[BYTES];
        size_t count = 2 + random_below(&dice, 5);

        make_block(good);
        for (size_t i = 0; i < count; i++) {
            memcpy(copies[i], good, BYTES);
            flip_some(copies[i], flips[random_below(&dice, 5)]);
        }
        refused += !decides(copies, count, good);
    }
    assert_true(refused > 0);
}

static void a_full_house_of_copies(void **state)
{
    uint8_t copies[FIRN_BALLOT_COPIES_MAX][BYTES], good[BYTES];

    (void)state;
    make_block(good);
    for (unsigned i = 0; i < FIRN_BALLOT_COPIES_MAX; i++) {
        memcpy(copies[i], good, BYTES);
        flip_some(copies[i], 4000);      /* an eighth of all bits: far beyond any code, not beyond thirty-two votes */
    }
    assert_true(decides(copies, FIRN_BALLOT_COPIES_MAX, good));
}

/* --- reading again --- */

/* A medium that gives another reading each time. */
struct flaky {
    const uint8_t *good;
    unsigned readings, flips, right_from, fails_until, forgotten;
};

static enum firn_status flaky_read(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct flaky *flaky = self;

    assert_int_equal(at, 8192);
    assert_int_equal(count, BYTES);
    *got = 0;
    *os_error = EIO;
    if (++flaky->readings < flaky->fails_until)
        return FIRN_IO;
    memcpy(bytes, flaky->good, BYTES);
    if (flaky->right_from == 0 || flaky->readings < flaky->right_from)
        flip_some(bytes, flaky->flips);
    *got = BYTES;
    return FIRN_OK;
}

static void flaky_forget(void *self, uint64_t at, uint64_t bytes)
{
    (void)at, (void)bytes;
    ((struct flaky *)self)->forgotten++;
}

static void reads_again_until_it_is_right(void **state)
{
    static const struct {
        struct flaky flaky;
        unsigned times;
        bool held;
        enum firn_status status;
        unsigned readings;
    } cases[] = {
        { { .flips = 3000, .right_from = 3 }, 5, false, FIRN_OK, 3 },
        { { .flips = 3000, .right_from = 3 }, 2, false, FIRN_LOST, 2 },
        { { .flips = 300 }, 5, true, FIRN_OK, 5 },                      /* never right, but the majority is */
        { { .fails_until = 4, .right_from = 1 }, 5, false, FIRN_OK, 4 },
        { { .fails_until = 9 }, 5, false, FIRN_LOST, 5 },
        { { .flips = 5 }, 0, true, FIRN_LOST, 0 },
    };
    uint8_t good[BYTES], block[BYTES];

    (void)state;
    make_block(good);
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct flaky flaky = cases[i].flaky;
        struct firn_store store = { .self = &flaky, .read_at = flaky_read, .forget = flaky_forget };

        flaky.good = good;
        memcpy(block, good, BYTES);
        flip(block, 9);
        flip(block, 9 + 64);
        flip(block, 9 + 128);
        assert_int_equal(firn_ballot_reread(&store, 8192, cases[i].times, cases[i].held, firn_memory_system(), block),
                         cases[i].status);
        assert_int_equal(flaky.readings, cases[i].readings);
        assert_int_equal(flaky.forgotten, cases[i].readings);      /* each one from the medium */
        if (cases[i].status == FIRN_OK)
            assert_memory_equal(block, good, BYTES);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(one_copy_is_as_good_as_its_lanes),
        cmocka_unit_test(one_good_copy_is_enough),
        cmocka_unit_test(the_majority_of_three),
        cmocka_unit_test(two_copies_and_their_lanes),
        cmocka_unit_test(equal_errors_do_not_win),
        cmocka_unit_test(never_accepts_what_is_wrong),
        cmocka_unit_test(a_full_house_of_copies),
        cmocka_unit_test(reads_again_until_it_is_right),
    };

    dice = random_start("test_ballot");
    return cmocka_run_group_tests_name("container: votes over copies of a block", tests, NULL, NULL);
}
