/*
 * base/threads.h - a few threads that share out numbered jobs
 *
 * Room: base. One set of jobs at a time. The calling thread is worker 0 and helps while it waits, so one thread in all
 * is a valid crew and the order of results never depends on the number: a job writes only what belongs to its index.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_THREADS_H
#define FIRN_BASE_THREADS_H

#include "firn/memory.h"

struct firn_threads;

/* index 0 .. jobs-1; worker 0 .. firn_threads_count()-1, no two jobs with the same worker at once */
typedef void (firn_threads_job)(void *self, size_t index, unsigned worker);

/* count 1 .. FIRN_LIMIT_THREADS, the caller included. FIRN_OK, FIRN_NO_MEMORY, FIRN_BAD_ARGUMENT, FIRN_BUSY. */
enum firn_status firn_threads_make(const struct firn_memory *memory, unsigned count, struct firn_threads **out);

/* Takes NULL. Waits for jobs that were started. */
void firn_threads_free(struct firn_threads *threads);

unsigned firn_threads_count(const struct firn_threads *threads);

/* Starts a set of jobs and returns at once; every start needs its wait before the next start. */
void firn_threads_start(struct firn_threads *threads, firn_threads_job *job, void *self, size_t jobs);

/* Helps until every job of the set is done. Does nothing when none was started. */
void firn_threads_wait(struct firn_threads *threads);

/* start and wait */
void firn_threads_run(struct firn_threads *threads, firn_threads_job *job, void *self, size_t jobs);

#endif
