/*
 * tests/help/tally.h - what many trials said of one number, beside what was forecast; within five standard errors
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_TALLY_H
#define FIRN_TESTS_TALLY_H

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <math.h>

struct tally {
    double sum, squares;
    unsigned trials;
};

static inline void tally_add(struct tally *tally, double value)
{
    tally->sum += value;
    tally->squares += value * value;
    tally->trials++;
}

static inline double tally_mean(const struct tally *tally)
{
    return tally->sum / tally->trials;
}

static inline double tally_error(const struct tally *tally)
{
    double mean = tally_mean(tally);

    return sqrt((tally->squares / tally->trials - mean * mean) / tally->trials);
}

static inline void tally_agrees(const struct tally *tally, double forecast)
{
    print_message("trials %u: %.5g +- %.2g, forecast %.5g\n", tally->trials, tally_mean(tally), tally_error(tally),
                  forecast);
    assert_true(tally->sum > 20);      /* so rare that it says nothing */
    assert_true(fabs(tally_mean(tally) - forecast) < 5 * tally_error(tally));
}

static inline void tally_does_not_exceed(const struct tally *tally, double forecast)
{
    print_message("trials %u: %.5g +- %.2g, forecast at most %.5g\n", tally->trials, tally_mean(tally),
                  tally_error(tally), forecast);
    assert_true(tally->sum > 20);
    assert_true(tally_mean(tally) < forecast + 5 * tally_error(tally));
}

#endif
