/*
 * desk/pack_words.h - what the words of pack ask of the container: reserve, sheet, effort, date
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_PACK_WORDS_H
#define FIRN_DESK_PACK_WORDS_H

#include "desk/view.h"
#include "firn/writer.h"

/* As given; NULL for what was not. */
struct firn_pack_words { const char *output, *reserve, *sheet, *effort; };

/*
 * Fills in geometry, effort, the title's date and the nonce. With SOURCE_DATE_EPOCH in the environment the same input
 * gives the same bytes. Returns an exit status; what is wrong was told.
 */
int firn_pack_words(const struct firn_pack_words *words, struct firn_writer_options *writing, struct firn_view *view);

#endif
