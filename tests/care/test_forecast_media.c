/*
 * tests/care/test_forecast_media.c - media profiles as text: what is read, what is refused and how it is told; the
 * profiles that come with the program; the table of choices
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/forecast.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static enum firn_status next(const char *text, struct firn_forecast_profile *profile, struct firn_fault *fault)
{
    struct firn_forecast_media media;

    firn_forecast_media_start(&media, text, strlen(text));
    return firn_forecast_media_next(&media, profile, fault);
}

static void reads_profiles(void **state)
{
    static const char text[] =
        "# a remark\r\n\n"
        "medium  first\n"
        "\tabout  Something \xC3\xA9trange\n"
        "  flips 1e-11 the makers' word\n"
        "runs .5 assumed by the night watch\n"
        "run-length 64KiB counted\n"
        "   # another\n"
        "medium second\n"
        "loss 0.03 counted\n"
        "read-errors 1E-15 datasheet";
    struct firn_forecast_media media;
    struct firn_forecast_profile p;
    struct firn_fault fault;

    firn_forecast_media_start(&media, text, sizeof text - 1);
    assert_int_equal(firn_forecast_media_next(&media, &p, &fault), FIRN_OK);
    assert_string_equal(p.name, "first");
    assert_string_equal(p.about, "Something \xC3\xA9trange");
    assert_true(p.medium.flips > 0.99e-11 && p.medium.flips < 1.01e-11);
    assert_true(p.medium.runs == 0.5 && p.medium.run_bytes == 65536 && p.medium.loss == 0);
    assert_string_equal(p.sources[0], "the makers' word");
    assert_true(p.given[0] && p.given[1] && p.given[2] && !p.given[3] && !p.given[4]);
    assert_true(!p.assumed[0] && p.assumed[1] && !p.assumed[2]);
    assert_int_equal(firn_forecast_media_next(&media, &p, &fault), FIRN_OK);
    assert_string_equal(p.name, "second");
    assert_string_equal(p.about, "");
    assert_true(p.medium.loss == 0.03 && p.medium.read_errors == 1e-15 && p.medium.run_bytes == 512);
    assert_int_equal(firn_forecast_media_next(&media, &p, &fault), FIRN_END);
    assert_int_equal(firn_forecast_media_next(&media, &p, &fault), FIRN_END);
    (void)state;
}

static const struct { const char *text, *told; } faulty[] = {
    { "flips 1 x\n", "line 1 stands before the first 'medium NAME'" },
    { "medium\n", "line 1 wants a name" },
    { "medium two words\n", "line 1 wants a name" },
    { "medium 1234567890123456789012345678901234567890\n", "line 1 wants a name" },
    { "medium a\n\n# x\nflips\n", "line 4 wants a rate" },
    { "medium a\nflips fast source\n", "line 2 wants a rate" },
    { "medium a\nflips -1 source\n", "line 2 wants a rate" },
    { "medium a\nflips nan source\n", "line 2 wants a rate" },
    { "medium a\nflips inf source\n", "line 2 wants a rate" },
    { "medium a\nflips 0x1p-3 source\n", "line 2 wants a rate" },
    { "medium a\nflips 1e-9x source\n", "line 2 wants a rate" },
    { "medium a\nflips 1e999 source\n", "line 2 wants a rate" },
    { "medium a\nread-errors 1.01 source\n", "line 2 wants a rate" },
    { "medium a\nflips 1e-9\n", "line 2 must say where its figure comes from" },
    { "medium a\nrun-length 1 source\n", "line 2 wants a length from 512 bytes on" },
    { "medium a\nrun-length long source\n", "line 2 wants a length" },
    { "medium a\nloss 0.1 x\nloss 0.1 x\n", "line 3 gives a figure for the second time" },
    { "medium a\nspeed 7 x\n", "line 2 begins with no word known here" },
    { "medium a\nabout\n", "line 2 wants a few words" },
    { "medium a\nabout bell \a\n", "line 2 is no plain UTF-8 text" },
    { "medium a\nabout \xFF\n", "line 2 is no plain UTF-8 text" },
};

static void tells_what_is_wrong_where(void **state)
{
    for (size_t i = 0; i < sizeof faulty / sizeof faulty[0]; i++) {
        struct firn_forecast_profile profile;
        struct firn_fault fault = { 0 };

        assert_int_equal(next(faulty[i].text, &profile, &fault), FIRN_BAD_DATA);
        if (strncmp(fault.what, faulty[i].told, strlen(faulty[i].told)) != 0)
            fail_msg("'%s' instead of '%s'", fault.what, faulty[i].told);
    }
    (void)state;
}

static void long_lines(void **state)
{
    char text[700];
    struct firn_forecast_profile profile;
    struct firn_fault fault;

    /* the most that fits: 239 bytes of words */
    memset(text, 'x', sizeof text);
    memcpy(text, "medium a\nabout ", 15);
    text[15 + 239] = '\0';
    assert_int_equal(next(text, &profile, &fault), FIRN_OK);
    assert_int_equal(strlen(profile.about), 239);
    text[15 + 239] = 'x';
    text[15 + 240] = '\0';
    assert_int_equal(next(text, &profile, &fault), FIRN_BAD_DATA);
    text[15 + 240] = 'x';
    text[sizeof text - 1] = '\0';
    assert_int_equal(next(text, &profile, &fault), FIRN_BAD_DATA);
    assert_string_equal(fault.what, "line 2 is longer than 511 bytes");
    (void)state;
}

