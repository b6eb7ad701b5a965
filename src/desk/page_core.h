/*
 * desk/page_core.h - a container drawn as a core, from its first block to its last
 *
 * Room: desk. Above the core a peak for each slice that was damaged, its height the number of damaged blocks on a scale
 * of powers of two; in the core the kinds: dots for mended, strokes for rebuilt, solid for lost, in that order from the
 * top where a slice has several; broken lines where nobody has looked yet.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_PAGE_CORE_H
#define FIRN_DESK_PAGE_CORE_H

#include "care/history.h"

#include <stdio.h>

/* The patterns that cores and the legend refer to; once in a page, before them. */
void firn_page_core_patterns(FILE *out);

/* A list of what the patterns mean. */
void firn_page_core_legend(FILE *out);

/* The newest scrub of a history, which has at least one entry. */
void firn_page_core(FILE *out, const struct firn_history *history);

#endif
