/*
 * desk/own_file.h - what a report must not be written over
 *
 * Room: desk. Options that take a file for a report are easily given a container instead: `--html *.firn` is enough.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_OWN_FILE_H
#define FIRN_DESK_OWN_FILE_H

#include "desk/view.h"

#include <stdbool.h>

/*
 * Whether a report may go to path: to what does not exist, is no regular file, is empty, or begins with `first` as all
 * reports of its kind do. Returns an exit status; what is wrong was told.
 *
 * path  NULL: there is nothing to ask
 * kind  for people: "a page of scrub"
 */
int firn_own_file_check(struct firn_view *view, const char *path, const char *first, const char *kind);

/* Whether what is to be written as output would take the place of the file that source names or leads to. */
bool firn_own_file_same(const char *source, const char *output);

#endif
