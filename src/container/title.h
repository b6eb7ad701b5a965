/*
 * container/title.h - the title page: 4096 bytes of plain text at the head of the file
 *
 * Room: container. It holds no counts, so that it can be written first to a pipe. Layout: format-spec/title.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_TITLE_H
#define FIRN_CONTAINER_TITLE_H

#include "firn/writer.h"

enum { FIRN_TITLE_PAGE_BYTES = 4096 };

/*
 * FIRN_OK; FIRN_BAD_ARGUMENT when a value has control characters, is no UTF-8, or is too long for the page: then *wrong
 * names it.
 */
enum firn_status firn_title_write(const struct firn_writer_title *title, const struct firn_sheet_geometry *geometry,
                                  uint8_t page[FIRN_TITLE_PAGE_BYTES], const char **wrong);

/* True when page begins like a title page. */
bool firn_title_looks_right(const uint8_t page[FIRN_TITLE_PAGE_BYTES]);

#endif
