/*
 * desk/scrub_turn.h - one container's turn in a run of scrub, and what came of it: the facts that all views show
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_TURN_H
#define FIRN_DESK_SCRUB_TURN_H

#include "care/history.h"
#include "desk/progress.h"

#include <time.h>

enum { FIRN_SCRUB_TURN_RANGES = 64 };

struct firn_scrub_turn_range { uint64_t first, count; };

struct firn_scrub_turn {
    char *path;
    int64_t last_done;                     /* before this run; 0 for never */
    bool tried;                            /* else it waits for another run, or its time has not come yet */
    bool waits;                            /* its time has come, but the run's was up */
    enum firn_status status;               /* of the scrub; FIRN_OK too when its time was up */
    enum firn_status kept;                 /* of writing its history down */
    struct firn_fault kept_fault;
    struct firn_scrub_report report;       /* of this run */
    struct firn_scrub_turn_range ranges[FIRN_SCRUB_TURN_RANGES];      /* of lost blocks; of more, the first */
    uint64_t range_count;
    bool report_only;
    struct firn_history *history;          /* with this run in it; NULL when it is not kept in memory */
    struct firn_history_entry entry;       /* of the scrub that this run is part of; blocks 0: none was begun */
    struct firn_trend trend;
};

/* What all turns of a run share. */
struct firn_scrub_job {
    unsigned threads;
    unsigned readings;                     /* of a block that does not read right, beyond the first */
    bool quiet;                            /* no progress */
    uint64_t rate_bytes;                   /* a second; 0 for no limit */
    bool timed;                            /* there is a deadline; a turn goes on where that of the last run was */
    struct timespec deadline;
    bool out_of_time;
    uint64_t sheets;                       /* done in this run, which gets somewhere however short its time is */
    const char *folder;                    /* where histories are; NULL when none are kept */
    struct firn_progress progress;
    /* the turn at hand */
    struct firn_scrub_turn *turn;
    struct firn_core core;
};

/* Whether it is time to stop: a signal asked to, or the deadline is past. */
bool firn_scrub_turn_stop(struct firn_scrub_job *job);

/* Reads the turn's history into memory; nothing happens where that cannot be, since a history only helps. */
void firn_scrub_turn_remember(struct firn_scrub_turn *turn, const struct firn_scrub_job *job);
void firn_scrub_turn_forget(struct firn_scrub_turn *turn);

/* Scrubs. fault is that of turn->status. */
void firn_scrub_turn_take(struct firn_scrub_turn *turn, struct firn_scrub_job *job, struct firn_fault *fault);

/* Whether something was found in this run that is not as it was written. */
bool firn_scrub_turn_damaged(const struct firn_scrub_turn *turn);
/* Whether bytes are lost, or may be. */
bool firn_scrub_turn_lost(const struct firn_scrub_turn *turn);
/* Whether this run has come to the end, and damage comes faster than it used to. */
bool firn_scrub_turn_grows(const struct firn_scrub_turn *turn);

/* Places and the time they came in, newest and before: "9 new places in 30 days, 2 in the 120 days before". */
void firn_scrub_turn_trend_words(const struct firn_trend *trend, struct firn_text *text);

#endif
