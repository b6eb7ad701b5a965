/*
 * desk/progress.h - how far it is, on a terminal only
 *
 * Room: desk. One line on standard error that is redrawn a few times a second: how much, how fast, how long still.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_PROGRESS_H
#define FIRN_DESK_PROGRESS_H

#include <stdbool.h>
#include <stdint.h>

struct firn_progress {
    bool shown;                /* standard error is a terminal, and nobody asked for quiet */
    bool drawn;                /* there is a line to wipe */
    const char *doing;         /* "packing" */
    uint64_t goal_bytes;       /* 0 when nobody knows */
    double began, last;        /* seconds */
};

void firn_progress_start(struct firn_progress *progress, const char *doing, uint64_t goal_bytes, bool quiet);
void firn_progress_step(struct firn_progress *progress, uint64_t items, uint64_t bytes);
/* Wipes the line; before anything else is printed. */
void firn_progress_wipe(struct firn_progress *progress);

#endif
