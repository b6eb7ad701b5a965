/*
 * desk/scrub_words.h - a scrub for people: one line for each container that needs one
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_WORDS_H
#define FIRN_DESK_SCRUB_WORDS_H

#include "desk/scrub_turn.h"
#include "desk/view.h"

/* always: also when there is nothing to say but that it is sound. */
void firn_scrub_words(struct firn_view *view, const struct firn_scrub_turn *turn, bool always);

#endif
