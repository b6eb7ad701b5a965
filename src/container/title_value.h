/*
 * container/title_value.h - what a title page says: accession, title, custodian, note, the day it was packed
 *
 * Room: container. Pure. Layout: format-spec/title.md.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_TITLE_VALUE_H
#define FIRN_CONTAINER_TITLE_VALUE_H

#include "container/title.h"

#include <stddef.h>

enum { FIRN_TITLE_VALUE_ROOM = 520 };

/*
 * The value behind a label ("accession", "packed on"), its lines put together. A page that is damaged may give a
 * damaged value: what is no UTF-8, or a control character, becomes a question mark.
 *
 * FIRN_OK, FIRN_END when the page has none ("" then), FIRN_NO_ROOM when it is longer than any writer makes.
 */
enum firn_status firn_title_value_read(const uint8_t page[FIRN_TITLE_PAGE_BYTES], const char *label,
                                       char value[FIRN_TITLE_VALUE_ROOM]);

#endif
