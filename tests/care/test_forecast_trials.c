/*
 * tests/care/test_forecast_trials.c - the forecast against the thing itself: bits flipped one by one, runs laid along
 * the blocks, rows counted by the layout of sheets, thousands of times; within five standard errors
 *
 * The seed is fixed, so a run that passes always passes; FIRN_SEED asks for another one.
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/forecast.h"

#include "guard/random.h"
#include "help/tally.h"

#include <stdlib.h>

enum { BLOCKS_MAX = 2048, ROWS_MAX = 128, LANES = 64, LANE_BITS = 512, SEGMENT_DATA_BLOCKS = 265 };

static const struct firn_sheet_geometry geometry = { .k = 12, .m = 4, .depth = 8 };

static struct random generator;

static double uniform(void)
{
    return ((double)(random_next(&generator) >> 11) + 0.5) * 0x1p-53;
}

/* By the gaps between events of a Poisson process. */
static unsigned poisson(double mean)
{
    unsigned events = 0;

    for (double at = -log(uniform()); at < mean; at -= log(uniform()))
        events++;
    return events;
}

/* --- one copy, one interval --- */

struct copy {
    unsigned sheets, blocks;                 /* full sheets */
    bool lost[BLOCKS_MAX];
    bool row_lost[ROWS_MAX];
    unsigned rows_lost, data_gone;           /* data blocks lost in rows that are lost */
    bool data_block_gone[BLOCKS_MAX];        /* by place among the data blocks */
};

static void make_copy(struct copy *copy, unsigned sheets)
{
    *copy = (struct copy){ .sheets = sheets, .blocks = sheets * firn_sheet_full_blocks(&geometry) };
    assert_true(copy->blocks <= BLOCKS_MAX);
}

/* Bits go wrong one by one, wherever they fall; a bit that is struck again stays wrong. */
static bool beyond_lanes(double flips)
{
    uint16_t struck[256];
    unsigned events = poisson(flips * LANES * LANE_BITS);
    uint8_t in_lane[LANES] = { 0 };

    assert_true(events <= 256);
    for (unsigned i = 0; i < events; i++) {
        bool again = false;

        struck[i] = (uint16_t)random_below(&generator, LANES * LANE_BITS);
        for (unsigned j = 0; j < i; j++)
            again = again || struck[j] == struck[i];
        if (!again && ++in_lane[struck[i] % LANES] == 2)
            return true;
    }
    return false;
}

static void flip(struct copy *copy, double flips)
{
    for (unsigned i = 0; i < copy->blocks; i++)
        copy->lost[i] = copy->lost[i] || beyond_lanes(flips);
}

/* Bad and good stretches of geometric length, one after the other. */
static void lay_runs(struct copy *copy, double bad, double run_blocks)
{
    double leave_bad = 1 / run_blocks, leave_good = leave_bad * bad / (1 - bad);
    bool is_bad = uniform() < bad;

    for (unsigned i = 0; i < copy->blocks; i++) {
        copy->lost[i] = copy->lost[i] || is_bad;
        if (uniform() < (is_bad ? leave_bad : leave_good))
            is_bad = !is_bad;
    }
}

static void judge_row(struct copy *copy, unsigned sheet, const struct firn_sheet_shape *shape, unsigned row)
{
    const unsigned start = sheet * firn_sheet_full_blocks(&geometry), data = sheet * firn_sheet_full_data(&geometry);
    unsigned lost = 0;

    for (unsigned column = 0; column < shape->k + shape->m; column++)
        lost += copy->lost[start + firn_sheet_index(shape, row, column)];
    copy->row_lost[sheet * shape->rows + row] = lost > shape->m;
    if (lost <= shape->m)
        return;
    copy->rows_lost++;
    for (unsigned column = 0; column < shape->k; column++) {
        uint32_t index = firn_sheet_index(shape, row, column);

        copy->data_gone += copy->lost[start + index];
        copy->data_block_gone[data + index] = copy->lost[start + index];
    }
}

static void judge(struct copy *copy)
{
    struct firn_sheet_shape shape;

    assert_int_equal(firn_sheet_shape_of(&geometry, firn_sheet_full_data(&geometry), &shape), FIRN_OK);
    for (unsigned sheet = 0; sheet < copy->sheets; sheet++)
        for (unsigned row = 0; row < shape.rows; row++)
            judge_row(copy, sheet, &shape, row);
}

