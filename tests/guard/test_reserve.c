/*
 * tests/guard/test_reserve.c - the reserve against its definition, against ISA-L's matrix product, and against loss
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/reserve.h"

#include "firn/sheet.h"
#include "guard/gf.h"
#include "guard/reserve_engine.h"
#include "random.h"
#include "vectors.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>
#include <isa-l/erasure_code.h>

enum { POINTS = 256, MOST_BYTES = 4200, EDGE = 64 };

/* A row with room around every payload, to see what is written where it should not be. */
static uint8_t rooms[POINTS][MOST_BYTES + 2 * EDGE], kept[POINTS][MOST_BYTES + 2 * EDGE];
static uint8_t *work;

static int lend_work(void **state)
{
    (void)state;
    work = aligned_alloc(64, (firn_reserve_work_bytes() + 63) / 64 * 64);
    return work == NULL;
}

static int take_work_back(void **state)
{
    (void)state;
    free(work);
    return 0;
}

/* Points every payload somewhere into its room, at its own alignment. */
static void place(struct random *random, uint8_t *payloads[POINTS])
{
    for (unsigned i = 0; i < POINTS; i++)
        payloads[i] = rooms[i] + random_below(random, EDGE);
}

/* What reserve payload j takes of data payload i, by Lagrange's formula at the 256 - m points that are given. */
static uint8_t coefficient(unsigned m, unsigned j, unsigned i)
{
    uint8_t over = 1, under = 1;

    for (unsigned s = m; s < POINTS; s++)
        if (s != m + i) {
            over = firn_gf_multiply(over, (uint8_t)(j ^ s));
            under = firn_gf_multiply(under, (uint8_t)((m + i) ^ s));
        }
    return firn_gf_multiply(over, firn_gf_inverse(under));
}

static void row_of_the_specification(const char *row, unsigned k, unsigned m, size_t bytes, uint8_t data[][8])
{
    const uint8_t *from[POINTS] = { NULL };
    uint8_t reserve[16][8], expected[8], *to[16] = { NULL };
    char name[80];

    for (unsigned i = 0; i < k; i++)
        from[i] = data[i];
    for (unsigned j = 0; j < m; j++)
        to[j] = reserve[j];
    assert_int_equal(firn_reserve_encode(k, m, from, to, bytes, work), FIRN_OK);
    for (unsigned j = 0; j < m; j++) {
        snprintf(name, sizeof name, "row %s reserve %u", row, j);
        assert_int_equal(vectors_read("sheet.txt", name, expected, sizeof expected), bytes);
        assert_memory_equal(reserve[j], expected, bytes);
    }
}

/* Rows made by another program, in Python, by Lagrange's formula and nothing else. */
static void encodes_the_rows_of_the_specification(void **state)
{
    uint8_t small[3][8], larger[12][8];
    char name[80];

    (void)state;
    for (unsigned i = 0; i < 3; i++) {
        snprintf(name, sizeof name, "row 3+4 data %u", i);
        assert_int_equal(vectors_read("sheet.txt", name, small[i], sizeof small[i]), 4);
    }
    row_of_the_specification("3+4", 3, 4, 4, small);
    for (unsigned i = 0; i < 12; i++)
        for (unsigned b = 0; b < 6; b++)
            larger[i][b] = (uint8_t)(17 * i + 5 * b + 1);
    row_of_the_specification("12+8", 12, 8, 6, larger);
}

/* One row by the engine and by ISA-L, which is fed with the Lagrange matrix; payloads of zeros may be left out. */
static void same_as_isal(struct random *random, unsigned k, unsigned m, size_t bytes)
{
    static uint8_t matrix[POINTS * POINTS], tables[32 * 128 * 128 * 2];
    uint8_t *payloads[POINTS], *expected[128];
    const uint8_t *data[POINTS];

    place(random, payloads);
    for (unsigned i = 0; i < k; i++) {
        const bool absent = i + 1 == k && k % 3 == 0;

        random_fill(random, payloads[i], bytes);
        if (absent)
            memset(payloads[i], 0, bytes);
        data[i] = absent ? NULL : payloads[i];
        for (unsigned j = 0; j < m; j++)
            matrix[j * k + i] = coefficient(m, j, i);
    }
    for (unsigned j = 0; j < m; j++)
        expected[j] = kept[j];
    ec_init_tables((int)k, (int)m, matrix, tables);
    ec_encode_data((int)bytes, (int)k, (int)m, tables, payloads, expected);
    assert_int_equal(firn_reserve_encode(k, m, data, payloads + k, bytes, work), FIRN_OK);
    for (unsigned j = 0; j < m; j++)
        assert_memory_equal(payloads[k + j], expected[j], bytes);
}

