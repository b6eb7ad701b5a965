/*
 * transfer/holes.h - which stretches of a file are data
 *
 * Room: transfer. Collects the extents of one file after another, never more than FIRN_ITEM_EXTENTS_MAX: where a file
 * has more, its shortest holes become data. The outcome depends on the extents alone, not on how they came.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_HOLES_H
#define FIRN_TRANSFER_HOLES_H

#include "firn/item.h"
#include "firn/memory.h"

struct firn_holes {
    const struct firn_memory *memory;
    struct firn_item_extent *extents;
    size_t count, capacity;
    uint64_t shortest;           /* a hole shorter than this is stored as data */
    uint64_t stored_bytes;       /* sum of the extents */
};

void firn_holes_start(struct firn_holes *holes, const struct firn_memory *memory);
void firn_holes_end(struct firn_holes *holes);

/* Forgets the extents of the file before. */
void firn_holes_clear(struct firn_holes *holes);

/* Adds data behind all that was added so far; bytes > 0. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_holes_add(struct firn_holes *holes, uint64_t at, uint64_t bytes);

/*
 * The extents of an open file of size bytes, as its file system tells them; one extent where it cannot.
 * FIRN_OK; FIRN_NO_MEMORY; FIRN_CHANGED: the answers contradict the size.
 */
enum firn_status firn_holes_map(struct firn_holes *holes, int descriptor, uint64_t size);

#endif
