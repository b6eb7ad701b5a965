/*
 * tests/guard/test_sheet.c - the arithmetic of sheets: worked shapes, and what must hold of every shape
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/sheet.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

/* The table of format-spec/sheet.md, worked out by another program, in Python, from the rule in words. */
static const struct shape_case {
    const char *name;
    struct firn_sheet_geometry geometry;
    uint32_t t;
    unsigned k, m, rows;
} shape_cases[] = {
    { "224/32, 1", { 224, 32, 128 }, 1, 1, 4, 1 },
    { "224/32, 28", { 224, 32, 128 }, 28, 28, 4, 1 },
    { "224/32, 29", { 224, 32, 128 }, 29, 15, 4, 2 },
    { "224/32, 100", { 224, 32, 128 }, 100, 100, 16, 1 },
    { "224/32, 224", { 224, 32, 128 }, 224, 224, 32, 1 },
    { "224/32, 225", { 224, 32, 128 }, 225, 45, 8, 5 },
    { "224/32, 500", { 224, 32, 128 }, 500, 100, 16, 5 },
    { "224/32, 1000", { 224, 32, 128 }, 1000, 200, 32, 5 },
    { "224/32, 5000", { 224, 32, 128 }, 5000, 218, 32, 23 },
    { "224/32, 28671", { 224, 32, 128 }, 28671, 224, 32, 128 },
    { "224/32, full", { 224, 32, 128 }, 28672, 224, 32, 128 },
    { "64/32, 1", { 64, 32, 341 }, 1, 1, 4, 1 },
    { "64/32, 9", { 64, 32, 341 }, 9, 5, 4, 2 },
    { "64/32, 50", { 64, 32, 341 }, 50, 8, 4, 7 },
    { "64/32, 1000", { 64, 32, 341 }, 1000, 63, 32, 16 },
    { "160/8, 81", { 160, 8, 195 }, 81, 41, 4, 2 },
    { "160/8, 1000", { 160, 8, 195 }, 1000, 143, 8, 7 },
    { "160/8, 31199", { 160, 8, 195 }, 31199, 160, 8, 195 },
    { "no reserve, 1", { 224, 0, 146 }, 1, 1, 0, 1 },
    { "no reserve, 225", { 224, 0, 146 }, 225, 113, 0, 2 },
    { "no reserve, 1000", { 224, 0, 146 }, 1000, 200, 0, 5 },
};
enum { SHAPE_CASES = sizeof shape_cases / sizeof shape_cases[0] };

static void has_the_shape(void **state)
{
    const struct shape_case *c = *state;
    struct firn_sheet_shape shape;

    assert_int_equal(firn_sheet_shape_of(&c->geometry, c->t, &shape), FIRN_OK);
    assert_int_equal(shape.k, c->k);
    assert_int_equal(shape.m, c->m);
    assert_int_equal(shape.rows, c->rows);
    assert_int_equal(shape.data_blocks, c->t);
    assert_int_equal(shape.reserve_blocks, c->m * c->rows);
}

static uint32_t divide_up(uint32_t a, uint32_t b)
{
    return a / b + (a % b != 0);
}

static void check_shape(const struct firn_sheet_geometry *g, uint32_t t)
{
    struct firn_sheet_shape s;
    uint32_t wanted = divide_up(t * g->m, g->k);

    wanted = wanted < 4 ? 4 : wanted;
    if (firn_sheet_shape_of(g, t, &s) != FIRN_OK || s.k < 1 || s.k > g->k || s.k + s.m > 256 || s.rows < 1
        || s.k != divide_up(t, s.rows) || s.reserve_blocks != s.m * s.rows
        || t + s.reserve_blocks > firn_sheet_full_blocks(g))
        fail_msg("k %u m %u depth %u, t %u: %u + %u by %u", g->k, g->m, g->depth, t, s.k, s.m, s.rows);
    if (g->m == 0 || t == firn_sheet_full_data(g))
        return;
    if (s.m < 4 || s.m > g->m || (s.m & (s.m - 1)) != 0 || s.reserve_blocks < wanted
        || (s.reserve_blocks > wanted + wanted / 4 && s.m != 4) || s.reserve_blocks > wanted + 3 + wanted / 4)
        fail_msg("k %u m %u depth %u, t %u: reserve %u, wanted %u", g->k, g->m, g->depth, t, s.reserve_blocks, wanted);
}

/* All t for all k, m at small depths; coarser steps at the largest depth. */
static void every_shape_is_sane(void **state)
{
    (void)state;
    for (unsigned m = 0; m <= 128; m = m == 0 ? 4 : 2 * m)
        for (unsigned k = 1; k <= 255 && k + m <= 256; k++)
            for (unsigned round = 0; round < 4; round++) {
                const unsigned most = 65536 / (k + m) < 4096 ? 65536 / (k + m) : 4096;
                const unsigned depths[4] = { 1, 2, most / 3 + 1, most };
                struct firn_sheet_geometry g = { (uint8_t)k, (uint8_t)m, (uint16_t)depths[round] };
                const uint32_t full = firn_sheet_full_data(&g), step = round < 2 ? 1 : full / 211 + 1;

                assert_true(firn_sheet_geometry_valid(&g));
                for (uint32_t t = 1; t <= full; t += step)
                    check_shape(&g, t);
                check_shape(&g, full);
                check_shape(&g, full > 1 ? full - 1 : 1);
            }
}

