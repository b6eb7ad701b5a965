/*
 * tests/guard/test_rescue.c - rows beyond the reserve: flips at rates, with blocks gone, strange and swapped among them
 *
 * Whatever comes of a row, a block that is said to be back must be what was written, byte for byte. The rates are below
 * those where rows come back no more (tests/bench/survival), far enough that no run will see one fail.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/rescue.h"

#include "firn/reserve.h"
#include "spoil.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

enum { MOST = FIRN_RESCUE_BLOCKS_MOST, NOWHERE = 1000 };

static uint8_t written[MOST][FIRN_BLOCK_BYTES], spoilt[MOST][FIRN_BLOCK_BYTES], states[MOST];
static uint8_t *blocks[MOST];
static struct firn_block_tag tags[MOST];
static uint8_t *work, *reserve_work;

static int lend_work(void **state)
{
    (void)state;
    work = aligned_alloc(64, (firn_rescue_work_bytes() + 63) / 64 * 64);
    reserve_work = aligned_alloc(64, (firn_reserve_work_bytes() + 63) / 64 * 64);
    return work == NULL || reserve_work == NULL;
}

static int take_work_back(void **state)
{
    (void)state;
    free(work);
    free(reserve_work);
    return 0;
}

/* A row of a sheet of one row; data block `missing` is not stored. */
static void write_row(struct random *random, unsigned k, unsigned m, unsigned missing)
{
    const uint8_t *data[MOST] = { NULL };
    uint8_t *reserve[MOST] = { NULL }, id[FIRN_BLOCK_ID_BYTES];

    random_fill(random, id, sizeof id);
    for (unsigned i = 0; i < k + m; i++) {
        tags[i] = (struct firn_block_tag){
            .version = 1, .kind = i < k ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE, .number = i, .data_blocks = k,
            .geometry = { (uint8_t)k, (uint8_t)m, 1 }
        };
        memcpy(tags[i].id, id, sizeof id);
        blocks[i] = i == missing ? NULL : spoilt[i];
        random_fill(random, written[i], FIRN_BLOCK_PAYLOAD_BYTES);
    }
    for (unsigned i = 0; i < k; i++)
        data[i] = i == missing ? NULL : written[i];
    for (unsigned j = 0; j < m; j++)
        reserve[j] = written[k + j];
    assert_int_equal(firn_reserve_encode(k, m, data, reserve, FIRN_BLOCK_PAYLOAD_BYTES, reserve_work), FIRN_OK);
    for (unsigned i = 0; i < k + m; i++)
        firn_block_seal(written[i], &tags[i]);
    memcpy(spoilt, written, sizeof spoilt);
}

/* What a reader would do before it asks for a rescue. */
static void judge_row(unsigned k, unsigned m)
{
    for (unsigned i = 0; i < k + m; i++) {
        struct firn_block_tag tag;
        enum firn_block_state found = blocks[i] == NULL ? FIRN_BLOCK_SOUND : firn_block_open(blocks[i], true, &tag);
        const bool good = blocks[i] == NULL || ((found == FIRN_BLOCK_SOUND || found == FIRN_BLOCK_MENDED)
                                                && tag.number == tags[i].number);

        states[i] = good ? FIRN_RESCUE_KNOWN : FIRN_RESCUE_READ;
    }
}

static enum firn_status rescue(unsigned k, unsigned m)
{
    const struct firn_rescue_row row = { k, m, blocks, tags, states };
    struct firn_rescue_report report;
    enum firn_status status;

    judge_row(k, m);
    status = firn_rescue_row(&row, &report, work);
    for (unsigned i = 0; i < k + m; i++) {
        const bool back = states[i] == FIRN_RESCUE_KNOWN || states[i] == FIRN_RESCUE_BACK;

        assert_true(back || status == FIRN_BEYOND_REPAIR);
        if (back && blocks[i] != NULL)
            assert_memory_equal(blocks[i], written[i], FIRN_BLOCK_BYTES);
    }
    assert_in_range(report.rounds, 0, FIRN_RESCUE_ROUNDS_MOST);
    return status;
}

static void flips_at_rates_come_back(void **state)
{
    static const struct { unsigned k, m, missing; double rate; } rows[] = {
        { 224, 32, NOWHERE, 1e-3 }, { 224, 32, 223, 5e-3 }, { 224, 32, NOWHERE, 7e-3 }, { 28, 4, NOWHERE, 2e-3 },
        { 1, 4, NOWHERE, 5e-3 }, { 252, 4, NOWHERE, 5e-4 }, { 160, 8, NOWHERE, 2e-3 }, { 64, 32, 3, 1e-2 },
        { 128, 128, NOWHERE, 2e-2 }
    };
    struct random random = random_start("flips");

    (void)state;
    for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
        for (unsigned trial = 0; trial < 4; trial++) {
            write_row(&random, rows[i].k, rows[i].m, rows[i].missing);
            (void)spoil_bits(&random, spoilt[0], sizeof spoilt, rows[i].rate);
            assert_int_equal(rescue(rows[i].k, rows[i].m), FIRN_OK);
        }
}

