/*
 * coding/sample.c - equal bytes in a sample, counted
 *
 * N bytes drawn from 256 equally likely ones have N (N - 1) / 2 / 256 pairs of equal bytes on average, with a
 * standard deviation very near to the root of that, and the squares of the counts add up to N + 2 * pairs. For a
 * piece: 511 pairs, deviation 22.6, squares 1534; for the sample: 2 097 088 pairs, deviation 1448, squares 4 226 944.
 * The bounds lie 5 and 6 deviations above. Data that save a share s of their bits by codes of their own have more
 * than 8 s (2 ln 2) N^2 / 256 above the average, so that a sample within the bound saves less than 0.05 percent.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/sample.h"

#include "coding/histogram.h"

enum {
    PIECES = 64,
    PIECE_BYTES = 512,
    FEWEST_BYTES = 2 * PIECES * PIECE_BYTES,
    GLANCE_BYTES = 1 << 16,
    PACKED_LEAST_BYTES = 128,
    SHORT_BYTES = 2000,
    PACKED = 486,                                  /* bits a byte in 1/64: 7.6 */
    PACKED_SHORT = 378,                            /* 5.9 */
    EVEN_BITS = 505,                               /* 7.9 */
    MILLER = 46,                                   /* 1 / (2 ln 2) bits for each symbol but one */
    PIECE_SQUARES_MAX = 1534 + 5 * 2 * 23,
    SAMPLE_SQUARES_MAX = 4226944 + 6 * 2 * 1448
};

bool firn_sample_is_even(const uint8_t *raw, size_t raw_bytes)
{
    uint32_t sum[256] = { 0 }, counts[256];
    size_t stride = raw_bytes / PIECES;
    uint64_t squares = 0;

    if (raw_bytes < FEWEST_BYTES)
        return false;
    for (size_t p = 0; p < PIECES; p++) {
        squares = 0;
        firn_histogram_count(raw + p * stride, PIECE_BYTES, counts);
        for (size_t b = 0; b < 256; b++) {
            squares += (uint64_t)counts[b] * counts[b];
            sum[b] += counts[b];
        }
        if (squares > PIECE_SQUARES_MAX)
            return false;
    }
    squares = 0;
    for (size_t b = 0; b < 256; b++)
        squares += (uint64_t)sum[b] * sum[b];
    return squares <= SAMPLE_SQUARES_MAX;
}

bool firn_sample_is_packed(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes)
{
    size_t count = raw_bytes < GLANCE_BYTES ? raw_bytes : GLANCE_BYTES;
    uint32_t counts[256], all, most;
    uint64_t sum = 0, distinct = 0;

    if (count < PACKED_LEAST_BYTES)
        return false;
    firn_histogram_count(raw, count, counts);
    all = firn_cost_log(logs, (uint32_t)count);
    for (size_t b = 0; b < 256; b++)
        if (counts[b] != 0) {
            sum += (uint64_t)counts[b] * (all - firn_cost_log(logs, counts[b]));
            distinct++;
        }
    if (sum + MILLER * (distinct - 1) > (uint64_t)PACKED * count)
        return true;
    most = all < EVEN_BITS ? all : EVEN_BITS;
    return count < SHORT_BYTES && sum > (uint64_t)PACKED_SHORT * count && 100 * sum > 93 * (uint64_t)most * count;
}
