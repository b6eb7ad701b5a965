/*
 * desk/page_trend.h - damage over time, drawn: a bar for each scrub of a container
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_PAGE_TREND_H
#define FIRN_DESK_PAGE_TREND_H

#include "care/history.h"

#include <stdio.h>

/* Of the container that the newest entry is of. */
void firn_page_trend(FILE *out, const struct firn_history *history);

#endif
