/*
 * guard/deep.h - the last means for a block without a usable row: lanes with two flips, tried out
 *
 * Room: guard. Pure. A lane with two flips tells the sum of their labels and not which they are; but only 256 pairs
 * of labels have that sum. Where all other lanes are clean or were wrong in one bit, every pair is tried, with the
 * hash as judge: it must agree in all 128 bits, so 65 536 trials let a wrong block pass with a chance below 2^-111.
 * Pairs that touch the tag are left out, since the caller knows it; pairs inside the guard words are one trial, since
 * the hash does not depend on them.
 *
 * Bounded: two such lanes at most, so 256 * 256 hashes of 4000 bytes for a block, about 10 ms.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_DEEP_H
#define FIRN_GUARD_DEEP_H

#include "firn/block.h"

enum { FIRN_DEEP_LANES_MOST = 2, FIRN_DEEP_PAIRS = FIRN_BLOCK_WORDS / 2 };

/*
 * How many trials the block as it was read may take: 0 when it is beyond deep repair (more than two lanes with two
 * flips, or one with more than two), else a number up to 65 536. Costs as much as checking the lanes.
 */
uint32_t firn_deep_trials(const uint8_t *block, const struct firn_block_tag *tag);

/* True: the block is what was written now, sealed under the tag. False: it is as it was. */
bool firn_deep_mend(uint8_t *block, const struct firn_block_tag *tag);

#endif
