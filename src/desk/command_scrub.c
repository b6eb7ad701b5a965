/* desk/command_scrub.c - the "scrub" command: words in, calls to care, a line for each container that needs one */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/interrupt.h"
#include "desk/progress.h"
#include "desk/shelf.h"
#include "desk/trouble.h"
#include "firn/scrub.h"

#include <inttypes.h>
#include <string.h>

enum option { REPORT_ONLY, REREAD, VERBOSE };

static const struct firn_args_option options[] = {
    [REPORT_ONLY] = { "report-only", '\0', NULL, "write nothing; works on read-only media" },
    [REREAD] = { "reread", '\0', "N", "read a block that is not right again up to N times, 31 at most (default 0)" },
    [VERBOSE] = { "verbose", 'v', NULL, "a line for every container, sound ones too" },
};

enum { RANGES_MAX = 64 };

struct range { uint64_t first, count; };

struct scrubbing {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_progress progress;
    struct range ranges[RANGES_MAX];      /* of lost blocks in the container at hand */
    uint64_t range_count;
    int exit;                             /* the worst so far */
    uint64_t containers;
    unsigned readings;
};

/* Loss is worst, then what kept us from looking, then damage that is safe. */
static void worsen(struct scrubbing *s, int exit)
{
    if (exit == FIRN_EXIT_LOST || s->exit == FIRN_EXIT_LOST)
        s->exit = FIRN_EXIT_LOST;
    else
        s->exit = exit > s->exit ? exit : s->exit;
}

static void note_lost(void *self, uint64_t first, uint64_t count)
{
    struct scrubbing *s = self;

    if (s->range_count < RANGES_MAX)
        s->ranges[s->range_count] = (struct range){ first, count };
    s->range_count++;
}

static void step(void *self, uint64_t done, uint64_t blocks)
{
    struct scrubbing *s = self;

    s->progress.goal_bytes = blocks * 4096;
    firn_progress_step(&s->progress, 0, done * 4096);
}

static bool damaged(const struct firn_scrub_report *r)
{
    return r->mended + r->rebuilt + r->lost > 0 || r->title == FIRN_SCRUB_TITLE_DAMAGED ||
           r->title == FIRN_SCRUB_TITLE_HEALED || r->extended_bytes > 0 || !r->end_known ||
           r->journal == FIRN_SCRUB_JOURNAL_REPLAYED || r->reread > 0 || r->stretches > 0;
}

static void add_part(struct firn_text *text, uint64_t count, const char *one, const char *many)
{
    char words[FIRN_TEXT_COUNT_ROOM];

    if (count > 0)
        firn_text_add(text, "%s%s %s", text->used > 0 ? ", " : "", firn_text_count(count, words),
                      count == 1 ? one : many);
}

