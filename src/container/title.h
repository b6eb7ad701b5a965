/*
 * container/title.h - the title page: 4096 bytes of plain text at the head of the file
 *
 * Room: container. It holds no counts, so that it can be written first to a pipe. Layout: format-spec/title.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_TITLE_H
#define FIRN_CONTAINER_TITLE_H

#include "base/text.h"
#include "firn/writer.h"

enum { FIRN_TITLE_PAGE_BYTES = 4096 };

/* Sizes of the specification and of the reader's source, the two records behind the TITLE record. */
struct firn_title_texts { size_t specification_bytes, reader_bytes; };

/*
 * texts  NULL when the container carries none; else the page tells how to get them out with a shell
 *
 * FIRN_OK; FIRN_BAD_ARGUMENT when a value has control characters, is no UTF-8, or is too long for the page: then *wrong
 * names it.
 */
enum firn_status firn_title_write(const struct firn_writer_title *title, const struct firn_sheet_geometry *geometry,
                                  const struct firn_title_texts *texts, uint8_t page[FIRN_TITLE_PAGE_BYTES],
                                  const char **wrong);

/* The layout of blocks, rows and records in words, as it stands in the page. */
void firn_title_layout(const struct firn_sheet_geometry *geometry, struct firn_text *text);

/* True when page begins like a title page. */
bool firn_title_looks_right(const uint8_t page[FIRN_TITLE_PAGE_BYTES]);

#endif
