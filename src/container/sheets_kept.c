/* container/sheets_kept.c - good blocks of a mended sheet that are kept when another sheet takes its place */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets_kept.h"

#include <string.h>

enum { KEPT_BLOCKS = 1024 };      /* 4 MiB: the catalogue of some hundred thousand items */

/* Without memory nothing is kept: only time is lost. */
void firn_sheets_kept_save(struct firn_sheets *sheets)
{
    struct firn_sheets_kept *kept = &sheets->kept[sheets->kept_next];
    uint32_t from = sheets->served, count = 0;

    if (sheets->sheet_index == FIRN_SHEETS_NONE || from == FIRN_SHEETS_NOTHING_SERVED)
        return;
    if (kept->blocks == NULL)
        kept->blocks = sheets->memory->get(sheets->memory->self, (size_t)KEPT_BLOCKS * FIRN_BLOCK_BYTES);
    if (kept->blocks == NULL)
        return;
    while (count < KEPT_BLOCKS && from + count < sheets->sheet_shape.data_blocks
           && sheets->findings[from + count] != FIRN_SHEETS_LOST)
        count++;
    memcpy(kept->blocks, firn_sheets_state_block(sheets, from), (size_t)count * FIRN_BLOCK_BYTES);
    kept->first = sheets->sheet_first + from;
    kept->count = count;
    sheets->kept_next = (sheets->kept_next + 1) % FIRN_SHEETS_KEPT;
}

const uint8_t *firn_sheets_kept_find(const struct firn_sheets *sheets, uint64_t number)
{
    for (unsigned i = 0; i < FIRN_SHEETS_KEPT; i++) {
        const struct firn_sheets_kept *kept = &sheets->kept[i];

        if (number >= kept->first && number - kept->first < kept->count)
            return kept->blocks + (size_t)(number - kept->first) * FIRN_BLOCK_BYTES;
    }
    return NULL;
}

void firn_sheets_kept_free(struct firn_sheets *sheets)
{
    for (unsigned i = 0; i < FIRN_SHEETS_KEPT; i++)
        sheets->memory->put(sheets->memory->self, sheets->kept[i].blocks);
}
