/*
 * tests/guard/test_columns.c - errors and erasures of columns: all patterns of tiny codes, chance patterns of large
 * ones
 *
 * The bound is that of Reed and Solomon (1960): e errors and f erasures with 2 e + f <= m come back. What is expected
 * is always what was written; where more is wrong than the code can bear, a column that is said to be solved must be
 * a word of the code, which the reserve computes independently. SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/columns.h"

#include "random.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>

enum { MOST = FIRN_COLUMNS_PAYLOADS_MOST, BYTES = FIRN_COLUMNS_BYTES_MOST };

static uint8_t written[MOST][BYTES], spoilt[MOST][BYTES], solved[BYTES], standings[MOST];
static uint32_t wrong[MOST];
static uint8_t *payloads[MOST];
static uint8_t *work, *reserve_work;

static int lend_work(void **state)
{
    (void)state;
    work = aligned_alloc(64, (firn_columns_work_bytes() + 63) / 64 * 64);
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

/* A row of the code, in `written` and in `spoilt`, all of it as read. */
static void write_row(struct random *random, unsigned k, unsigned m)
{
    const uint8_t *data[MOST];
    uint8_t *reserve[MOST];

    for (unsigned i = 0; i < k; i++) {
        random_fill(random, written[i], BYTES);
        data[i] = written[i];
    }
    for (unsigned j = 0; j < m; j++)
        reserve[j] = written[k + j];
    assert_int_equal(firn_reserve_encode(k, m, data, reserve, BYTES, reserve_work), FIRN_OK);
    memcpy(spoilt, written, sizeof spoilt);
    memset(standings, FIRN_COLUMNS_READ, sizeof standings);
    memset(solved, 0, sizeof solved);
    memset(wrong, 0, sizeof wrong);
    for (unsigned i = 0; i < MOST; i++)
        payloads[i] = spoilt[i];
}

static struct firn_columns_row row_of(unsigned k, unsigned m, size_t bytes, unsigned chance_bits)
{
    return (struct firn_columns_row){ k, m, payloads, standings, bytes, chance_bits };
}

/* Whether column b, with what is gone taken as it was written, is a word of the code. */
static bool is_word(unsigned k, unsigned m, size_t b)
{
    const uint8_t *data[MOST];
    uint8_t made[MOST], *reserve[MOST], column[MOST];

    for (unsigned i = 0; i < k + m; i++)
        column[i] = standings[i] == FIRN_COLUMNS_GONE ? written[i][b] : spoilt[i][b];
    for (unsigned i = 0; i < k; i++)
        data[i] = column + i;
    for (unsigned j = 0; j < m; j++)
        reserve[j] = made + j;
    assert_int_equal(firn_reserve_encode(k, m, data, reserve, 1, reserve_work), FIRN_OK);
    return memcmp(made, column + k, m) == 0;
}

/* --- tiny codes --- */

/* Columns that carry one pattern each, until all are used; then they are decoded, checked, and used again. */
struct bench {
    unsigned k, m, gone;      /* gone: a set of positions */
    size_t used;
    uint64_t patterns;
};

static void decode_bench(struct bench *bench)
{
    const unsigned n = bench->k + bench->m;
    struct firn_columns_row row = row_of(bench->k, bench->m, bench->used, 0);

    memset(solved, 0, sizeof solved);
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_OK);
    for (size_t b = 0; b < bench->used; b++)
        assert_int_equal(solved[b], 1);
    for (unsigned i = 0; i < n; i++) {
        if (standings[i] == FIRN_COLUMNS_READ)
            assert_memory_equal(spoilt[i], written[i], bench->used);
        else      /* what is gone is neither read nor written: the noise there is still noise */
            for (size_t b = 0; b < bench->used; b++)
                assert_int_equal(spoilt[i][b], written[i][b] ^ 0x5A);
    }
    bench->patterns += bench->used;
    bench->used = 0;
}

/* All values of the errors at the `left` positions of `set` from `from` on. */
static void spoil_all_values(struct bench *bench, unsigned set, unsigned from, unsigned char *values)
{
    while (from < MOST && from < bench->k + bench->m && (set >> from & 1) == 0)
        from++;
    if (from == bench->k + bench->m) {
        for (unsigned i = 0; i < from; i++)
            if ((set >> i & 1) != 0)
                spoilt[i][bench->used] = written[i][bench->used] ^ values[i];
        if (++bench->used == BYTES)
            decode_bench(bench);
        return;
    }
    for (unsigned value = 1; value < 256; value++) {
        values[from] = (unsigned char)value;
        spoil_all_values(bench, set, from + 1, values);
    }
}

static unsigned size_of(unsigned set)
{
    unsigned size = 0;

    for (; set != 0; set &= set - 1)
        size++;
    return size;
}

static uint64_t binomial(unsigned n, unsigned r)
{
    return r == 0 ? 1 : binomial(n, r - 1) * (n - r + 1) / r;
}

