/*
 * coding/cost.h - what a symbol is expected to cost, before there is a code: logarithms in whole numbers
 *
 * Room: coding. Pure. Whole numbers only, so that every machine decides alike. The unit is 1/64 bit.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_COST_H
#define FIRN_CODING_COST_H

#include "base/log2.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_COST_BIT = 64,
    FIRN_COST_LOG_STEPS = 256,
    FIRN_COST_MAX = 14 * FIRN_COST_BIT     /* of one symbol */
};

struct firn_cost_logs {
    uint16_t part[FIRN_COST_LOG_STEPS];    /* 64 log2(1 + i / 256), rounded */
};

void firn_cost_prepare(struct firn_cost_logs *logs);

/* 64 log2(n), n >= 1, by the nine leading bits of n. */
static inline uint32_t firn_cost_log(const struct firn_cost_logs *logs, uint32_t n)
{
    uint32_t whole = firn_log2(n);

    return whole * FIRN_COST_BIT + logs->part[((uint64_t)n << 32 >> whole >> 24) & (FIRN_COST_LOG_STEPS - 1)];
}

/*
 * costs[s] = what symbol s costs under a prefix code for the counts: the logarithm of how rare it is, at least one bit;
 * a symbol that does not occur costs two bits more than one that occurs once.
 */
void firn_cost_symbols(const struct firn_cost_logs *logs, const uint32_t *counts, size_t symbols, uint16_t *costs);

#endif
