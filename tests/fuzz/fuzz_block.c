/*
 * tests/fuzz/fuzz_block.c - any bytes as a block: judged, never trusted; what it calls good satisfies its own judgement
 * again
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/block.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 }, before[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag, again;
    struct firn_sheet_shape shape;

    memcpy(block, data, size < sizeof block ? size : sizeof block);
    memcpy(before, block, sizeof block);
    switch (firn_block_open(block, true, &tag)) {
    case FIRN_BLOCK_GONE:
    case FIRN_BLOCK_FOREIGN:
        if (memcmp(before, block, sizeof block) != 0)
            abort();
        break;
    case FIRN_BLOCK_SOUND:
    case FIRN_BLOCK_MENDED:
        if (firn_block_open(block, true, &again) != FIRN_BLOCK_SOUND || !firn_sheet_geometry_valid(&tag.geometry) ||
            firn_sheet_shape_of(&tag.geometry, tag.data_blocks, &shape) != FIRN_OK)
            abort();
        break;
    }
    /* sealed from the same bytes with whatever tag they would make, it opens as sealed */
    if (size >= 16) {
        struct firn_block_tag made = { .version = FIRN_BLOCK_FORMAT_VERSION,
                                       .geometry = { .k = data[0], .m = data[1], .depth = (uint16_t)(1 + data[2]) },
                                       .number = data[3],
                                       .data_blocks = data[4] };

        if (firn_sheet_geometry_valid(&made.geometry) &&
            firn_sheet_shape_of(&made.geometry, made.data_blocks, &shape) == FIRN_OK) {
            made.number %= firn_sheet_full_blocks(&made.geometry);
            made.kind = made.number < made.data_blocks ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE;
            firn_block_seal(block, &made);
            if (firn_block_open(block, true, &tag) == FIRN_BLOCK_GONE)
                abort();
        }
    }
    return 0;
}
