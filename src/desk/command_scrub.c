/* desk/command_scrub.c - the "scrub" command: whose turn it is, calls to care, and what the views are given to show */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "base/memory.h"
#include "desk/gentle.h"
#include "desk/interrupt.h"
#include "desk/lines.h"
#include "desk/own_file.h"
#include "desk/scrub_events.h"
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

enum option { REPORT_ONLY, REREAD, VERBOSE, RATE, TIME, EVERY, GENTLE, REPORT, METRICS, HTML, EVENTS, STATE };

static const struct firn_args_option options[] = {
    [REPORT_ONLY] = { "report-only", '\0', NULL, "write nothing; works on read-only media" },
    [REREAD] = { "reread", '\0', "N", "read a block that is not right again up to N times, 31 at most (default 0)" },
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

enum { RATE_MIN_BYTES = 100000 };      /* a sheet of 128 MiB takes 22 minutes then, and a run does one at least */

struct scrubbing {
    const struct firn_args *args;
    struct firn_view *view;
    int exit;                             /* the worst so far */
    struct firn_scrub_turn *turns;
    size_t count, capacity;
    uint64_t every_seconds;
    char folder[PATH_MAX];
    struct firn_scrub_job job;
    struct firn_lines report, events;
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
        if (firn_text_parse_size(size, &s->job.rate_bytes) == FIRN_OK && s->job.rate_bytes >= RATE_MIN_BYTES)
            return FIRN_EXIT_SOUND;
    }
    return firn_trouble_usage(s->view, words, "is no rate such as 50MB, or less than 100kB");
}

static int read_words(struct scrubbing *s)
{
    const char *allowed = s->args->values[TIME], *every = s->args->values[EVERY];
    const char *reread = s->args->values[REREAD];
    uint64_t seconds, readings = 0;

    if (reread != NULL && (firn_text_parse_count(reread, &readings) != FIRN_OK || readings > 31))
        return firn_trouble_usage(s->view, reread, "is no number of readings from 0 to 31");
    s->job.readings = (unsigned)readings;
    if (s->args->operand_count == 0)
        return firn_trouble_usage(s->view, "FILE-OR-FOLDER", "is missing: name a container or a folder of them");
    if (allowed != NULL) {
        if (firn_text_parse_duration(allowed, &seconds) != FIRN_OK || seconds == 0)
            return firn_trouble_usage(s->view, allowed, "is no time such as 90min or 2h");
        s->job.timed = true;
        clock_gettime(CLOCK_MONOTONIC, &s->job.deadline);
        s->job.deadline.tv_sec += (time_t)seconds;
    }
    if (every != NULL && firn_text_parse_duration(every, &s->every_seconds) != FIRN_OK)
        return firn_trouble_usage(s->view, every, "is no time such as 30d");
    return read_rate(s);
}

/* A history that cannot be kept stands in the way only where something depends on it. */
static bool needs_state(const struct scrubbing *s)
{
    return s->args->values[STATE] != NULL || s->job.timed || s->every_seconds > 0;
}

static int find_state(struct scrubbing *s)
{
    const char *asked = s->args->values[STATE];
    bool needed = needs_state(s);
    struct firn_fault fault = { 0 };
    enum firn_status status = firn_state_folder(asked, s->folder, sizeof s->folder, &fault);

    s->job.folder = status == FIRN_OK ? s->folder : NULL;
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
    if (!s->job.timed && s->every_seconds == 0)
        return;
    for (size_t i = 0; i < s->count; i++) {
        struct firn_scrub_turn *turn = &s->turns[i];

        firn_scrub_turn_remember(turn, &s->job);
        turn->last_done = turn->history == NULL ? 0 : firn_history_last_done(turn->history);
        firn_scrub_turn_forget(turn);
    }
    qsort(s->turns, s->count, sizeof *s->turns, oldest_first);
}

static bool is_due(const struct scrubbing *s, const struct firn_scrub_turn *turn)
{
    return s->every_seconds == 0 || turn->last_done == 0
        || (int64_t)time(NULL) - turn->last_done >= (int64_t)s->every_seconds;
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
    firn_scrub_events(&s->events, turn);
    if (turn->status != FIRN_OK)
        worsen(s, firn_trouble_tell(s->view, turn->path, turn->status, fault));
    if (firn_scrub_turn_lost(turn))
        worsen(s, FIRN_EXIT_LOST);
    else if (firn_scrub_turn_damaged(turn))
        worsen(s, FIRN_EXIT_SAFE);
}

static void scrub_one(struct scrubbing *s, struct firn_scrub_turn *turn)
{
    struct firn_fault fault = { 0 };

    firn_scrub_turn_take(turn, &s->job, &fault);
    if (turn->status == FIRN_OK && turn->entry.blocks == 0) {      /* time was up before anything was looked at */
        turn->tried = false;
        turn->waits = true;
        return;
    }
    tell(s, turn, &fault);
    if (turn->kept != FIRN_OK && needs_state(s))
        worsen(s, firn_trouble_tell(s->view, NULL, turn->kept, &turn->kept_fault));
}

/* Histories of a large shelf stay in memory only where a page is to be made of them. */
static void scrub_all(struct scrubbing *s)
{
    bool keep = s->args->values[HTML] != NULL || s->args->values[METRICS] != NULL;
    uint64_t waiting = 0;

    for (size_t i = 0; i < s->count; i++) {
        struct firn_scrub_turn *turn = &s->turns[i];

        if (is_due(s, turn) && !firn_scrub_turn_stop(&s->job))
            scrub_one(s, turn);
        else
            turn->waits = is_due(s, turn);
        if (keep && turn->history == NULL)
            firn_scrub_turn_remember(turn, &s->job);
        if (!keep)
            firn_scrub_turn_forget(turn);
        waiting += turn->waits || (turn->tried && !turn->entry.done && turn->status == FIRN_OK);
    }
    if (s->job.out_of_time && s->args->given[VERBOSE]) {
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
    s->job.threads = args->threads;
    s->job.quiet = args->quiet || args->json;
    s->report.descriptor = s->events.descriptor = -1;
    exit = read_words(s);
    if (exit == FIRN_EXIT_SOUND)
        exit = find_state(s);
    if (exit == FIRN_EXIT_SOUND)
        exit = firn_own_file_check(view, args->values[HTML], "<!DOCTYPE html>", "a page");
    if (exit == FIRN_EXIT_SOUND)
        exit = firn_own_file_check(view, args->values[METRICS], "# TYPE firn_", "a file of our gauges");
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
        firn_scrub_turn_forget(&s->turns[i]);
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
             "for longest comes first, and a large shelf is gone through night after night, one\n"
             "sheet a night at least.\n\n"
             "If this is your only copy and it is damaged, copy it before you repair it, and\n"
             "find out what is wrong with the medium: repairs do not make it young again. How\n"
             "often to scrub, and when to migrate, is for your institution's policy to say.\n\n"
             "Exit status: 0 sound; 1 damage was found and every byte is safe; 2 blocks are lost.\n",
    .example = "  firn scrub /shelf\n"
               "  firn scrub --report-only /media/optical/quay-1931.firn\n"
               "  firn scrub --time 2h --rate 50MB --gentle --html shelf.html /shelf\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
