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

enum { FIRN_OPENING_STORES_MAX = 3 };      /* the file, what puts its blocks in order, what reads again */

struct firn_opening {
    struct firn_store stores[FIRN_OPENING_STORES_MAX];      /* the last one is read from */
    unsigned store_count;
    unsigned readings;                 /* of a block that does not read right; 0: one has to do */
    uint64_t stretches;                /* 0: its blocks are where they belong; else in how many pieces they are */
    struct firn_reader *reader;
};

/*
 * path `-` is standard input; what cannot be searched is copied to a temporary file first. A container whose blocks are
 * not where they belong is read from where they are, and a finding says so. Returns FIRN_EXIT_SOUND, or says why not.
 */
int firn_opening_make(struct firn_opening *opening, const char *path, const struct firn_args *args,
                      struct firn_view *view);
/* The same, with so many readings of a block that does not read right. */
int firn_opening_make_patient(struct firn_opening *opening, const char *path, unsigned readings,
                              const struct firn_args *args, struct firn_view *view);
void firn_opening_close(struct firn_opening *opening);

/* Closes it. Returns exit; FIRN_EXIT_SAFE instead of sound when blocks that were read had to be mended or rebuilt. */
int firn_opening_leave(struct firn_opening *opening, int exit);

/* How many blocks came from another reading than the first. */
uint64_t firn_opening_gained(const struct firn_opening *opening);

/* "k = 224, m = 32, ..." in words: layout, protection, identity. */
void firn_opening_show_layout(struct firn_view *view, const struct firn_reader_layout *layout);

/*
 * The remarks that a layout calls for: cut short, foreign bytes, title page damaged. Returns FIRN_EXIT_SOUND,
 * FIRN_EXIT_SAFE or FIRN_EXIT_LOST.
 */
int firn_opening_remark(struct firn_view *view, const char *path, const struct firn_reader_layout *layout);

/* The same for what was opened: blocks that are not where they belong are damage too, and with them goes page 0. */
int firn_opening_look(struct firn_view *view, const char *path, const struct firn_opening *opening);

#endif
