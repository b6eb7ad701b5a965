/* care/pace.c - a store that is read no faster than it may be */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/pace.h"

#include <time.h>

/* A rest is cut into pieces, between which somebody may ask to stop. */
static const double longest_rest = 0.1;

static double system_now(void *self)
{
    struct timespec time;

    (void)self;
    clock_gettime(CLOCK_MONOTONIC, &time);
    return (double)time.tv_sec + (double)time.tv_nsec / 1e9;
}

static void system_rest(void *self, double seconds)
{
    const struct timespec time = { (time_t)seconds, (long)((seconds - (double)(time_t)seconds) * 1e9) };

    (void)self;
    (void)nanosleep(&time, NULL);
}

static bool asked_to_stop(const struct firn_pace *pace)
{
    return pace->options->stop != NULL && pace->options->stop(pace->options->self);
}

static void wait_until_due(struct firn_pace *pace)
{
    double now = pace->now(pace->clock_self);

    while (now < pace->due && !asked_to_stop(pace)) {
        double left = pace->due - now;

        pace->rest(pace->clock_self, left < longest_rest ? left : longest_rest);
        now = pace->now(pace->clock_self);
    }
    pace->due = now < pace->due ? pace->due : now;      /* time that nobody read in is not saved up */
}

static enum firn_status read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct firn_pace *pace = self;

    wait_until_due(pace);
    pace->due += (double)count / (double)pace->options->rate_bytes;
    return pace->inner.read_at(pace->inner.self, at, bytes, count, got, os_error);
}

static enum firn_status write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    struct firn_pace *pace = self;

    return pace->inner.write_at(pace->inner.self, at, bytes, count, os_error);
}

static enum firn_status size(void *self, uint64_t *bytes, int *os_error)
{
    struct firn_pace *pace = self;

    return pace->inner.size(pace->inner.self, bytes, os_error);
}

static enum firn_status resize(void *self, uint64_t bytes, int *os_error)
{
    struct firn_pace *pace = self;

    return pace->inner.resize(pace->inner.self, bytes, os_error);
}

static enum firn_status sync_now(void *self, int *os_error)
{
    struct firn_pace *pace = self;

    return pace->inner.sync(pace->inner.self, os_error);
}

static void forget(void *self, uint64_t at, uint64_t bytes)
{
    struct firn_pace *pace = self;

    if (pace->inner.forget != NULL)
        pace->inner.forget(pace->inner.self, at, bytes);
}

/* Whoever opened the inner store closes it. */
static void leave_open(void *self)
{
    (void)self;
}

struct firn_store *firn_pace_store(struct firn_pace *pace, const struct firn_store *inner,
                                   const struct firn_scrub_options *options)
{
    *pace = (struct firn_pace){ .inner = *inner, .options = options, .now = system_now, .rest = system_rest };
    /* nothing is lent: what is lent is read when nobody is looking */
    pace->outer = (struct firn_store){
        .self = pace, .read_at = read_at, .write_at = write_at, .size = size, .resize = resize, .sync = sync_now,
        .forget = forget, .close = leave_open
    };
    return &pace->outer;
}
