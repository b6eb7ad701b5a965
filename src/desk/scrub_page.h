/*
 * desk/scrub_page.h - a scrub as a page: what needs attention, then every container as a core with its trend
 *
 * Room: desk. One file of HTML with its drawings in it; no script, nothing from elsewhere; for phone, desk and paper,
 * and readable without colour.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_PAGE_H
#define FIRN_DESK_SCRUB_PAGE_H

#include "desk/scrub_turn.h"

/* Returns what firn_staged_write does. */
enum firn_status firn_scrub_page(const char *path, const struct firn_scrub_turn *turns, size_t count,
                                 struct firn_fault *fault);

#endif
