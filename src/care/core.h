/*
 * care/core.h - a container as a core: from its first block to its last, how much of each slice was damaged
 *
 * Room: care. The depth profile that a scrub brings up, small enough to be kept for every scrub.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_CORE_H
#define FIRN_CARE_CORE_H

#include "base/text.h"
#include "firn/scrub.h"

enum { FIRN_CORE_SLICES = 120, FIRN_CORE_WORDS_ROOM = FIRN_CORE_SLICES * 72 };

/* Damaged blocks of one slice. */
struct firn_core_slice { uint64_t mended, rebuilt, lost; };

/* Slice s of a container of n blocks holds those from ceil(s * n / FIRN_CORE_SLICES) on. */
struct firn_core {
    uint64_t blocks;
    struct firn_core_slice slices[FIRN_CORE_SLICES];
    uint64_t places, places_lost;      /* runs of damaged, and of lost, blocks */
    uint64_t next, next_lost;          /* the block that would go on with the last run; 0: none */
};

void firn_core_start(struct firn_core *core, uint64_t blocks);
/* Blocks come in ascending order, each below core->blocks. */
void firn_core_add(struct firn_core *core, uint64_t block, enum firn_scrub_found what);

/* The slice that a block is in; and a slice's first block, which is core's blocks for the one behind the last. */
size_t firn_core_slice_of(uint64_t block, uint64_t blocks);
uint64_t firn_core_first_block(size_t slice, uint64_t blocks);

/* "3:1,0,0;57:0,12,2": the slices that are damaged, as mended, rebuilt, lost; "-" for none. */
void firn_core_write(const struct firn_core *core, struct firn_text *text);
/* Slices only. FIRN_OK, or FIRN_BAD_DATA with the slices as far as they could be read. */
enum firn_status firn_core_read(struct firn_core *core, const char *words);

#endif
