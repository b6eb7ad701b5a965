/*
 * guard/lanes_plain.c - the syndrome of all 64 lanes in plain C; every other engine is checked against it
 *
 * Lay the words out by label. The words with the highest label bit set are the upper half: their XOR is the syndrome's
 * highest bit. XOR the upper half onto the lower, and what is left is the same question with one bit less. That is
 * about two XORs a word for all ten syndrome words, where taking them one by one would need nearly six. Here it is done
 * for eight rows of sixteen words at a time, so that little goes back to memory on the way.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/lanes_engine.h"

#include "base/bytes.h"

#include <string.h>

enum { COLUMNS = 16, ROWS = 8, GROUPS = 4 };

static bool usable(void)
{
    return true;
}

/* Words stay as the machine loads them until the end: XOR does not care for byte order. */
static inline uint64_t load(const uint8_t *at, size_t index)
{
    uint64_t word;

    memcpy(&word, at + 8 * index, sizeof word);
    return word;
}

/* Folds the rows of a group of 128 neighbouring labels; bits[j] gathers those whose row number has bit j. */
static void fold_rows(const uint8_t *const rows[ROWS], uint64_t (*restrict bits)[COLUMNS], uint64_t *restrict sum)
{
    const uint8_t *const r0 = rows[0], *const r1 = rows[1], *const r2 = rows[2], *const r3 = rows[3];
    const uint8_t *const r4 = rows[4], *const r5 = rows[5], *const r6 = rows[6], *const r7 = rows[7];

    for (unsigned i = 0; i < COLUMNS; i++) {
        uint64_t v1 = load(r1, i), v01 = load(r0, i) ^ v1, v3 = load(r3, i), v23 = load(r2, i) ^ v3;
        uint64_t v5 = load(r5, i), v45 = load(r4, i) ^ v5, v7 = load(r7, i), v67 = load(r6, i) ^ v7;

        bits[0][i] ^= v1 ^ v3 ^ v5 ^ v7;
        bits[1][i] ^= v23 ^ v67;
        bits[2][i] ^= v45 ^ v67;
        sum[i] = v01 ^ v23 ^ v45 ^ v67;
    }
}

/* Adds the upper half of count sums to the lower half, and returns the XOR of the upper half. */
static uint64_t fold_half(uint64_t *sums, unsigned count)
{
    uint64_t upper = 0;

    for (unsigned i = 0; i < count / 2; i++) {
        upper ^= sums[count / 2 + i];
        sums[i] ^= sums[count / 2 + i];
    }
    return upper;
}

static uint64_t total(const uint64_t sums[COLUMNS])
{
    uint64_t sum = 0;

    for (unsigned i = 0; i < COLUMNS; i++)
        sum ^= sums[i];
    return sum;
}

/* The words of labels 0 .. 15, in order. */
static void gather_first(const uint8_t *block, uint64_t first[COLUMNS])
{
    first[0] = load(block, FIRN_BLOCK_WORDS - 1);
    for (unsigned j = 0; j < 4; j++) {
        first[1U << j] = load(block, FIRN_LANES_DATA_WORDS + j);
        for (unsigned i = 1; i < 1U << j; i++)
            first[(1U << j) + i] = load(block, (1U << j) + i - 2 - j);
    }
}

/*
 * Where the 16 words from label 16 * row on stand: labels 2^j + 1 .. 2^(j+1) - 1 are words label - 2 - j. In the place
 * of label 2^j this gives the word before it, for which the caller makes amends.
 */
static const uint8_t *row_at(const uint8_t *block, unsigned row)
{
    const unsigned j = 4U + (row > 1) + (row > 3) + (row > 7) + (row > 15);

    return block + 8 * ((size_t)COLUMNS * row - 2 - j);
}

static void syndrome(const uint8_t *block, uint64_t syndromes[FIRN_LANES_SYNDROME_WORDS])
{
    uint64_t bits[3][COLUMNS] = { { 0 } }, sums[GROUPS * COLUMNS], first[COLUMNS], words[FIRN_LANES_SYNDROME_WORDS];

    gather_first(block, first);
    for (unsigned group = 0; group < GROUPS; group++) {
        const uint8_t *rows[ROWS];

        for (unsigned i = 0; i < ROWS; i++)
            rows[i] = group + i == 0 ? (const uint8_t *)first : row_at(block, ROWS * group + i);
        fold_rows(rows, bits, &sums[group * COLUMNS]);
    }
    words[8] = fold_half(sums, 4 * COLUMNS);
    words[7] = fold_half(sums, 2 * COLUMNS);
    for (unsigned j = 0; j < 3; j++)
        words[4 + j] = total(bits[j]);
    for (unsigned j = 4; j-- > 0;)
        words[j] = fold_half(sums, 2U << j);
    words[9] = sums[0];
    for (unsigned j = 4; j < FIRN_LANES_PARITY_WORDS; j++) {
        uint64_t amends = load(block, FIRN_LANES_DATA_WORDS + j) ^ load(block, ((size_t)1 << j) - 2 - j);

        words[j] ^= amends;
        words[9] ^= amends;
    }
    for (unsigned j = 0; j < FIRN_LANES_SYNDROME_WORDS; j++)
        syndromes[j] = firn_bytes_get64((const uint8_t *)&words[j]);
}

const struct firn_lanes_engine firn_lanes_plain = { "plain", usable, syndrome };
