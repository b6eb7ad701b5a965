/* container/sheets_block.c - single blocks of a container: read, judged, counted */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets_block.h"

#include "base/memory.h"

void firn_sheets_block_read(struct firn_sheets *sheets, uint64_t first, uint32_t count, uint8_t *bytes, bool *absent)
{
    struct firn_store *store = sheets->store;
    size_t got = 0, had;
    int os_error = 0;
    enum firn_status status = store->read_at(store->self, firn_sheets_place(first), bytes,
                                             (size_t)count * FIRN_BLOCK_BYTES, &got, &os_error);
    bool failed = status != FIRN_OK;

    had = got / FIRN_BLOCK_BYTES;
    for (uint32_t i = 0; i < count; i++) {
        absent[i] = i >= had;
        if (absent[i] && failed) {
            status = store->read_at(store->self, firn_sheets_place(first + i), bytes + (size_t)i * FIRN_BLOCK_BYTES,
                                    FIRN_BLOCK_BYTES, &got, &os_error);
            absent[i] = status != FIRN_OK || got < FIRN_BLOCK_BYTES;
        }
    }
}

bool firn_sheets_block_akin(const struct firn_block_tag *a, const struct firn_block_tag *b)
{
    return memcmp(a->id, b->id, sizeof a->id) == 0 && a->geometry.k == b->geometry.k &&
           a->geometry.m == b->geometry.m && a->geometry.depth == b->geometry.depth;
}

void firn_sheets_block_count(struct firn_sheets *sheets, uint64_t number, enum firn_sheets_finding finding,
                             bool absent)
{
    uint32_t full = firn_sheet_full_blocks(&sheets->layout.geometry);
    uint64_t sheet = number / full, index = number % full;
    uint8_t bit = (uint8_t)(1U << index % 8);

    if (sheets->counted[sheet] == NULL)
        sheets->counted[sheet] = firn_memory_get_zeroed(sheets->memory, full / 8 + 1, 1);
    if (sheets->counted[sheet] != NULL) {
        if (sheets->counted[sheet][index / 8] & bit)
            return;
        sheets->counted[sheet][index / 8] |= bit;
    }
    sheets->damage.mended += finding == FIRN_SHEETS_MENDED;
    sheets->damage.rebuilt += finding == FIRN_SHEETS_REBUILT;
    sheets->damage.lost += finding == FIRN_SHEETS_LOST;
    sheets->damage.unreadable += absent;
}

struct firn_block_tag firn_sheets_block_tag(const struct firn_sheets *sheets, const struct firn_sheet_shape *shape,
                                            uint64_t first_block, uint32_t index)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = index < shape->data_blocks ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE,
        .geometry = sheets->layout.geometry, .number = first_block + index, .data_blocks = shape->data_blocks
    };

    memcpy(tag.id, sheets->layout.id, sizeof tag.id);
    return tag;
}

enum firn_sheets_finding firn_sheets_block_judge(uint8_t *block, const struct firn_block_tag *expected, bool check_all)
{
    struct firn_block_tag tag;
    enum firn_block_state state = firn_block_open(block, check_all, &tag);

    if (state == FIRN_BLOCK_GONE || state == FIRN_BLOCK_FOREIGN)
        return FIRN_SHEETS_LOST;
    if (!firn_sheets_block_akin(&tag, expected) || tag.number != expected->number || tag.kind != expected->kind ||
        tag.data_blocks != expected->data_blocks)
        return FIRN_SHEETS_LOST;
    return state == FIRN_BLOCK_MENDED ? FIRN_SHEETS_MENDED : FIRN_SHEETS_SOUND;
}
