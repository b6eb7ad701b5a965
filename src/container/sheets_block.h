/*
 * container/sheets_block.h - single blocks of a container: read, judged, counted
 *
 * Room: container. Only for the files called sheets.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SHEETS_BLOCK_H
#define FIRN_CONTAINER_SHEETS_BLOCK_H

#include "container/sheets_state.h"

/*
 * Reads blocks first .. first + count - 1. Where the medium gives an error, block by block; absent[i] tells which could
 * not be read at all.
 */
void firn_sheets_block_read(struct firn_sheets *sheets, uint64_t first, uint32_t count, uint8_t *bytes, bool *absent);

/* Whether two tags tell of the same container. */
bool firn_sheets_block_akin(const struct firn_block_tag *a, const struct firn_block_tag *b);

/* The tag that the block with this index must have, in the sheet of this shape that begins at first_block. */
struct firn_block_tag firn_sheets_block_tag(const struct firn_sheets *sheets, const struct firn_sheet_shape *shape,
                                            uint64_t first_block, uint32_t index);

/* SOUND, MENDED (in place) or LOST. */
enum firn_sheets_finding firn_sheets_block_judge(uint8_t *block, const struct firn_block_tag *expected, bool check_all);

/*
 * Counts a damaged block, once however often it is read. Without memory for the mark it may count twice: only a figure.
 */
void firn_sheets_block_count(struct firn_sheets *sheets, uint64_t number, enum firn_sheets_finding finding,
                             bool absent);

#endif
