/*
 * coding/table.h - the 256 code lengths of a stretch, themselves coded
 *
 * Room: coding. Pure. Layout and meaning: format-spec/segment.md, "The table". In short: the lengths in symbol order as
 * tokens (one length; a run of absent symbols; a repetition of the last length), the tokens under a small prefix code
 * whose own lengths come first; the table ends where the code is full, so trailing absent symbols cost nothing.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_TABLE_H
#define FIRN_CODING_TABLE_H

#include "coding/bits.h"

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_TABLE_SYMBOLS = 256,
    FIRN_TABLE_ALPHABET_MAX = 512,
    FIRN_TABLE_LENGTH_LIMIT = 11,
    FIRN_TABLE_TOKENS = 14,            /* lengths 0 .. 11, absent run, repetition */
    FIRN_TABLE_TOKEN_LIMIT = 7,
    FIRN_TABLE_COST_MIN_BITS = 3 * FIRN_TABLE_TOKENS + 2,      /* of two symbols, the first two of all */
    FIRN_TABLE_COST_MAX_BITS = 3 * FIRN_TABLE_TOKENS + FIRN_TABLE_SYMBOLS * FIRN_TABLE_TOKEN_LIMIT
};

/*
 * lengths  of a full code of at least two symbols, 0 .. FIRN_TABLE_LENGTH_LIMIT each
 * Both give exactly the same number of bits, not counting those that fill up the last byte.
 */
unsigned firn_table_cost_bits(const uint8_t lengths[FIRN_TABLE_SYMBOLS]);
void firn_table_write(struct firn_bits_writer *writer, const uint8_t lengths[FIRN_TABLE_SYMBOLS]);

/* FIRN_OK: a full code of at least two symbols. FIRN_BAD_DATA: over-full, under-full, or not a table. */
enum firn_status firn_table_read(struct firn_bits_reader *reader, uint8_t lengths[FIRN_TABLE_SYMBOLS]);

/*
 * The same for several tables, `stride` apart, of an alphabet of `symbols` symbols, at most FIRN_TABLE_ALPHABET_MAX.
 * Their tokens share a code.
 */
unsigned firn_table_cost_bits_all(const uint8_t *lengths, size_t stride, size_t tables, size_t symbols);
void firn_table_write_all(struct firn_bits_writer *writer, const uint8_t *lengths, size_t stride, size_t tables,
                          size_t symbols);
enum firn_status firn_table_read_all(struct firn_bits_reader *reader, uint8_t *lengths, size_t stride, size_t tables,
                                     size_t symbols);

#endif
