/*
 * firn/block.h - one block of a container: 3968 bytes of payload, a tag that says where it belongs, guard words
 *
 * Room: guard. The tag holds a 128-bit hash over payload and tag, so a block can be judged alone, and enough about the
 * container that any one intact block tells how all of it is laid out. Offsets: format-spec/block.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BLOCK_H
#define FIRN_BLOCK_H

#include "firn/lanes.h"
#include "firn/sheet.h"

#include <stddef.h>

enum {
    FIRN_BLOCK_PAYLOAD_BYTES = 3968,
    FIRN_BLOCK_TAG_AT = 3968,
    FIRN_BLOCK_TAG_BYTES = 48,
    FIRN_BLOCK_HASH_AT = 4000,         /* the last 16 bytes of the tag */
    FIRN_BLOCK_FORMAT_VERSION = 1,
    FIRN_BLOCK_ID_BYTES = 8
};

enum firn_block_kind { FIRN_BLOCK_DATA = 1, FIRN_BLOCK_RESERVE = 2 };

struct firn_block_tag {
    uint8_t version;
    enum firn_block_kind kind;
    struct firn_sheet_geometry geometry;      /* of a full sheet of this container */
    uint8_t id[FIRN_BLOCK_ID_BYTES];          /* of the container */
    uint64_t number;                          /* of the block in the container, from 0 */
    uint32_t data_blocks;                     /* t: data blocks in this block's sheet */
};

enum firn_block_state {
    FIRN_BLOCK_SOUND,        /* hash and lanes as written */
    FIRN_BLOCK_MENDED,       /* was damaged; the lanes gave back what the hash confirms */
    FIRN_BLOCK_GONE,         /* the hash cannot be satisfied: lost to this layer */
    FIRN_BLOCK_FOREIGN       /* hash is right, but the tag is of a format version this build does not read, or absurd */
};

/*
 * Seals a block whose payload stands in its first 3968 bytes: writes tag, hash and guard words behind it.
 * The tag must be valid (firn_sheet_geometry_valid, data_blocks 1 .. k * depth).
 */
FIRN_API void firn_block_seal(uint8_t *block, const struct firn_block_tag *tag);

/*
 * Judges a block as read, mends it in place where the lanes can, and reads its tag.
 *
 * block      in/out  FIRN_BLOCK_BYTES bytes; left as it was unless the state is FIRN_BLOCK_MENDED
 * check_all  in      also checks the guard words of a block whose hash matches, as scrub does: flips there do no harm
 *                    yet, but the next flip might. Without it such a block counts as sound.
 * tag        out     filled in unless the state is FIRN_BLOCK_GONE; on FIRN_BLOCK_FOREIGN only version is meaningful
 */
FIRN_API enum firn_block_state firn_block_open(uint8_t *block, bool check_all, struct firn_block_tag *tag);

#endif
