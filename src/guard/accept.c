/*
 * guard/accept.c - whether a repaired block is the one that was written, though its stored hash is damaged too
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/accept.h"

#include "base/bytes.h"
#include "firn/block.h"
#include "guard/hash.h"

#include <string.h>

enum {
    HASHED_BITS = 8 * FIRN_BLOCK_HASH_AT,
    GUARD_AT = FIRN_BLOCK_HASH_AT + FIRN_HASH_BYTES,
    HASH_BITS = 8 * FIRN_HASH_BYTES,
    GUARD_BITS = 8 * (FIRN_BLOCK_BYTES - GUARD_AT),
    FREE_BITS = 2,
    DEVIATIONS_SQUARED = 36
};

/* In how many bits bytes[from .. end) of two blocks differ; from and end are multiples of 8. */
static uint64_t distance(const uint8_t *a, const uint8_t *b, size_t from, size_t end)
{
    uint64_t count = 0;

    for (size_t i = from; i < end; i += 8)
        for (uint64_t odd = firn_bytes_get64(a + i) ^ firn_bytes_get64(b + i); odd != 0; odd &= odd - 1)
            count++;
    return count;
}

/* Whether `found` strange bits of `bits` are no more than `elsewhere` of the hashed bits explain. Units: 1/32 000. */
static bool explained(uint64_t found, uint64_t bits, uint64_t elsewhere)
{
    const uint64_t expected = bits * (elsewhere + 1);
    const uint64_t beyond = found < FREE_BITS ? 0 : (found - FREE_BITS) * HASHED_BITS;

    return beyond <= expected
        || (beyond - expected) * (beyond - expected) <= DEVIATIONS_SQUARED * expected * HASHED_BITS;
}

bool firn_accept_block(const uint8_t *repaired, const uint8_t *read)
{
    uint8_t made[FIRN_BLOCK_BYTES];
    uint64_t hash_bits, elsewhere;

    firn_hash_put(repaired, FIRN_BLOCK_HASH_AT, made + FIRN_BLOCK_HASH_AT);
    hash_bits = distance(made, read, FIRN_BLOCK_HASH_AT, GUARD_AT);
    if (hash_bits == 0)
        return true;
    if (hash_bits > FIRN_ACCEPT_HASH_BITS_MOST)
        return false;
    memcpy(made, repaired, FIRN_BLOCK_HASH_AT);
    firn_lanes_guard(made);
    elsewhere = distance(made, read, 0, FIRN_BLOCK_HASH_AT);
    return explained(hash_bits, HASH_BITS, elsewhere)
        && explained(distance(made, read, GUARD_AT, FIRN_BLOCK_BYTES), GUARD_BITS, elsewhere);
}