/* 2 e + f <= m: with f blocks of noise, what is left of the reserve is for the flips. */
static void flips_and_lost_blocks_come_back(void **state)
{
    struct random random = random_start("flips and losses");

    (void)state;
    for (unsigned trial = 0; trial < 6; trial++) {
        unsigned lost[16];

        write_row(&random, 224, 32, NOWHERE);
        (void)spoil_bits(&random, spoilt[0], sizeof spoilt, 2e-3);
        random_choose(&random, 256, 16, lost);
        for (unsigned i = 0; i < 16; i++)      /* noise, zeros, and one byte value all over */
            switch (i % 3) {
            case 0: random_fill(&random, spoilt[lost[i]], FIRN_BLOCK_BYTES); break;
            case 1: memset(spoilt[lost[i]], 0, FIRN_BLOCK_BYTES); break;
            default: memset(spoilt[lost[i]], 0xA5, FIRN_BLOCK_BYTES); break;
            }
        assert_int_equal(rescue(224, 32), FIRN_OK);
    }
}

/* Two or three syndromes are all that is left to tell flips from none: then only changes of one bit are believed. */
static void few_syndromes_are_enough_for_few_flips(void **state)
{
    static const struct { unsigned k, m, gone; double rate; } rows[] = {
        { 224, 32, 29, 3e-4 }, { 224, 32, 30, 1e-4 }, { 252, 4, 2, 1e-4 }, { 27, 4, 2, 1e-3 }
    };
    struct random random = random_start("few syndromes");

    (void)state;
    for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
        for (unsigned trial = 0; trial < 4; trial++) {
            unsigned lost[32];

            write_row(&random, rows[i].k, rows[i].m, NOWHERE);
            (void)spoil_bits(&random, spoilt[0], sizeof spoilt, rows[i].rate);
            random_choose(&random, rows[i].k + rows[i].m, rows[i].gone, lost);
            for (unsigned j = 0; j < rows[i].gone; j++)
                random_fill(&random, spoilt[lost[j]], FIRN_BLOCK_BYTES);
            assert_int_equal(rescue(rows[i].k, rows[i].m), FIRN_OK);
        }
}

/* Twelve payloads are noise under tags that look right: the columns find them out, and count them as erasures then. */
static void noise_under_a_right_tag_is_found_out(void **state)
{
    struct random random = random_start("noise");

    (void)state;
    write_row(&random, 224, 32, NOWHERE);
    (void)spoil_bits(&random, spoilt[0], sizeof spoilt, 2e-3);
    for (unsigned i = 0; i < 12; i++)
        random_fill(&random, spoilt[20 * i + 3], FIRN_BLOCK_PAYLOAD_BYTES);
    assert_int_equal(rescue(224, 32), FIRN_OK);
}

/* Good blocks in each other's places, more than the reserve has, so that each costs one erasure and not two. */
static void swapped_blocks_count_as_lost(void **state)
{
    struct random random = random_start("swapped");

    (void)state;
    write_row(&random, 224, 32, NOWHERE);
    for (unsigned i = 0; i < 24; i += 2) {
        memcpy(spoilt[i], written[i + 1], FIRN_BLOCK_BYTES);
        memcpy(spoilt[i + 1], written[i], FIRN_BLOCK_BYTES);
    }
    (void)spoil_bits(&random, spoilt[24], (MOST - 24) * (size_t)FIRN_BLOCK_BYTES, 2e-4);
    assert_int_equal(rescue(224, 32), FIRN_OK);
}

/* As many as the reserve can rebuild, and more than it can: nothing wrong is ever called back. */
static void losses_alone(void **state)
{
    struct random random = random_start("losses");

    (void)state;
    for (unsigned lost = 15; lost <= 18; lost++) {
        write_row(&random, 100, 16, NOWHERE);
        for (unsigned i = 0; i < lost; i++)
            random_fill(&random, spoilt[6 * i], FIRN_BLOCK_BYTES);
        assert_int_equal(rescue(100, 16), lost <= 16 ? FIRN_OK : FIRN_BEYOND_REPAIR);
    }
}

static void beyond_it_nothing_wrong_is_called_back(void **state)
{
    static const struct { unsigned k, m; double rate; } rows[] = {
        { 224, 32, 1e-2 }, { 224, 32, 5e-2 }, { 28, 4, 2e-2 }, { 252, 4, 4e-3 }, { 252, 4, 1e-2 }, { 160, 8, 8e-3 }
    };
    struct random random = random_start("beyond");

    (void)state;
    for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++)
        for (unsigned trial = 0; trial < 3; trial++) {
            write_row(&random, rows[i].k, rows[i].m, NOWHERE);
            (void)spoil_bits(&random, spoilt[0], sizeof spoilt, rows[i].rate);
            assert_int_equal(rescue(rows[i].k, rows[i].m), FIRN_BEYOND_REPAIR);
        }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(flips_at_rates_come_back),
        cmocka_unit_test(flips_and_lost_blocks_come_back),
        cmocka_unit_test(few_syndromes_are_enough_for_few_flips),
        cmocka_unit_test(noise_under_a_right_tag_is_found_out),
        cmocka_unit_test(swapped_blocks_count_as_lost),
        cmocka_unit_test(losses_alone),
        cmocka_unit_test(beyond_it_nothing_wrong_is_called_back),
    };

    return cmocka_run_group_tests(tests, lend_work, take_work_back);
}