static struct firn_forecast_plan plan_of(unsigned sheets, unsigned copies, double years, double interval)
{
    return (struct firn_forecast_plan){
        .bytes = (uint64_t)sheets * firn_sheet_full_data(&geometry) * 3968, .geometry = geometry, .copies = copies,
        .years = years, .interval = interval
    };
}

/* --- flips alone: everything is independent, so every figure must agree --- */

static void flips(void **state)
{
    const double rate = 1.2e-4;
    const struct firn_forecast_medium medium = { .flips = rate, .run_bytes = 512 };
    const struct firn_forecast_plan plan = plan_of(2, 1, 1, 1);
    struct firn_forecast_result forecast;
    struct tally any = { 0 }, beyond = { 0 };

    assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
    for (unsigned trial = 0; trial < 6000; trial++) {
        struct copy copy;
        unsigned gone = 0;

        make_copy(&copy, 2);
        flip(&copy, rate);
        judge(&copy);
        for (unsigned i = 0; i < copy.blocks; i++)
            gone += copy.lost[i];
        tally_add(&any, copy.rows_lost > 0);
        tally_add(&beyond, gone);
    }
    tally_agrees(&beyond, forecast.beyond_lanes);
    tally_agrees(&any, exp(forecast.ln_lost[FIRN_FORECAST_ANY]));
    (void)state;
}

/* --- runs and flips: what is counted on average must agree; that anything is lost may be told too high --- */

static void runs_and_flips(void **state)
{
    enum { SHEETS = 3 };
    const double flip_rate = 6e-5, runs = 4, run_bytes = 5 * 4096 + 512;
    const struct firn_forecast_medium medium = { .flips = flip_rate, .runs = runs, .run_bytes = run_bytes };
    const struct firn_forecast_plan plan = plan_of(SHEETS, 1, 1, 1);
    const double blocks = SHEETS * 128, bad = -expm1(-runs * 6 / blocks);
    struct firn_forecast_result forecast;
    struct firn_forecast_row row = { 12, 4, 8, 0, log(bad), 6 };
    struct firn_forecast_row_loss loss;
    struct tally any = { 0 }, rows = { 0 }, data = { 0 }, alone = { 0 };

    assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
    for (unsigned trial = 0; trial < 20000; trial++) {
        struct copy copy;

        make_copy(&copy, SHEETS);
        flip(&copy, flip_rate);
        for (unsigned i = 0; i < copy.blocks; i++)
            tally_add(&alone, copy.lost[i]);
        lay_runs(&copy, bad, 6);
        judge(&copy);
        tally_add(&any, copy.rows_lost > 0);
        tally_add(&rows, copy.rows_lost);
        tally_add(&data, copy.data_gone);
    }
    tally_agrees(&alone, forecast.beyond_lanes / blocks);
    row.ln_alone = log(forecast.beyond_lanes / blocks);
    firn_forecast_row(&row, &loss);
    tally_agrees(&rows, SHEETS * 8 * exp(loss.ln_row));
    tally_agrees(&data, SHEETS * 96 * exp(loss.ln_block));
    tally_does_not_exceed(&any, exp(forecast.ln_lost[FIRN_FORECAST_ANY]));
    (void)state;
}