/* How many patterns there are: the sum of C(n, f) C(n - f, e) 255^e. */
static uint64_t count_patterns(unsigned n, unsigned m)
{
    uint64_t count = 0;

    for (unsigned f = 0; f < m; f++) {
        uint64_t values = 1;

        for (unsigned e = 0; 2 * e + f <= m && e + f <= n; e++, values *= 255)
            count += binomial(n, f) * binomial(n - f, e) * values;
    }
    return count;
}

/* Every set of erasures, every set of errors beside it within the bound, every value of the errors. */
static void every_pattern(struct random *random, unsigned k, unsigned m)
{
    const unsigned n = k + m, sets = 1U << n;
    struct bench bench = { .k = k, .m = m };
    unsigned char values[MOST];

    for (bench.gone = 0; bench.gone < sets; bench.gone++) {
        if (size_of(bench.gone) >= m)      /* one syndrome at least, or there is nothing to decode */
            continue;
        write_row(random, k, m);
        for (unsigned i = 0; i < n; i++)
            if ((bench.gone >> i & 1) != 0) {
                standings[i] = FIRN_COLUMNS_GONE;
                for (size_t b = 0; b < BYTES; b++)
                    spoilt[i][b] ^= 0x5A;
            }
        for (unsigned set = 0; set < sets; set++)
            if ((set & bench.gone) == 0 && 2 * size_of(set) + size_of(bench.gone) <= m)
                spoil_all_values(&bench, set, 0, values);
        if (bench.used > 0)
            decode_bench(&bench);
    }
    printf("k = %u, m = %u: %llu patterns\n", k, m, (unsigned long long)bench.patterns);
    assert_int_equal(bench.patterns, count_patterns(n, m));
}

static void every_pattern_of_tiny_codes_comes_back(void **state)
{
    static const struct { unsigned k, m; } codes[] = { { 1, 2 }, { 2, 2 }, { 5, 2 }, { 1, 4 }, { 2, 4 }, { 3, 4 } };
    struct random random = random_start("every pattern");

    (void)state;
    for (size_t i = 0; i < sizeof codes / sizeof codes[0]; i++)
        every_pattern(&random, codes[i].k, codes[i].m);
}

/* --- large codes --- */

/* Errors of any value at e chance positions of column b that are not gone. */
static void spoil_column(struct random *random, unsigned n, size_t b, unsigned e)
{
    for (unsigned done = 0; done < e;) {
        unsigned i = random_below(random, n);

        if (standings[i] == FIRN_COLUMNS_READ && spoilt[i][b] == written[i][b]) {
            spoilt[i][b] ^= (uint8_t)(1 + random_below(random, 255));
            done++;
        }
    }
}

static void large_row(struct random *random, const struct firn_reserve_engine *engine, unsigned k, unsigned m,
                      unsigned f)
{
    const unsigned n = k + m;
    unsigned gone[MOST];
    uint32_t spoilt_count = 0, counted = 0;
    struct firn_columns_row row = row_of(k, m, BYTES, 0);

    write_row(random, k, m);
    random_choose(random, n, f, gone);
    for (unsigned i = 0; i < f; i++)
        standings[gone[i]] = FIRN_COLUMNS_GONE;
    for (size_t b = 0; b < BYTES; b++) {
        unsigned e = random_below(random, (m - f) / 2 + 1);

        spoil_column(random, n, b, e);
        spoilt_count += e;
    }
    assert_int_equal(firn_columns_mend_by(engine, &row, solved, wrong, work), FIRN_OK);
    for (size_t b = 0; b < BYTES; b++)
        assert_int_equal(solved[b], 1);
    for (unsigned i = 0; i < n; i++)
        if (standings[i] == FIRN_COLUMNS_READ)
            assert_memory_equal(spoilt[i], written[i], BYTES);
    for (unsigned i = 0; i < n; i++)
        counted += wrong[i];
    assert_int_equal(counted, spoilt_count);
}

static void large_codes_come_back_by_every_engine(void **state)
{
    static const struct { unsigned k, m, f; } rows[] = {
        { 224, 32, 0 }, { 224, 32, 13 }, { 224, 32, 31 }, { 28, 4, 0 }, { 252, 4, 1 }, { 160, 8, 3 }, { 100, 16, 0 },
        { 64, 64, 20 }, { 128, 128, 0 }, { 128, 128, 61 }
    };
    struct random random = random_start("large codes");

    (void)state;
    for (unsigned i = 0; firn_reserve_engines[i] != NULL; i++) {
        if (!firn_reserve_engines[i]->usable()) {
            printf("skipped: %s\n", firn_reserve_engines[i]->name);
            continue;
        }
        for (size_t j = 0; j < sizeof rows / sizeof rows[0]; j++)
            large_row(&random, firn_reserve_engines[i], rows[j].k, rows[j].m, rows[j].f);
    }
}

