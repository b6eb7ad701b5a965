/*
 * container/ballot.h - one block out of several damaged copies or readings of it
 *
 * Room: container. Bit by bit the majority is taken; where copies differ, each lane (firn/lanes.h) tells which of the
 * differing bits can be right together. What comes out is a proposal: only the block's own hash can accept it, so two
 * copies with the same error never outvote a right one unnoticed.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_BALLOT_H
#define FIRN_CONTAINER_BALLOT_H

#include "firn/block.h"
#include "firn/store.h"

enum { FIRN_BALLOT_COPIES_MAX = 32 };

/*
 * copies  1 .. FIRN_BALLOT_COPIES_MAX times FIRN_BLOCK_BYTES; each is tried by itself first
 * block   out  the good block; on FIRN_BLOCK_GONE what the majority says
 *
 * Returns FIRN_BLOCK_SOUND, or FIRN_BLOCK_MENDED when it took the lanes or more than one copy, FIRN_BLOCK_GONE, or
 * FIRN_BLOCK_FOREIGN. Bounded work: at most 4096 hashes beyond those of the copies.
 */
enum firn_block_state firn_ballot_decide(const uint8_t *const *copies, size_t count,
                                         uint8_t block[FIRN_BLOCK_BYTES], struct firn_block_tag *tag);

/*
 * Reads the 4096 bytes at `at` again, up to `times` times, each time from the medium as far as the system lets us, and
 * decides over these readings and what `block` holds (unless held is false).
 *
 * FIRN_OK    block is good; what it was before does not matter any more
 * FIRN_LOST  it is not; block holds what the majority of the readings says, or what it held when there were none
 */
enum firn_status firn_ballot_reread(struct firn_store *store, uint64_t at, unsigned times, bool held,
                                    const struct firn_memory *memory, uint8_t block[FIRN_BLOCK_BYTES]);

#endif