/* Runs longer than m * D = 32 blocks strike many rows at once. */
static void long_runs(void **state)
{
    enum { SHEETS = 4 };
    const double runs = 0.5, run_bytes = 29 * 4096 + 512, blocks = SHEETS * 128, bad = -expm1(-runs * 30 / blocks);
    const struct firn_forecast_medium medium = { .runs = runs, .run_bytes = run_bytes };
    const struct firn_forecast_plan plan = plan_of(SHEETS, 1, 1, 1);
    const struct firn_forecast_row row = { 12, 4, 8, -INFINITY, log(bad), 30 };
    struct firn_forecast_row_loss loss;
    struct firn_forecast_result forecast;
    struct tally any = { 0 }, rows = { 0 }, data = { 0 };

    assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
    firn_forecast_row(&row, &loss);
    for (unsigned trial = 0; trial < 40000; trial++) {
        struct copy copy;

        make_copy(&copy, SHEETS);
        lay_runs(&copy, bad, 30);
        judge(&copy);
        tally_add(&any, copy.rows_lost > 0);
        tally_add(&rows, copy.rows_lost);
        tally_add(&data, copy.data_gone);
    }
    tally_agrees(&rows, SHEETS * 8 * exp(loss.ln_row));
    tally_agrees(&data, SHEETS * 96 * exp(loss.ln_block));
    tally_does_not_exceed(&any, exp(forecast.ln_lost[FIRN_FORECAST_RUNS]));
    assert_true(tally_mean(&any) > 0.8 * exp(forecast.ln_lost[FIRN_FORECAST_RUNS]));
    (void)state;
}

/* --- no reserve: every lost block counts, and runs are told as they come --- */

static bool any_lost(const struct copy *a, const struct copy *b)
{
    for (unsigned i = 0; i < a->blocks; i++)
        if (a->lost[i] && (b == NULL || b->lost[i]))
            return true;
    return false;
}

static void no_reserve(void **state)
{
    enum { BLOCKS = 512 };
    const struct firn_sheet_geometry bare = { .k = 16, .m = 0, .depth = 8 };
    const double flip_rate = 3e-6, runs = 0.3, bad = -expm1(-runs * 30 / BLOCKS);
    const struct firn_forecast_medium medium = { .flips = flip_rate, .runs = runs, .run_bytes = 29 * 4096 + 512 };
    struct firn_forecast_plan plan = { .bytes = (uint64_t)BLOCKS * 3968, .geometry = bare, .copies = 1, .years = 1,
                                       .interval = 1 };
    struct firn_forecast_result one, two;
    struct tally lost_one = { 0 }, lost_two = { 0 };

    assert_int_equal(firn_forecast_run(&medium, &plan, &one), FIRN_OK);
    assert_int_equal(one.blocks, BLOCKS);
    plan.copies = 2;
    assert_int_equal(firn_forecast_run(&medium, &plan, &two), FIRN_OK);
    for (unsigned trial = 0; trial < 40000; trial++) {
        struct copy a, b;

        make_copy(&a, 4);
        make_copy(&b, 4);
        flip(&a, flip_rate);
        lay_runs(&a, bad, 30);
        flip(&b, flip_rate);
        lay_runs(&b, bad, 30);
        tally_add(&lost_one, any_lost(&a, NULL));
        tally_add(&lost_two, any_lost(&a, &b));
    }
    tally_agrees(&lost_one, exp(one.ln_lost[FIRN_FORECAST_ANY]));
    tally_agrees(&lost_two, exp(two.ln_lost[FIRN_FORECAST_ANY]));
    (void)state;
}

/* --- bytes: a lost block takes every segment that it touches --- */

static void lost_bytes(void **state)
{
    enum { SHEETS = 16 };
    const double rate = 9e-5;
    const struct firn_forecast_medium medium = { .flips = rate, .run_bytes = 512 };
    const struct firn_forecast_plan plan = plan_of(SHEETS, 1, 1, 1);
    struct firn_forecast_result forecast;
    struct tally share = { 0 };

    assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
    for (unsigned trial = 0; trial < 1000; trial++) {
        struct copy copy;
        unsigned at, hit = 0;

        make_copy(&copy, SHEETS);
        flip(&copy, rate);
        judge(&copy);
        at = random_below(&generator, SHEETS * 96 - SEGMENT_DATA_BLOCKS);
        for (unsigned i = 0; i < SEGMENT_DATA_BLOCKS; i++)
            hit += copy.data_block_gone[at + i];
        tally_add(&share, hit > 0);
    }
    tally_does_not_exceed(&share, forecast.lost_bytes[FIRN_FORECAST_ANY] / (double)plan.bytes);
    (void)state;
}

/* --- years, copies, media, fates that are shared --- */

struct shelf_of_two {
    double flips, loss, correlation;
};

