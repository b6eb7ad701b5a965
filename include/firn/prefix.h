/*
 * firn/prefix.h - optimal prefix codes under a length limit
 *
 * Room: coding. Lengths by package-merge, exactly optimal for the limit; among equal codes one of least length
 * variance. Words by the canonical rule, so that the lengths are the whole decoding table.
 *
 * Method: D. A. Huffman, Proc. IRE 40(9), 1952, pp. 1098-1101; L. L. Larmore and D. S. Hirschberg, "A Fast Algorithm
 * for Optimal Length-Limited Huffman Codes", J. ACM 37(3), 1990, pp. 464-473; canonical rule as in RFC 1951, section
 * 3.2.2.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_PREFIX_H
#define FIRN_PREFIX_H

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_PREFIX_SYMBOLS_MAX = 1024,
    FIRN_PREFIX_LENGTH_MAX = 15
};

/* Work space of firn_prefix_lengths for so many symbols, in bytes. */
FIRN_API size_t firn_prefix_work_bytes(size_t symbols);

/*
 * Code lengths of least total cost for the weights.
 *
 * weights  `symbols` counts; 0 means the symbol does not occur and gets length 0
 * limit    1 .. FIRN_PREFIX_LENGTH_MAX
 * lengths  out; a lone symbol gets length 1; of two symbols of equal weight the first never gets the longer word
 * work     firn_prefix_work_bytes(symbols), aligned to 8
 *
 * FIRN_OK; FIRN_BAD_ARGUMENT when the limit is too small for the number of symbols, or a number is out of range.
 */
FIRN_API enum firn_status firn_prefix_lengths(const uint32_t *weights, size_t symbols, unsigned limit, uint8_t *lengths,
                                              void *work);

/*
 * The canonical words of the lengths, most significant bit first.
 * FIRN_OK; FIRN_BAD_LENGTHS when the lengths are over-full, or under-full (but no symbol at all, and a lone symbol of
 * length 1, are allowed).
 */
FIRN_API enum firn_status firn_prefix_assign(const uint8_t *lengths, size_t symbols, uint16_t *words);

/* Sum of weight * length, in bits. */
FIRN_API uint64_t firn_prefix_cost_bits(const uint32_t *weights, const uint8_t *lengths, size_t symbols);

#endif
