/*
 * coding/spread.c - symbols sorted by length, then written in strides
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/spread.h"

#include "base/bytes.h"

#include <string.h>

enum { LIMIT = FIRN_TABLE_LENGTH_LIMIT, STRIDE = 8 };

/* Symbols in the order of their words: sorted[ends[l - 1]] .. sorted[ends[l] - 1] have words of length l. */
struct order {
    uint16_t sorted[FIRN_TABLE_ALPHABET_MAX], ends[LIMIT + 1];
};

/* Most of a large alphabet is absent, and eight absent symbols are passed at once. */
static void sort(const uint8_t *lengths, size_t symbols, struct order *order)
{
    uint16_t present[FIRN_TABLE_ALPHABET_MAX], counts[LIMIT + 1] = { 0 }, next[LIMIT + 1];
    size_t count = 0, s = 0;

    while (s < symbols) {
        if (s + 8 <= symbols && firn_bytes_get64(lengths + s) == 0) {
            s += 8;
            continue;
        }
        for (size_t stop = s + 8 < symbols ? s + 8 : symbols; s < stop; s++) {
            present[count] = (uint16_t)s;
            count += lengths[s] != 0;
            counts[lengths[s]]++;
        }
    }
    order->ends[0] = next[0] = 0;
    for (unsigned l = 1; l <= LIMIT; l++) {
        next[l] = order->ends[l - 1];
        order->ends[l] = (uint16_t)(next[l] + counts[l]);
    }
    for (size_t k = 0; k < count; k++)
        order->sorted[next[lengths[present[k]]]++] = present[k];
}

void firn_spread16(const uint8_t *lengths, size_t symbols, const uint16_t *values,
                   uint16_t entries[FIRN_SPREAD_ENTRIES])
{
    struct order order;

    sort(lengths, symbols, &order);
    for (unsigned l = 1; l <= LIMIT; l++) {
        size_t span = (size_t)1 << (LIMIT - l);

        for (size_t at = order.ends[l - 1]; at < order.ends[l]; at++, entries += span) {
            uint16_t entry = (uint16_t)(values[order.sorted[at]] | l);

            if (span < STRIDE)
                for (size_t k = 0; k < span; k++)
                    entries[k] = entry;
            else
                for (size_t k = 0; k < span; k += STRIDE)
                    for (size_t i = 0; i < STRIDE; i++)
                        entries[k + i] = entry;
        }
    }
}

void firn_spread32(const uint8_t *lengths, size_t symbols, const uint32_t *values,
                   uint32_t entries[FIRN_SPREAD_ENTRIES])
{
    struct order order;

    sort(lengths, symbols, &order);
    for (unsigned l = 1; l <= LIMIT; l++) {
        size_t span = (size_t)1 << (LIMIT - l);

        for (size_t at = order.ends[l - 1]; at < order.ends[l]; at++, entries += span) {
            uint32_t entry = values[order.sorted[at]] | l;

            if (span < STRIDE)
                for (size_t k = 0; k < span; k++)
                    entries[k] = entry;
            else
                for (size_t k = 0; k < span; k += STRIDE)
                    for (size_t i = 0; i < STRIDE; i++)
                        entries[k + i] = entry;
        }
    }
}
