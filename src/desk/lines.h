/*
 * desk/lines.h - a file of JSON Lines that grows from run to run
 *
 * Room: desk. How lines are written: care/append.h.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_LINES_H
#define FIRN_DESK_LINES_H

#include "desk/view.h"

struct firn_lines {
    int descriptor;            /* -1 when it is not open */
    const char *path;
    struct firn_view *view;    /* where trouble is told */
    int exit;                  /* FIRN_EXIT_IO once a line could not be written */
    char *bytes;               /* of the line at hand */
    size_t count;
};

/*
 * path NULL: nothing is opened, and lines go nowhere. A file that is there and does not begin as such files do is left
 * alone. Returns an exit status; what is wrong was told.
 */
int firn_lines_open(struct firn_lines *lines, const char *path, struct firn_view *view);

/* A stream for the next line, or NULL when lines go nowhere or memory is out, which was told. */
FILE *firn_lines_begin(struct firn_lines *lines);
/* Ends what firn_lines_begin gave, its LF included, and writes it. What goes wrong is told once, and kept in exit. */
void firn_lines_end(struct firn_lines *lines, FILE *line);

/* Closes; returns the exit status that a run has which has come to `exit` without the file. */
int firn_lines_close(struct firn_lines *lines, int exit);

#endif
