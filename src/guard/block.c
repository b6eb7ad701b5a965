/*
 * guard/block.c - sealing a block, and judging one that was read (format-spec/block.md)
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/block.h"

#include "base/bytes.h"
#include "guard/hash.h"

#include <string.h>

/* Offsets in the tag, format-spec/block.md, table 2. */
enum {
    MAGIC_AT = 0, VERSION_AT = 4, KIND_AT = 5, K_AT = 6, M_AT = 7, ID_AT = 8, NUMBER_AT = 16, DATA_BLOCKS_AT = 24,
    DEPTH_AT = 28, ZERO_AT = 30
};

static const uint8_t magic[4] = { 'F', 'I', 'R', 'N' };

void firn_block_seal(uint8_t *block, const struct firn_block_tag *tag)
{
    uint8_t *at = block + FIRN_BLOCK_TAG_AT;

    memcpy(at + MAGIC_AT, magic, sizeof magic);
    at[VERSION_AT] = tag->version;
    at[KIND_AT] = (uint8_t)tag->kind;
    at[K_AT] = tag->geometry.k;
    at[M_AT] = tag->geometry.m;
    memcpy(at + ID_AT, tag->id, FIRN_BLOCK_ID_BYTES);
    firn_bytes_put64(at + NUMBER_AT, tag->number);
    firn_bytes_put32(at + DATA_BLOCKS_AT, tag->data_blocks);
    firn_bytes_put16(at + DEPTH_AT, tag->geometry.depth);
    firn_bytes_put16(at + ZERO_AT, 0);
    firn_hash_put(block, FIRN_BLOCK_HASH_AT, block + FIRN_BLOCK_HASH_AT);
    firn_lanes_guard(block);
}

/* Whether a writer of this format could have made the tag. */
static bool plausible(const uint8_t *at, const struct firn_block_tag *tag)
{
    struct firn_sheet_shape shape;
    uint64_t index;

    if (memcmp(at + MAGIC_AT, magic, sizeof magic) != 0 || tag->version != FIRN_BLOCK_FORMAT_VERSION
        || firn_bytes_get16(at + ZERO_AT) != 0
        || firn_sheet_shape_of(&tag->geometry, tag->data_blocks, &shape) != FIRN_OK)
        return false;
    index = tag->number % firn_sheet_full_blocks(&tag->geometry);
    if (index < tag->data_blocks)
        return at[KIND_AT] == FIRN_BLOCK_DATA;
    return at[KIND_AT] == FIRN_BLOCK_RESERVE && index < tag->data_blocks + shape.reserve_blocks;
}

/* Reads the tag of a block whose hash is right. */
static enum firn_block_state read_tag(const uint8_t *block, enum firn_block_state state, struct firn_block_tag *tag)
{
    const uint8_t *at = block + FIRN_BLOCK_TAG_AT;

    *tag = (struct firn_block_tag){
        .version = at[VERSION_AT],
        .kind = at[KIND_AT] == FIRN_BLOCK_RESERVE ? FIRN_BLOCK_RESERVE : FIRN_BLOCK_DATA,
        .geometry = { at[K_AT], at[M_AT], firn_bytes_get16(at + DEPTH_AT) },
        .number = firn_bytes_get64(at + NUMBER_AT),
        .data_blocks = firn_bytes_get32(at + DATA_BLOCKS_AT),
    };
    memcpy(tag->id, at + ID_AT, FIRN_BLOCK_ID_BYTES);
    return plausible(at, tag) ? state : FIRN_BLOCK_FOREIGN;
}

static bool hash_right(const uint8_t *block)
{
    return firn_hash_matches(block, FIRN_BLOCK_HASH_AT, block + FIRN_BLOCK_HASH_AT);
}

enum firn_block_state firn_block_open(uint8_t *block, bool check_all, struct firn_block_tag *tag)
{
    uint8_t trial[FIRN_BLOCK_BYTES];
    struct firn_lanes_report report;
    enum firn_block_state state;

    if (hash_right(block)) {
        state = read_tag(block, FIRN_BLOCK_SOUND, tag);
        if (state != FIRN_BLOCK_SOUND || !check_all || firn_lanes_check(block))
            return state;
        firn_lanes_guard(block);      /* the hash vouches for every word they are made of */
        return FIRN_BLOCK_MENDED;
    }
    memcpy(trial, block, sizeof trial);
    (void)firn_lanes_mend(trial, &report);      /* a lane beyond repair may be hurt in its guard words only */
    if (report.mended == 0 || !hash_right(trial))
        return FIRN_BLOCK_GONE;
    state = read_tag(trial, FIRN_BLOCK_MENDED, tag);
    if (state == FIRN_BLOCK_MENDED) {
        firn_lanes_guard(trial);
        memcpy(block, trial, sizeof trial);
    }
    return state;
}