/* The line for people: what was found, then what became of it. */
static void say(struct scrubbing *s, const char *path, const struct firn_scrub_report *r)
{
    char words[1024], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    add_part(&text, r->mended, "block mended", "blocks mended");
    if (r->mended_bits > 0)
        firn_text_add(&text, " (%s stray bit%s)", firn_text_count(r->mended_bits, count),
                      r->mended_bits == 1 ? "" : "s");
    add_part(&text, r->rebuilt, "block rebuilt from the reserve", "blocks rebuilt from the reserve");
    add_part(&text, r->lost, "block LOST", "blocks LOST");
    for (uint64_t i = 0; i < r->lost && i < s->range_count && i < 4; i++)
        firn_text_add(&text, "%s%" PRIu64 "-%" PRIu64, i == 0 ? " (numbers " : ", ", s->ranges[i].first,
                      s->ranges[i].first + s->ranges[i].count - 1);
    if (s->range_count > 0)
        firn_text_add(&text, s->range_count > 4 ? ", ...)" : ")");
    add_part(&text, r->reread, "block right only when read again", "blocks right only when read again");
    if (r->stretches > 0)
        firn_text_add(&text, "%sits blocks are NOT WHERE THEY BELONG, in %s piece%s", text.used > 0 ? ", " : "",
                      firn_text_count(r->stretches, count), r->stretches == 1 ? "" : "s");
    if (r->title == FIRN_SCRUB_TITLE_DAMAGED || r->title == FIRN_SCRUB_TITLE_HEALED)
        firn_text_add(&text, "%stitle page damaged", text.used > 0 ? ", " : "");
    add_part(&text, r->extended_bytes, "byte put back at its end", "bytes put back at its end");
    if (!r->end_known)
        firn_text_add(&text, "%sits end is MISSING", text.used > 0 ? ", " : "");
    add_part(&text, r->replayed, "block of a repair that was cut off put in place",
             "blocks of a repair that was cut off put in place");
    if (text.used == 0)
        firn_text_add(&text, "sound, %s blocks", firn_text_count(r->checked, count));
    else if (r->stretches > 0)
        firn_text_add(&text, "; nothing written, collate makes a sound copy");
    else if (s->args->given[REPORT_ONLY])
        firn_text_add(&text, "; nothing written");
    else if (r->written > 0)
        firn_text_add(&text, r->lost == 0 && r->end_known ? "; repaired in place" : "; the rest repaired in place");
    if (r->reread > 0)
        firn_text_add(&text, "; copy it while it can still be read");
    if (r->lost > 0 || !r->end_known)
        firn_text_add(&text, "; take another copy");
    if (r->foreign_bytes > 0)
        firn_text_add(&text, "; %" PRIu64 " bytes behind its end are not part of it", r->foreign_bytes);
    if (r->journal == FIRN_SCRUB_JOURNAL_WAITS)
        firn_text_add(&text, "; a repair that was cut off waits to be finished by scrub");
    firn_view_line(s->view, path, words);
}

static void say_json(struct scrubbing *s, const char *path, enum firn_status status, const struct firn_scrub_report *r)
{
    static const char *const titles[] = { [FIRN_SCRUB_TITLE_SOUND] = "sound",
                                          [FIRN_SCRUB_TITLE_DAMAGED] = "damaged",
                                          [FIRN_SCRUB_TITLE_HEALED] = "healed",
                                          [FIRN_SCRUB_TITLE_UNKNOWN] = "unknown" };
    static const char *const journals[] = { [FIRN_SCRUB_JOURNAL_NONE] = "none",
                                            [FIRN_SCRUB_JOURNAL_WAITS] = "waits",
                                            [FIRN_SCRUB_JOURNAL_DROPPED] = "dropped",
                                            [FIRN_SCRUB_JOURNAL_REPLAYED] = "replayed",
                                            [FIRN_SCRUB_JOURNAL_STRANGE] = "strange" };
    struct firn_view *view = s->view;

    firn_view_begin(view, "scrub", NULL);
    firn_view_words(view, "container", NULL, path);
    firn_view_words(view, "status", NULL, firn_status_text(status));
    firn_view_hex(view, "id", NULL, r->id, sizeof r->id);
    firn_view_count(view, "file-bytes", NULL, r->file_bytes);
    firn_view_count(view, "blocks", NULL, r->blocks);
    firn_view_count(view, "checked", NULL, r->checked);
    firn_view_count(view, "mended", NULL, r->mended);
    firn_view_count(view, "mended-bits", NULL, r->mended_bits);
    firn_view_count(view, "rebuilt", NULL, r->rebuilt);
    firn_view_count(view, "lost", NULL, r->lost);
    firn_view_count(view, "unreadable", NULL, r->unreadable);
    firn_view_count(view, "reread", NULL, r->reread);
    firn_view_count(view, "pieces", NULL, r->stretches);
    firn_view_count(view, "written", NULL, r->written);
    firn_view_count(view, "extended-bytes", NULL, r->extended_bytes);
    firn_view_count(view, "foreign-bytes", NULL, r->foreign_bytes);
    firn_view_switch(view, "end-known", r->end_known);
    firn_view_words(view, "title-page", NULL, titles[r->title]);
    firn_view_words(view, "journal", NULL, journals[r->journal]);
    fputs(",\"lost-ranges\":[", view->out);
    for (uint64_t i = 0; i < s->range_count && i < RANGES_MAX; i++)
        fprintf(view->out, "%s{\"first\":%" PRIu64 ",\"blocks\":%" PRIu64 "}", i > 0 ? "," : "", s->ranges[i].first,
                s->ranges[i].count);
    fputc(']', view->out);
    firn_view_end(view);
}

