/*
 * tests/bench/survival_row.h - one row of default settings, written, spoilt, and brought back layer by layer
 *
 * Damage is made here by code that shares nothing with what repairs it.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BENCH_SURVIVAL_ROW_H
#define FIRN_BENCH_SURVIVAL_ROW_H

#include <stdbool.h>
#include <stdint.h>

enum { ROW_K = 224, ROW_M = 32, ROW_N = ROW_K + ROW_M };

/* What a layer made of a row: all of it right, and the part of its data bytes that is not there. */
struct row_outcome {
    bool whole;
    double lost;
};

struct row_outcomes {
    struct row_outcome lanes, reserve, columns, rescue;
    unsigned blocks_mended;      /* by their lanes or sound, of ROW_N */
    unsigned wrong;              /* blocks called good that are not what was written: never */
};

struct row;

struct row *row_make(uint64_t seed);
void row_free(struct row *row);

/* Written anew, with other contents; or as it was written, undamaged. */
void row_write(struct row *row);
void row_refresh(struct row *row);

void row_flip(struct row *row, double rate);
/* Blocks become noise: each with the probability `rate`; or `count` columns from `first` on. Returns how many. */
unsigned row_lose(struct row *row, double rate);
void row_wipe(struct row *row, unsigned first, unsigned count);

/* Lets every layer try, each on what was read. */
struct row_outcomes row_bring_back(struct row *row);

/* Only lanes and reserve: for losses there is nothing else. */
struct row_outcomes row_bring_back_lost(struct row *row);

/* A number below `bound`. */
unsigned row_random(struct row *row, unsigned bound);

#endif
