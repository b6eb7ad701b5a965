/*
 * tests/care/test_forecast_format.c - the forecast against the format itself: sealed blocks, spoiled bit by bit, judged
 * by the code that reads containers
 *
 * The seed is fixed, so a run that passes always passes; FIRN_SEED asks for another one.
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/forecast.h"

#include "care/real_sheet.h"
#include "guard/random.h"
#include "help/tally.h"

static struct random generator;
static struct real_sheet original, sheet;

static double uniform(void)
{
    return ((double)(random_next(&generator) >> 11) + 0.5) * 0x1p-53;
}

/* Every bit that has gone wrong by the end of the time, each for itself: gaps between them are geometric. */
static void flip(double flips)
{
    const double bits = 8.0 * sizeof sheet.blocks, ln_right = -flips;

    for (double at = floor(log(uniform()) / ln_right); at < bits; at += 1 + floor(log(uniform()) / ln_right))
        sheet.blocks[(size_t)at / 8] ^= (uint8_t)(1U << (size_t)at % 8);
}

/* Whole blocks that the medium does not give back. */
static void lose(double chance)
{
    for (unsigned i = 0; i < REAL_SHEET_BLOCKS; i++)
        if (uniform() < chance)
            memset(sheet.blocks + (size_t)i * BLOCK_BYTES, 0, BLOCK_BYTES);
}

static void trials(const struct firn_forecast_medium *medium, double lost_blocks)
{
    const struct firn_forecast_plan plan = {
        .bytes = (uint64_t)REAL_SHEET_K * REAL_SHEET_ROWS * FIRN_BLOCK_PAYLOAD_BYTES, .geometry = real_sheet_geometry,
        .copies = 1, .years = 1, .interval = 1
    };
    struct tally any = { 0 }, beyond = { 0 };
    struct firn_forecast_result forecast;

    assert_int_equal(firn_forecast_run(medium, &plan, &forecast), FIRN_OK);
    assert_int_equal(forecast.blocks, REAL_SHEET_BLOCKS);
    for (unsigned trial = 0; trial < 2500; trial++) {
        struct real_loss loss;

        memcpy(&sheet, &original, sizeof sheet);
        if (medium->flips > 0)
            flip(medium->flips);
        lose(lost_blocks);
        real_sheet_judge(&sheet, &loss);
        tally_add(&any, loss.rows > 0);
        tally_add(&beyond, loss.blocks);
    }
    if (lost_blocks <= 0)
        tally_agrees(&beyond, forecast.beyond_lanes);
    tally_agrees(&any, exp(forecast.ln_lost[FIRN_FORECAST_ANY]));
}

static void flipped_bits(void **state)
{
    const struct firn_forecast_medium medium = { .flips = 1.4e-4, .run_bytes = 512 };

    trials(&medium, 0);
    (void)state;
}

/* The chance that one of a block's 32768 bits is not read, turned into one for each bit. */
static void unreadable_blocks(void **state)
{
    const double lost = 0.13;
    const struct firn_forecast_medium medium = { .read_errors = -expm1(log1p(-lost) / 32768), .run_bytes = 512 };

    trials(&medium, lost);
    (void)state;
}

static void flips_and_unreadable_blocks(void **state)
{
    const double lost = 0.06;
    const struct firn_forecast_medium medium = { .flips = 1e-4, .read_errors = -expm1(log1p(-lost) / 32768),
                                                 .run_bytes = 512 };

    trials(&medium, lost);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(flipped_bits),
        cmocka_unit_test(unreadable_blocks),
        cmocka_unit_test(flips_and_unreadable_blocks),
    };

    setenv("FIRN_SEED", "1931", 0);
    generator = random_start("test_forecast_format");
    real_sheet_make(&original);
    return cmocka_run_group_tests(tests, NULL, NULL);
}
