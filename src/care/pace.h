/*
 * care/pace.h - a store that is read no faster than it may be
 *
 * Room: care. Every read waits until those before it have had their time, so that the medium has rests in between and
 * others get their turn. What is written goes through: a repair is short, and should be over soon.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_PACE_H
#define FIRN_CARE_PACE_H

#include "firn/scrub.h"
#include "firn/store.h"

struct firn_pace {
    struct firn_store inner, outer;
    const struct firn_scrub_options *options;
    double due;                                    /* when the next read may begin, in seconds of now */
    /* the system's; a test brings its own */
    void *clock_self;
    double (*now)(void *self);
    void (*rest)(void *self, double seconds);      /* may end early */
};

/* The store to read from in place of inner; options (rate_bytes, stop) and inner's bytes are lent. */
struct firn_store *firn_pace_store(struct firn_pace *pace, const struct firn_store *inner,
                                   const struct firn_scrub_options *options);

#endif
