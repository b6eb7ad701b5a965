/*
 * desk/shelf.h - the containers in files and folders named on the command line
 *
 * Room: desk. In a folder, containers are the regular files whose names end in `.firn`, and those that begin like a
 * title page whatever they are called; folders below it are walked, symbolic links are not followed, names come in the
 * order of their bytes.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SHELF_H
#define FIRN_DESK_SHELF_H

#include "firn/status.h"

/* Called for each container; what it returns is gathered by the caller through self. */
typedef void (firn_shelf_teller)(void *self, const char *path);

/*
 * Calls tell for path itself, if it is no folder, else for every container below it; trouble for a folder that cannot
 * be read. FIRN_OK or FIRN_NO_MEMORY; FIRN_STOPPED when a signal asked to.
 */
enum firn_status firn_shelf_walk(const char *path, firn_shelf_teller *tell,
                                 void (*trouble)(void *self, const char *path, int os_error), void *self);

/* The same, but for every regular file, whatever it is. */
enum firn_status firn_shelf_files(const char *path, firn_shelf_teller *tell,
                                  void (*trouble)(void *self, const char *path, int os_error), void *self);

#endif
