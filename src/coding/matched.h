/*
 * coding/matched.h - a segment as literals and repeats of what came before in it
 *
 * Room: coding. Pure. Layout and meaning: format-spec/segment.md, "Matched". A command is a run of literals, then a
 * match: so many bytes again from so far back. Commands, distances and literals have a bitstream each, so that three
 * look-ups that do not wait for one another are under way. Here are the alphabets, shared by writer, parser and reader.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_MATCHED_H
#define FIRN_CODING_MATCHED_H

#include "coding/contexts.h"

#include "base/log2.h"
#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_MATCHED_LIMIT = 11,                       /* bits of a word */
    FIRN_MATCHED_ENTRIES = 1 << FIRN_MATCHED_LIMIT,
    FIRN_MATCHED_LENGTH_MIN = 2,
    FIRN_MATCHED_RUN_CODES = 16,
    FIRN_MATCHED_LENGTH_CODES = 32,
    FIRN_MATCHED_COMMANDS = FIRN_MATCHED_RUN_CODES * FIRN_MATCHED_LENGTH_CODES,
    FIRN_MATCHED_COMMAND_CONTEXTS = 4,
    FIRN_MATCHED_RECENT = 4,                       /* distances kept */
    FIRN_MATCHED_DISTANCE_BITS = 20,
    FIRN_MATCHED_FINE_MAX = 3,                     /* low bits of a distance that its symbol may tell */
    FIRN_MATCHED_DISTANCES_MAX = FIRN_MATCHED_RECENT +
                                 (2 * (FIRN_MATCHED_DISTANCE_BITS - FIRN_MATCHED_FINE_MAX) << FIRN_MATCHED_FINE_MAX),
    FIRN_MATCHED_DISTANCE_CONTEXTS = 8,
    FIRN_MATCHED_LITERAL_CONTEXTS = 512,
    FIRN_MATCHED_BATCH = 256                       /* commands decoded before they are carried out */
};

struct firn_matched_command {
    uint32_t literals, length, distance;           /* length 0: the last command, literals only */
};

/* A code of a run or a length: the numbers from base on, told apart by so many more bits. */
struct firn_matched_class {
    uint16_t base;
    uint8_t bits;
};

extern const struct firn_matched_class firn_matched_runs[FIRN_MATCHED_RUN_CODES];
extern const struct firn_matched_class firn_matched_lengths[FIRN_MATCHED_LENGTH_CODES];

unsigned firn_matched_run_code(uint32_t literals);
unsigned firn_matched_length_code(uint32_t length);

static inline size_t firn_matched_distances(unsigned fine)
{
    return FIRN_MATCHED_RECENT + ((size_t)2 * (FIRN_MATCHED_DISTANCE_BITS - fine) << fine);
}

/* By the length of the match and whether it follows another match at once. */
static inline unsigned firn_matched_distance_context(uint32_t literals, uint32_t length)
{
    return (length < 5 ? length - FIRN_MATCHED_LENGTH_MIN : 3) + (literals == 0 ? 4u : 0u);
}

/* By the length of the match before; FIRN_MATCHED_COMMAND_CONTEXTS of them; 0 to begin with. */
static inline unsigned firn_matched_command_context(uint32_t length)
{
    return length < 4 ? 0 : length < 7 ? 1 : length < 16 ? 2 : 3;
}

/*
 * By the byte before. The first after a match has contexts of its own, by the byte that would have come had the match
 * gone on: the one so far back as the match was copied from. 0 where there is none.
 */
static inline unsigned firn_matched_literal_context(const uint8_t *raw, size_t at, bool first, uint32_t distance)
{
    size_t back = first ? distance : 1;

    return (at < back ? 0 : raw[at - back]) + (first ? 256u : 0u);
}

/* The symbol of a distance that is none of the recent ones; more_bits of more tell it from its like. */
static inline unsigned firn_matched_distance_symbol(uint32_t distance, unsigned fine, unsigned *more_bits,
                                                    uint32_t *more)
{
    uint32_t far = (distance - 1) >> fine, near = (distance - 1) & ((1u << fine) - 1), high = far + 2;
    unsigned exponent = firn_log2(high);

    *more_bits = exponent - 1;
    *more = high & ((1u << (exponent - 1)) - 1);
    return FIRN_MATCHED_RECENT + ((2 * (exponent - 1) + (high >> (exponent - 1) & 1)) << fine) + near;
}

