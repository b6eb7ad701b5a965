/*
 * desk/scrub_events.h - a scrub for the institution's records
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_EVENTS_H
#define FIRN_DESK_SCRUB_EVENTS_H

#include "desk/events.h"
#include "desk/scrub_turn.h"

void firn_scrub_events(struct firn_lines *events, const struct firn_scrub_turn *turn);

#endif
