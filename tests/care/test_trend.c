/*
 * tests/care/test_trend.c - odds of damage that comes faster
 *
 * Tails: exact, by integers and fractions of Python 3.11 (math.comb, fractions). Crowding: with equal intervals the
 * places' distances from the middle are whole numbers, so by hand; the rate of false alarms by simulation.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/trend.h"

#include "guard/random.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>

#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

static void knows_tails(void **state)
{
    static const struct { uint64_t least, n; double p, tail; } tails[] = {
        { 8, 10, 0.5, 0.0546875 },                       /* 56 / 1024 */
        { 5, 5, 0.25, 0.0009765625 },                    /* 1 / 1024 */
        { 1, 3, 0.1, 0.271 },
        { 500, 1000, 0.5, 0.5126125090891804 },
        { 30, 40, 0.1, 3.0649470763974496e-22 },
        { 1, 2000, 0.001, 0.8648000746025003 },
        { 120, 1000, 0.1, 0.02199614496579435 },
        { 10, 1000, 0.5, 1 },
        { 5, 6, 1.0 / 365, 9.240474110129607e-13 },
        { 0, 5, 0.5, 1 }, { 6, 5, 0.5, 0 }, { 1, 5, 0, 0 }, { 5, 5, 1, 1 }, { 0, 0, 0.5, 1 },
    };

    (void)state;
    for (size_t i = 0; i < COUNT(tails); i++) {
        double got = firn_trend_binomial_tail(tails[i].least, tails[i].n, tails[i].p);

        assert_true(fabs(got - tails[i].tail) <= 1e-11 * tails[i].tail);
    }
}

/* Three equal intervals: places are -1, 0 and 1 from the middle, with a variance of 2/3 each. */
static void knows_crowding(void **state)
{
    const struct firn_trend_interval intervals[] = { { 60, 1 }, { 60, 2 }, { 60, 7 } };

    (void)state;
    assert_true(fabs(firn_trend_judge(intervals, 3).crowding - 6 / sqrt(10 * 2.0 / 3)) < 1e-12);
}

static const struct judge_case {
    const char *what;
    size_t count;
    struct firn_trend_interval intervals[8];
    bool grows;
} judge_cases[] = {
    { "nothing is known", 0, { { 0, 0 } }, false },
    { "one interval has nothing to be held against", 1, { { 30, 50 } }, false },
    { "never any damage", 4, { { 30, 0 }, { 30, 0 }, { 30, 0 }, { 30, 0 } }, false },
    { "four of four places: one in 256", 4, { { 30, 0 }, { 30, 0 }, { 30, 0 }, { 30, 4 } }, false },
    { "five of five places: one in 1024", 4, { { 30, 0 }, { 30, 0 }, { 30, 0 }, { 30, 5 } }, true },
    { "as many in a longer time", 4, { { 30, 0 }, { 30, 0 }, { 30, 0 }, { 900, 5 } }, false },
    { "much, but steady", 4, { { 30, 90 }, { 30, 110 }, { 30, 100 }, { 30, 105 } }, false },
    { "creeping up", 7, { { 30, 0 }, { 30, 1 }, { 30, 1 }, { 30, 2 }, { 30, 4 }, { 30, 6 }, { 30, 9 } }, true },
    { "dying away", 5, { { 30, 9 }, { 30, 5 }, { 30, 2 }, { 30, 1 }, { 30, 1 } }, false },
    { "bad once, and well since", 4, { { 30, 0 }, { 30, 0 }, { 30, 40 }, { 30, 0 } }, false },
    { "no time has passed", 3, { { 0, 5 }, { 0, 5 }, { 0, 50 } }, false },
};

static void judges(void **state)
{
    const struct judge_case *c = *state;

    assert_int_equal(firn_trend_judge(c->intervals, c->count).grows, c->grows);
}

/* A Poisson number of small mean, by Knuth's product of uniform numbers. */
static uint64_t poisson(struct random *dice, double mean)
{
    double product = 1, floor = exp(-mean);
    uint64_t count = 0;

    while ((product *= ((double)(random_next(dice) >> 11) + 0.5) / 9007199254740992.0) > floor)
        count++;
    return count;
}

/*
 * At a steady rate each question is answered wrongly once in a thousand times: of 40 000 histories 80 at most are to be
 * expected, give or take 9; five standard deviations are allowed. Where the rate doubles from one scrub to the fourth
 * after it, not one alarm in a hundred may fail to come.
 */
static void seldom_cries_wolf(void **state)
{
    struct random dice = random_start("trend");
    unsigned wolves = 0, missed = 0;

    (void)state;
    for (unsigned round = 0; round < 40000; round++) {
        struct firn_trend_interval steady[12], growing[12];

        for (unsigned i = 0; i < 12; i++) {
            double seconds = 20 + random_below(&dice, 20);

            steady[i] = (struct firn_trend_interval){ seconds, poisson(&dice, seconds / 10) };
            growing[i] = (struct firn_trend_interval){ seconds, poisson(&dice, seconds / 10 * exp2(i / 4.0)) };
        }
        wolves += firn_trend_judge(steady, 12).grows;
        missed += !firn_trend_judge(growing, 12).grows;
    }
    print_message("%u false alarms, %u missed\n", wolves, missed);
    assert_in_range(wolves, 1, 80 + 45);
    assert_in_range(missed, 0, 400);
}

int main(void)
{
    struct CMUnitTest tests[32];
    size_t count = 0;

    for (size_t i = 0; i < COUNT(judge_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = judge_cases[i].what, .test_func = judges,
                                              .initial_state = (void *)(uintptr_t)&judge_cases[i] };
    tests[count++] = (struct CMUnitTest)cmocka_unit_test(knows_tails);
    tests[count++] = (struct CMUnitTest)cmocka_unit_test(knows_crowding);
    tests[count++] = (struct CMUnitTest)cmocka_unit_test(seldom_cries_wolf);
    return _cmocka_run_group_tests("trend", tests, count, NULL, NULL);
}
