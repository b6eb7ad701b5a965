/*
 * desk/page.h - words, numbers and dates in a page of HTML
 *
 * Room: desk. WHATWG HTML and SVG 2, no script, nothing fetched from elsewhere.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_PAGE_H
#define FIRN_DESK_PAGE_H

#include <stdint.h>
#include <stdio.h>

/* Any bytes, as text or inside a quoted attribute: control characters visible, nothing that HTML reads as its own. */
void firn_page_words(FILE *out, const char *words);

/* "1 234 567", held together. */
void firn_page_count(FILE *out, uint64_t count);
/* "12 blocks", "1 block". */
void firn_page_counted(FILE *out, uint64_t count, const char *one, const char *many);
void firn_page_size(FILE *out, uint64_t bytes);
/* "2026-12-01 02:14", UTC, in an element that says so to machines. */
void firn_page_time(FILE *out, int64_t seconds);
/* The day alone, as plain text. */
void firn_page_day(FILE *out, int64_t seconds);

/* The style sheet, between its tags. */
void firn_page_style(FILE *out);

#endif
