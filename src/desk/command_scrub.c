/* desk/command_scrub.c - the "scrub" command: whose turn it is, calls to care, and what the views are given to show */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "base/memory.h"
#include "desk/events.h"
#include "desk/gentle.h"
#include "desk/interrupt.h"
#include "desk/progress.h"
#include "desk/scrub_json.h"
#include "desk/scrub_metrics.h"
#include "desk/scrub_page.h"
#include "desk/scrub_words.h"
#include "desk/shelf.h"
#include "desk/state.h"
#include "desk/trouble.h"

#include <inttypes.h>
#include <limits.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

enum option { REPORT_ONLY, VERBOSE, RATE, TIME, EVERY, GENTLE, REPORT, METRICS, HTML, EVENTS, STATE };

static const struct firn_args_option options[] = {
    [REPORT_ONLY] = { "report-only", '\0', NULL, "write nothing; works on read-only media" },
    [VERBOSE] = { "verbose", 'v', NULL, "a line for every container, sound ones too" },
    [RATE] = { "rate", '\0', "SIZE", "read no more than SIZE a second, such as 50MB" },
    [TIME] = { "time", '\0', "TIME", "stop after TIME, such as 2h; the next run goes on from there" },
    [EVERY] = { "every", '\0', "TIME", "leave alone what was gone through less than TIME ago: 30d" },
    [GENTLE] = { "gentle", '\0', NULL, "give way to everybody else on processor and disk" },
    [REPORT] = { "report", '\0', "FILE", "append a JSON line for each container" },
    [METRICS] = { "metrics", '\0', "FILE", "write gauges for monitoring, in one go" },
    [HTML] = { "html", '\0', "FILE", "write a page for people: cores, trends, what needs attention" },
    [EVENTS] = { "events", '\0', "FILE", "append what was done as PREMIS events, JSON Lines" },
    [STATE] = { "state", '\0', "DIR", "keep histories in DIR (default: XDG_STATE_HOME/firn)" },
};

struct scrubbing {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_progress progress;
    int exit;                             /* the worst so far */
    struct firn_scrub_turn *turns;
    size_t count, capacity;
    uint64_t rate_bytes, every_seconds;
    bool timed, out_of_time;
    struct timespec deadline;
    uint64_t done_bytes;                  /* in this run, so that it gets somewhere however short its time is */
    char folder[PATH_MAX];
    bool remembers;                       /* folder is there */
    struct firn_lines report, events;
    /* the turn at hand */
    struct firn_scrub_turn *turn;
    struct firn_core core;
};

/* Loss is worst, then what kept us from looking, then damage that is safe. */
static void worsen(struct scrubbing *s, int exit)
{
    if (exit == FIRN_EXIT_LOST || s->exit == FIRN_EXIT_LOST)
        s->exit = FIRN_EXIT_LOST;
    else
        s->exit = exit > s->exit ? exit : s->exit;
}

/* ---- words ---- */

static int read_rate(struct scrubbing *s)
{
    const char *words = s->args->values[RATE];
    char size[32];
    size_t bytes = words == NULL ? 0 : strlen(words);

    if (words == NULL)
        return FIRN_EXIT_SOUND;
    if (bytes > 2 && strcmp(words + bytes - 2, "/s") == 0)
        bytes -= 2;
    if (bytes < sizeof size) {
        memcpy(size, words, bytes);
        size[bytes] = '\0';
        if (firn_text_parse_size(size, &s->rate_bytes) == FIRN_OK && s->rate_bytes >= 1000)
            return FIRN_EXIT_SOUND;
    }
    return firn_trouble_usage(s->view, words, "is no rate such as 50MB, or less than 1kB");
}

static int read_words(struct scrubbing *s)
{
    const char *allowed = s->args->values[TIME], *every = s->args->values[EVERY];
    uint64_t seconds;

    if (s->args->operand_count == 0)
        return firn_trouble_usage(s->view, "FILE-OR-FOLDER", "is missing: name a container or a folder of them");
    if (allowed != NULL) {
        if (firn_text_parse_duration(allowed, &seconds) != FIRN_OK || seconds == 0)
            return firn_trouble_usage(s->view, allowed, "is no time such as 90min or 2h");
        s->timed = true;
        clock_gettime(CLOCK_MONOTONIC, &s->deadline);
        s->deadline.tv_sec += (time_t)seconds;
    }
    if (every != NULL && firn_text_parse_duration(every, &s->every_seconds) != FIRN_OK)
        return firn_trouble_usage(s->view, every, "is no time such as 30d");
    return read_rate(s);
}

