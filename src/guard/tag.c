/*
 * guard/tag.c - the tag of a block in bytes, as it is written, read, guessed at and compared
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/tag.h"

#include "base/bytes.h"

#include <string.h>

/* Offsets in the tag, format-spec/block.md, table 2. */
enum {
    MAGIC_AT = 0, VERSION_AT = 4, KIND_AT = 5, K_AT = 6, M_AT = 7, ID_AT = 8, NUMBER_AT = 16, DATA_BLOCKS_AT = 24,
    DEPTH_AT = 28, ZERO_AT = 30
};

enum { VOTE_STRANGE_MOST = 8 };

static const uint8_t magic[4] = { 'F', 'I', 'R', 'N' };

void firn_tag_put(const struct firn_block_tag *tag, uint8_t bytes[FIRN_TAG_BYTES])
{
    memcpy(bytes + MAGIC_AT, magic, sizeof magic);
    bytes[VERSION_AT] = tag->version;
    bytes[KIND_AT] = (uint8_t)tag->kind;
    bytes[K_AT] = tag->geometry.k;
    bytes[M_AT] = tag->geometry.m;
    memcpy(bytes + ID_AT, tag->id, FIRN_BLOCK_ID_BYTES);
    firn_bytes_put64(bytes + NUMBER_AT, tag->number);
    firn_bytes_put32(bytes + DATA_BLOCKS_AT, tag->data_blocks);
    firn_bytes_put16(bytes + DEPTH_AT, tag->geometry.depth);
    firn_bytes_put16(bytes + ZERO_AT, 0);
}

static bool plausible(const uint8_t *bytes, const struct firn_block_tag *tag)
{
    struct firn_sheet_shape shape;
    uint64_t index;

    if (memcmp(bytes + MAGIC_AT, magic, sizeof magic) != 0 || tag->version != FIRN_BLOCK_FORMAT_VERSION
        || firn_bytes_get16(bytes + ZERO_AT) != 0
        || firn_sheet_shape_of(&tag->geometry, tag->data_blocks, &shape) != FIRN_OK)
        return false;
    index = tag->number % firn_sheet_full_blocks(&tag->geometry);
    if (index < tag->data_blocks)
        return bytes[KIND_AT] == FIRN_BLOCK_DATA;
    return bytes[KIND_AT] == FIRN_BLOCK_RESERVE && index < tag->data_blocks + shape.reserve_blocks;
}

bool firn_tag_get(const uint8_t bytes[FIRN_TAG_BYTES], struct firn_block_tag *tag)
{
    *tag = (struct firn_block_tag){
        .version = bytes[VERSION_AT],
        .kind = bytes[KIND_AT] == FIRN_BLOCK_RESERVE ? FIRN_BLOCK_RESERVE : FIRN_BLOCK_DATA,
        .geometry = { bytes[K_AT], bytes[M_AT], firn_bytes_get16(bytes + DEPTH_AT) },
        .number = firn_bytes_get64(bytes + NUMBER_AT),
        .data_blocks = firn_bytes_get32(bytes + DATA_BLOCKS_AT),
    };
    memcpy(tag->id, bytes + ID_AT, FIRN_BLOCK_ID_BYTES);
    return plausible(bytes, tag);
}

static unsigned count_ones(uint64_t word)
{
    unsigned count = 0;

    for (; word != 0; word &= word - 1)
        count++;
    return count;
}

unsigned firn_tag_distance(const uint8_t a[FIRN_TAG_BYTES], const uint8_t b[FIRN_TAG_BYTES])
{
    unsigned distance = 0;

    for (unsigned i = 0; i < FIRN_TAG_BYTES; i += 8)
        distance += count_ones(firn_bytes_get64(a + i) ^ firn_bytes_get64(b + i));
    return distance;
}

bool firn_tag_vote(struct firn_tag_votes *votes, const uint8_t bytes[FIRN_TAG_BYTES])
{
    unsigned strange = count_ones(firn_bytes_get32(bytes + MAGIC_AT) ^ firn_bytes_get32(magic))
                       + count_ones(bytes[VERSION_AT] ^ FIRN_BLOCK_FORMAT_VERSION) + count_ones(bytes[KIND_AT] >> 2)
                       + count_ones(firn_bytes_get16(bytes + ZERO_AT));

    if (strange > VOTE_STRANGE_MOST)
        return false;
    for (unsigned i = 0; i < 8 * FIRN_TAG_BYTES; i++)
        votes->ones[i] += bytes[i / 8] >> i % 8 & 1U;
    votes->count++;
    return true;
}

void firn_tag_elect(const struct firn_tag_votes *votes, uint8_t bytes[FIRN_TAG_BYTES])
{
    memset(bytes, 0, FIRN_TAG_BYTES);
    for (unsigned i = 0; i < 8 * FIRN_TAG_BYTES; i++)
        if (votes->ones[i] > votes->count / 2)
            bytes[i / 8] |= (uint8_t)(1U << i % 8);
}
