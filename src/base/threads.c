/* base/threads.c - a few threads that share out numbered jobs */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/threads.h"

#include "base/limits.h"
#include "base/memory.h"

#include <pthread.h>
#include <signal.h>
#include <stdbool.h>

struct firn_threads {
    const struct firn_memory *memory;
    unsigned count;                 /* the caller included */
    unsigned started;               /* pthreads that run */
    pthread_mutex_t lock;           /* guards all below */
    pthread_cond_t work, done;
    bool leaving;
    firn_threads_job *job;
    void *self;
    size_t jobs, next, finished;
    struct seat {
        pthread_t thread;
        struct firn_threads *threads;
        unsigned worker;
    } seats[];                      /* count - 1 */
};

/* Takes jobs until none is left; called and left with the lock held. */
static void take_jobs(struct firn_threads *threads, unsigned worker)
{
    while (threads->next < threads->jobs) {
        size_t index = threads->next++;

        pthread_mutex_unlock(&threads->lock);
        threads->job(threads->self, index, worker);
        pthread_mutex_lock(&threads->lock);
        if (++threads->finished == threads->jobs)
            pthread_cond_broadcast(&threads->done);
    }
}

static void *live(void *argument)
{
    struct seat *seat = argument;
    struct firn_threads *threads = seat->threads;

    pthread_mutex_lock(&threads->lock);
    while (!threads->leaving) {
        take_jobs(threads, seat->worker);
        if (!threads->leaving)
            pthread_cond_wait(&threads->work, &threads->lock);
    }
    pthread_mutex_unlock(&threads->lock);
    return NULL;
}

/* The crew takes no signals: they are for the thread that knows what to do about them. */
static enum firn_status start_crew(struct firn_threads *threads)
{
    sigset_t all, before;

    sigfillset(&all);
    pthread_sigmask(SIG_SETMASK, &all, &before);
    while (threads->started + 1 < threads->count) {
        struct seat *seat = &threads->seats[threads->started];

        *seat = (struct seat){ .threads = threads, .worker = threads->started + 1 };
        if (pthread_create(&seat->thread, NULL, live, seat) != 0)
            break;
        threads->started++;
    }
    pthread_sigmask(SIG_SETMASK, &before, NULL);
    return threads->started + 1 == threads->count ? FIRN_OK : FIRN_BUSY;
}

enum firn_status firn_threads_make(const struct firn_memory *memory, unsigned count, struct firn_threads **out)
{
    struct firn_threads *threads;
    enum firn_status status;

    *out = NULL;
    if (count < 1 || count > FIRN_LIMIT_THREADS)
        return FIRN_BAD_ARGUMENT;
    threads = firn_memory_get_zeroed(memory, 1, sizeof *threads + (count - 1) * sizeof threads->seats[0]);
    if (threads == NULL)
        return FIRN_NO_MEMORY;
    threads->memory = memory;
    threads->count = count;
    pthread_mutex_init(&threads->lock, NULL);
    pthread_cond_init(&threads->work, NULL);
    pthread_cond_init(&threads->done, NULL);
    status = start_crew(threads);
    if (status != FIRN_OK) {
        firn_threads_free(threads);
        return status;
    }
    *out = threads;
    return FIRN_OK;
}

void firn_threads_free(struct firn_threads *threads)
{
    if (threads == NULL)
        return;
    firn_threads_wait(threads);
    pthread_mutex_lock(&threads->lock);
    threads->leaving = true;
    pthread_cond_broadcast(&threads->work);
    pthread_mutex_unlock(&threads->lock);
    for (unsigned i = 0; i < threads->started; i++)
        pthread_join(threads->seats[i].thread, NULL);
    pthread_cond_destroy(&threads->done);
    pthread_cond_destroy(&threads->work);
    pthread_mutex_destroy(&threads->lock);
    threads->memory->put(threads->memory->self, threads);
}

unsigned firn_threads_count(const struct firn_threads *threads)
{
    return threads->count;
}

void firn_threads_start(struct firn_threads *threads, firn_threads_job *job, void *self, size_t jobs)
{
    pthread_mutex_lock(&threads->lock);
    threads->job = job;
    threads->self = self;
    threads->jobs = jobs;
    threads->next = 0;
    threads->finished = 0;
    pthread_cond_broadcast(&threads->work);
    pthread_mutex_unlock(&threads->lock);
}

void firn_threads_wait(struct firn_threads *threads)
{
    pthread_mutex_lock(&threads->lock);
    take_jobs(threads, 0);
    while (threads->finished < threads->jobs)
        pthread_cond_wait(&threads->done, &threads->lock);
    threads->jobs = threads->next = threads->finished = 0;
    pthread_mutex_unlock(&threads->lock);
}

void firn_threads_run(struct firn_threads *threads, firn_threads_job *job, void *self, size_t jobs)
{
    firn_threads_start(threads, job, self, jobs);
    firn_threads_wait(threads);
}
