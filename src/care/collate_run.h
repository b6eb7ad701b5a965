/*
 * care/collate_run.h - a collation at work: what its files share
 *
 * Room: care.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_COLLATE_RUN_H
#define FIRN_CARE_COLLATE_RUN_H

#include "care/collate_map.h"

/* A container that is being put together. */
struct firn_collate_run_container {
    struct firn_block_tag like;              /* its id and geometry */
    struct firn_store_stage *stage;
    struct firn_store *store;                /* the stage's */
    char *path;
    uint64_t end;                            /* behind the last block that anything is known of */
    bool has_page;
    uint8_t page[FIRN_BLOCK_BYTES];          /* what stood before block 0 of a source */
    struct firn_collate_container told;
};

struct firn_collate {
    const struct firn_collate_options *options;
    const struct firn_memory *memory;
    struct firn_collate_map *map;
    struct firn_collate_run_container *containers[FIRN_COLLATE_CONTAINERS_MAX];
    unsigned count;
    struct firn_collate_run_share { struct firn_collate_share told; char *name; } *shares;      /* told at the end */
    size_t share_count, share_capacity;
};

#endif
