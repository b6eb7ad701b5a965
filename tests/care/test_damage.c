/*
 * tests/care/test_damage.c - the models of damage against the distributions whose names they have
 *
 * Bounds are five standard deviations wide or wider: a right program fails such a check once in a million runs. The
 * seed is printed; FIRN_SEED replays it.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/damage.h"

#include "guard/random.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

enum { ROOM = 8 << 20 };

static struct random dice;

/* A file of `used` zero bytes, spoiled: every bit that is 1 afterwards was flipped. */
struct medium {
    struct firn_store_buffer buffer;
    struct firn_store store;
    struct firn_drill_spoiled spoiled;
};

static void medium_make(struct medium *medium, size_t used)
{
    medium->buffer = (struct firn_store_buffer){ calloc(ROOM, 1), ROOM, used };
    assert_non_null(medium->buffer.bytes);
    firn_store_memory(&medium->buffer, &medium->store);
}

static void medium_free(struct medium *medium)
{
    free(medium->buffer.bytes);
}

static void spoil(struct medium *medium, const struct firn_drill_damage *damage, uint64_t seed, uint64_t trial)
{
    const char *wrong;
    struct firn_fault fault;

    assert_int_equal(firn_damage_check(damage, medium->buffer.used, &wrong), FIRN_OK);
    assert_int_equal(firn_damage_spoil(damage, seed, trial, &medium->store, firn_memory_system(), &medium->spoiled,
                                       &fault), FIRN_OK);
}

static bool bit(const struct medium *medium, uint64_t at)
{
    return medium->buffer.bytes[at / 8] >> at % 8 & 1;
}

static uint64_t ones(const struct medium *medium)
{
    uint64_t count = 0;

    for (size_t i = 0; i < medium->buffer.used; i++)
        for (unsigned b = medium->buffer.bytes[i]; b != 0; b &= b - 1)
            count++;
    return count;
}

static void within(double seen, double expected, double deviation, const char *what)
{
    if (fabs(seen - expected) > 5 * deviation)
        fail_msg("%s: %g, expected %g, standard deviation %g", what, seen, expected, deviation);
}

/* --- the same everywhere --- */

/* The first numbers from the seed 1234567, as they are widely published for this generator (from memory). */
static void draws_the_published_numbers(void **state)
{
    static const uint64_t published[] = {
        UINT64_C(6457827717110365317), UINT64_C(3203168211198807973), UINT64_C(9817491932198370423),
        UINT64_C(4593380528125082431), UINT64_C(16408922859458223821)
    };
    uint64_t seed = 1234567;

    (void)state;
    for (size_t i = 0; i < sizeof published / sizeof published[0]; i++)
        assert_true(firn_damage_random(&seed) == published[i]);
}

/* Places computed by a program in another language, written from the contracts in care/damage.h. */
static void spoils_the_same_bytes_everywhere(void **state)
{
    static const uint64_t flips[] = { 354, 1275, 3697, 3873, 3899, 4257, 6562, 6793 };
    static const uint64_t losses[] = { 60, 69, 74, 94, 115, 240 };
    struct firn_drill_damage damage = { .flip_rate = 1e-3 };
    struct medium medium;
    size_t found = 0;

    (void)state;
    medium_make(&medium, ROOM);
    spoil(&medium, &damage, 17, 1);
    for (uint64_t at = 0; found < sizeof flips / sizeof flips[0]; at++)
        if (bit(&medium, at))
            assert_true(at == flips[found++]);
    memset(medium.buffer.bytes, 0, ROOM);
    damage = (struct firn_drill_damage){ .lose_rate = 0.02 };
    spoil(&medium, &damage, 17, 1);
    found = 0;
    for (uint64_t block = 0; found < sizeof losses / sizeof losses[0]; block++) {
        unsigned set = 0;

        for (size_t i = 0; i < 4096; i++)
            set += medium.buffer.bytes[block * 4096 + i] != 0;
        assert_true(set == 0 || set > 3900);      /* random bytes are zero once in 256 */
        if (set > 0)
            assert_true(block == losses[found++]);
    }
    medium_free(&medium);
}

