/*
 * coding/cost.c - logarithms by squaring
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/cost.h"

void firn_cost_prepare(struct firn_cost_logs *logs)
{
    for (uint32_t i = 0; i < FIRN_COST_LOG_STEPS; i++) {
        uint64_t x = ((uint64_t)i + FIRN_COST_LOG_STEPS) << 22;     /* 1 + i / 256 with 30 binary places */
        uint32_t log = 0;

        for (unsigned bit = 0; bit < 7; bit++) {                    /* squaring doubles the logarithm */
            x = x * x >> 30;
            log = log << 1 | (uint32_t)(x >> 31);
            x >>= x >> 31;
        }
        logs->part[i] = (uint16_t)((log + 1) / 2);
    }
}

void firn_cost_symbols(const struct firn_cost_logs *logs, const uint32_t *counts, size_t symbols, uint16_t *costs)
{
    uint32_t total = 0, all;

    for (size_t s = 0; s < symbols; s++)
        total += counts[s];
    all = total == 0 ? FIRN_COST_BIT : firn_cost_log(logs, total);
    for (size_t s = 0; s < symbols; s++) {
        uint32_t cost = counts[s] == 0 ? all + 2 * FIRN_COST_BIT : all - firn_cost_log(logs, counts[s]);

        cost = cost < FIRN_COST_BIT ? FIRN_COST_BIT : cost;
        costs[s] = (uint16_t)(cost > FIRN_COST_MAX ? FIRN_COST_MAX : cost);
    }
}
