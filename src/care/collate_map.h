/*
 * care/collate_map.h - what is known of each block of each container, and the damaged copies of it, in temporary files
 *
 * Room: care. The map is a sparse file of one number for each block: nothing, good, or where the newest damaged copy
 * lies; each copy leads to the one before it. Only a page for each container is in memory.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_COLLATE_MAP_H
#define FIRN_CARE_COLLATE_MAP_H

#include "firn/block.h"
#include "firn/collate.h"

/* Containers of up to 32 TiB; 128 of them make a sparse file of 8 TiB, which any file system of today can hold. */
#define FIRN_COLLATE_MAP_BLOCKS_MAX (UINT64_C(1) << 33)

/* Who mends a container keeps a few bytes for each sheet; a lone block with an absurd number shall not cost memory. */
#define FIRN_COLLATE_MAP_SHEETS_MAX (UINT64_C(1) << 20)

enum { FIRN_COLLATE_MAP_NOTHING = 0, FIRN_COLLATE_MAP_GOOD = 1 };      /* more: the place of a damaged copy */

struct firn_collate_map;

enum firn_status firn_collate_map_make(const char *folder, const struct firn_memory *memory,
                                       struct firn_collate_map **out, struct firn_fault *fault);
void firn_collate_map_free(struct firn_collate_map *map);      /* takes NULL */

/* container 0 .. FIRN_COLLATE_CONTAINERS_MAX - 1, number below FIRN_COLLATE_MAP_BLOCKS_MAX. FIRN_OK, FIRN_IO, ... */
enum firn_status firn_collate_map_get(struct firn_collate_map *map, unsigned container, uint64_t number,
                                      uint64_t *entry, struct firn_fault *fault);
enum firn_status firn_collate_map_set(struct firn_collate_map *map, unsigned container, uint64_t number,
                                      uint64_t entry, struct firn_fault *fault);

/* Keeps a damaged copy of a block whose entry is not GOOD. */
enum firn_status firn_collate_map_keep(struct firn_collate_map *map, unsigned container, uint64_t number,
                                       const uint8_t *block, struct firn_fault *fault);

/*
 * Fetches the damaged copies that an entry leads to, the newest first; most at most. copies: room for them. *count: how
 * many there were.
 */
enum firn_status firn_collate_map_fetch(struct firn_collate_map *map, uint64_t entry, size_t most, uint8_t *copies,
                                        size_t *count, struct firn_fault *fault);

#endif
