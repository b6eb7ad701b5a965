/*
 * container/sheets_kept.h - good blocks of a mended sheet that are kept when another sheet takes its place
 *
 * Room: container. Only for the files called sheets. A reader goes through two parts of the stream by turns: the
 * catalogue at the end and the content before it. Only one sheet is in memory, and mending one anew at every turn takes
 * a second each. So the blocks that would have been read next are kept: 4 MiB for each of the last two sheets.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SHEETS_KEPT_H
#define FIRN_CONTAINER_SHEETS_KEPT_H

#include "container/sheets_state.h"

/* Keeps what follows in the mended sheet from the data block that was read last, before another is loaded. */
void firn_sheets_kept_save(struct firn_sheets *sheets);

/* Data block `number` if it is kept, else NULL. */
const uint8_t *firn_sheets_kept_find(const struct firn_sheets *sheets, uint64_t number);

void firn_sheets_kept_free(struct firn_sheets *sheets);

#endif
