/*
 * desk/scrub_json.h - a scrub for programs: one JSON object for each container
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_JSON_H
#define FIRN_DESK_SCRUB_JSON_H

#include "desk/scrub_turn.h"
#include "desk/view.h"

void firn_scrub_json(struct firn_view *view, const struct firn_scrub_turn *turn);

#endif