/* The file that is installed: in order, each figure with its source, each profile good for a forecast. */
static void installed_profiles(void **state)
{
    char *text = calloc(1, 100000);
    FILE *file = fopen(FIRN_SOURCE_DIR "/src/package/media.txt", "rb");
    struct firn_forecast_plan plan = { .bytes = 1000000000000, .geometry = { 224, 32, 128 }, .copies = 2, .years = 10,
                                       .interval = 1 };
    struct firn_forecast_media media;
    struct firn_forecast_profile profile;
    struct firn_forecast_result result;
    struct firn_fault fault = { 0 };
    enum firn_status status;
    unsigned profiles = 0, published = 0;

    assert_non_null(text);
    assert_non_null(file);
    firn_forecast_media_start(&media, text, fread(text, 1, 99999, file));
    fclose(file);
    while ((status = firn_forecast_media_next(&media, &profile, &fault)) == FIRN_OK) {
        profiles++;
        assert_true(profile.about[0] != '\0');
        for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++) {
            assert_true(profile.given[figure]);
            published += !profile.assumed[figure];
        }
        assert_int_equal(firn_forecast_run(&profile.medium, &plan, &result), FIRN_OK);
        assert_true(result.ln_lost[FIRN_FORECAST_ANY] < 0 && result.ln_lost[FIRN_FORECAST_ANY] > -30);
    }
    if (status != FIRN_END)
        fail_msg("media.txt: %s", fault.what);
    assert_true(profiles >= 5 && published >= 10);
    free(text);
    (void)state;
}

/* --- the table --- */

static const struct firn_forecast_medium disk = { .flips = 1e-11, .runs = 2, .run_bytes = 65536, .loss = 0.02,
                                                  .read_errors = 1e-15 };
static const struct firn_forecast_plan three = { .bytes = UINT64_C(4000000000), .copies = 3, .years = 10,
                                                 .geometry = { 224, 32, 128 }, .interval = 1 };

static void make_table(struct firn_forecast_table *table, double target)
{
    static const double reserves[] = { 0, 5, 14.3 };

    *table = (struct firn_forecast_table){
        .reserve_count = 3, .interval_count = 4, .intervals = { 0.25, 1, 2, INFINITY },
        .ln_target = target > 0 ? log(target) : -INFINITY, .keep = 1, .check = 1
    };
    for (unsigned i = 0; i < 3; i++)
        assert_int_equal(firn_sheet_geometry_for(reserves[i], 134217728, &table->geometries[i]), FIRN_OK);
}

