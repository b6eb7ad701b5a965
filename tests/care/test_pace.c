/* tests/care/test_pace.c - reading no faster than it may be, by a clock of the test's own */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/pace.h"

#include "help/fault_store.h"

#include <errno.h>
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

struct clock { double now, rested; unsigned rests, stop_after; };

static double now(void *self)
{
    return ((struct clock *)self)->now;
}

static void rest(void *self, double seconds)
{
    struct clock *clock = self;

    assert_true(seconds > 0 && seconds <= 0.1 + 1e-9);      /* or a wish to stop would wait too long */
    clock->now += seconds;
    clock->rested += seconds;
    clock->rests++;
}

static bool stop(void *self)
{
    const struct clock *clock = self;

    return clock->stop_after > 0 && clock->rests >= clock->stop_after;
}

struct bench {
    struct clock clock;
    struct firn_scrub_options options;
    struct fault_store inner;
    struct firn_pace pace;
    struct firn_store *store;
    uint8_t bytes[4096];
};

static void start(struct bench *bench, uint64_t rate_bytes)
{
    *bench = (struct bench){ .options = { .rate_bytes = rate_bytes, .stop = stop } };
    for (size_t i = 0; i < sizeof bench->bytes; i++)
        bench->bytes[i] = (uint8_t)(i * 7);
    fault_store_make(&bench->inner, bench->bytes, sizeof bench->bytes);
    bench->options.self = &bench->clock;
    bench->store = firn_pace_store(&bench->pace, &bench->inner.store, &bench->options);
    bench->pace.clock_self = &bench->clock;
    bench->pace.now = now;
    bench->pace.rest = rest;
}

static void read_some(struct bench *bench, uint64_t at, size_t count)
{
    uint8_t got[4096];
    size_t bytes;
    int why;

    assert_int_equal(bench->store->read_at(bench->store->self, at, got, count, &bytes, &why), FIRN_OK);
    assert_int_equal(bytes, count);
    assert_memory_equal(got, bench->bytes + at, count);
}

/* A hundred reads of 1000 bytes at 10 000 bytes a second: the last may begin after 9.9 seconds. */
static void keeps_the_rate(void **state)
{
    struct bench bench;

    (void)state;
    start(&bench, 10000);
    for (unsigned i = 0; i < 100; i++)
        read_some(&bench, i, 1000);
    assert_true(fabs(bench.clock.now - 9.9) < 1e-6);
    fault_store_free(&bench.inner);
}

/* Where reading itself is slower nobody waits, and what was not read then is not read faster after. */
static void saves_nothing_up(void **state)
{
    struct bench bench;

    (void)state;
    start(&bench, 10000);
    read_some(&bench, 0, 1000);
    bench.clock.now += 60;
    read_some(&bench, 0, 1000);
    assert_int_equal(bench.clock.rests, 0);
    read_some(&bench, 0, 1000);
    assert_true(fabs(bench.clock.rested - 0.1) < 1e-6);
    fault_store_free(&bench.inner);
}

static void stops_waiting(void **state)
{
    struct bench bench;

    (void)state;
    start(&bench, 10);
    read_some(&bench, 0, 1000);      /* its time is 100 seconds */
    bench.clock.stop_after = 3;
    read_some(&bench, 0, 1000);
    assert_int_equal(bench.clock.rests, 3);
    fault_store_free(&bench.inner);
}

/* Everything else goes through, faults too. */
static void passes_the_rest_on(void **state)
{
    struct bench bench;
    uint64_t bytes;
    size_t got;
    int why;

    (void)state;
    start(&bench, 1);
    assert_int_equal(bench.store->write_at(bench.store->self, 4096, "more", 4, &why), FIRN_OK);
    assert_int_equal(bench.store->size(bench.store->self, &bytes, &why), FIRN_OK);
    assert_int_equal(bytes, 4100);
    assert_int_equal(bench.store->resize(bench.store->self, 4096, &why), FIRN_OK);
    assert_int_equal(bench.inner.now.used, 4096);
    assert_int_equal(bench.store->sync(bench.store->self, &why), FIRN_OK);
    assert_int_equal(bench.inner.calls[FAULT_SYNC], 1);
    bench.store->forget(bench.store->self, 0, 4096);
    assert_null(bench.store->lend);
    bench.inner.rules[FAULT_READ] = (struct fault_rule){ .from = 1, .times = 9, .os_error = ENXIO };
    assert_int_equal(bench.store->read_at(bench.store->self, 0, bench.bytes, 1, &got, &why), FIRN_IO);
    assert_int_equal(why, ENXIO);
    assert_int_equal(bench.clock.rests, 0);
    fault_store_free(&bench.inner);
}

/* The system's own clock: half a second's worth of reading takes that long at least. */
static void waits_in_earnest(void **state)
{
    struct bench bench;
    double before;

    (void)state;
    start(&bench, 8000);
    bench.store = firn_pace_store(&bench.pace, &bench.inner.store, &bench.options);
    before = bench.pace.now(NULL);
    for (unsigned i = 0; i < 5; i++)
        read_some(&bench, 0, 1000);
    assert_true(bench.pace.now(NULL) - before >= 0.5 - 1e-3);
    fault_store_free(&bench.inner);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(keeps_the_rate), cmocka_unit_test(saves_nothing_up), cmocka_unit_test(stops_waiting),
        cmocka_unit_test(passes_the_rest_on), cmocka_unit_test(waits_in_earnest),
    };

    return cmocka_run_group_tests_name("pace", tests, NULL, NULL);
}
