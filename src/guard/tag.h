/*
 * guard/tag.h - the tag of a block in bytes, as it is written, read, guessed at and compared
 *
 * Room: guard. Pure. Used by guard/block.c and by those who look at blocks whose hash is not satisfied: there a tag
 * is not to be believed, but where a block lies tells what its tag must have been, bit by bit, and in how many bits
 * it differs tells how much of the block is left. Layout: format-spec/block.md, table 2. The hash is not part of it
 * here.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_TAG_H
#define FIRN_GUARD_TAG_H

#include "firn/block.h"

enum {
    FIRN_TAG_BYTES = FIRN_BLOCK_HASH_AT - FIRN_BLOCK_TAG_AT,
    /*
     * A tag with more strange bits than this belongs to something else: a block of noise differs in 128 of 256 bits,
     * one of zeros in more than this many (magic, id and sizes have their ones), one at a raw bit error rate of 1 in
     * 50 in 5.
     */
    FIRN_TAG_STRANGE_MOST = 20
};

/* Writes all 32 bytes. */
void firn_tag_put(const struct firn_block_tag *tag, uint8_t bytes[FIRN_TAG_BYTES]);

/* Reads the fields, whatever they hold; true when a writer of this format could have written them. */
bool firn_tag_get(const uint8_t bytes[FIRN_TAG_BYTES], struct firn_block_tag *tag);

/* In how many bits two tags differ. */
unsigned firn_tag_distance(const uint8_t a[FIRN_TAG_BYTES], const uint8_t b[FIRN_TAG_BYTES]);

/* --- what many damaged tags say together --- */

/* Starts as all zeros. */
struct firn_tag_votes {
    uint32_t count;
    uint32_t ones[8 * FIRN_TAG_BYTES];
};

/*
 * A tag's vote is counted when at most 8 of the 62 bits are strange that every tag of this format has alike (magic,
 * version, zero bytes, kind but for its last two bits); of tags of noise one in a thousand million is. Returns
 * whether it was counted.
 */
bool firn_tag_vote(struct firn_tag_votes *votes, const uint8_t bytes[FIRN_TAG_BYTES]);

/* Every bit as most votes have it. */
void firn_tag_elect(const struct firn_tag_votes *votes, uint8_t bytes[FIRN_TAG_BYTES]);

#endif