static void cells_are_forecasts(void **state)
{
    struct firn_forecast_table table;

    make_table(&table, 0);
    assert_int_equal(firn_forecast_table_fill(&disk, &three, &table), FIRN_OK);
    assert_false(table.found);
    for (unsigned i = 0; i < 3; i++)
        for (unsigned j = 0; j < 4; j++) {
            struct firn_forecast_plan plan = three;
            struct firn_forecast_result result;
            double checks = isinf(table.intervals[j]) ? 0 : 1 / table.intervals[j];

            plan.geometry = table.geometries[i];
            plan.interval = table.intervals[j];
            assert_int_equal(firn_forecast_run(&disk, &plan, &result), FIRN_OK);
            assert_true(fabs(table.cells[i][j].ln_lost - result.ln_lost[FIRN_FORECAST_ANY]) < 1e-9);
            assert_true(fabs(table.cells[i][j].ln_rows - result.ln_lost[FIRN_FORECAST_ROWS]) < 1e-9);
            assert_true(fabs(table.ln_medium[j] - result.ln_lost[FIRN_FORECAST_MEDIUM]) < 1e-9);
            assert_true(fabs(table.cells[i][j].cost - 3 * (double)result.container_bytes / 4e9 * (1 + checks)) < 1e-9);
        }
    (void)state;
}

/* Whatever the target: the choice meets it, and nothing that meets it is cheaper. */
static void the_choice_is_the_cheapest(void **state)
{
    static const double targets[] = { 0.5, 1e-2, 1e-3, 1e-4, 2e-5, 1e-9 };
    unsigned found = 0;

    for (size_t i = 0; i < sizeof targets / sizeof targets[0]; i++) {
        struct firn_forecast_table table;
        unsigned meet = 0;

        make_table(&table, targets[i]);
        assert_int_equal(firn_forecast_table_fill(&disk, &three, &table), FIRN_OK);
        for (unsigned j = 0; j < 12; j++) {
            const struct firn_forecast_cell *cell = &table.cells[j / 4][j % 4];

            assert_int_equal(cell->meets, exp(cell->ln_lost) <= targets[i]);
            meet += cell->meets;
            if (cell->meets)
                assert_true(cell->cost >= table.cells[table.best_reserve][table.best_interval].cost);
        }
        assert_int_equal(table.found, meet > 0);
        if (table.found)
            assert_true(table.cells[table.best_reserve][table.best_interval].meets);
        found += table.found;
    }
    assert_true(found >= 3 && found < sizeof targets / sizeof targets[0]);
    (void)state;
}

/* Where scrubbing costs nothing, one scrubs often; where keeping does, the reserve does not. Of equals the safer. */
static void prices_decide(void **state)
{
    struct firn_forecast_table table;

    make_table(&table, 0.5);
    table.check = 0;
    assert_int_equal(firn_forecast_table_fill(&disk, &three, &table), FIRN_OK);
    assert_int_equal(table.best_interval, 0);
    make_table(&table, 0.5);
    table.keep = table.check = 0;
    assert_int_equal(firn_forecast_table_fill(&disk, &three, &table), FIRN_OK);
    for (unsigned j = 0; j < 12; j++)
        assert_true(table.cells[table.best_reserve][table.best_interval].ln_lost <= table.cells[j / 4][j % 4].ln_lost);
    table.reserve_count = 0;
    assert_int_equal(firn_forecast_table_fill(&disk, &three, &table), FIRN_BAD_ARGUMENT);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(reads_profiles),
        cmocka_unit_test(tells_what_is_wrong_where),
        cmocka_unit_test(long_lines),
        cmocka_unit_test(installed_profiles),
        cmocka_unit_test(cells_are_forecasts),
        cmocka_unit_test(the_choice_is_the_cheapest),
        cmocka_unit_test(prices_decide),
    };

    return cmocka_run_group_tests(tests, NULL, NULL);
}
