/* desk/scrub_turn.c - one container's turn in a run of scrub, and what came of it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_turn.h"

#include "desk/interrupt.h"

#include <inttypes.h>
#include <string.h>

/* ---- the turn ---- */

static bool time_is_up(struct firn_scrub_job *job)
{
    struct timespec now;

    if (!job->timed || job->out_of_time || job->sheets == 0)
        return job->out_of_time;
    clock_gettime(CLOCK_MONOTONIC, &now);
    job->out_of_time = now.tv_sec > job->deadline.tv_sec
        || (now.tv_sec == job->deadline.tv_sec && now.tv_nsec >= job->deadline.tv_nsec);
    return job->out_of_time;
}

bool firn_scrub_turn_stop(struct firn_scrub_job *job)
{
    return firn_interrupt_asked(NULL) || time_is_up(job);
}

static bool stop(void *self)
{
    return firn_scrub_turn_stop(self);
}

static void step(void *self, uint64_t done, uint64_t blocks)
{
    struct firn_scrub_job *job = self;

    job->sheets++;
    job->progress.goal_bytes = blocks * 4096;
    firn_progress_step(&job->progress, 0, done * 4096);
}

static void note_lost(void *self, uint64_t first, uint64_t count)
{
    struct firn_scrub_turn *turn = ((struct firn_scrub_job *)self)->turn;

    if (turn->range_count < FIRN_SCRUB_TURN_RANGES)
        turn->ranges[turn->range_count] = (struct firn_scrub_turn_range){ first, count };
    turn->range_count++;
}

static void note_found(void *self, uint64_t block, enum firn_scrub_found what)
{
    firn_core_add(&((struct firn_scrub_job *)self)->core, block, what);
}

/* Goes on where the last run's time was up; a run without a limit looks at everything. */
static uint64_t begin_at(void *self, const uint8_t id[8], uint64_t blocks)
{
    struct firn_scrub_job *job = self;
    struct firn_scrub_turn *turn = job->turn;
    const struct firn_history_entry *open = NULL;

    if (job->timed && turn->history != NULL)
        open = firn_history_open_turn(turn->history, id, blocks);
    if (open != NULL) {
        turn->entry = *open;
        job->core = turn->history->core;
        job->core.next = job->core.next_lost = 0;
        return open->reached;
    }
    firn_core_start(&job->core, blocks);
    turn->entry = (struct firn_history_entry){ .began = (int64_t)time(NULL), .blocks = blocks };
    memcpy(turn->entry.id, id, sizeof turn->entry.id);
    return 0;
}

/* What was found goes into the history. */
static void write_history(struct firn_scrub_job *job, struct firn_scrub_turn *turn)
{
    const struct firn_scrub_report *r = &turn->report;
    bool found = r->mended + r->rebuilt + r->lost > 0;

    if (turn->entry.blocks == 0)
        return;
    turn->entry.at = (int64_t)time(NULL);
    turn->entry.done = r->reached == r->blocks && turn->status != FIRN_STOPPED && turn->status != FIRN_NO_MEMORY;
    firn_history_count(&turn->entry, r, &job->core, !turn->report_only && (r->written > 0 || !found));
    if (turn->history == NULL)
        return;
    turn->kept = firn_history_add(turn->history, &turn->entry, &job->core, &turn->kept_fault);
    turn->trend = firn_history_trend(turn->history);
}

void firn_scrub_turn_remember(struct firn_scrub_turn *turn, const struct firn_scrub_job *job)
{
    struct firn_fault fault;

    (void)firn_history_open(job->folder, turn->path, firn_memory_system(), &turn->history, &fault);
}

void firn_scrub_turn_forget(struct firn_scrub_turn *turn)
{
    firn_history_close(turn->history);
    turn->history = NULL;
}

void firn_scrub_turn_take(struct firn_scrub_turn *turn, struct firn_scrub_job *job, struct firn_fault *fault)
{
    const struct firn_scrub_options scrub = {
        .path = turn->path, .memory = firn_memory_system(), .threads = job->threads, .report_only = turn->report_only,
        .readings = job->readings, .rate_bytes = job->rate_bytes, .self = job, .stop = stop, .progress = step,
        .lost = note_lost, .found = note_found, .begin_at = begin_at
    };

    job->turn = turn;
    turn->tried = true;
    firn_scrub_turn_remember(turn, job);
    firn_progress_start(&job->progress, "scrubbing", 0, job->quiet);
    turn->status = firn_scrub(&scrub, &turn->report, fault);
    firn_progress_wipe(&job->progress);
    write_history(job, turn);
    if (turn->status == FIRN_STOPPED && job->out_of_time && !firn_interrupt_asked(NULL))
        turn->status = FIRN_OK;
}

/* ---- what came of it ---- */

bool firn_scrub_turn_lost(const struct firn_scrub_turn *turn)
{
    return turn->report.lost > 0 || turn->entry.end_missing;
}

bool firn_scrub_turn_damaged(const struct firn_scrub_turn *turn)
{
    const struct firn_scrub_report *r = &turn->report;

    return turn->entry.blocks > 0
        && (r->mended + r->rebuilt + r->lost > 0 || turn->entry.title_damaged || r->extended_bytes > 0
            || turn->entry.end_missing || r->journal == FIRN_SCRUB_JOURNAL_REPLAYED || r->reread > 0
            || r->stretches > 0);
}

bool firn_scrub_turn_grows(const struct firn_scrub_turn *turn)
{
    return turn->tried && turn->entry.done && turn->trend.grows;
}

static void add_places(struct firn_text *text, uint64_t places, const char *word)
{
    char count[FIRN_TEXT_COUNT_ROOM];

    firn_text_add(text, "%s %splace%s", firn_text_count(places, count), word, places == 1 ? "" : "s");
}

static void add_time(struct firn_text *text, double seconds)
{
    const struct { double seconds; const char *one; } units[] = {
        { 86400, "day" }, { 3600, "hour" }, { 60, "minute" }
    };
    size_t unit = 0;
    uint64_t count;

    while (unit < 2 && seconds < 2 * units[unit].seconds)
        unit++;
    count = (uint64_t)(seconds / units[unit].seconds + 0.5);
    firn_text_add(text, "%" PRIu64 " %s%s", count, units[unit].one, count == 1 ? "" : "s");
}

void firn_scrub_turn_trend_words(const struct firn_trend *trend, struct firn_text *text)
{
    add_places(text, trend->newest_places, "new ");
    firn_text_add(text, " in ");
    add_time(text, trend->newest_seconds);
    firn_text_add(text, ", ");
    add_places(text, trend->earlier_places, "");
    firn_text_add(text, " in the ");
    add_time(text, trend->earlier_seconds);
    firn_text_add(text, " before");
}
