/*
 * coding/contexts.h - many contexts, few tables: which contexts share a code
 *
 * Room: coding. Pure. What came before a symbol, its context, tells which symbols are likely. A code for every context
 * would cost more in tables than it saves, so contexts with like statistics share one. Written down are the number of
 * tables, the map from contexts to tables, and the tables: format-spec/segment.md, "Contexts".
 *
 * Method: S. P. Lloyd, "Least Squares Quantization in PCM", IEEE Trans. IT-28(2), 1982, pp. 129-137, with the bits a
 * context takes under a table for the distance; then tables are joined as long as that saves bits, their own included.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_CONTEXTS_H
#define FIRN_CODING_CONTEXTS_H

#include "coding/bits.h"
#include "coding/cost.h"
#include "coding/table.h"

#include "firn/status.h"

#include <stdint.h>

enum {
    FIRN_CONTEXTS_MAX = 1024,
    FIRN_CONTEXTS_TABLES_MAX = 16,
    FIRN_CONTEXTS_ALPHABET_MAX = 512,
    FIRN_CONTEXTS_COST_MAX_BITS = 4 + 17 * 3 + FIRN_CONTEXTS_MAX * 7 +
                                  FIRN_CONTEXTS_TABLES_MAX * (FIRN_TABLE_COST_MAX_BITS + 256 * 7)
};

/* The codes of one kind of symbol. */
struct firn_contexts {
    unsigned tables;                                                   /* 1 .. FIRN_CONTEXTS_TABLES_MAX */
    uint8_t map[FIRN_CONTEXTS_MAX];                                    /* context to table */
    uint8_t lengths[FIRN_CONTEXTS_TABLES_MAX][FIRN_CONTEXTS_ALPHABET_MAX];
};

struct firn_contexts_pair {
    uint32_t count;
    uint16_t symbol;
};

struct firn_contexts_work {
    uint32_t sums[FIRN_CONTEXTS_TABLES_MAX][FIRN_CONTEXTS_ALPHABET_MAX];
    uint16_t costs[FIRN_CONTEXTS_TABLES_MAX][FIRN_CONTEXTS_ALPHABET_MAX];
    uint64_t price[FIRN_CONTEXTS_MAX];                                 /* of each context under its table */
    uint32_t starts[FIRN_CONTEXTS_MAX + 1];                            /* of its pairs */
    struct firn_contexts_pair pairs[FIRN_CONTEXTS_MAX * 256];
    uint64_t prefix_work[8192];
};

/*
 * Clusters and makes optimal codes, of at least two symbols each.
 *
 * counts      contexts rows of `symbols` counts; contexts * symbols <= FIRN_CONTEXTS_MAX * 256
 * tables_max  1 .. FIRN_CONTEXTS_TABLES_MAX
 * limit       of word lengths
 *
 * Returns the bits that everything takes: map, tables and words.
 */
uint64_t firn_contexts_make(const struct firn_cost_logs *logs, const uint32_t *counts, size_t contexts, size_t symbols,
                            unsigned tables_max, unsigned limit, struct firn_contexts *made,
                            struct firn_contexts_work *work);

/* One code for all contexts; counts: of symbols, whatever their context. */
uint64_t firn_contexts_make_one(const uint32_t *counts, size_t contexts, size_t symbols, unsigned limit,
                                struct firn_contexts *made, struct firn_contexts_work *work);

void firn_contexts_write(struct firn_bits_writer *writer, const struct firn_contexts *codes, size_t contexts,
                         size_t symbols);

/* FIRN_OK: a sound map into `tables` full codes of at least two symbols each. Otherwise FIRN_BAD_DATA. */
enum firn_status firn_contexts_read(struct firn_bits_reader *reader, struct firn_contexts *codes, size_t contexts,
                                    size_t symbols);

#endif
