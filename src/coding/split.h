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
    FIRN_SPLIT_PREFIX_WORK_BYTES = 28672     /* firn_prefix_work_bytes(256), rounded up */
};

struct firn_split_stretch {
    size_t raw_at, raw_bytes;
    size_t first_cell, end_cell;
    enum firn_segment_method method;
};

/* What the search leaves behind; all of it is scratch but stretches[0 .. stretch_count) and before. */
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

/*
 * A lower bound, in bits, for the words of any code of at most FIRN_TABLE_LENGTH_LIMIT bits a word over the counts,
 * which add up to at most FIRN_SEGMENT_RAW_MAX and are of two symbols at least. Sharper than the entropy, and faster:
 * some 0.1 percent below the optimum. Stops early when the bound has reached `enough`.
 */
uint64_t firn_split_floor_bits(const uint32_t counts[256], uint64_t enough);

/* The bytes of cells first .. end - 1, counted by a search before; returns how many different ones there are. */
unsigned firn_split_counts(const struct firn_split_work *work, size_t first, size_t end, uint32_t counts[256]);

#endif
