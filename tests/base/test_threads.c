/* tests/base/test_threads.c - jobs are each done once, whatever the number of threads */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/threads.h"

#include "base/limits.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdatomic.h>
#include <stdint.h>

enum { JOBS = 1000 };

struct work {
    atomic_int done[JOBS];
    atomic_int in_worker[FIRN_LIMIT_THREADS];
    atomic_int clashes;
};

static void job(void *self, size_t index, unsigned worker)
{
    struct work *work = self;

    if (atomic_fetch_add(&work->in_worker[worker], 1) != 0)
        atomic_fetch_add(&work->clashes, 1);
    atomic_fetch_add(&work->done[index], 1);
    atomic_fetch_sub(&work->in_worker[worker], 1);
}

static void every_job_once(void **state)
{
    for (unsigned count = 1; count <= 8; count++) {
        struct firn_threads *threads;

        assert_int_equal(firn_threads_make(firn_memory_system(), count, &threads), FIRN_OK);
        assert_int_equal(firn_threads_count(threads), count);
        for (int round = 0; round < 20; round++) {
            static struct work work;
            size_t jobs = round == 0 ? 0 : round == 1 ? 1 : JOBS;

            work = (struct work){ .clashes = 0 };
            firn_threads_start(threads, job, &work, jobs);
            firn_threads_wait(threads);
            for (size_t i = 0; i < JOBS; i++)
                assert_int_equal(work.done[i], i < jobs);
            assert_int_equal(work.clashes, 0);
        }
        firn_threads_free(threads);
    }
    (void)state;
}

static void started_jobs_are_finished_before_freeing(void **state)
{
    static struct work work;
    struct firn_threads *threads;

    assert_int_equal(firn_threads_make(firn_memory_system(), 3, &threads), FIRN_OK);
    firn_threads_start(threads, job, &work, JOBS);
    firn_threads_free(threads);
    for (size_t i = 0; i < JOBS; i++)
        assert_int_equal(work.done[i], 1);
    firn_threads_free(NULL);
    (void)state;
}

static void absurd_numbers_are_refused(void **state)
{
    struct firn_threads *threads;

    assert_int_equal(firn_threads_make(firn_memory_system(), 0, &threads), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_threads_make(firn_memory_system(), FIRN_LIMIT_THREADS + 1, &threads), FIRN_BAD_ARGUMENT);
    assert_null(threads);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_job_once), cmocka_unit_test(started_jobs_are_finished_before_freeing),
        cmocka_unit_test(absurd_numbers_are_refused),
    };

    return cmocka_run_group_tests_name("threads", tests, NULL, NULL);
}
