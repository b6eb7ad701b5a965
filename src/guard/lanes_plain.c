/*
 * guard/lanes_plain.c - the syndrome of all 64 lanes by folding halves; every other engine is checked against it
 *
 * Lay the words out by label. The words with the highest label bit set are the upper half: their XOR is the syndrome's
 * highest bit. XOR the upper half onto the lower, and what is left is the same question with one bit less. That is about
 * two XORs a word for all ten syndrome words, where taking them one by one would need nearly six.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/lanes_engine.h"

#include "base/bytes.h"

static bool usable(void)
{
    return true;
}

static uint64_t word(const uint8_t *block, unsigned index)
{
    return firn_bytes_get64(block + 8 * (size_t)index);
}

/* folded[i], i < 256: the words with labels i and 256 + i. Labels 2^j + 1 .. 2^(j+1) - 1 stand in words label - 2 - j. */
static uint64_t fold_block(const uint8_t *block, uint64_t folded[256])
{
    const uint8_t *upper = block + 8 * (size_t)(256 - 2 - 8);
    uint64_t sum;

    folded[0] = word(block, 511) ^ word(block, 510);
    for (unsigned j = 0; j < 8; j++) {
        const uint8_t *lower = block + 8 * ((size_t)(1U << j) - 1 - j);

        folded[1U << j] = word(block, 502 + j) ^ word(upper, 1U << j);
        for (unsigned i = 1; i < 1U << j; i++)
            folded[(1U << j) + i] = word(lower, i - 1) ^ word(upper, (1U << j) + i);
    }
    sum = word(block, 510);
    for (unsigned i = 1; i < 256; i++)
        sum ^= word(upper, i);
    return sum;
}

static void syndrome(const uint8_t *block, uint64_t syndromes[FIRN_LANES_SYNDROME_WORDS])
{
    uint64_t folded[256];

    syndromes[8] = fold_block(block, folded);
    for (unsigned j = 8; j-- > 0;) {
        uint64_t sum = 0;

        for (unsigned i = 0; i < 1U << j; i++) {
            sum ^= folded[(1U << j) + i];
            folded[i] ^= folded[(1U << j) + i];
        }
        syndromes[j] = sum;
    }
    syndromes[9] = folded[0];
}

const struct firn_lanes_engine firn_lanes_plain = { "plain", usable, syndrome };
