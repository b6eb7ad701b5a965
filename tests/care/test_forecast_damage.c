/*
 * tests/care/test_forecast_damage.c - the forecast against the models of damage that drills use: sealed blocks spoiled
 * by them, judged by the code that reads containers
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/damage.h"
#include "firn/forecast.h"

#include "care/real_sheet.h"
#include "help/tally.h"

#include <stdlib.h>

static struct real_sheet original, sheet;

static uint64_t seed(void)
{
    const char *given = getenv("FIRN_SEED");

    return given != NULL ? strtoull(given, NULL, 0) : 1931;
}

/* Trials of a drill's damage beside the forecast for the same rates. */
static void trials(const struct firn_drill_damage *damage)
{
    const struct firn_forecast_medium medium = {
        .flips = -log1p(-damage->flip_rate), .read_errors = -expm1(log1p(-damage->lose_rate) / 32768), .run_bytes = 512
    };
    const struct firn_forecast_plan plan = {
        .bytes = (uint64_t)REAL_SHEET_K * REAL_SHEET_ROWS * FIRN_BLOCK_PAYLOAD_BYTES, .geometry = real_sheet_geometry,
        .copies = 1, .years = 1, .interval = 1
    };
    struct tally any = { 0 };
    struct firn_forecast_result forecast;

    assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
    for (unsigned trial = 0; trial < 2500; trial++) {
        struct firn_store_buffer buffer = { sheet.blocks, sizeof sheet.blocks, sizeof sheet.blocks };
        struct firn_drill_spoiled spoiled;
        struct firn_fault fault = { 0 };
        struct firn_store store;
        struct real_loss loss;

        memcpy(&sheet, &original, sizeof sheet);
        firn_store_memory(&buffer, &store);
        assert_int_equal(firn_damage_spoil(damage, seed(), trial + 1, &store, firn_memory_system(), &spoiled, &fault),
                         FIRN_OK);
        store.close(store.self);
        real_sheet_judge(&sheet, &loss);
        tally_add(&any, loss.rows > 0);
    }
    tally_agrees(&any, exp(forecast.ln_lost[FIRN_FORECAST_ANY]));
}

static void flips(void **state)
{
    trials(&(const struct firn_drill_damage){ .flip_rate = 1.4e-4 });
    (void)state;
}

static void lost_blocks(void **state)
{
    trials(&(const struct firn_drill_damage){ .lose_rate = 0.13 });
    (void)state;
}

static void flips_and_lost_blocks(void **state)
{
    trials(&(const struct firn_drill_damage){ .flip_rate = 1e-4, .lose_rate = 0.06 });
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(flips),
        cmocka_unit_test(lost_blocks),
        cmocka_unit_test(flips_and_lost_blocks),
    };

    real_sheet_make(&original);
    return cmocka_run_group_tests(tests, NULL, NULL);
}
