/* desk/scrub_events.c - a scrub for the institution's records */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_events.h"

#include <inttypes.h>

/* A fixity check for each container, and a recovery where something was to be put right. */
void firn_scrub_events(struct firn_lines *events, const struct firn_scrub_turn *turn)
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
    firn_events_tell(events, &event);
    if (!damaged || turn->report_only)
        return;
    event.type = FIRN_EVENTS_RECOVERY;
    event.detail = "repaired in place, from the blocks' own check words and from the reserve";
    event.outcome = turn->status == FIRN_OK && !firn_scrub_turn_lost(turn) ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_FAILURE;
    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " blocks written, %" PRIu64 " lost", r->written + r->replayed, r->lost);
    firn_events_tell(events, &event);
}
