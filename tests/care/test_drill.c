/*
 * tests/care/test_drill.c - drills: survival against the exact binomial tail, and an honest account of each trial
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/drill_store.h"

#include "guard/random.h"
#include "help/collection.h"
#include "help/fault_memory.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

static const struct firn_sheet_geometry geometry = { .k = 14, .m = 4, .depth = 8 };
static struct collection *packed;
static struct random dice;

struct rehearsal {
    struct firn_store_buffer original, copy;
    struct firn_drill_options options;
    struct firn_drill_report report;
    struct firn_fault fault;
    enum firn_status status;
    unsigned trials;
    struct firn_drill_trial last;
    unsigned wrong;                    /* accounts that contradict themselves */
    unsigned stops_left;
};

static void take_trial(void *self, const struct firn_drill_trial *trial)
{
    struct rehearsal *r = self;

    r->trials++;
    r->last = *trial;
    r->wrong += trial->number != r->trials || trial->blocks_wrong != 0;
    r->wrong += trial->whole && trial->blocks_lost != 0;
    r->wrong += trial->whole != (trial->recognised && trial->blocks_lost == 0);
    r->wrong += trial->blocks_lost == 0 && trial->recognised && trial->items_whole != trial->items;
}

static bool stop_later(void *self)
{
    struct rehearsal *r = self;

    return r->stops_left > 0 && --r->stops_left == 0;
}

static void rehearse_with(struct rehearsal *r, const struct firn_memory *memory)
{
    struct firn_store original, copy;
    size_t room = packed->buffer.used;

    r->original = packed->buffer;
    r->copy = (struct firn_store_buffer){ malloc(room), room, 0 };
    assert_non_null(r->copy.bytes);
    firn_store_memory(&r->original, &original);
    firn_store_memory(&r->copy, &copy);
    r->options.memory = memory;
    r->options.self = r;
    r->options.threads = 1;
    r->options.path = "the original";
    r->options.stop = stop_later;
    r->options.trial = take_trial;
    r->status = firn_drill_store(&r->options, &original, &copy, &r->report, &r->fault);
    free(r->copy.bytes);
}

static void rehearse(struct rehearsal *r)
{
    rehearse_with(r, firn_memory_system());
}

/* P(X <= most), X binomial, 0 < p < 1 */
static double binomial_tail(unsigned trials, double p, unsigned most)
{
    double sum = 0;

    for (unsigned i = 0; i <= most; i++)
        sum += exp(lgamma(trials + 1.0) - lgamma(i + 1.0) - lgamma(trials - i + 1.0) + i * log(p)
                   + (trials - i) * log1p(-p));
    return sum;
}

enum { FULL_BLOCKS = 8 * 18, FULL_DATA = 8 * 14 };

/* The shape of the short sheet at the end, found by its number of blocks. */
static struct firn_sheet_shape last_sheet(size_t blocks)
{
    struct firn_sheet_shape shape;

    for (uint32_t data = 1; data < FULL_DATA; data++)
        if (firn_sheet_shape_of(&geometry, data, &shape) == FIRN_OK &&
            shape.data_blocks + shape.reserve_blocks == blocks)
            return shape;
    fail_msg("no sheet has %zu blocks", blocks);
    return shape;
}

/*
 * A container comes back whole when no row lost more than m blocks; rows are counted here from the specification
 * (format-spec/sheet.md): the block with index q is in row q mod D, and a full sheet has D = 8 rows of 18.
 */
static double survival(double p)
{
    size_t blocks = packed->buffer.used / 4096 - 1, in_last = blocks % FULL_BLOCKS;
    struct firn_sheet_shape shape = last_sheet(in_last);
    double all = pow(binomial_tail(18, p, 4), (double)(blocks / FULL_BLOCKS * 8));

    for (uint32_t row = 0; row < shape.rows; row++)
        all *= binomial_tail((unsigned)((in_last - row + shape.rows - 1) / shape.rows), p, shape.m);
    return all;
}

static void survives_as_the_binomial_says(void **state)
{
    static const double rates[] = { 0.03, 0.06, 0.08, 0.1 };
    enum { TRIALS = 400 };

    (void)state;
    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++) {
        struct rehearsal r = { .options = { .damage.lose_rate = rates[i], .trials = TRIALS,
                                            .seed = random_next(&dice) } };
        double p = survival(rates[i]), below, above;
        unsigned whole;

        rehearse(&r);
        assert_int_equal(r.status, FIRN_OK);
        assert_int_equal(r.report.trials, TRIALS);
        assert_int_equal(r.trials, TRIALS);
        assert_int_equal(r.wrong, 0);
        whole = (unsigned)r.report.whole;
        below = binomial_tail(TRIALS, p, whole);
        above = whole == 0 ? 1 : 1 - binomial_tail(TRIALS, p, whole - 1);
        print_message("lose rate %g: whole in %u of %u trials, expected %.1f\n", rates[i], whole, (unsigned)TRIALS,
                      TRIALS * p);
        assert_true(p > 0.02 && p < 0.9999);
        assert_true(below > 1e-7 && above > 1e-7);
    }
}

