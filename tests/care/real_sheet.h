/*
 * tests/care/real_sheet.h - one sheet of sealed blocks, as a container has it: what is lost of it is for the real code
 * to say
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_REAL_SHEET_H
#define FIRN_TESTS_REAL_SHEET_H

#include "firn/block.h"

#include <string.h>

enum { REAL_SHEET_K = 12, REAL_SHEET_M = 4, REAL_SHEET_ROWS = 8, REAL_SHEET_BLOCKS = 16 * 8, BLOCK_BYTES = 4096 };

static const struct firn_sheet_geometry real_sheet_geometry = { REAL_SHEET_K, REAL_SHEET_M, REAL_SHEET_ROWS };

struct real_sheet {
    uint8_t blocks[REAL_SHEET_BLOCKS * BLOCK_BYTES];
};

/* Payloads that differ; the reserve's need not be right, since only losses are counted. */
static inline void real_sheet_make(struct real_sheet *sheet)
{
    for (unsigned i = 0; i < REAL_SHEET_BLOCKS; i++) {
        struct firn_block_tag tag = {
            .version = FIRN_BLOCK_FORMAT_VERSION, .geometry = real_sheet_geometry, .number = i,
            .kind = i < REAL_SHEET_K * REAL_SHEET_ROWS ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE,
            .data_blocks = REAL_SHEET_K * REAL_SHEET_ROWS
        };

        for (unsigned j = 0; j < FIRN_BLOCK_PAYLOAD_BYTES; j++)
            sheet->blocks[i * BLOCK_BYTES + j] = (uint8_t)((i * 37 + j) * 2654435761U >> 24);
        firn_block_seal(sheet->blocks + (size_t)i * BLOCK_BYTES, &tag);
    }
}

struct real_loss {
    unsigned blocks, rows, data;      /* lost; rows beyond their reserve; data blocks in these */
};

/* Opens every block as a reader does, in place, and counts by the layout of the sheet. */
static inline void real_sheet_judge(struct real_sheet *sheet, struct real_loss *loss)
{
    struct firn_sheet_shape shape;
    bool lost[REAL_SHEET_BLOCKS];

    memset(loss, 0, sizeof *loss);
    for (unsigned i = 0; i < REAL_SHEET_BLOCKS; i++) {
        struct firn_block_tag tag;

        lost[i] = firn_block_open(sheet->blocks + (size_t)i * BLOCK_BYTES, false, &tag) == FIRN_BLOCK_GONE;
        loss->blocks += lost[i];
    }
    firn_sheet_shape_of(&real_sheet_geometry, firn_sheet_full_data(&real_sheet_geometry), &shape);
    for (unsigned row = 0; row < shape.rows; row++) {
        unsigned in_row = 0, data = 0;

        for (unsigned column = 0; column < shape.k + shape.m; column++) {
            bool gone = lost[firn_sheet_index(&shape, row, column)];

            in_row += gone;
            data += gone && column < shape.k;
        }
        if (in_row > shape.m) {
            loss->rows++;
            loss->data += data;
        }
    }
}

#endif