static void repeats_itself_and_only_itself(void **state)
{
    struct firn_drill_damage damage = {
        .flip_rate = 1e-4, .lose_rate = 0.01, .good_to_bad = 1e-5, .bad_to_good = 0.01, .wrong_in_bad = 0.5,
        .runs = { 50000, 7 }, .run_count = 2, .cut_bytes = 1000
    };
    struct medium one, other;
    uint64_t seed = random_next(&dice);

    (void)state;
    medium_make(&one, 3000001);
    medium_make(&other, 3000001);
    spoil(&one, &damage, seed, 5);
    spoil(&other, &damage, seed, 5);
    assert_int_equal(one.buffer.used, 2999001);
    assert_memory_equal(one.buffer.bytes, other.buffer.bytes, ROOM);
    assert_memory_equal(&one.spoiled, &other.spoiled, sizeof one.spoiled);
    medium_free(&other);
    for (unsigned i = 0; i < 2; i++) {      /* another trial, another seed */
        medium_make(&other, 3000001);
        spoil(&other, &damage, seed + i, 5 + !i);
        assert_memory_not_equal(one.buffer.bytes, other.buffer.bytes, 2999001);
        medium_free(&other);
    }
    medium_free(&one);
}

/* What one model does is what it does alone: put together, flips show as the XOR of both. */
static void models_do_not_touch_each_other(void **state)
{
    struct firn_drill_damage flips = { .flip_rate = 1e-3 };
    struct firn_drill_damage bursts = { .good_to_bad = 1e-4, .bad_to_good = 0.01, .wrong_in_bad = 0.5 }, both = bursts;
    struct medium a, b, together;
    uint64_t seed = random_next(&dice);

    (void)state;
    both.flip_rate = flips.flip_rate;
    medium_make(&a, 1 << 20);
    medium_make(&b, 1 << 20);
    medium_make(&together, 1 << 20);
    spoil(&a, &flips, seed, 1);
    spoil(&b, &bursts, seed, 1);
    spoil(&together, &both, seed, 1);
    for (size_t i = 0; i < 1 << 20; i++)
        assert_int_equal(together.buffer.bytes[i], a.buffer.bytes[i] ^ b.buffer.bytes[i]);
    medium_free(&a);
    medium_free(&b);
    medium_free(&together);
}

/* --- distributions --- */

/* Waiting times have mean (1 - p) / p and variance (1 - p) / p^2; P(wait >= n) = (1 - p)^n. */
static void waits_are_geometric(void **state)
{
    static const double rates[] = { 1, 0.5, 0.1, 0.003, 1e-7 };
    enum { DRAWS = 200000 };
    uint64_t seed = random_next(&dice);

    (void)state;
    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++) {
        double p = rates[i], sum = 0, beyond = 0, n = floor(0.7 / p), tail = pow(1 - p, n);
        struct firn_damage_wait wait;

        firn_damage_wait_make(p, &wait);
        for (unsigned j = 0; j < DRAWS; j++) {
            double drawn = (double)firn_damage_wait_next(&wait, &seed);

            sum += drawn;
            beyond += drawn >= n;
        }
        within(sum / DRAWS, (1 - p) / p, sqrt((1 - p) / DRAWS) / p, "mean waiting time");
        within(beyond, DRAWS * tail, sqrt(DRAWS * tail * (1 - tail)), "long waits");
    }
}

