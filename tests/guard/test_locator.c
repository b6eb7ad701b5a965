/*
 * tests/guard/test_locator.c - wrong places and values from syndromes: the examples of the specification, chance ones
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/locator.h"

#include "guard/gf.h"
#include "random.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>

#include <cmocka.h>

static struct firn_locator_logs logs;

/* format-spec/sheet.md, section 7; computed from the definition by a few lines of Python. */
static void the_examples_of_the_specification(void **state)
{
    static const uint8_t two[4] = { 0x84, 0x0D, 0x7A, 0x69 }, one[3] = { 0x04, 0x10, 0x40 };
    struct firn_locator locator;

    (void)state;
    assert_true(firn_locator_find(&logs, two, 4, &locator));
    assert_int_equal(locator.degree, 2);
    assert_int_equal(locator.sigma[0], 0x08);
    assert_int_equal(locator.sigma[1], 0x06);
    assert_int_equal(locator.sigma[2], 0x01);
    assert_int_equal(firn_locator_value(&logs, &locator, 4), 0x04);
    assert_int_equal(firn_locator_value(&logs, &locator, 2), 0x80);
    assert_true(firn_locator_find(&logs, one, 3, &locator));
    assert_int_equal(locator.degree, 1);
    assert_int_equal(locator.sigma[0], 4);
    assert_int_equal(firn_locator_value(&logs, &locator, 4), firn_gf_multiply(0x04, 4 ^ 5));
}

static uint8_t value_at(const struct firn_locator *locator, uint8_t point)
{
    uint8_t value = 0;

    for (unsigned i = locator->degree + 1; i-- > 0;)
        value = firn_gf_multiply(value, point) ^ locator->sigma[i];
    return value;
}

/* Up to as many errors as `count` syndromes can tell, at chance points, the point 0 among them every other time. */
static void finds_what_was_put_in(void **state)
{
    struct random random = random_start("locator");

    (void)state;
    for (unsigned trial = 0; trial < 3000; trial++) {
        const unsigned count = 1 + random_below(&random, FIRN_LOCATOR_SYNDROMES_MOST);
        const unsigned wrong = random_below(&random, count / 2 + 1);
        unsigned points[FIRN_LOCATOR_WRONG_MOST] = { 0 };
        uint8_t values[FIRN_LOCATOR_WRONG_MOST], syndromes[FIRN_LOCATOR_SYNDROMES_MOST] = { 0 };
        struct firn_locator locator;

        random_choose(&random, 256, wrong, points);
        if (wrong > 0 && trial % 2 == 0)
            points[0] = 0;      /* they ascend, so no other is */
        for (unsigned i = 0; i < wrong; i++) {
            uint8_t term = values[i] = (uint8_t)(1 + random_below(&random, 255));

            for (unsigned l = 0; l < count; l++) {
                syndromes[l] ^= term;
                term = firn_gf_multiply(term, (uint8_t)points[i]);
            }
        }
        assert_true(firn_locator_find(&logs, syndromes, count, &locator));
        assert_int_equal(locator.degree, wrong);
        for (unsigned i = 0; i < wrong; i++) {
            assert_int_equal(value_at(&locator, (uint8_t)points[i]), 0);
            assert_int_equal(firn_locator_value(&logs, &locator, (uint8_t)points[i]), values[i]);
        }
    }
}

/* Syndromes at random: as many as the binomial coefficients say are those of two errors or fewer. */
static void more_errors_are_noticed_or_make_no_roots(void **state)
{
    struct random random = random_start("too many");
    unsigned told = 0;

    (void)state;
    for (unsigned trial = 0; trial < 20000; trial++) {
        uint8_t syndromes[4];
        struct firn_locator locator;
        unsigned roots = 0;

        random_fill(&random, syndromes, sizeof syndromes);
        if (!firn_locator_find(&logs, syndromes, 4, &locator))
            continue;
        for (unsigned point = 0; point < 256; point++)
            roots += value_at(&locator, (uint8_t)point) == 0;
        told += roots == locator.degree;
    }
    /* C(256, 2) 255^2 of 256^4 are syndromes of two errors: 0.4942; six standard deviations of 20 000 trials are 424 */
    assert_in_range(told, 9884 - 424, 9884 + 424);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_examples_of_the_specification),
        cmocka_unit_test(finds_what_was_put_in),
        cmocka_unit_test(more_errors_are_noticed_or_make_no_roots),
    };

    firn_locator_make_logs(&logs);
    return cmocka_run_group_tests(tests, NULL, NULL);
}