static void agrees_with_isal(void **state)
{
    static const unsigned sizes[][2] = { { 224, 32 }, { 160, 32 }, { 64, 32 }, { 160, 8 }, { 128, 128 }, { 252, 4 },
                                         { 255, 1 }, { 254, 2 }, { 240, 16 }, { 192, 64 }, { 32, 32 }, { 1, 1 },
                                         { 1, 128 }, { 33, 32 } };
    struct random random = random_start("ISA-L");

    (void)state;
    for (size_t i = 0; i < sizeof sizes / sizeof sizes[0]; i++)
        same_as_isal(&random, sizes[i][0], sizes[i][1], 3968);
    for (unsigned round = 0; round < 60; round++) {
        unsigned m = 1U << random_below(&random, 8), k = 1 + random_below(&random, POINTS - m);

        same_as_isal(&random, k, m, 64 + random_below(&random, MOST_BYTES - 64));
    }
}

/* Any square part of the matrix can be undone: the code is as good as a code of its size can be (Singleton's bound). */
static void every_small_minor_is_regular(void **state)
{
    enum { K = 9, M = 4 };
    uint8_t a[M][M];

    (void)state;
    for (unsigned rows = 1; rows < 1U << M; rows++)
        for (unsigned columns = 1; columns < 1U << K; columns++) {
            unsigned n = 0, n_columns = 0, place_of[M] = { 0 };

            for (unsigned i = 0; i < K; i++)
                if ((columns >> i & 1) != 0 && n_columns++ < M)
                    place_of[n_columns - 1] = i;
            for (unsigned j = 0; j < M; j++)
                if ((rows >> j & 1) != 0) {
                    for (unsigned i = 0; i < M; i++)
                        a[n][i] = coefficient(M, j, place_of[i]);
                    n++;
                }
            if (n != n_columns)
                continue;
            for (unsigned c = 0; c < n; c++) {      /* elimination; a missing pivot is a zero determinant */
                unsigned pivot = c;

                while (pivot < n && a[pivot][c] == 0)
                    pivot++;
                assert_true(pivot < n);
                for (unsigned i = 0; i < n; i++) {
                    uint8_t swap = a[c][i];

                    a[c][i] = a[pivot][i];
                    a[pivot][i] = swap;
                }
                for (unsigned r = c + 1; r < n; r++) {
                    uint8_t factor = firn_gf_multiply(a[r][c], firn_gf_inverse(a[c][c]));

                    for (unsigned i = 0; i < n; i++)
                        a[r][i] ^= firn_gf_multiply(factor, a[c][i]);
                }
            }
        }
}

static void make_row(struct random *random, unsigned k, unsigned m, size_t bytes, uint8_t *payloads[POINTS])
{
    place(random, payloads);
    for (unsigned i = 0; i < k + m; i++)
        random_fill(random, rooms[i], sizeof rooms[i]);
    assert_int_equal(firn_reserve_encode(k, m, (const uint8_t *const *)payloads, payloads + k, bytes, work), FIRN_OK);
    memcpy(kept, rooms, sizeof rooms[0] * (k + m));
}

/* Spoils the lost payloads, rebuilds, and wants every byte of every room as it was. */
static void comes_back(struct random *random, const struct firn_reserve_engine *engine, unsigned k, unsigned m,
                       size_t bytes, uint8_t *const payloads[POINTS], const unsigned *lost, unsigned lost_count)
{
    for (unsigned i = 0; i < lost_count; i++)
        random_fill(random, payloads[lost[i]], bytes);
    assert_int_equal(firn_reserve_rebuild_by(engine, k, m, payloads, lost, lost_count, bytes, work), FIRN_OK);
    if (memcmp(rooms, kept, sizeof rooms[0] * (k + m)) != 0)
        fail_msg("engine %s, k %u, m %u, %zu bytes, %u lost, first %u", engine->name, k, m, bytes, lost_count,
                 lost_count > 0 ? lost[0] : 0);
}

/* Every set of up to m of the k + m payloads. */
static void every_pattern_of_a_small_row_comes_back(void **state)
{
    static const unsigned sizes[][2] = { { 12, 4 }, { 9, 4 }, { 5, 8 }, { 6, 2 }, { 7, 1 } };
    struct random random = random_start("small rows");

    (void)state;
    for (size_t s = 0; s < sizeof sizes / sizeof sizes[0]; s++) {
        const unsigned k = sizes[s][0], m = sizes[s][1];
        uint8_t *payloads[POINTS];

        make_row(&random, k, m, 40, payloads);
        for (unsigned pattern = 0; pattern < 1U << (k + m); pattern++) {
            unsigned lost[16], count = 0;

            for (unsigned i = 0; i < k + m; i++)
                if ((pattern >> i & 1) != 0 && count++ < m)
                    lost[count - 1] = i;
            if (count <= m)
                comes_back(&random, &firn_reserve_plain, k, m, 40, payloads, lost, count);
        }
    }
}

