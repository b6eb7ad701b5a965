/*
 * desk/trouble.h - a status becomes one clear line and an exit status
 *
 * Room: desk. Exit statuses: 0, 1 and 2 are ours; the others are those of sysexits.h (BSD, glibc).
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_TROUBLE_H
#define FIRN_DESK_TROUBLE_H

#include "desk/view.h"

enum firn_trouble_exit {
    FIRN_EXIT_SOUND = 0,           /* intact, or done */
    FIRN_EXIT_SAFE = 1,            /* damage was found, and every byte is safe */
    FIRN_EXIT_LOST = 2,            /* bytes are lost; the report says which */
    FIRN_EXIT_USAGE = 64,
    FIRN_EXIT_BAD_DATA = 65,
    FIRN_EXIT_NO_INPUT = 66,
    FIRN_EXIT_SOFTWARE = 70,
    FIRN_EXIT_OS = 71,
    FIRN_EXIT_CANNOT_CREATE = 73,
    FIRN_EXIT_IO = 74,
    FIRN_EXIT_TRY_AGAIN = 75
};

int firn_trouble_exit(enum firn_status status);

/* Says what happened to which thing and what to do, and returns the exit status. path: NULL for fault->what. */
int firn_trouble_tell(struct firn_view *view, const char *path, enum firn_status status,
                      const struct firn_fault *fault);

/* A wrong word on the command line: "WORD: WHAT; see 'firn COMMAND --help'". Returns FIRN_EXIT_USAGE. */
int firn_trouble_usage(struct firn_view *view, const char *word, const char *what);

#endif
