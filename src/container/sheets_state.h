/*
 * container/sheets_state.h - what the files called sheets share: the sheets at work
 *
 * Room: container. Only for the files called sheets; everybody else sees container/sheets.h.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SHEETS_STATE_H
#define FIRN_CONTAINER_SHEETS_STATE_H

#include "base/threads.h"
#include "container/sheets.h"

enum {
    FIRN_SHEETS_CHUNK_BLOCKS = 64,      /* 256 KiB: in the second-level cache while it is judged */
    FIRN_SHEETS_KEPT = 2
};

#define FIRN_SHEETS_NONE UINT64_MAX
#define FIRN_SHEETS_NOTHING_SERVED UINT32_MAX

/* Good data blocks `first` and those after it. */
struct firn_sheets_kept {
    uint8_t *blocks;
    uint64_t first;
    uint32_t count;
};

struct firn_sheets {
    struct firn_sheets_options options;
    struct firn_store *store;
    const struct firn_memory *memory;
    struct firn_threads *threads;
    struct firn_reader_layout layout;
    struct firn_reader_damage damage;
    uint64_t blocks_in_file;                 /* whole ones */
    /* reading on: good data blocks from chunk_first on, mended where needed */
    uint8_t *chunk;
    uint64_t chunk_first;
    uint32_t chunk_count;
    /* the mended sheet */
    uint8_t *sheet;
    enum firn_sheets_finding *findings;
    bool *absent;
    uint64_t sheet_index;
    struct firn_sheet_shape sheet_shape;
    uint64_t sheet_first;
    uint32_t sheet_missing;
    uint32_t served;                         /* the index of the data block of it that was read last */
    /* what is left of sheets that were mended before */
    struct firn_sheets_kept kept[FIRN_SHEETS_KEPT];
    unsigned kept_next;                      /* the one to be given up next */
    uint8_t *work;                           /* reserve work, one for each worker */
    /* which damaged blocks were counted already: a bit for each block, a field for each sheet that has any */
    uint8_t **counted;
};

static inline bool firn_sheets_state_stopped(const struct firn_sheets *sheets)
{
    return sheets->options.stop != NULL && sheets->options.stop(sheets->options.stop_self);
}

/* Of the mended sheet. */
static inline uint8_t *firn_sheets_state_block(struct firn_sheets *sheets, uint32_t index)
{
    return sheets->sheet + (size_t)index * FIRN_BLOCK_BYTES;
}

static inline uint32_t firn_sheets_state_count(const struct firn_sheets *sheets)
{
    return sheets->sheet_shape.data_blocks + sheets->sheet_shape.reserve_blocks;
}

#endif