static void random_patterns_come_back_by_every_engine(void **state)
{
    struct random random = random_start("random losses");

    (void)state;
    for (unsigned e = 0; firn_reserve_engines[e] != NULL; e++) {
        const struct firn_reserve_engine *engine = firn_reserve_engines[e];

        if (!engine->usable()) {
            printf("engine %s: skipped, not usable here\n", engine->name);
            continue;
        }
        for (unsigned round = 0; round < 48; round++) {
            unsigned m = 1U << round % 8, k = 1 + random_below(&random, POINTS - m), lost[128];
            unsigned most = m < k + m ? m : k + m, count = round % 3 == 0 ? most : random_below(&random, most + 1);
            size_t bytes = round % 5 == 0 ? 3968 : 1 + random_below(&random, 300);
            uint8_t *payloads[POINTS];

            make_row(&random, k, m, bytes, payloads);
            random_choose(&random, k + m, count, lost);
            comes_back(&random, engine, k, m, bytes, payloads, lost, count);
        }
    }
}

/* Any engine encodes what the plain one does: odd sizes, all alignments, nothing written past the end. */
static void engines_agree(void **state)
{
    struct random random = random_start("reserve engines");

    (void)state;
    for (unsigned e = 0; firn_reserve_engines[e] != NULL; e++) {
        const struct firn_reserve_engine *engine = firn_reserve_engines[e];

        if (!engine->usable()) {
            printf("engine %s: skipped, not usable here\n", engine->name);
            continue;
        }
        for (unsigned round = 0; round < 96; round++) {
            unsigned m = 1U << round % 8, k = 1 + random_below(&random, POINTS - m);
            size_t bytes = round % 7 == 0 ? MOST_BYTES : random_below(&random, 400);
            uint8_t *payloads[POINTS];
            const uint8_t *const *data = (const uint8_t *const *)payloads;

            place(&random, payloads);
            for (unsigned i = 0; i < k + m; i++)
                random_fill(&random, rooms[i], sizeof rooms[i]);
            memcpy(kept, rooms, sizeof rooms);
            assert_int_equal(firn_reserve_encode_by(engine, k, m, data, payloads + k, bytes, work), FIRN_OK);
            for (unsigned i = 0; i < k + m; i++) {      /* swap: what the engine made is kept */
                static uint8_t swap[MOST_BYTES + 2 * EDGE];

                memcpy(swap, rooms[i], sizeof swap);
                memcpy(rooms[i], kept[i], sizeof swap);
                memcpy(kept[i], swap, sizeof swap);
            }
            assert_int_equal(firn_reserve_encode_by(&firn_reserve_plain, k, m, data, payloads + k, bytes, work),
                             FIRN_OK);
            assert_memory_equal(rooms, kept, sizeof rooms[0] * (k + m));
        }
        printf("engine %s: agrees\n", engine->name);
    }
}

enum { SHEET_BLOCKS = 200, SHEET_BYTES = 8 };

/* A row of a small sheet; returns how many of its blocks lie in the lost run, and puts their columns into lost. */
static unsigned pick_row(const struct firn_sheet_shape *shape, uint32_t row, uint8_t sheet[][SHEET_BYTES],
                         uint32_t start, uint32_t length, uint8_t *payloads[POINTS], unsigned lost[POINTS])
{
    unsigned count = 0;

    for (unsigned column = 0; column < shape->k + shape->m; column++) {
        uint32_t index = firn_sheet_index(shape, row, column);

        payloads[column] = index == UINT32_MAX ? NULL : sheet[index];
        if (index != UINT32_MAX && index >= start && index < start + length)
            lost[count++] = column;
    }
    return count;
}

static void make_sheet(struct random *random, const struct firn_sheet_shape *shape, uint8_t sheet[][SHEET_BYTES])
{
    uint8_t *payloads[POINTS];
    unsigned none[POINTS];

    assert_true(shape->data_blocks + shape->reserve_blocks <= SHEET_BLOCKS);
    random_fill(random, sheet[0], SHEET_BLOCKS * SHEET_BYTES);
    for (uint32_t row = 0; row < shape->rows; row++) {
        assert_int_equal(pick_row(shape, row, sheet, 0, 0, payloads, none), 0);
        assert_int_equal(firn_reserve_encode(shape->k, shape->m, (const uint8_t *const *)payloads, payloads + shape->k,
                                             SHEET_BYTES, work), FIRN_OK);
    }
}

