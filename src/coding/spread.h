/*
 * coding/spread.h - decoding tables: what a word says, for every string of bits that may begin with it
 *
 * Room: coding. Pure. A word of l bits has 2^(limit - l) entries side by side, and words in canonical order are in the
 * order of their entries; so a table is filled from its start to its end, in strides that are alike for words alike.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_SPREAD_H
#define FIRN_CODING_SPREAD_H

#include "coding/table.h"

#include <stddef.h>
#include <stdint.h>

enum { FIRN_SPREAD_ENTRIES = 1 << FIRN_TABLE_LENGTH_LIMIT };

/*
 * entries[bits] = values[symbol] | length of its word, which the low four bits of values are left for.
 *
 * lengths  of a full code of at most FIRN_TABLE_ALPHABET_MAX symbols, none longer than FIRN_TABLE_LENGTH_LIMIT
 */
void firn_spread16(const uint8_t *lengths, size_t symbols, const uint16_t *values,
                   uint16_t entries[FIRN_SPREAD_ENTRIES]);
void firn_spread32(const uint8_t *lengths, size_t symbols, const uint32_t *values,
                   uint32_t entries[FIRN_SPREAD_ENTRIES]);

#endif
