/* desk/scrub_words.c - a scrub for people */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_words.h"

#include <inttypes.h>

static void add_part(struct firn_text *text, uint64_t count, const char *one, const char *many)
{
    char words[FIRN_TEXT_COUNT_ROOM];

    if (count > 0)
        firn_text_add(text, "%s%s %s", text->used > 0 ? ", " : "", firn_text_count(count, words),
                      count == 1 ? one : many);
}

/* What was found. */
static void add_found(const struct firn_scrub_turn *turn, struct firn_text *text)
{
    const struct firn_scrub_report *r = &turn->report;
    char count[FIRN_TEXT_COUNT_ROOM];

    add_part(text, r->mended, "block mended", "blocks mended");
    if (r->mended_bits > 0)
        firn_text_add(text, " (%s stray bit%s)", firn_text_count(r->mended_bits, count),
                      r->mended_bits == 1 ? "" : "s");
    add_part(text, r->rebuilt, "block rebuilt from the reserve", "blocks rebuilt from the reserve");
    add_part(text, r->lost, "block LOST", "blocks LOST");
    for (uint64_t i = 0; i < r->lost && i < turn->range_count && i < 4; i++)
        firn_text_add(text, "%s%" PRIu64 "-%" PRIu64, i == 0 ? " (numbers " : ", ", turn->ranges[i].first,
                      turn->ranges[i].first + turn->ranges[i].count - 1);
    if (turn->range_count > 0)
        firn_text_add(text, turn->range_count > 4 ? ", ...)" : ")");
    add_part(text, r->reread, "block right only when read again", "blocks right only when read again");
    if (r->stretches > 0)
        firn_text_add(text, "%sits blocks are NOT WHERE THEY BELONG, in %s piece%s", text->used > 0 ? ", " : "",
                      firn_text_count(r->stretches, count), r->stretches == 1 ? "" : "s");
    if (r->title == FIRN_SCRUB_TITLE_DAMAGED || r->title == FIRN_SCRUB_TITLE_HEALED)
        firn_text_add(text, "%stitle page damaged", text->used > 0 ? ", " : "");
    add_part(text, r->extended_bytes, "byte put back at its end", "bytes put back at its end");
    if (turn->entry.end_missing)
        firn_text_add(text, "%sits end is MISSING", text->used > 0 ? ", " : "");
    add_part(text, r->replayed, "block of a repair that was cut off put in place",
             "blocks of a repair that was cut off put in place");
}

static void add_sound(const struct firn_scrub_turn *turn, struct firn_text *text)
{
    char count[FIRN_TEXT_COUNT_ROOM];

    firn_text_add(text, "sound, %s blocks", firn_text_count(turn->report.checked, count));
    if (!turn->entry.done)
        firn_text_add(text, " so far, up to block %" PRIu64 " of %" PRIu64, turn->report.reached, turn->report.blocks);
}

/* And what became of it. */
static void add_outcome(const struct firn_scrub_turn *turn, struct firn_text *text)
{
    const struct firn_scrub_report *r = &turn->report;

    if (text->used == 0)
        add_sound(turn, text);
    else if (r->stretches > 0)
        firn_text_add(text, "; nothing written, collate makes a sound copy");
    else if (turn->report_only)
        firn_text_add(text, "; nothing written");
    else if (r->written > 0)
        firn_text_add(text, !firn_scrub_turn_lost(turn) ? "; repaired in place" : "; the rest repaired in place");
    if (r->reread > 0)
        firn_text_add(text, "; copy it while it can still be read");
    if (firn_scrub_turn_lost(turn))
        firn_text_add(text, "; take another copy");
    if (r->foreign_bytes > 0)
        firn_text_add(text, "; %" PRIu64 " bytes behind its end are not part of it", r->foreign_bytes);
    if (r->journal == FIRN_SCRUB_JOURNAL_WAITS)
        firn_text_add(text, "; a repair that was cut off waits to be finished by scrub");
}

static void warn(struct firn_view *view, const struct firn_scrub_turn *turn)
{
    char words[300];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "damage comes faster: ");
    firn_scrub_turn_trend_words(&turn->trend, &text);
    firn_text_add(&text, "; copy this medium now");
    firn_view_line(view, turn->path, words);
}

void firn_scrub_words(struct firn_view *view, const struct firn_scrub_turn *turn, bool always)
{
    const struct firn_scrub_report *r = &turn->report;
    char words[1024];
    struct firn_text text;

    if (turn->entry.blocks == 0)
        return;
    firn_text_start(&text, words, sizeof words);
    add_found(turn, &text);
    add_outcome(turn, &text);
    if (always || firn_scrub_turn_damaged(turn) || r->foreign_bytes > 0 || r->journal == FIRN_SCRUB_JOURNAL_WAITS)
        firn_view_line(view, turn->path, words);
    if (firn_scrub_turn_grows(turn))
        warn(view, turn);
}
