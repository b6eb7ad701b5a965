/*
 * coding/hasty.h - a way through a segment that is found fast, good or not
 *
 * Room: coding. Pure. The last places of four bytes, by their hash, are all that is looked at; with `tries` above 1
 * some places before those as well, and then a match waits to see whether the next byte starts a better one.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_HASTY_H
#define FIRN_CODING_HASTY_H

#include "coding/matched.h"

#include "firn/segment.h"

enum { FIRN_HASTY_HASH_BITS = 15 };

struct firn_hasty_work {
    uint32_t heads[1 << FIRN_HASTY_HASH_BITS];
    uint32_t before[FIRN_SEGMENT_RAW_MAX];         /* the place before of the same hash */
};

/* Returns the number of commands. */
size_t firn_hasty_parse(const uint8_t *raw, size_t raw_bytes, unsigned tries, struct firn_matched_command *commands,
                        struct firn_hasty_work *work);

#endif
