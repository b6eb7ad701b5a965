/*
 * guard/block.c - sealing a block, and judging one that was read (format-spec/block.md)
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/block.h"

#include "guard/hash.h"
#include "guard/tag.h"

#include <string.h>

void firn_block_seal(uint8_t *block, const struct firn_block_tag *tag)
{
    firn_tag_put(tag, block + FIRN_BLOCK_TAG_AT);
    firn_hash_put(block, FIRN_BLOCK_HASH_AT, block + FIRN_BLOCK_HASH_AT);
    firn_lanes_guard(block);
}

/* Reads the tag of a block whose hash is right. */
static enum firn_block_state read_tag(const uint8_t *block, enum firn_block_state state, struct firn_block_tag *tag)
{
    return firn_tag_get(block + FIRN_BLOCK_TAG_AT, tag) ? state : FIRN_BLOCK_FOREIGN;
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
