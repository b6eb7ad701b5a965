/*
 * desk/opening.h - a container named on the command line, opened for reading
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_OPENING_H
#define FIRN_DESK_OPENING_H

#include "desk/args.h"
#include "desk/view.h"
#include "firn/reader.h"

struct firn_opening {
    struct firn_store store;
    struct firn_reader *reader;
    bool store_open;
};

/* path `-` is standard input, copied to a temporary file first. Returns FIRN_EXIT_SOUND, or says why not. */
int firn_opening_make(struct firn_opening *opening, const char *path, const struct firn_args *args,
                      struct firn_view *view);
void firn_opening_close(struct firn_opening *opening);

/* "k = 224, m = 32, ..." in words: layout, protection, identity. */
void firn_opening_show_layout(struct firn_view *view, const struct firn_reader_layout *layout);

/*
 * The remarks that a layout calls for: cut short, foreign bytes, title page damaged. Returns FIRN_EXIT_SOUND,
 * FIRN_EXIT_SAFE or FIRN_EXIT_LOST.
 */
int firn_opening_remark(struct firn_view *view, const char *path, const struct firn_reader_layout *layout);

#endif