/* Every block of a sheet has exactly one place, and neighbours lie in different rows. */
static void places_are_one_to_one(void **state)
{
    static uint8_t seen[65536];

    (void)state;
    for (size_t c = 0; c < SHAPE_CASES; c++) {
        struct firn_sheet_shape s;
        uint32_t absent = 0;

        assert_int_equal(firn_sheet_shape_of(&shape_cases[c].geometry, shape_cases[c].t, &s), FIRN_OK);
        memset(seen, 0, sizeof seen);
        for (uint32_t row = 0; row < s.rows; row++)
            for (unsigned column = 0; column < s.k + s.m; column++) {
                uint32_t index = firn_sheet_index(&s, row, column);

                if (index == UINT32_MAX) {
                    assert_true(column == s.k - 1);
                    absent++;
                    continue;
                }
                assert_true(index < s.data_blocks + s.reserve_blocks);
                assert_true((column < s.k) == (index < s.data_blocks));
                assert_int_equal(index % s.rows, row);
                assert_int_equal(seen[index]++, 0);
            }
        assert_int_equal(absent, s.k * s.rows - s.data_blocks);
    }
}

static const struct geometry_case {
    const char *name;
    double percent;
    uint64_t sheet_bytes;
    unsigned k, m, depth;
} geometry_cases[] = {
    { "the default", 14.3, 128 << 20, 224, 32, 128 },
    { "20 %", 20, 128 << 20, 160, 32, 170 },
    { "50 %", 50, 128 << 20, 64, 32, 341 },
    { "5 %", 5, 128 << 20, 160, 8, 195 },
    { "10 %", 10, 128 << 20, 160, 16, 186 },
    { "100 %", 100, 128 << 20, 32, 32, 512 },
    { "2 %", 2, 128 << 20, 200, 4, 160 },
    { "the least there is", 0.001, 128 << 20, 252, 4, 128 },
    { "no reserve", 0, 128 << 20, 224, 0, 146 },
    { "one row", 14.3, 1, 224, 32, 1 },
    { "1 MiB", 14.3, 1 << 20, 224, 32, 1 },
    { "2 MiB", 14.3, 2 << 20, 224, 32, 2 },
    { "no more than 65536 blocks", 14.3, UINT64_MAX, 224, 32, 256 },
    { "no more than 65536 blocks, 100 %", 100, UINT64_MAX, 32, 32, 1024 },
};
enum { GEOMETRY_CASES = sizeof geometry_cases / sizeof geometry_cases[0] };

static void chooses_a_geometry(void **state)
{
    const struct geometry_case *c = *state;
    struct firn_sheet_geometry g;

    assert_int_equal(firn_sheet_geometry_for(c->percent, c->sheet_bytes, &g), FIRN_OK);
    assert_true(firn_sheet_geometry_valid(&g));
    assert_int_equal(g.k, c->k);
    assert_int_equal(g.m, c->m);
    assert_int_equal(g.depth, c->depth);
}

/* Within half a k of what was asked, wherever that is possible at all. */
static void comes_near_any_percentage(void **state)
{
    (void)state;
    for (unsigned i = 16; i <= 1000; i++) {
        struct firn_sheet_geometry g;
        double percent = i / 10.0, ideal;

        assert_int_equal(firn_sheet_geometry_for(percent, 128 << 20, &g), FIRN_OK);
        assert_true(firn_sheet_geometry_valid(&g));
        ideal = 100.0 * g.m / percent;
        assert_true(fabs(g.k - ideal) <= 0.5000001);
    }
}

static void refuses_nonsense(void **state)
{
    static const struct firn_sheet_geometry bad[] = {
        { 0, 32, 128 }, { 225, 32, 1 }, { 224, 31, 1 }, { 224, 2, 1 }, { 224, 1, 1 }, { 255, 128, 1 }, { 224, 32, 0 },
        { 224, 32, 257 }, { 1, 4, 4097 }, { 100, 255, 1 },
    };
    const struct firn_sheet_geometry good = { 224, 32, 128 };
    struct firn_sheet_geometry g;
    struct firn_sheet_shape shape;

    (void)state;
    for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
        assert_false(firn_sheet_geometry_valid(&bad[i]));
        assert_int_equal(firn_sheet_shape_of(&bad[i], 1, &shape), FIRN_BAD_ARGUMENT);
    }
    assert_int_equal(firn_sheet_shape_of(&good, 0, &shape), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_sheet_shape_of(&good, 28673, &shape), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_sheet_shape_of(&good, UINT32_MAX, &shape), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_sheet_geometry_for(-1, 128 << 20, &g), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_sheet_geometry_for(100.1, 128 << 20, &g), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_sheet_geometry_for(NAN, 128 << 20, &g), FIRN_BAD_ARGUMENT);
}

int main(void)
{
    const struct CMUnitTest others[] = {
        cmocka_unit_test(every_shape_is_sane), cmocka_unit_test(places_are_one_to_one),
        cmocka_unit_test(comes_near_any_percentage), cmocka_unit_test(refuses_nonsense),
    };
    enum { OTHERS = sizeof others / sizeof others[0] };
    struct CMUnitTest tests[SHAPE_CASES + GEOMETRY_CASES + OTHERS];
    struct CMUnitTest *test = tests;

    for (size_t i = 0; i < SHAPE_CASES; i++)
        *test++ = (struct CMUnitTest){ shape_cases[i].name, has_the_shape, NULL, NULL, (void *)&shape_cases[i] };
    for (size_t i = 0; i < GEOMETRY_CASES; i++)
        *test++ = (struct CMUnitTest){ geometry_cases[i].name, chooses_a_geometry, NULL, NULL,
                                       (void *)&geometry_cases[i] };
    memcpy(test, others, sizeof others);
    return cmocka_run_group_tests_name("sheet", tests, NULL, NULL);
}