static void repeats_itself(void **state)
{
    struct rehearsal one = { .options = { .damage = { .flip_rate = 1e-5, .lose_rate = 0.05 }, .trials = 3,
                                          .seed = 9 } };
    struct rehearsal other = one;

    (void)state;
    rehearse(&one);
    rehearse(&other);
    assert_int_equal(one.status, FIRN_OK);
    assert_memory_equal(&one.report, &other.report, sizeof one.report);
    assert_memory_equal(&one.last.spoiled, &other.last.spoiled, sizeof one.last.spoiled);
    assert_int_equal(one.last.blocks_rebuilt, other.last.blocks_rebuilt);
    assert_true(one.last.spoiled.lost_blocks > 0);
}

/* A run costs one block more than its length by lying across them; the short sheet at the end has the least reserve. */
static void a_run_within_the_reserve_comes_back(void **state)
{
    struct firn_sheet_shape shape = last_sheet((packed->buffer.used / 4096 - 1) % FULL_BLOCKS);
    uint64_t run = (shape.reserve_blocks - UINT64_C(1)) * 4096;
    struct rehearsal r = { .options = { .damage = { .runs = { run }, .run_count = 1 }, .trials = 30,
                                        .seed = random_next(&dice) } };

    (void)state;
    rehearse(&r);
    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.report.whole, 30);
    assert_int_equal(r.report.least_items_whole, r.report.items);
    assert_int_equal(r.wrong, 0);
}

/* Cut to a third: some items are lost; the account says so and is not taken for success. */
static void a_cut_beyond_the_reserve_is_told(void **state)
{
    uint64_t bytes = packed->buffer.used;
    struct rehearsal r = { .options = { .damage.cut_bytes = bytes - bytes / 3, .trials = 1, .seed = 1 } };

    (void)state;
    rehearse(&r);
    assert_int_equal(r.status, FIRN_OK);
    assert_true(r.last.recognised);
    assert_false(r.last.whole);
    assert_int_equal(r.last.spoiled.cut_bytes, bytes - bytes / 3);
    assert_true(r.last.items_whole < r.last.items);
    assert_true(r.last.blocks_lost >= (bytes - bytes / 3) / 4096 - 32);
    assert_int_equal(r.wrong, 0);
}

static void beyond_recognition_is_an_outcome(void **state)
{
    struct rehearsal r = { .options = { .damage.lose_rate = 1, .trials = 2, .seed = 1 } };

    (void)state;
    rehearse(&r);
    assert_int_equal(r.status, FIRN_OK);
    assert_int_equal(r.report.whole, 0);
    assert_false(r.last.recognised);
    assert_int_equal(r.last.items_whole, 0);
}

static void a_damaged_original_is_refused(void **state)
{
    struct rehearsal r = { .options = { .trials = 1, .seed = 1 } };

    (void)state;
    packed->buffer.bytes[5 * 4096 + 77] ^= 16;
    rehearse(&r);
    packed->buffer.bytes[5 * 4096 + 77] ^= 16;
    assert_int_equal(r.status, FIRN_BAD_DATA);
    assert_int_equal(r.trials, 0);
    packed->buffer.bytes[5] ^= 16;      /* its title page */
    rehearse(&r);
    packed->buffer.bytes[5] ^= 16;
    assert_int_equal(r.status, FIRN_BAD_DATA);
}

static void the_original_is_left_alone(void **state)
{
    struct rehearsal r = { .options = { .damage = { .lose_rate = 0.3, .flip_rate = 1e-4, .cut_bytes = 9999 },
                                        .trials = 2, .seed = random_next(&dice) } };
    uint8_t *before = malloc(packed->buffer.used);
    size_t bytes = packed->buffer.used;

    (void)state;
    assert_non_null(before);
    memcpy(before, packed->buffer.bytes, bytes);
    rehearse(&r);
    assert_int_equal(packed->buffer.used, bytes);
    assert_memory_equal(packed->buffer.bytes, before, bytes);
    free(before);
}

static void stops_when_asked(void **state)
{
    (void)state;
    for (unsigned calls = 1; calls < 60; calls += 7) {
        struct rehearsal r = { .options = { .damage.lose_rate = 0.02, .trials = 1000, .seed = 3 },
                               .stops_left = calls };

        rehearse(&r);
        assert_int_equal(r.status, FIRN_STOPPED);
    }
}

static void lives_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    unsigned fail_at = 0;

    (void)state;
    while (status != FIRN_OK) {
        struct rehearsal r = { .options = { .damage.lose_rate = 0.05, .trials = 1, .seed = 3 } };
        struct fault_memory fault;

        fault_memory_make(&fault, ++fail_at);
        rehearse_with(&r, &fault.memory);
        status = r.status;
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(fault.outstanding, 0);
        assert_int_equal(r.wrong, 0);
    }
    assert_true(fail_at > 10);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(survives_as_the_binomial_says),
        cmocka_unit_test(repeats_itself),
        cmocka_unit_test(a_run_within_the_reserve_comes_back),
        cmocka_unit_test(a_cut_beyond_the_reserve_is_told),
        cmocka_unit_test(beyond_recognition_is_an_outcome),
        cmocka_unit_test(a_damaged_original_is_refused),
        cmocka_unit_test(the_original_is_left_alone),
        cmocka_unit_test(stops_when_asked),
        cmocka_unit_test(lives_without_memory),
    };
    int failed;

    dice = random_start("test_drill");
    packed = collection_make(20, 1931, &geometry, 1);
    failed = cmocka_run_group_tests_name("care: drills", tests, NULL, NULL);
    collection_free(packed);
    return failed;
}
