/* desk/scrub_json.c - a scrub for programs */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_json.h"

#include <inttypes.h>
#include <time.h>

static void put_time(struct firn_view *view)
{
    time_t now = time(NULL);
    char words[32] = "";
    struct tm utc;

    if (gmtime_r(&now, &utc) != NULL)
        strftime(words, sizeof words, "%Y-%m-%dT%H:%M:%SZ", &utc);
    firn_view_words(view, "at", NULL, words);
}

void firn_scrub_json(struct firn_view *view, const struct firn_scrub_turn *turn)
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
    const struct firn_scrub_report *r = &turn->report;

    firn_view_begin(view, "scrub", NULL);
    put_time(view);
    firn_view_words(view, "container", NULL, turn->path);
    firn_view_words(view, "status", NULL, firn_status_text(turn->status));
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
    firn_view_count(view, "reached", NULL, r->reached);
    firn_view_switch(view, "done", turn->entry.done);
    firn_view_count(view, "places", NULL, turn->entry.places);
    firn_view_switch(view, "growing", firn_scrub_turn_grows(turn));
    fputs(",\"lost-ranges\":[", view->out);
    for (uint64_t i = 0; i < turn->range_count && i < FIRN_SCRUB_TURN_RANGES; i++)
        fprintf(view->out, "%s{\"first\":%" PRIu64 ",\"blocks\":%" PRIu64 "}", i > 0 ? "," : "", turn->ranges[i].first,
                turn->ranges[i].count);
    fputc(']', view->out);
    firn_view_end(view);
}
