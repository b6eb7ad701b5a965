/*
 * firn/item.h - one item of a collection as the catalogue has it
 *
 * Room: container. An item is its pax header (POSIX.1-2001, IEEE Std 1003.1), which the container carries without
 * reading it, and where its content lies. Content space is the stored content of all items end to end.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_ITEM_H
#define FIRN_ITEM_H

#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { FIRN_ITEM_SHA256_BYTES = 32, FIRN_ITEM_EXTENTS_MAX = 1 << 16 };

/* A stretch of a file that is stored; between the extents of a sparse file lie holes, which read as zeros. */
struct firn_item_extent {
    uint64_t at;          /* in the file */
    uint64_t bytes;       /* > 0 */
};

struct firn_item {
    uint64_t number;                            /* from 0, in the order of packing */
    const uint8_t *pax;                         /* pax header: any extended header, then the ustar header */
    size_t pax_bytes;                           /* a multiple of 512, > 0 */
    bool has_content;                           /* a regular file, perhaps an empty one */
    uint64_t bytes;                             /* size of the file, holes included; 0 without content */
    const struct firn_item_extent *extents;     /* ascending, apart from each other, within the file */
    size_t extent_count;                        /* 0 for an empty file or one that is a single hole */
    uint64_t content_at;                        /* place of its first stored byte in content space */
    uint64_t stored_bytes;                      /* sum of its extents */
    bool summed;                                /* sha256 is known */
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];     /* of the file's bytes, holes included */
};

#endif
