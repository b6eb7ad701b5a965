/* desk/scrub_turn.c - what came of one container in one run of scrub */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_turn.h"

#include <inttypes.h>

bool firn_scrub_turn_lost(const struct firn_scrub_turn *turn)
{
    return turn->report.lost > 0 || turn->entry.end_missing;
}

bool firn_scrub_turn_damaged(const struct firn_scrub_turn *turn)
{
    const struct firn_scrub_report *r = &turn->report;

    return turn->entry.blocks > 0
        && (r->mended + r->rebuilt + r->lost > 0 || turn->entry.title_damaged || r->extended_bytes > 0
            || turn->entry.end_missing || r->journal == FIRN_SCRUB_JOURNAL_REPLAYED);
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