/* One error more than the code bears: left alone, or made a word of the code and called solved; never anything else. */
static void beyond_the_bound_nothing_is_half_done(void **state)
{
    static const struct { unsigned k, m, chance_bits; } rows[] = {
        { 224, 32, 10 }, { 28, 4, 10 }, { 28, 4, 0 }, { 252, 4, 0 }, { 160, 8, 0 }
    };
    struct random random = random_start("beyond the bound");

    (void)state;
    for (size_t r = 0; r < sizeof rows / sizeof rows[0]; r++) {
        const unsigned k = rows[r].k, m = rows[r].m, n = k + m;
        struct firn_columns_row row = row_of(k, m, BYTES, rows[r].chance_bits);
        static uint8_t before[MOST][BYTES];
        unsigned believed = 0;

        write_row(&random, k, m);
        for (size_t b = 0; b < BYTES; b++)
            spoil_column(&random, n, b, m / 2 + 1);
        memcpy(before, spoilt, sizeof before);
        assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_OK);
        for (size_t b = 0; b < BYTES; b++) {
            believed += solved[b];
            if (solved[b])
                assert_true(is_word(k, m, b));
            else
                for (unsigned i = 0; i < n; i++)
                    assert_int_equal(spoilt[i][b], before[i][b]);
        }
        printf("k = %u, m = %u, 2^-%u: %u of %u columns made a wrong word\n", k, m, rows[r].chance_bits, believed,
               (unsigned)BYTES);
        /* BYTES / 1024 are expected at most where the chance is bounded; 40 would be more than a billion to one */
        if (rows[r].chance_bits > 0)
            assert_true(believed < 40);
    }
}

/* --- what is known --- */

static void known_payloads_are_never_touched(void **state)
{
    struct random random = random_start("known");
    struct firn_columns_row row = row_of(60, 8, BYTES, 10);

    (void)state;
    write_row(&random, 60, 8);
    payloads[7] = NULL;      /* a payload of zeros that is not stored */
    memset(written[7], 0, BYTES);
    standings[7] = standings[11] = standings[62] = FIRN_COLUMNS_KNOWN;
    {
        const uint8_t *data[60];
        uint8_t *reserve[8];

        for (unsigned i = 0; i < 60; i++)
            data[i] = i == 7 ? NULL : written[i];
        for (unsigned j = 0; j < 8; j++)
            reserve[j] = written[60 + j];
        assert_int_equal(firn_reserve_encode(60, 8, data, reserve, BYTES, reserve_work), FIRN_OK);
        memcpy(spoilt, written, sizeof spoilt);
    }
    for (size_t b = 0; b < BYTES; b++)
        spoil_column(&random, 68, b, 1 + (unsigned)(b % 2));
    for (size_t b = 0; b < BYTES; b += 2)
        spoilt[11][b] ^= 1;      /* a contradiction: what is known is wrong */
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_OK);
    for (size_t b = 0; b < BYTES; b++) {
        assert_int_equal(solved[b], b % 2);
        assert_int_equal(spoilt[11][b], written[11][b] ^ (b % 2 == 0));
    }
    for (size_t b = 1; b < BYTES; b += 2)
        for (unsigned i = 0; i < 68; i++)
            assert_int_equal(spoilt[i][b], written[i][b]);
    assert_int_equal(wrong[7] + wrong[11] + wrong[62], 0);
}

static void solved_columns_are_left_as_they_are(void **state)
{
    struct random random = random_start("solved");
    struct firn_columns_row row = row_of(20, 4, BYTES, 0);

    (void)state;
    write_row(&random, 20, 4);
    for (size_t b = 0; b < BYTES; b++)
        spoilt[3][b] ^= 0x81;
    for (size_t b = 0; b < BYTES; b += 3)
        solved[b] = 1;
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_OK);
    for (size_t b = 0; b < BYTES; b++) {
        assert_int_equal(spoilt[3][b], written[3][b] ^ (b % 3 == 0 ? 0x81 : 0));
        assert_int_equal(solved[b], 1);
    }
    assert_int_equal(wrong[3], BYTES - (BYTES + 2) / 3);
}

static void bad_rows_are_refused(void **state)
{
    struct random random = random_start("refused");
    struct firn_columns_row row = row_of(20, 4, BYTES, 0);

    (void)state;
    write_row(&random, 20, 4);
    memset(standings, FIRN_COLUMNS_GONE, 5);
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_BEYOND_REPAIR);
    standings[4] = FIRN_COLUMNS_READ;      /* four gone of four: nothing is left to tell right from wrong */
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_OK);
    for (size_t b = 0; b < BYTES; b++)
        assert_int_equal(solved[b], 0);
    row.m = 3;
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_BAD_ARGUMENT);
    row = row_of(253, 4, BYTES, 0);
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_BAD_ARGUMENT);
    row = row_of(20, 4, BYTES + 1, 0);
    assert_int_equal(firn_columns_mend(&row, solved, wrong, work), FIRN_BAD_ARGUMENT);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_pattern_of_tiny_codes_comes_back),
        cmocka_unit_test(large_codes_come_back_by_every_engine),
        cmocka_unit_test(beyond_the_bound_nothing_is_half_done),
        cmocka_unit_test(known_payloads_are_never_touched),
        cmocka_unit_test(solved_columns_are_left_as_they_are),
        cmocka_unit_test(bad_rows_are_refused),
    };

    return cmocka_run_group_tests(tests, lend_work, take_work_back);
}
