/*
 * firn/sheet.h - how blocks are laid out in sheets, and sheets in rows
 *
 * Room: guard. A sheet is t data blocks in stream order followed by its reserve blocks. The block with index q belongs
 * to row q mod D; a row is one Reed-Solomon code word of at most k data and exactly m reserve payloads, so any m blocks
 * of a row can be lost. Neighbours lie in different rows: a run of up to m * D lost blocks costs each row at most m.
 *
 * Every full sheet has the same geometry {k, m, depth}, told by every tag. Only the last sheet may be short; its k, m
 * and D follow from the geometry and its t by the rule in format-spec/sheet.md, which keeps the overhead that was asked
 * for.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_SHEET_H
#define FIRN_SHEET_H

#include "firn/status.h"

#include <stdbool.h>
#include <stdint.h>

/* A full sheet: k data columns, m reserve columns, depth rows. */
struct firn_sheet_geometry {
    uint8_t k;           /* 1 .. 255 */
    uint8_t m;           /* 0, or a power of two from 4 to 128, with k + m <= 256 */
    uint16_t depth;      /* D of a full sheet: 1 .. 4096, with depth * (k + m) <= 65536 */
};

/* One sheet as it stands in the container. */
struct firn_sheet_shape {
    uint32_t data_blocks;        /* t */
    uint32_t reserve_blocks;     /* m * rows */
    uint32_t rows;               /* D */
    unsigned k, m;               /* columns of this sheet; k = ceil(t / D) */
};

FIRN_API bool firn_sheet_geometry_valid(const struct firn_sheet_geometry *geometry);

/* Data blocks of a full sheet, and all blocks of it. */
FIRN_API uint32_t firn_sheet_full_data(const struct firn_sheet_geometry *geometry);
FIRN_API uint32_t firn_sheet_full_blocks(const struct firn_sheet_geometry *geometry);

/* The shape of a sheet of data_blocks data blocks, 1 .. firn_sheet_full_data(). FIRN_OK or FIRN_BAD_ARGUMENT. */
FIRN_API enum firn_status firn_sheet_shape_of(const struct firn_sheet_geometry *geometry, uint32_t data_blocks,
                                              struct firn_sheet_shape *shape);

/*
 * The geometry for a reserve of `percent` of the data, 0 .. 100 (fractions allowed), and sheets of at most sheet_bytes
 * bytes (the default is 128 MiB), though never less than one row. The least reserve there is, 4 for 252, is taken for
 * anything between 0 and that. FIRN_OK or FIRN_BAD_ARGUMENT.
 */
FIRN_API enum firn_status firn_sheet_geometry_for(double percent, uint64_t sheet_bytes,
                                                  struct firn_sheet_geometry *geometry);

/*
 * The index within its sheet of column `column` of row `row`: columns 0 .. k-1 are data, k .. k+m-1 reserve. The index
 * mod D is the row for both, so reserve does not begin in row 0 when t is no multiple of D.
 * Returns UINT32_MAX for a data column that this row does not have (zeros that are not stored).
 */
FIRN_API uint32_t firn_sheet_index(const struct firn_sheet_shape *shape, uint32_t row, unsigned column);

#endif
