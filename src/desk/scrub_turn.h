/*
 * desk/scrub_turn.h - what came of one container in one run of scrub: the facts that all views show
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_TURN_H
#define FIRN_DESK_SCRUB_TURN_H

#include "care/history.h"

enum { FIRN_SCRUB_TURN_RANGES = 64 };

struct firn_scrub_turn_range { uint64_t first, count; };

struct firn_scrub_turn {
    char *path;
    int64_t last_done;                     /* before this run; 0 for never */
    bool tried;                            /* else it waits for another run, or its time has not come yet */
    bool waits;                            /* its time has come, but the run's was up */
    enum firn_status status;               /* of the scrub; FIRN_OK too when its time was up */
    struct firn_scrub_report report;       /* of this run */
    struct firn_scrub_turn_range ranges[FIRN_SCRUB_TURN_RANGES];      /* of lost blocks; of more, the first */
    uint64_t range_count;
    bool report_only;
    struct firn_history *history;          /* with this run in it; NULL when it is not kept in memory */
    struct firn_history_entry entry;       /* of the scrub that this run is part of; blocks 0: none was begun */
    struct firn_trend trend;
};

/* Whether something was found in this run that is not as it was written. */
bool firn_scrub_turn_damaged(const struct firn_scrub_turn *turn);
/* Whether bytes are lost, or may be. */
bool firn_scrub_turn_lost(const struct firn_scrub_turn *turn);
/* Whether this run has come to the end, and damage comes faster than it used to. */
bool firn_scrub_turn_grows(const struct firn_scrub_turn *turn);

/* Places and the time they came in, newest and before: "9 new places in 30 days, 2 in the 120 days before". */
void firn_scrub_turn_trend_words(const struct firn_trend *trend, struct firn_text *text);

#endif
