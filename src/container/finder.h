/*
 * container/finder.h - blocks found wherever they lie in a source, at any byte offset, in one pass
 *
 * Room: container. Looks for the magic of a tag and lets the hash decide. Where a good block was found, the next one is
 * expected behind it; a damaged block there is recognised by its tag being nearly the one expected. Sectors that cannot
 * be read count as zeros.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_FINDER_H
#define FIRN_CONTAINER_FINDER_H

#include "firn/block.h"
#include "firn/store.h"

struct firn_finder_block {
    uint64_t at;                       /* in the source */
    const uint8_t *bytes;              /* FIRN_BLOCK_BYTES; lent for the call */
    enum firn_block_state state;       /* SOUND, MENDED, or GONE: its hash cannot be satisfied */
    struct firn_block_tag tag;         /* of a block that is GONE: what its neighbours or its own bytes suggest */
    const uint8_t *page;               /* of block 0: the 4096 bytes before it, where there are so many; else NULL */
};

struct firn_finder_visitor {
    void *self;
    /* Any status but FIRN_OK ends the search with it. Blocks come nearly, but not always, in ascending order. */
    enum firn_status (*block)(void *self, const struct firn_finder_block *block);
    void (*progress)(void *self, uint64_t at, uint64_t bytes);      /* may be NULL */
    bool (*stop)(void *self);                                       /* may be NULL */
    unsigned readings;                 /* what cannot be read is tried so many times more */
};

struct firn_finder_report { uint64_t bytes, unreadable_bytes, good, mended, damaged; };

/* FIRN_OK; FIRN_NO_MEMORY; FIRN_IO: its size cannot be told; FIRN_STOPPED; what the visitor returned. */
enum firn_status firn_finder_run(struct firn_store *store, const struct firn_memory *memory,
                                 const struct firn_finder_visitor *visitor, struct firn_finder_report *report,
                                 struct firn_fault *fault);

#endif
