/* container/sheets_layout.c - how a container is laid out, told by its blocks */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets_layout.h"

#include "container/sheets_block.h"
#include "guard/tag.h"

#include <string.h>

enum { CHUNK = FIRN_SHEETS_CHUNK_BLOCKS };

/* What a block that was read at place `number` has to say. */
enum testimony {
    NOTHING,
    LIKENESS,      /* not good, but its tag is nearly what it must be there */
    GOOD,
    FOREIGN        /* good, of another format version */
};

/* Whether the tag of a block that is not good is that of its place, but for few bits; kind and t may be anything. */
static bool alike(const uint8_t *block, uint64_t number, const struct firn_block_tag *like)
{
    uint8_t expected[FIRN_TAG_BYTES];
    struct firn_block_tag tag;

    (void)firn_tag_get(block + FIRN_BLOCK_TAG_AT, &tag);
    tag.version = FIRN_BLOCK_FORMAT_VERSION;
    tag.geometry = like->geometry;
    memcpy(tag.id, like->id, sizeof tag.id);
    tag.number = number;
    firn_tag_put(&tag, expected);
    return firn_tag_distance(expected, block + FIRN_BLOCK_TAG_AT) <= FIRN_TAG_STRANGE_MOST;
}

/* like: the container that is looked for, or NULL when any will do. */
static enum testimony hear(uint8_t *block, uint64_t number, const struct firn_block_tag *like,
                           struct firn_block_tag *tag)
{
    enum firn_block_state state = firn_block_open(block, false, tag);

    if (state == FIRN_BLOCK_FOREIGN)
        return FOREIGN;
    if (state == FIRN_BLOCK_GONE)
        return like != NULL && alike(block, number, like) ? LIKENESS : NOTHING;
    return tag->number == number && (like == NULL || firn_sheets_block_akin(tag, like)) ? GOOD : NOTHING;
}

/* Geometry and id as most tags have them; the rest of the tag means nothing. */
static enum firn_status elect(const struct firn_tag_votes *votes, struct firn_block_tag *tag)
{
    uint8_t bytes[FIRN_TAG_BYTES];

    firn_tag_elect(votes, bytes);
    (void)firn_tag_get(bytes, tag);
    if (votes->count == 0 || !firn_sheet_geometry_valid(&tag->geometry))
        return FIRN_NOT_CONTAINER;
    return tag->version == FIRN_BLOCK_FORMAT_VERSION ? FIRN_OK : FIRN_FOREIGN_FORMAT;
}

/* The first block from the front that is good and in its place tells geometry and id; else all tags together do. */
static enum firn_status find_first(struct firn_sheets *sheets, struct firn_block_tag *tag)
{
    struct firn_tag_votes votes = { .count = 0 };
    bool absent[CHUNK], foreign = false;

    for (uint64_t first = 0; first < sheets->blocks_in_file; first += CHUNK) {
        uint64_t left = sheets->blocks_in_file - first;
        uint32_t count = left < CHUNK ? (uint32_t)left : CHUNK;

        if (firn_sheets_state_stopped(sheets))
            return FIRN_STOPPED;
        firn_sheets_block_read(sheets, first, count, sheets->chunk, absent);
        for (uint32_t i = 0; i < count; i++) {
            uint8_t *block = sheets->chunk + (size_t)i * FIRN_BLOCK_BYTES;
            enum testimony heard = absent[i] ? NOTHING : hear(block, first + i, NULL, tag);

            if (heard == GOOD)
                return FIRN_OK;
            foreign = foreign || heard == FOREIGN;
            if (!absent[i])
                (void)firn_tag_vote(&votes, block + FIRN_BLOCK_TAG_AT);
        }
    }
    return foreign ? FIRN_FOREIGN_FORMAT : elect(&votes, tag);
}

/* The last sheet of which anything is left. */
struct ending {
    uint64_t full;                   /* blocks of a full sheet */
    uint64_t number;                 /* of the last block of it that is there */
    bool found;
    struct firn_tag_votes votes;     /* of its blocks */
};