/* A history that cannot be kept stands in the way only where something depends on it. */
static int find_state(struct scrubbing *s)
{
    const char *asked = s->args->values[STATE];
    bool needed = asked != NULL || s->timed || s->every_seconds > 0;
    struct firn_fault fault = { 0 };
    enum firn_status status = firn_state_folder(asked, s->folder, sizeof s->folder, &fault);

    s->remembers = status == FIRN_OK;
    if (status == FIRN_NO_INPUT && needed)
        return firn_trouble_usage(s->view, "--state", "is missing, and HOME does not say where to remember the place");
    if (status != FIRN_OK && status != FIRN_NO_INPUT && needed)
        return firn_trouble_tell(s->view, s->folder, status, &fault);
    if (status != FIRN_OK && s->args->given[VERBOSE])
        firn_view_note(s->view, "no-history", s->folder, "cannot be made; no history is kept");
    return FIRN_EXIT_SOUND;
}

/* ---- whose turn it is ---- */

static void gather(void *self, const char *path)
{
    struct scrubbing *s = self;
    void *turns = s->turns;
    char *copy = strdup(path);
    enum firn_status status = copy == NULL ? FIRN_NO_MEMORY
        : firn_memory_grow(firn_memory_system(), &turns, &s->capacity, s->count + 1, sizeof *s->turns);

    s->turns = turns;
    if (status != FIRN_OK) {
        free(copy);
        worsen(s, firn_trouble_tell(s->view, path, status, NULL));
        return;
    }
    s->turns[s->count++] = (struct firn_scrub_turn){
        .path = copy, .report = { .title = FIRN_SCRUB_TITLE_UNKNOWN }, .report_only = s->args->given[REPORT_ONLY]
    };
}

static void tell_trouble(void *self, const char *path, int os_error)
{
    struct scrubbing *s = self;
    struct firn_fault fault = { .os_error = os_error };

    worsen(s, firn_trouble_tell(s->view, path, FIRN_NO_INPUT, &fault));
}

static void gather_all(struct scrubbing *s)
{
    for (size_t i = 0; i < s->args->operand_count && !firn_interrupt_asked(NULL); i++) {
        size_t before = s->count;
        enum firn_status status = firn_shelf_walk(s->args->operands[i], gather, tell_trouble, s);

        if (status != FIRN_OK)
            worsen(s, firn_trouble_tell(s->view, s->args->operands[i], status, NULL));
        else if (s->count == before && s->exit == FIRN_EXIT_SOUND) {
            firn_view_finding(s->view, "no-input", s->args->operands[i], "no container is in there; check the name");
            worsen(s, FIRN_EXIT_NO_INPUT);
        }
    }
}

static enum firn_status remember(const struct scrubbing *s, struct firn_scrub_turn *turn)
{
    struct firn_fault fault;

    return firn_history_open(s->remembers ? s->folder : NULL, turn->path, firn_memory_system(), &turn->history, &fault);
}

static void forget(struct firn_scrub_turn *turn)
{
    firn_history_close(turn->history);
    turn->history = NULL;
}

static int oldest_first(const void *one, const void *other)
{
    const struct firn_scrub_turn *a = one, *b = other;

    if (a->last_done != b->last_done)
        return a->last_done < b->last_done ? -1 : 1;
    return strcmp(a->path, b->path);
}

/* With a limit of any kind it matters who comes first: whoever was not gone through for longest. */
static void put_in_order(struct scrubbing *s)
{
    if (!s->timed && s->every_seconds == 0)
        return;
    for (size_t i = 0; i < s->count; i++)
        if (remember(s, &s->turns[i]) == FIRN_OK) {
            s->turns[i].last_done = firn_history_last_done(s->turns[i].history);
            forget(&s->turns[i]);
        }
    qsort(s->turns, s->count, sizeof *s->turns, oldest_first);
}

static bool is_due(const struct scrubbing *s, const struct firn_scrub_turn *turn)
{
    return s->every_seconds == 0 || turn->last_done == 0
        || (int64_t)time(NULL) - turn->last_done >= (int64_t)s->every_seconds;
}

/* ---- one turn ---- */

static bool time_is_up(struct scrubbing *s)
{
    struct timespec now;

    if (!s->timed || s->out_of_time || s->done_bytes == 0)
        return s->out_of_time;
    clock_gettime(CLOCK_MONOTONIC, &now);
    s->out_of_time = now.tv_sec > s->deadline.tv_sec
        || (now.tv_sec == s->deadline.tv_sec && now.tv_nsec >= s->deadline.tv_nsec);
    return s->out_of_time;
}

static bool stop(void *self)
{
    return firn_interrupt_asked(NULL) || time_is_up(self);
}

static void step(void *self, uint64_t done, uint64_t blocks)
{
    struct scrubbing *s = self;

    s->done_bytes += 4096;
    s->progress.goal_bytes = blocks * 4096;
    firn_progress_step(&s->progress, 0, done * 4096);
}