static void scrub_one(void *self, const char *path)
{
    struct scrubbing *s = self;
    struct firn_scrub_options scrub = {
        .path = path, .memory = firn_memory_system(), .threads = s->args->threads,
        .report_only = s->args->given[REPORT_ONLY], .readings = s->readings, .self = s, .stop = firn_interrupt_asked,
        .progress = step, .lost = note_lost
    };
    struct firn_scrub_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (firn_interrupt_asked(NULL))
        return;
    s->containers++;
    s->range_count = 0;
    firn_progress_start(&s->progress, "scrubbing", 0, s->args->quiet || s->args->json);
    status = firn_scrub(&scrub, &report, &fault);
    firn_progress_wipe(&s->progress);
    if (s->view->json)
        say_json(s, path, status, &report);
    else if (report.checked > 0 && (damaged(&report) || report.foreign_bytes > 0 || s->args->given[VERBOSE] ||
                                    report.journal == FIRN_SCRUB_JOURNAL_WAITS))
        say(s, path, &report);
    fflush(s->view->out);
    if (status != FIRN_OK)
        worsen(s, firn_trouble_tell(s->view, path, status, &fault));
    if (report.lost > 0 || (report.checked > 0 && !report.end_known))
        worsen(s, FIRN_EXIT_LOST);
    else if (damaged(&report) && report.checked > 0)
        worsen(s, FIRN_EXIT_SAFE);
}

static void tell_trouble(void *self, const char *path, int os_error)
{
    struct scrubbing *s = self;
    struct firn_fault fault = { .os_error = os_error };

    worsen(s, firn_trouble_tell(s->view, path, FIRN_NO_INPUT, &fault));
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct scrubbing s = { .args = args, .view = view };
    const char *reread = args->values[REREAD];
    uint64_t readings = 0;

    if (reread != NULL && (firn_text_parse_count(reread, &readings) != FIRN_OK || readings > 31))
        return firn_trouble_usage(view, reread, "is no number of readings from 0 to 31");
    s.readings = (unsigned)readings;
    if (args->operand_count == 0)
        return firn_trouble_usage(view, "FILE-OR-FOLDER", "is missing: name a container or a folder of them");
    for (size_t i = 0; i < args->operand_count && !firn_interrupt_asked(NULL); i++) {
        uint64_t before = s.containers;
        enum firn_status status = firn_shelf_walk(args->operands[i], scrub_one, tell_trouble, &s);

        if (status != FIRN_OK)
            worsen(&s, firn_trouble_tell(view, args->operands[i], status, NULL));
        else if (s.containers == before && s.exit == FIRN_EXIT_SOUND) {
            firn_view_finding(view, "no-input", args->operands[i], "no container is in there; check the name");
            worsen(&s, FIRN_EXIT_NO_INPUT);
        }
    }
    return s.exit;
}

const struct firn_command firn_command_scrub = {
    .name = "scrub",
    .summary = "check every block, repair in place, report",
    .usage = "FILE-OR-FOLDER... [--report-only]",
    .about = "Checks every block of each container, hash and lanes, and repairs in place what can\n"
             "be repaired, behind a journal that makes a power cut harmless. Prints nothing when\n"
             "all is well, one line for each container otherwise. Folders are walked.\n\n"
             "If this is your only copy and it is damaged, copy it before you repair it, and\n"
             "find out what is wrong with the medium: repairs do not make it young again.\n\n"
             "Exit status: 0 sound; 1 damage was found and every byte is safe; 2 blocks are lost.\n",
    .example = "  firn scrub /shelf\n"
               "  firn scrub --report-only /media/optical/quay-1931.firn\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
