/*
 * coding/split.h - where the statistics change: cutting a segment into stretches of least total cost
 *
 * Room: coding. Pure. Cuts may be made on a grid of cells. Dynamic programming over the grid finds the stretches
 * whose costs, in bits and with all tables included, add up to the least; every stretch is priced as the cheapest of
 * stored, run and prefix. The framing of a prefix stretch is priced at a fixed sum, since the exact one (stream
 * lengths, filled-up bytes) is known only when the streams are.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_SPLIT_H
#define FIRN_CODING_SPLIT_H

#include "firn/segment.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_SPLIT_CELLS_MAX = 256,
    FIRN_SPLIT_CELL_MIN_BYTES = FIRN_SEGMENT_RAW_MAX / FIRN_SPLIT_CELLS_MAX,
    FIRN_SPLIT_LOG_BITS = 24,
    FIRN_SPLIT_PREFIX_WORK_BYTES = 28672     /* firn_prefix_work_bytes(256), rounded up */
};

struct firn_split_stretch {
    size_t raw_at, raw_bytes;
    enum firn_segment_method method;
};

/* What the search leaves behind; all of it is scratch but stretches[0 .. stretch_count). */
struct firn_split_work {
    struct firn_split_stretch stretches[FIRN_SPLIT_CELLS_MAX];
    size_t stretch_count;
    uint64_t cost_bits;                                     /* of the whole, as priced here */
    size_t priced;                                          /* how often a stretch was priced exactly */
    uint32_t before[FIRN_SPLIT_CELLS_MAX + 1][256];         /* counts of the bytes before each place of the grid */
    uint64_t best[FIRN_SPLIT_CELLS_MAX + 1];                /* least cost of what lies before the place */
    uint16_t from[FIRN_SPLIT_CELLS_MAX + 1];                /* where the last stretch before it starts */
    uint8_t method[FIRN_SPLIT_CELLS_MAX + 1];               /* how that stretch is coded */
    uint64_t floor[FIRN_SPLIT_CELLS_MAX];                   /* words of cell i up to here take at least so many bits */
    uint64_t hope[FIRN_SPLIT_CELLS_MAX];                    /* a lower bound for a last stretch that starts at i */
    uint64_t prefix_work[FIRN_SPLIT_PREFIX_WORK_BYTES / 8];
};

/*
 * raw_bytes   1 .. FIRN_SEGMENT_RAW_MAX
 * cell_bytes  at least FIRN_SPLIT_CELL_MIN_BYTES
 * prune       false prices every stretch exactly; the result is the same, later. For tests.
 */
void firn_split(const uint8_t *raw, size_t raw_bytes, size_t cell_bytes, bool prune, struct firn_split_work *work);

/* 2^24 * binary logarithm of n >= 1: never more than the true value, and less than 49 below it. */
uint32_t firn_split_log2(uint32_t n);

/* A lower bound, in bits, for the words of any prefix code over the counts: their entropy, rounded down. */
uint64_t firn_split_entropy_bits(const uint32_t counts[256]);

#endif