static void note_lost(void *self, uint64_t first, uint64_t count)
{
    struct firn_scrub_turn *turn = ((struct scrubbing *)self)->turn;

    if (turn->range_count < FIRN_SCRUB_TURN_RANGES)
        turn->ranges[turn->range_count] = (struct firn_scrub_turn_range){ first, count };
    turn->range_count++;
}

static void note_found(void *self, uint64_t block, enum firn_scrub_found what)
{
    firn_core_add(&((struct scrubbing *)self)->core, block, what);
}

/* Goes on where the last run's time was up; a run without a limit looks at everything. */
static uint64_t begin_at(void *self, const uint8_t id[8], uint64_t blocks)
{
    struct scrubbing *s = self;
    struct firn_scrub_turn *turn = s->turn;
    const struct firn_history_entry *open = NULL;

    if (s->timed && turn->history != NULL)
        open = firn_history_open_turn(turn->history, id, blocks);
    if (open != NULL) {
        turn->entry = *open;
        s->core = turn->history->core;
        s->core.next = s->core.next_lost = 0;
        return open->reached;
    }
    firn_core_start(&s->core, blocks);
    turn->entry = (struct firn_history_entry){ .began = (int64_t)time(NULL), .blocks = blocks };
    memcpy(turn->entry.id, id, sizeof turn->entry.id);
    return 0;
}

/* What was found goes into the history; a history that cannot be written is told of once it was asked for. */
static void write_history(struct scrubbing *s, struct firn_scrub_turn *turn)
{
    const struct firn_scrub_report *r = &turn->report;
    bool found = r->mended + r->rebuilt + r->lost > 0;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (turn->entry.blocks == 0)
        return;
    turn->entry.at = (int64_t)time(NULL);
    turn->entry.done = r->reached == r->blocks && turn->status != FIRN_STOPPED && turn->status != FIRN_NO_MEMORY;
    firn_history_count(&turn->entry, r, &s->core, !turn->report_only && (r->written > 0 || !found));
    if (turn->history == NULL)
        return;
    status = firn_history_add(turn->history, &turn->entry, &s->core, &fault);
    turn->trend = firn_history_trend(turn->history);
    if (status != FIRN_OK && (s->timed || s->every_seconds > 0 || s->args->values[STATE] != NULL))
        worsen(s, firn_trouble_tell(s->view, NULL, status, &fault));
}

static void record(struct scrubbing *s, const struct firn_scrub_turn *turn)
{
    const struct firn_scrub_report *r = &turn->report;
    bool damaged = firn_scrub_turn_damaged(turn), opened = turn->entry.blocks > 0;
    char note[200];
    struct firn_text text;
    struct firn_events_event event = {
        .type = FIRN_EVENTS_FIXITY_CHECK, .container = turn->path, .id = opened ? r->id : NULL, .note = note,
        .detail = "every block against its hash and its check words"
    };

    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " of %" PRIu64 " blocks: %" PRIu64 " mendable, %" PRIu64 " to rebuild, %" PRIu64
                  " lost", r->checked, r->blocks, r->mended, r->rebuilt, r->lost);
    event.outcome = damaged ? FIRN_EVENTS_FAILURE : turn->entry.done ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_UNKNOWN;
    if (!opened)
        event.note = firn_status_text(turn->status);
    firn_events_tell(&s->events, &event);
    if (!damaged || turn->report_only)
        return;
    event.type = FIRN_EVENTS_RECOVERY;
    event.detail = "repaired in place, from the blocks' own check words and from the reserve";
    event.outcome = turn->status == FIRN_OK && !firn_scrub_turn_lost(turn) ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_FAILURE;
    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " blocks written, %" PRIu64 " lost", r->written + r->replayed, r->lost);
    firn_events_tell(&s->events, &event);
}

static void tell(struct scrubbing *s, const struct firn_scrub_turn *turn, const struct firn_fault *fault)
{
    struct firn_view report = { .out = firn_lines_begin(&s->report), .json = true, .command = s->view->command };

    if (s->view->json)
        firn_scrub_json(s->view, turn);
    else
        firn_scrub_words(s->view, turn, s->args->given[VERBOSE]);
    fflush(s->view->out);
    if (report.out != NULL) {
        firn_scrub_json(&report, turn);
        firn_lines_end(&s->report, report.out);
    }
    record(s, turn);
    if (turn->status != FIRN_OK)
        worsen(s, firn_trouble_tell(s->view, turn->path, turn->status, fault));
    if (firn_scrub_turn_lost(turn))
        worsen(s, FIRN_EXIT_LOST);
    else if (firn_scrub_turn_damaged(turn))
        worsen(s, FIRN_EXIT_SAFE);
}

