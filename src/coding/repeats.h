/*
 * coding/repeats.h - where the bytes that follow occurred before
 *
 * Room: coding. Pure. For every place of a segment, the nearest repeat of each length that is worth knowing, all of
 * them found once, so that the parser can go over them several times. Suffixes stand in binary search trees, one for
 * each hash of four bytes, the latest at the root; short repeats come from tables of the last place of two and three
 * bytes.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_REPEATS_H
#define FIRN_CODING_REPEATS_H

#include "firn/segment.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_REPEATS_LENGTH_MAX = 4095,                /* as kept; the parser makes them longer where they are */
    FIRN_REPEATS_DISTANCE_BITS = 20,
    FIRN_REPEATS_KEPT = 5 << 20,                   /* when all are used up only the longest of a place is kept */
    FIRN_REPEATS_HASH_BITS = 16
};

/* A repeat: length << 20 | distance - 1. */
static inline uint32_t firn_repeats_length(uint32_t repeat)
{
    return repeat >> FIRN_REPEATS_DISTANCE_BITS;
}

static inline uint32_t firn_repeats_distance(uint32_t repeat)
{
    return (repeat & ((1u << FIRN_REPEATS_DISTANCE_BITS) - 1)) + 1;
}

struct firn_repeats {
    uint32_t starts[FIRN_SEGMENT_RAW_MAX + 1];     /* of the repeats of a place, lengths ascending */
    uint32_t kept[FIRN_REPEATS_KEPT + FIRN_SEGMENT_RAW_MAX + 1024];
    uint32_t heads[1 << FIRN_REPEATS_HASH_BITS], heads3[1 << FIRN_REPEATS_HASH_BITS], heads2[1 << 16];
    uint32_t below[2 * FIRN_SEGMENT_RAW_MAX];      /* the trees */
};

/*
 * enough: a repeat of this length ends the search, and places inside it get none; tries: nodes looked at for a place.
 */
void firn_repeats_find(const uint8_t *raw, size_t raw_bytes, uint32_t enough, unsigned tries,
                       struct firn_repeats *work);

/* How many bytes are equal, at most `most`. */
uint32_t firn_repeats_equal(const uint8_t *a, const uint8_t *b, uint32_t most);

#endif
