/*
 * coding/histogram.c - counting bytes
 *
 * Four tables in turn, so that equal neighbouring bytes do not wait on the same counter.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/histogram.h"

#include "base/bytes.h"

#include <string.h>

void firn_histogram_count(const uint8_t *bytes, size_t byte_count, uint32_t counts[256])
{
    uint32_t tables[4][256];
    size_t i = 0;

    memset(tables, 0, sizeof tables);
    for (; i + 8 <= byte_count; i += 8) {
        uint64_t word = firn_bytes_get64(bytes + i);

        tables[0][word & 255]++;
        tables[1][word >> 8 & 255]++;
        tables[2][word >> 16 & 255]++;
        tables[3][word >> 24 & 255]++;
        tables[0][word >> 32 & 255]++;
        tables[1][word >> 40 & 255]++;
        tables[2][word >> 48 & 255]++;
        tables[3][word >> 56]++;
    }
    for (; i < byte_count; i++)
        tables[0][bytes[i]]++;
    for (size_t b = 0; b < 256; b++)
        counts[b] = tables[0][b] + tables[1][b] + tables[2][b] + tables[3][b];
}