static void scrub_one(struct scrubbing *s, struct firn_scrub_turn *turn)
{
    struct firn_scrub_options scrub = {
        .path = turn->path, .memory = firn_memory_system(), .threads = s->args->threads,
        .report_only = turn->report_only, .rate_bytes = s->rate_bytes, .self = s, .stop = stop, .progress = step,
        .lost = note_lost, .found = note_found, .begin_at = begin_at
    };
    struct firn_fault fault = { 0 };

    s->turn = turn;
    turn->tried = true;
    (void)remember(s, turn);      /* without it there is none; that the path is wrong, if so, the scrub will say */
    firn_progress_start(&s->progress, "scrubbing", 0, s->args->quiet || s->args->json);
    turn->status = firn_scrub(&scrub, &turn->report, &fault);
    firn_progress_wipe(&s->progress);
    write_history(s, turn);
    if (turn->status == FIRN_STOPPED && s->out_of_time && !firn_interrupt_asked(NULL))
        turn->status = FIRN_OK;
    tell(s, turn, &fault);
}

/* Histories of a large shelf stay in memory only where a page is to be made of them. */
static void scrub_all(struct scrubbing *s)
{
    bool keep = s->args->values[HTML] != NULL || s->args->values[METRICS] != NULL;
    uint64_t waiting = 0;

    for (size_t i = 0; i < s->count; i++) {
        struct firn_scrub_turn *turn = &s->turns[i];

        if (is_due(s, turn) && !stop(s))
            scrub_one(s, turn);
        else
            turn->waits = is_due(s, turn);
        if (keep && turn->history == NULL)
            (void)remember(s, turn);
        if (!keep)
            forget(turn);
        waiting += turn->waits || (turn->tried && !turn->entry.done && turn->status == FIRN_OK);
    }
    if (s->out_of_time && s->args->given[VERBOSE]) {
        char words[100];
        struct firn_text text;

        firn_text_start(&text, words, sizeof words);
        firn_text_add(&text, "time is up; %" PRIu64 " of %zu containers are still to be gone through", waiting,
                      s->count);
        firn_view_note(s->view, "time-is-up", "", words);
    }
}

/* ---- the run ---- */

static void write_views(struct scrubbing *s)
{
    const char *metrics = s->args->values[METRICS], *page = s->args->values[HTML];
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (metrics != NULL) {
        status = firn_scrub_metrics(metrics, s->turns, s->count, s->exit, &fault);
        if (status != FIRN_OK)
            worsen(s, firn_trouble_tell(s->view, metrics, status, &fault));
    }
    if (page != NULL) {
        status = firn_scrub_page(page, s->turns, s->count, &fault);
        if (status != FIRN_OK)
            worsen(s, firn_trouble_tell(s->view, page, status, &fault));
    }
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct scrubbing *s = calloc(1, sizeof *s);
    int exit;

    if (s == NULL)
        return firn_trouble_tell(view, "scrub", FIRN_NO_MEMORY, NULL);
    s->args = args;
    s->view = view;
    s->report.descriptor = s->events.descriptor = -1;
    exit = read_words(s);
    if (exit == FIRN_EXIT_SOUND)
        exit = find_state(s);
    if (exit == FIRN_EXIT_SOUND)
        exit = firn_lines_open(&s->report, args->values[REPORT], view);
    if (exit == FIRN_EXIT_SOUND)
        exit = firn_lines_open(&s->events, args->values[EVENTS], view);
    if (exit == FIRN_EXIT_SOUND) {
        if (args->given[GENTLE])
            firn_gentle();
        gather_all(s);
        put_in_order(s);
        scrub_all(s);
        write_views(s);
        exit = s->exit;
    }
    for (size_t i = 0; i < s->count; i++) {
        forget(&s->turns[i]);
        free(s->turns[i].path);
    }
    exit = firn_lines_close(&s->events, firn_lines_close(&s->report, exit));
    firn_memory_system()->put(NULL, s->turns);
    free(s);
    return exit;
}

const struct firn_command firn_command_scrub = {
    .name = "scrub",
    .summary = "check every block, repair in place, report",
    .usage = "FILE-OR-FOLDER... [options]",
    .about = "Checks every block of each container, hash and lanes, and repairs in place what can\n"
             "be repaired, behind a journal that makes a power cut harmless. Prints nothing when\n"
             "all is well, one line for each container otherwise, and a warning where damage comes\n"
             "faster than it used to. Folders are walked. With --time whoever was not gone through\n"
             "for longest comes first, and a large shelf is gone through night after night.\n\n"
             "If this is your only copy and it is damaged, copy it before you repair it, and\n"
             "find out what is wrong with the medium: repairs do not make it young again. How\n"
             "often to scrub, and when to migrate, is for your institution's policy to say.\n\n"
             "Exit status: 0 sound; 1 damage was found and every byte is safe; 2 blocks are lost.\n",
    .example = "  firn scrub /shelf\n"
               "  firn scrub --report-only /media/optical/quay-1931.firn\n"
               "  firn scrub --time 2h --rate 50MB --gentle --html shelf.html /shelf\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