/*
 * Every run of `length` lost blocks, at every start: it all comes back, or some row says that it cannot, and writes
 * nothing.
 */
static void lose_runs(struct random *random, const struct firn_sheet_shape *shape, uint32_t length, bool bearable)
{
    uint8_t whole[SHEET_BLOCKS][SHEET_BYTES], sheet[SHEET_BLOCKS][SHEET_BYTES], before[SHEET_BLOCKS][SHEET_BYTES];
    uint8_t *payloads[POINTS];
    unsigned lost[POINTS];

    make_sheet(random, shape, whole);
    for (uint32_t start = 0; start + length <= shape->data_blocks + shape->reserve_blocks; start++) {
        bool beyond = false;

        memcpy(sheet, whole, sizeof sheet);
        for (uint32_t i = 0; i < length; i++)
            random_fill(random, sheet[start + i], SHEET_BYTES);
        for (uint32_t row = 0; row < shape->rows; row++) {
            unsigned count = pick_row(shape, row, sheet, start, length, payloads, lost);
            enum firn_status status;

            memcpy(before, sheet, sizeof sheet);
            status = firn_reserve_rebuild(shape->k, shape->m, payloads, lost, count, SHEET_BYTES, work);
            assert_int_equal(status, count <= shape->m ? FIRN_OK : FIRN_BEYOND_REPAIR);
            if (status == FIRN_BEYOND_REPAIR) {
                assert_memory_equal(sheet, before, sizeof sheet);
                beyond = true;
            }
        }
        assert_int_equal(beyond, !bearable);
        if (bearable)
            assert_memory_equal(sheet, whole, sizeof sheet);
    }
}

static void runs_as_long_as_the_reserve_come_back(void **state)
{
    static const struct { struct firn_sheet_geometry geometry; uint32_t t; } cases[] = {
        { { 10, 4, 7 }, 70 }, { { 10, 4, 7 }, 66 }, { { 16, 8, 5 }, 80 }, { { 16, 8, 5 }, 77 }, { { 3, 4, 20 }, 41 },
        { { 100, 32, 1 }, 100 },
    };
    struct random random = random_start("runs of lost blocks");

    (void)state;
    for (size_t c = 0; c < sizeof cases / sizeof cases[0]; c++) {
        struct firn_sheet_shape shape;

        assert_int_equal(firn_sheet_shape_of(&cases[c].geometry, cases[c].t, &shape), FIRN_OK);
        lose_runs(&random, &shape, shape.m * shape.rows, true);
        lose_runs(&random, &shape, shape.m * shape.rows + 1, false);
    }
}

static void refuses_what_cannot_be(void **state)
{
    uint8_t bytes[POINTS][8] = { { 0 } }, *payloads[POINTS];
    unsigned lost[8] = { 0, 1, 2, 3, 4, 5, 6, 7 };
    const unsigned twice[2] = { 3, 3 }, descending[2] = { 4, 3 }, outside[1] = { 14 };
    const uint8_t *const *data = (const uint8_t *const *)payloads;

    (void)state;
    for (unsigned i = 0; i < POINTS; i++)
        payloads[i] = bytes[i];
    assert_int_equal(firn_reserve_encode(0, 4, data, payloads, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_encode(4, 0, data, payloads, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_encode(4, 3, data, payloads, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_encode(253, 4, data, payloads, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_encode(1, 256, data, payloads, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_encode(4, 4, data, payloads + 4, 0, work), FIRN_OK);
    assert_int_equal(firn_reserve_rebuild(10, 3, payloads, lost, 1, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_rebuild(10, 4, payloads, lost, 5, 8, work), FIRN_BEYOND_REPAIR);
    assert_int_equal(firn_reserve_rebuild(10, 4, payloads, twice, 2, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_rebuild(10, 4, payloads, descending, 2, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_rebuild(10, 4, payloads, outside, 1, 8, work), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_reserve_rebuild(10, 4, payloads, lost, 0, 8, work), FIRN_OK);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(encodes_the_rows_of_the_specification),
        cmocka_unit_test(agrees_with_isal),
        cmocka_unit_test(every_small_minor_is_regular),
        cmocka_unit_test(every_pattern_of_a_small_row_comes_back),
        cmocka_unit_test(random_patterns_come_back_by_every_engine),
        cmocka_unit_test(engines_agree),
        cmocka_unit_test(runs_as_long_as_the_reserve_come_back),
        cmocka_unit_test(refuses_what_cannot_be),
    };

    return cmocka_run_group_tests_name("reserve", tests, lend_work, take_work_back);
}