/* Flips in cells of 512 bits are binomial: Pearson's chi-square over the counts that occur often enough. */
static void flips_are_binomial(void **state)
{
    static const double rates[] = { 1e-4, 2e-3, 0.02 };
    enum { CELL_BYTES = 64, CELL_BITS = 512, CELLS = ROOM / CELL_BYTES };

    (void)state;
    for (size_t r = 0; r < sizeof rates / sizeof rates[0]; r++) {
        struct firn_drill_damage damage = { .flip_rate = rates[r] };
        double p = rates[r], chance = pow(1 - p, CELL_BITS), square = 0, rest = CELLS, seen_rest = CELLS;
        unsigned seen[CELL_BITS + 1] = { 0 }, classes = 0;
        struct medium medium;

        medium_make(&medium, ROOM);
        spoil(&medium, &damage, random_next(&dice), 1);
        assert_true(ones(&medium) == medium.spoiled.flipped_bits);
        within((double)medium.spoiled.flipped_bits, 8.0 * ROOM * p, sqrt(8.0 * ROOM * p * (1 - p)), "flips");
        for (size_t cell = 0; cell < CELLS; cell++) {
            unsigned count = 0;

            for (size_t i = 0; i < CELL_BITS; i++)
                count += bit(&medium, cell * CELL_BITS + i);
            seen[count]++;
        }
        for (unsigned k = 0; k <= CELL_BITS; k++) {
            double expected = chance * CELLS;

            if (expected >= 10) {
                square += (seen[k] - expected) * (seen[k] - expected) / expected;
                rest -= expected;
                seen_rest -= seen[k];
                classes++;
            }
            chance *= (double)(CELL_BITS - k) / (k + 1) * p / (1 - p);
        }
        if (rest >= 10) {
            square += (seen_rest - rest) * (seen_rest - rest) / rest;
            classes++;
        }
        assert_true(classes >= 2);
        /* chi-square with f degrees of freedom: mean f, variance 2 f, and a tail that five deviations do not cover */
        assert_true(square < classes + 10 * sqrt(2.0 * classes));
        medium_free(&medium);
    }
}

static void losses_are_binomial(void **state)
{
    struct firn_drill_damage damage = { .lose_rate = 0.05 };
    double lost = 0, blocks = 0;

    (void)state;
    for (uint64_t trial = 1; trial <= 40; trial++) {
        struct medium medium;

        medium_make(&medium, 300 * 4096 + 100);
        spoil(&medium, &damage, random_next(&dice), trial);
        lost += (double)medium.spoiled.lost_blocks;
        blocks += 301;
        medium_free(&medium);
    }
    within(lost, blocks * 0.05, sqrt(blocks * 0.05 * 0.95), "lost blocks");
}

/*
 * Gilbert's chain, seen in the bits alone: with every bit of a burst wrong and no other, runs of ones are bursts. The
 * share of time in the bad state is p / (p + r), and the variance of the time spent there over n steps is n pi (1 - pi)
 * (1 + l) / (1 - l), l = 1 - p - r being the chain's second eigenvalue. Runs last 1 / r, with variance (1 - r) / r^2.
 */
static void bursts_are_stationary(void **state)
{
    static const struct { double p, r; } chains[] = { { 0.01, 0.1 }, { 1e-4, 0.01 }, { 0.2, 0.3 }, { 0.5, 1 } };

    (void)state;
    for (size_t c = 0; c < sizeof chains / sizeof chains[0]; c++) {
        double p = chains[c].p, r = chains[c].r, bits = 8.0 * ROOM, share = p / (p + r), l = 1 - p - r, runs = 0, bad;
        struct firn_drill_damage damage = { .good_to_bad = p, .bad_to_good = r, .wrong_in_bad = 1 };
        struct medium medium;

        medium_make(&medium, ROOM);
        spoil(&medium, &damage, random_next(&dice), 1);
        bad = (double)ones(&medium);
        for (uint64_t at = 0; at < UINT64_C(8) * ROOM; at++)
            runs += bit(&medium, at) && (at == 0 || !bit(&medium, at - 1));
        assert_true(bad == (double)medium.spoiled.bad_bits);
        assert_true(bad == (double)medium.spoiled.burst_bits);
        assert_true(runs == (double)medium.spoiled.bursts);
        within(bad, bits * share, sqrt(bits * share * (1 - share) * (1 + l) / (1 - l)), "bits in the bad state");
        within(bad / runs, 1 / r, sqrt((1 - r) / runs) / r + 1e-9, "mean length of a burst");
        medium_free(&medium);
    }
}