/*
 * Puts the distance to the front of the recent ones. Returns its symbol if it was there, else FIRN_MATCHED_RECENT.
 */
static inline unsigned firn_matched_recall(uint32_t recent[FIRN_MATCHED_RECENT], uint32_t distance)
{
    unsigned k = 0;

    while (k < FIRN_MATCHED_RECENT && recent[k] != distance)
        k++;
    for (unsigned i = k < FIRN_MATCHED_RECENT ? k : FIRN_MATCHED_RECENT - 1; i > 0; i--)
        recent[i] = recent[i - 1];
    recent[0] = distance;
    return k;
}

static inline void firn_matched_recent_start(uint32_t recent[FIRN_MATCHED_RECENT])
{
    for (unsigned k = 0; k < FIRN_MATCHED_RECENT; k++)
        recent[k] = 1u << k;
}

/* ---- the codes of a segment ---- */

struct firn_matched_codes {
    unsigned fine;
    struct firn_contexts commands, distances, literals;
};

/* ---- writing ---- */

struct firn_matched_counts {
    uint32_t commands[FIRN_MATCHED_COMMAND_CONTEXTS][FIRN_MATCHED_COMMANDS];
    uint32_t distances[FIRN_MATCHED_DISTANCE_CONTEXTS * FIRN_MATCHED_DISTANCES_MAX];    /* rows of the symbols in use */
    uint32_t literals[FIRN_MATCHED_LITERAL_CONTEXTS][256];
    uint64_t command_more_bits, distance_more_bits;
};

struct firn_matched_write_work {
    struct firn_cost_logs logs;
    struct firn_matched_counts counts;
    struct firn_matched_codes codes;
    struct firn_contexts_work contexts;
    uint32_t literal_words[FIRN_CONTEXTS_TABLES_MAX][256];             /* word << 8 | length */
    uint32_t command_words[FIRN_CONTEXTS_TABLES_MAX][FIRN_MATCHED_COMMANDS];
    uint32_t distance_words[FIRN_CONTEXTS_TABLES_MAX][FIRN_MATCHED_DISTANCES_MAX];
};

/*
 * Counts, and makes the codes for the commands: contexts clustered, the best `fine`; hastily, one code for each kind of
 * symbol. Returns the bits of tables and streams.
 */
uint64_t firn_matched_make_codes(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                                 struct firn_matched_write_work *w);
uint64_t firn_matched_make_codes_hastily(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                                         struct firn_matched_write_work *w);

/*
 * Writes what follows the first two bytes of a segment, under w->codes. Returns the bytes written, at most room_bytes;
 * 0 when they do not fit.
 */
size_t firn_matched_write(const uint8_t *raw, const struct firn_matched_command *commands, size_t count, uint8_t *room,
                          size_t room_bytes, struct firn_matched_write_work *w);

/* ---- reading ---- */

struct firn_matched_read_work {
    struct firn_matched_codes codes;
    uint16_t literals[FIRN_CONTEXTS_TABLES_MAX][FIRN_MATCHED_ENTRIES];
    uint32_t commands[FIRN_MATCHED_COMMAND_CONTEXTS][FIRN_MATCHED_ENTRIES];
    uint32_t distances[FIRN_MATCHED_DISTANCE_CONTEXTS][FIRN_MATCHED_ENTRIES];
    struct firn_matched_command batch[FIRN_MATCHED_BATCH];
    uint64_t table_bits;                                               /* what map and tables took */
};

/* coded: what follows the first two bytes of the segment. FIRN_OK or FIRN_BAD_DATA. */
enum firn_status firn_matched_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_matched_read_work *work);

/* How many bits codes and streams have. FIRN_OK or FIRN_BAD_DATA. */
enum firn_status firn_matched_measure(const uint8_t *coded, size_t coded_bytes, uint64_t *table_bits,
                                      uint64_t *code_bits, struct firn_matched_read_work *work);

#endif
