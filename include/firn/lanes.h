/*
 * firn/lanes.h - mending stray bits inside one block
 *
 * Room: guard. A block is 4096 bytes, seen as 512 little-endian 64-bit words. Bit b of every word belongs to lane b: 64
 * lanes of 512 bits, each a word of the extended Hamming code [512, 502, 4]. One wrong bit per lane is mended, two are
 * noticed; so any run of 64 wrong bits is mended too. Three wrong bits in a lane may be "mended" to a wrong word: only
 * the block's hash can tell (firn/block.h).
 *
 * Method: R. W. Hamming, "Error Detecting and Error Correcting Codes", Bell System Technical Journal 29(2), 1950,
 * pp. 147-160. Where the guard words sit: format-spec/block.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_LANES_H
#define FIRN_LANES_H

#include "firn/status.h"

#include <stdbool.h>
#include <stdint.h>

enum {
    FIRN_BLOCK_BYTES = 4096,
    FIRN_BLOCK_WORDS = 512,
    FIRN_LANES = 64,
    FIRN_LANES_DATA_WORDS = 502,       /* words 0..501 are guarded, words 502..511 guard them */
    FIRN_LANES_PARITY_WORDS = 9        /* words 502..510; word 511 is the overall parity */
};

struct firn_lanes_report {
    unsigned clean, mended, beyond;    /* lanes; the three add up to 64 */
};

/* Computes the ten guard words of a block from its first 502 words and writes them into it, at any alignment. */
FIRN_API void firn_lanes_guard(uint8_t *block);

/* True when every lane is a code word as it stands. */
FIRN_API bool firn_lanes_check(const uint8_t *block);

/*
 * Mends what the guard words can mend, in place.
 *
 * block   in/out  FIRN_BLOCK_BYTES bytes, any alignment; lent for the call, never kept.
 *                 A lane beyond repair is left exactly as it was found.
 * report  out     always filled in.
 *
 * FIRN_OK             every lane is a code word now, mended ones included
 * FIRN_BEYOND_REPAIR  report->beyond lanes are not
 *
 * Allocates nothing. Different threads may work on different blocks.
 */
FIRN_API enum firn_status firn_lanes_mend(uint8_t *block, struct firn_lanes_report *report);

#endif
