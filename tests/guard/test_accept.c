/*
 * tests/guard/test_accept.c - the judge of blocks whose hash is damaged: the right ones pass, near misses never do
 *
 * The chance of a false accept is recomputed from the binomial distribution of the bits in which an unrelated hash
 * agrees.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/accept.h"

#include "firn/block.h"
#include "guard/hash.h"
#include "guard/tag.h"
#include "spoil.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

enum { HASH_AT = FIRN_BLOCK_HASH_AT, GUARD_AT = HASH_AT + FIRN_HASH_BYTES, HASHED_BITS = 8 * HASH_AT };

static uint8_t written[FIRN_BLOCK_BYTES], read[FIRN_BLOCK_BYTES], repaired[FIRN_BLOCK_BYTES];

static void write_block(struct random *random)
{
    struct firn_block_tag tag = {
        .version = 1, .kind = FIRN_BLOCK_DATA, .geometry = { 224, 32, 128 }, .data_blocks = 28672
    };

    random_fill(random, written, FIRN_BLOCK_PAYLOAD_BYTES);
    random_fill(random, tag.id, sizeof tag.id);
    tag.number = random_below(random, 28672);
    firn_block_seal(written, &tag);
    memcpy(read, written, sizeof read);
    memcpy(repaired, written, sizeof repaired);
}

static void flip(uint8_t *block, unsigned bit)
{
    block[bit / 8] ^= (uint8_t)(1U << bit % 8);
}

/* `count` distinct bits of bytes[at .. end). */
static void flip_some(struct random *random, uint8_t *block, unsigned at, unsigned end, unsigned count)
{
    uint8_t flipped[FIRN_BLOCK_BYTES] = { 0 };

    while (count > 0) {
        const unsigned bit = 8 * at + random_below(random, 8 * (end - at));

        if ((flipped[bit / 8] >> bit % 8 & 1) == 0) {
            flip(flipped, bit);
            flip(block, bit);
            count--;
        }
    }
}

/* At rates up to the one where rows come back no more; 4000 blocks each: one in 250 runs may lose one at 8e-3. */
static void right_blocks_pass_at_every_rate(void **state)
{
    static const double rates[] = { 1e-5, 1e-4, 1e-3, 3e-3, 5e-3, 8e-3 };
    struct random random = random_start("right blocks");

    (void)state;
    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++) {
        unsigned refused = 0;

        for (unsigned trial = 0; trial < 4000; trial++) {
            write_block(&random);
            (void)spoil_bits(&random, read, sizeof read, rates[i]);
            memset(repaired + HASH_AT, 0, sizeof repaired - HASH_AT);      /* does not matter */
            refused += !firn_accept_block(repaired, read);
        }
        assert_true(refused <= 1);
    }
}

/*
 * Blocks that are right but for one to four bits of payload or tag, the stored hash as it was written or with flips of
 * its own, little or much repaired elsewhere: all that could tempt a judge. And those that were never repaired at all.
 */
static void near_misses_never_pass(void **state)
{
    static const double rates[] = { 0, 1e-5, 1e-3, 5e-3, 1e-2 };
    struct random random = random_start("near misses");
    unsigned passed = 0;

    (void)state;
    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++)
        for (unsigned trial = 0; trial < 40000; trial++) {
            if (trial % 64 == 0)
                write_block(&random);
            memcpy(read, written, sizeof read);
            if (rates[i] > 0)
                (void)spoil_bits(&random, read, sizeof read, rates[i]);
            memcpy(repaired, trial % 2 == 0 ? written : read, sizeof repaired);
            flip_some(&random, repaired, 0, HASH_AT, 1 + trial % 4);
            if (memcmp(repaired, written, HASH_AT) != 0)
                passed += firn_accept_block(repaired, read);
        }
    assert_int_equal(passed, 0);
}

/* The bounds of the header, bit by bit: what it lets pass passes, one more bit does not. */
static void bounds_are_where_the_header_says(void **state)
{
    static const unsigned repairs[] = { 0, 1, 31, 160, 256, 1000, 8000 };
    struct random random = random_start("bounds");

    (void)state;
    for (size_t i = 0; i < sizeof repairs / sizeof repairs[0]; i++)
        for (unsigned part = 0; part < 2; part++) {
            const unsigned bits = part == 0 ? 128 : 640;
            const double x = bits * (repairs[i] + 1.0) / HASHED_BITS;
            unsigned bound = (unsigned)floor(2 + x + 6 * sqrt(x));

            if (part == 0 && bound > FIRN_ACCEPT_HASH_BITS_MOST)
                bound = FIRN_ACCEPT_HASH_BITS_MOST;
            for (unsigned more = 0; more < 2; more++) {
                write_block(&random);
                flip_some(&random, read, 0, HASH_AT, repairs[i]);
                if (part == 0) {
                    flip_some(&random, read, HASH_AT, GUARD_AT, bound + more);
                } else {      /* the guard words are asked only where the hash is not right in every bit */
                    flip(read, 8 * HASH_AT);
                    flip_some(&random, read, GUARD_AT, FIRN_BLOCK_BYTES, bound + more);
                }
                assert_int_equal(firn_accept_block(repaired, read), more == 0);
            }
        }
}

static void a_right_hash_needs_no_guard_words(void **state)
{
    struct random random = random_start("right hash");

    (void)state;
    write_block(&random);
    random_fill(&random, read + GUARD_AT, FIRN_BLOCK_BYTES - GUARD_AT);
    assert_true(firn_accept_block(repaired, read));
}

/* C(128,0) + ... + C(128,8), exactly, is below 2^41: the chance is below 2^-87, that of 90 judgements below 2^-81. */
static void false_accepts_are_as_rare_as_the_header_says(void **state)
{
    uint64_t ways = 1, sum = 1;

    (void)state;
    for (unsigned i = 1; i <= FIRN_ACCEPT_HASH_BITS_MOST; i++) {
        ways = ways * (128 - i + 1) / i;
        sum += ways;
    }
    assert_int_equal(ways, UINT64_C(1429702652400));      /* C(128,8), by Pascal's triangle in Python */
    assert_true(sum < UINT64_C(1) << 41);
    assert_true(90 * (double)sum < ldexp(1, 128 - 81));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(right_blocks_pass_at_every_rate),
        cmocka_unit_test(near_misses_never_pass),
        cmocka_unit_test(bounds_are_where_the_header_says),
        cmocka_unit_test(a_right_hash_needs_no_guard_words),
        cmocka_unit_test(false_accepts_are_as_rare_as_the_header_says),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
