/*
 * guard/accept.h - whether a repaired block is the one that was written, though its stored hash is damaged too
 *
 * Room: guard. Pure. Used by guard/rescue.c. The usual judge is the hash: it says yes when every bit of it agrees. At
 * a raw bit error rate of one in 200 it hardly ever does, since the 128 bits that were stored have flips of their
 * own, and no code but the lanes guards them. So hash and guard words are computed anew from the repaired payload and
 * tag, and compared with those that were read. With e bits of payload and tag repaired, out of 32 000, x = n (e + 1)
 * / 32 000 flips are to be expected in n bits; at most that, six standard deviations and two bits more may differ:
 *
 *     hash     min(8, x + 6 sqrt(x) + 2)   of n = 128 bits
 *     guard    x + 6 sqrt(x) + 2           of n = 640 bits, not asked where no bit of the hash differs
 *
 * A right block fails that once in a million times at a raw bit error rate of 8 in 1000, more seldom below; then it is
 * rebuilt from its row like one that is lost.
 *
 * A wrong payload has a hash that has nothing to do with the stored one: that at most 8 of 128 bits differ happens
 * with the probability (C(128,0) + ... + C(128,8)) / 2^128 < 2^-87. A rescue judges a block at most 90 times: below
 * 2^-81. The bound on the guard words makes it smaller still, by an amount that depends on the damage and is not
 * counted on.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_ACCEPT_H
#define FIRN_GUARD_ACCEPT_H

#include "firn/lanes.h"

enum { FIRN_ACCEPT_HASH_BITS_MOST = 8 };

/*
 * repaired  payload and tag are what the block is taken to be; what stands behind them does not matter
 * read      the whole block as it was read
 */
bool firn_accept_block(const uint8_t *repaired, const uint8_t *read);

#endif
