/*
 * transfer/intake_walk.h - the way through a tree of folders, by descriptor, with a stack of our own
 *
 * Room: transfer. Each folder's names are read at once and sorted by bytes. At most FIRN_INTAKE_WALK_OPEN folders are
 * open; those further up are opened again through the `..` of the one below, and must be the same folders still.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_INTAKE_WALK_H
#define FIRN_TRANSFER_INTAKE_WALK_H

#include "firn/memory.h"

#include <stdbool.h>
#include <stddef.h>
#include <sys/stat.h>

enum { FIRN_INTAKE_WALK_OPEN = 48 };

struct firn_intake_walk;

enum firn_status firn_intake_walk_make(const struct firn_memory *memory, struct firn_intake_walk **out);
void firn_intake_walk_free(struct firn_intake_walk *walk);      /* takes NULL; closes what is open */

/*
 * Goes into an open folder, which the walk owns from now on, also when it fails.
 *
 * facts  of the folder
 * mark   kept with the folder, given back by firn_intake_walk_next
 *
 * FIRN_OK; FIRN_NO_MEMORY; FIRN_IO with *os_error: the names cannot be read.
 */
enum firn_status firn_intake_walk_into(struct firn_intake_walk *walk, int descriptor, const struct stat *facts,
                                       size_t mark, int *os_error);

/*
 * The next name of the innermost folder that has one left; folders without are left on the way.
 *
 * folder  out, its descriptor; name: out, both lent until the next call
 * mark    out, the one of that folder
 *
 * FIRN_OK; FIRN_END: nothing is left; FIRN_CHANGED: the folder with that mark is not where it was, the rest of it is
 * lost.
 */
enum firn_status firn_intake_walk_next(struct firn_intake_walk *walk, int *folder, const char **name, size_t *mark);

#endif
