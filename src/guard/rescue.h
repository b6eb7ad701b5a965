/*
 * guard/rescue.h - a row with more blocks that fail their hash than the reserve can rebuild
 *
 * Room: guard. Pure. Most bytes of such blocks are still right. So first every column is decoded for errors and
 * erasures (guard/columns.h); then the lanes mend what is left in columns that could not be; then the columns again
 * with the blocks that satisfy their hash by now taken as known, until nothing changes. Columns first: a lane with
 * three flips is miscorrected, so at high rates lanes first does more harm than good. Where a column is solved the
 * lanes have nothing to say: a lane that points at a byte there had three flips, and one with two has only the few
 * pairs that lie elsewhere.
 *
 * A block is judged by its hash, with the tolerance of guard/accept.h, since that is damaged too. Once no more than m
 * blocks of the row are without that judgement, they are rebuilt from those that have it, as always.
 *
 * The tags are known: the caller tells what each must be from where the block lies.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_RESCUE_H
#define FIRN_GUARD_RESCUE_H

#include "firn/block.h"

enum firn_rescue_state {
    FIRN_RESCUE_KNOWN,      /* satisfies its hash: never changed */
    FIRN_RESCUE_READ,       /* does not, but may be mostly right */
    FIRN_RESCUE_GONE,       /* there is nothing to start from: unreadable, or it belongs elsewhere */
    FIRN_RESCUE_BACK        /* was one of the two before; is what was written now, sealed */
};

enum { FIRN_RESCUE_ROUNDS_MOST = 30, FIRN_RESCUE_BLOCKS_MOST = 256 };

struct firn_rescue_row {
    unsigned k, m;                         /* of the row, m > 0 */
    uint8_t *const *blocks;                /* k + m whole blocks, data first; NULL for one that is not stored: zeros */
    const struct firn_block_tag *tags;     /* k + m */
    uint8_t *states;                       /* k + m, in and out, each an enum firn_rescue_state; KNOWN where NULL */
};

struct firn_rescue_report {
    unsigned rounds;
    size_t columns_solved;                 /* of FIRN_BLOCK_PAYLOAD_BYTES */
};

size_t firn_rescue_work_bytes(void);       /* about 2.6 MiB */

/*
 * Brings back what it can of a row, in at most FIRN_RESCUE_ROUNDS_MOST rounds of columns and lanes. A block is judged
 * at most three times a round.
 *
 * work    firn_rescue_work_bytes(), aligned to 64
 * report  out; always filled in
 *
 * FIRN_OK             no block is READ or GONE any more FIRN_BEYOND_REPAIR  some are. What such a block holds is its
 * best guess: the columns that were solved, the rest as it
 *                     was read, under the tag that it must have had.
 */
enum firn_status firn_rescue_row(const struct firn_rescue_row *row, struct firn_rescue_report *report, uint8_t *work);

#endif