/* Number and t of the last block, by what most tags of its sheet say of t; false when they make no sense. */
static bool conclude(const struct ending *ending, const struct firn_block_tag *like, struct firn_block_tag *tag)
{
    uint8_t bytes[FIRN_TAG_BYTES];
    struct firn_sheet_shape shape;

    firn_tag_elect(&ending->votes, bytes);
    (void)firn_tag_get(bytes, tag);
    tag->number = ending->number;
    return firn_sheet_shape_of(&like->geometry, tag->data_blocks, &shape) == FIRN_OK
        && ending->number % ending->full < shape.data_blocks + shape.reserve_blocks;
}

/*
 * The last block of this container, from the back, and t of its sheet: from a good block of that sheet if there is one,
 * else by the votes of those that are like one.
 */
static enum firn_status find_last(struct firn_sheets *sheets, const struct firn_block_tag *like,
                                  struct firn_block_tag *tag)
{
    struct ending ending = { .full = firn_sheet_full_blocks(&like->geometry) };
    uint64_t end = sheets->blocks_in_file;
    bool absent[CHUNK];

    while (end > 0) {
        uint32_t count = end < CHUNK ? (uint32_t)end : CHUNK;

        if (firn_sheets_state_stopped(sheets))
            return FIRN_STOPPED;
        firn_sheets_block_read(sheets, end - count, count, sheets->chunk, absent);
        for (uint32_t i = count; i-- > 0;) {
            uint8_t *block = sheets->chunk + (size_t)i * FIRN_BLOCK_BYTES;
            uint64_t number = end - count + i;
            enum testimony heard;

            if (ending.found && number / ending.full != ending.number / ending.full) {
                if (conclude(&ending, like, tag))
                    return FIRN_OK;
                ending.found = false;
                ending.votes = (struct firn_tag_votes){ .count = 0 };
            }
            heard = absent[i] ? NOTHING : hear(block, number, like, tag);
            if (heard == GOOD)
                return FIRN_OK;
            if (heard == LIKENESS) {
                ending.number = ending.found ? ending.number : number;
                ending.found = true;
                (void)firn_tag_vote(&ending.votes, block + FIRN_BLOCK_TAG_AT);
            }
        }
        end -= count;
    }
    return ending.found && conclude(&ending, like, tag) ? FIRN_OK : FIRN_NOT_CONTAINER;
}

enum firn_status firn_sheets_layout_find(struct firn_sheets *sheets)
{
    struct firn_reader_layout *layout = &sheets->layout;
    struct firn_block_tag first, last;
    enum firn_status status = find_first(sheets, &first);
    uint64_t full, begin, end;

    if (status == FIRN_OK)
        status = find_last(sheets, &first, &last);
    if (status != FIRN_OK)
        return status;
    layout->geometry = first.geometry;
    memcpy(layout->id, first.id, sizeof layout->id);
    full = firn_sheet_full_blocks(&first.geometry);
    layout->sheets = last.number / full + 1;
    status = firn_sheet_shape_of(&first.geometry, last.data_blocks, &layout->last_sheet);
    if (status != FIRN_OK)
        return FIRN_NOT_CONTAINER;
    begin = (layout->sheets - 1) * full;
    layout->blocks = begin + layout->last_sheet.data_blocks + layout->last_sheet.reserve_blocks;
    layout->data_blocks = (layout->sheets - 1) * firn_sheet_full_data(&first.geometry) + layout->last_sheet.data_blocks;
    layout->blocks_missing = layout->blocks > sheets->blocks_in_file ? layout->blocks - sheets->blocks_in_file : 0;
    end = firn_sheets_place(layout->blocks);
    if (layout->file_bytes > end)
        layout->foreign_bytes = layout->file_bytes - end;
    else if (layout->file_bytes >= FIRN_BLOCK_BYTES)
        layout->foreign_bytes = layout->file_bytes % FIRN_BLOCK_BYTES;
    layout->end_known = last.data_blocks < firn_sheet_full_data(&first.geometry);
    return FIRN_OK;
}
