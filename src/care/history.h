/*
 * care/history.h - what scrubs have found in one container over time, and where the last one was broken off
 *
 * Room: care. A text file in a folder of the caller's, one for each place (the path from the root) that a container has
 * been scrubbed in; a line for each scrub, appended and synced. Lines that make no sense are passed over: a history is
 * a help, and never a reason not to look.
 *
 *     firn-history 1 /shelf/quay-1931.firn
 *     began=1796083200 at=1796083260 id=3f2a... blocks=32768 reached=32768 done=1 ... core=3:1,0,0
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_HISTORY_H
#define FIRN_CARE_HISTORY_H

#include "care/core.h"
#include "care/trend.h"
#include "firn/scrub.h"

enum { FIRN_HISTORY_MAX = 256 };      /* scrubs that are kept in memory: the newest */

/* One scrub, perhaps done in parts, night after night. Times are seconds since 1970-01-01T00:00:00Z. */
struct firn_history_entry {
    int64_t began, at;                 /* when its first part began; when its last part ended */
    uint8_t id[8];
    uint64_t file_bytes, blocks;
    uint64_t reached;                  /* blocks looked at so far, from the first one on */
    bool done;                         /* all of it was looked at */
    uint64_t mended, mended_bits, rebuilt, lost, unreadable, written;
    uint64_t places;                   /* runs of damaged blocks */
    uint64_t left;                     /* of these, still there afterwards */
    bool title_damaged;
    bool end_missing;
};

struct firn_history {
    const struct firn_memory *memory;
    char *file;                        /* where it is kept; NULL when it is not */
    char *place;                       /* of the container, from the root */
    struct firn_history_entry *entries;
    size_t count, capacity;            /* ascending in time; parts of one scrub are one entry */
    struct firn_core core;             /* of the newest */
};

/*
 * Reads the history of the container at path. folder NULL, or one that cannot be read: it begins empty.
 * FIRN_OK, FIRN_NO_MEMORY, FIRN_NO_INPUT: there is no such path.
 */
enum firn_status firn_history_open(const char *folder, const char *path, const struct firn_memory *memory,
                                   struct firn_history **out, struct firn_fault *fault);
void firn_history_close(struct firn_history *history);      /* takes NULL */

/* Where a scrub that was broken off goes on: its entry with that identity and size; else NULL. */
const struct firn_history_entry *firn_history_open_turn(const struct firn_history *history, const uint8_t id[8],
                                                        uint64_t blocks);

/* When the container was last gone through to its end; 0 for never. */
int64_t firn_history_last_done(const struct firn_history *history);

/* Adds what one call of firn_scrub has come to, to what earlier parts have; whether it is done is told already. */
void firn_history_count(struct firn_history_entry *entry, const struct firn_scrub_report *report,
                        const struct firn_core *core, bool repaired);

/*
 * Takes an entry in, in the place of the newest if it goes on with that, and writes it down. The entry counts also when
 * it cannot be written. FIRN_OK, FIRN_CANNOT_CREATE, FIRN_IO; FIRN_NO_MEMORY: it does not count.
 */
enum firn_status firn_history_add(struct firn_history *history, const struct firn_history_entry *entry,
                                  const struct firn_core *core, struct firn_fault *fault);

/* The newly damaged places between one whole scrub and the next, of the newest container in this place. */
size_t firn_history_intervals(const struct firn_history *history,
                              struct firn_trend_interval intervals[FIRN_HISTORY_MAX]);
struct firn_trend firn_history_trend(const struct firn_history *history);

#endif
