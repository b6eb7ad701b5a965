/*
 * guard/deep.c - the last means for a block without a usable row: lanes with two flips, tried out
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/deep.h"

#include "base/bytes.h"
#include "guard/hash.h"
#include "guard/lanes_engine.h"
#include "guard/tag.h"

#include <string.h>

enum { TAG_WORD = FIRN_BLOCK_TAG_AT / 8, HASH_WORD = FIRN_BLOCK_HASH_AT / 8 };

/* A lane with two flips, and the pairs of words they may lie in. At first: the one pair that changes nothing. */
struct doubtful {
    unsigned lane, pair_count;
    struct { uint16_t first, second; } pairs[FIRN_DEEP_PAIRS];
};

struct trial {
    uint8_t block[FIRN_BLOCK_BYTES];
    struct doubtful lanes[FIRN_DEEP_LANES_MOST];
};

static bool in_tag(unsigned word)
{
    return word >= TAG_WORD && word < HASH_WORD;
}

static void flip(uint8_t *block, unsigned word, unsigned lane)
{
    block[8 * (size_t)word + lane / 8] ^= (uint8_t)(1U << lane % 8);
}

/* The pairs whose labels add up to `label`; of those that the hash does not depend on, one. */
static void list_pairs(struct doubtful *doubtful, unsigned lane, unsigned label)
{
    bool guards_only = false;

    doubtful->lane = lane;
    doubtful->pair_count = 0;
    for (unsigned a = 0; a < FIRN_BLOCK_WORDS; a++) {
        const unsigned first = firn_lanes_word_of(a), second = firn_lanes_word_of(a ^ label);
        const bool guards = first >= FIRN_LANES_DATA_WORDS && second >= FIRN_LANES_DATA_WORDS;

        if (a > (a ^ label) || in_tag(first) || in_tag(second) || (guards && guards_only))
            continue;
        guards_only = guards_only || guards;
        doubtful->pairs[doubtful->pair_count].first = (uint16_t)first;
        doubtful->pairs[doubtful->pair_count++].second = (uint16_t)second;
    }
}

/* Puts the tag in, mends lanes with one flip, and finds those with two. False: beyond deep repair. */
static bool prepare(struct trial *trial, const uint8_t *block, const struct firn_block_tag *tag)
{
    uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS];

    unsigned doubtful = 0;

    memcpy(trial->block, block, sizeof trial->block);
    for (unsigned i = 0; i < FIRN_DEEP_LANES_MOST; i++)
        trial->lanes[i] = (struct doubtful){ .lane = 0, .pair_count = 1 };
    firn_tag_put(tag, trial->block + FIRN_BLOCK_TAG_AT);
    firn_lanes_engine_here()->syndrome(trial->block, syndrome);
    for (unsigned lane = 0; lane < FIRN_LANES; lane++) {
        unsigned label = 0;

        for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++)
            label |= (unsigned)(syndrome[j] >> lane & 1) << j;
        if ((syndrome[FIRN_LANES_PARITY_WORDS] >> lane & 1) != 0) {
            if (in_tag(firn_lanes_word_of(label)))      /* which is right: so there are three flips or more */
                return false;
            flip(trial->block, firn_lanes_word_of(label), lane);
        } else if (label != 0) {
            if (doubtful == FIRN_DEEP_LANES_MOST)
                return false;
            list_pairs(&trial->lanes[doubtful++], lane, label);
        }
    }
    return true;
}

static bool hash_right(const uint8_t *block)
{
    return firn_hash_matches(block, FIRN_BLOCK_HASH_AT, block + FIRN_BLOCK_HASH_AT);
}

static void flip_pair(struct trial *trial, unsigned doubtful, unsigned pair)
{
    const struct doubtful *lane = &trial->lanes[doubtful];

    flip(trial->block, lane->pairs[pair].first, lane->lane);
    flip(trial->block, lane->pairs[pair].second, lane->lane);
}

/* Tries the pairs of both doubtful lanes in all combinations until the block is right. */
static bool try_all(struct trial *trial)
{
    for (unsigned i = 0; i < trial->lanes[0].pair_count; i++) {
        flip_pair(trial, 0, i);
        for (unsigned j = 0; j < trial->lanes[1].pair_count; j++) {
            flip_pair(trial, 1, j);
            if (hash_right(trial->block))
                return true;
            flip_pair(trial, 1, j);
        }
        flip_pair(trial, 0, i);
    }
    return false;
}

uint32_t firn_deep_trials(const uint8_t *block, const struct firn_block_tag *tag)
{
    struct trial trial;

    return prepare(&trial, block, tag) ? trial.lanes[0].pair_count * trial.lanes[1].pair_count : 0;
}

bool firn_deep_mend(uint8_t *block, const struct firn_block_tag *tag)
{
    struct trial trial;

    if (!prepare(&trial, block, tag) || !try_all(&trial))
        return false;
    memcpy(block, trial.block, FIRN_BLOCK_PAYLOAD_BYTES);
    firn_block_seal(block, tag);
    return true;
}