/* One interval with two copies; true when something is lost. */
static bool interval_loses(const struct shelf_of_two *shelf)
{
    bool media_share = uniform() < shelf->correlation, first = uniform() < -expm1(-shelf->loss);
    bool second = media_share ? first : uniform() < -expm1(-shelf->loss);
    struct copy a, b;

    if (first && second)
        return true;
    make_copy(&a, 1);
    flip(&a, shelf->flips);
    judge(&a);
    make_copy(&b, 1);
    flip(&b, shelf->flips);
    judge(&b);
    if (first || second)
        return a.rows_lost > 0;
    for (unsigned row = 0; row < geometry.depth; row++)
        if (a.row_lost[row] && (uniform() < shelf->correlation || b.row_lost[row]))
            return true;
    return false;
}

static void two_copies_over_years(void **state)
{
    static const double correlations[] = { 0, 0.25 };
    const struct firn_forecast_medium medium = { .flips = 1.1e-4, .loss = 0.1, .run_bytes = 512 };
    struct firn_forecast_plan plan = plan_of(1, 2, 6, 1);

    for (unsigned i = 0; i < 2; i++) {
        const struct shelf_of_two shelf = { medium.flips, medium.loss, correlations[i] };
        struct firn_forecast_result forecast;
        struct tally lost = { 0 };

        plan.correlation = correlations[i];
        assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
        for (unsigned trial = 0; trial < 4000; trial++) {
            bool any = false;

            for (unsigned year = 0; year < 6 && !any; year++)
                any = interval_loses(&shelf);
            tally_add(&lost, any);
        }
        tally_agrees(&lost, exp(forecast.ln_lost[FIRN_FORECAST_ANY]));
    }
    (void)state;
}

/*
 * Two media that fail at any moment; a scrub every year finds a failed one, and `replace` later it has been made anew
 * from the other. Lost is what has no medium at some moment.
 */
static bool both_fail(double rate, double replace, unsigned years)
{
    double fails[2] = { -log(uniform()) / rate, -log(uniform()) / rate };

    for (;;) {
        unsigned first = fails[0] < fails[1] ? 0 : 1;
        double back = ceil(fails[first]) + replace;

        if (fails[first] >= years)
            return false;
        if (fails[1 - first] < back)
            return true;
        fails[first] = back - log(uniform()) / rate;
    }
}

static void media_that_are_replaced(void **state)
{
    const struct firn_forecast_medium medium = { .loss = 0.08, .run_bytes = 512 };
    struct firn_forecast_plan plan = plan_of(1, 2, 8, 1);

    for (unsigned i = 0; i < 3; i++) {
        struct firn_forecast_result forecast;
        struct tally lost = { 0 };

        plan.replace = 0.3 * i;
        assert_int_equal(firn_forecast_run(&medium, &plan, &forecast), FIRN_OK);
        for (unsigned trial = 0; trial < 40000; trial++)
            tally_add(&lost, both_fail(medium.loss, plan.replace, 8));
        tally_does_not_exceed(&lost, exp(forecast.ln_lost[FIRN_FORECAST_MEDIUM]));
        assert_true(tally_mean(&lost) > 0.85 * exp(forecast.ln_lost[FIRN_FORECAST_MEDIUM]));
    }
    (void)state;
}

/* A thing goes bad at random and is mended when somebody looks: how long it waits, on average over time. */
static void waiting(void **state)
{
    const double rate = 0.7;

    for (int regular = 0; regular < 2; regular++) {
        struct tally bad = { 0 };

        for (unsigned trial = 0; trial < 20000; trial++) {
            /* the interval in progress at a random moment has begun some time ago: memory is lost when it is random */
            double since = regular ? uniform() : -log(uniform());

            tally_add(&bad, -log(uniform()) < rate * since);
        }
        tally_agrees(&bad, firn_forecast_waiting(rate, regular));
    }
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(flips),
        cmocka_unit_test(runs_and_flips),
        cmocka_unit_test(long_runs),
        cmocka_unit_test(no_reserve),
        cmocka_unit_test(lost_bytes),
        cmocka_unit_test(two_copies_over_years),
        cmocka_unit_test(media_that_are_replaced),
        cmocka_unit_test(waiting),
    };

    setenv("FIRN_SEED", "1931", 0);
    generator = random_start("test_forecast_trials");
    return cmocka_run_group_tests(tests, NULL, NULL);
}