/* Gilbert's example of h = 0.5: p = 0.01, r = 0.1 give a bit error rate of 0.0454545 (recomputed from his formula). */
static void bursts_have_gilberts_error_rate(void **state)
{
    struct firn_drill_damage damage = { .good_to_bad = 0.01, .bad_to_good = 0.1, .wrong_in_bad = 0.5 };
    double bits = 8.0 * ROOM, share = 0.0909091, l = 0.89;
    struct medium medium;

    (void)state;
    medium_make(&medium, ROOM);
    spoil(&medium, &damage, random_next(&dice), 1);
    within((double)ones(&medium) / bits, 0.0454545, sqrt(share * (1 + l) / (1 - l) / bits), "bit error rate");
    /* Elliott's: errors in the good state too, pi_G (1 - k) + pi_B (1 - h) */
    memset(medium.buffer.bytes, 0, ROOM);
    damage.wrong_in_good = 0.001;
    spoil(&medium, &damage, random_next(&dice), 1);
    within((double)ones(&medium) / bits, 0.0454545 + 0.001 * 0.9090909, sqrt(share * (1 + l) / (1 - l) / bits),
           "bit error rate with errors in the good state");
    medium_free(&medium);
}

/* A run lies anywhere with the same chance: its mean start is the middle, and it is exactly as long as asked. */
static void runs_lie_anywhere(void **state)
{
    enum { BYTES = 100000, RUN = 3000, TRIALS = 2000 };
    struct firn_drill_damage damage = { .runs = { RUN }, .run_count = 1 };
    double sum = 0, span = BYTES - RUN;

    (void)state;
    for (uint64_t trial = 1; trial <= TRIALS; trial++) {
        struct medium medium;
        size_t first = 0, last = BYTES - 1;

        medium = (struct medium){ .buffer = { calloc(BYTES, 1), BYTES, BYTES } };
        assert_non_null(medium.buffer.bytes);
        firn_store_memory(&medium.buffer, &medium.store);
        spoil(&medium, &damage, random_next(&dice), trial);
        while (first < BYTES && medium.buffer.bytes[first] == 0)
            first++;
        while (last > first && medium.buffer.bytes[last] == 0)
            last--;
        assert_in_range(last - first + 1, RUN - 8, RUN);      /* a random byte at its ends may be zero */
        assert_int_equal(medium.spoiled.run_bytes, RUN);
        sum += (double)first;
        medium_free(&medium);
    }
    within(sum / TRIALS, span / 2, span / sqrt(12.0 * TRIALS) + 1, "mean start of a run");
}

static void nothing_asked_is_nothing_done(void **state)
{
    struct firn_drill_damage damage = { 0 };
    struct medium medium;

    (void)state;
    medium_make(&medium, 12345);
    spoil(&medium, &damage, random_next(&dice), 1);
    assert_int_equal(medium.buffer.used, 12345);
    assert_true(ones(&medium) == 0);
    medium_free(&medium);
}

static void refuses_what_is_no_chance(void **state)
{
    static const struct firn_drill_damage wrong[] = {
        { .flip_rate = -0.1 }, { .flip_rate = 1.5 }, { .flip_rate = NAN }, { .lose_rate = 2 },
        { .good_to_bad = 0.1 }, { .good_to_bad = 0.1, .bad_to_good = 7 }, { .runs = { 1001 }, .run_count = 1 },
        { .wrong_in_bad = -1 }, { .run_count = FIRN_DRILL_RUNS_MAX + 1 },
    };

    (void)state;
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        const char *words = NULL;

        assert_int_equal(firn_damage_check(&wrong[i], 1000, &words), FIRN_BAD_ARGUMENT);
        assert_non_null(words);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(draws_the_published_numbers),
        cmocka_unit_test(spoils_the_same_bytes_everywhere),
        cmocka_unit_test(repeats_itself_and_only_itself),
        cmocka_unit_test(models_do_not_touch_each_other),
        cmocka_unit_test(waits_are_geometric),
        cmocka_unit_test(flips_are_binomial),
        cmocka_unit_test(losses_are_binomial),
        cmocka_unit_test(bursts_are_stationary),
        cmocka_unit_test(bursts_have_gilberts_error_rate),
        cmocka_unit_test(runs_lie_anywhere),
        cmocka_unit_test(nothing_asked_is_nothing_done),
        cmocka_unit_test(refuses_what_is_no_chance),
    };

    dice = random_start("test_damage");
    return cmocka_run_group_tests_name("care: models of damage", tests, NULL, NULL);
}
