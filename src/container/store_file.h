/*
 * container/store_file.h - a descriptor as a store, and folders that remember names: what the store_*.c files share
 *
 * Room: container.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_STORE_FILE_H
#define FIRN_CONTAINER_STORE_FILE_H

#include "firn/store.h"

/*
 * Makes a store of a descriptor that can be searched. The store owns the descriptor from then on; on failure the caller
 * still does. path is copied; it names the file in faults.
 */
enum firn_status firn_store_file_make(int descriptor, bool writable, const char *path, const struct firn_memory *memory,
                                      struct firn_store *store);

/* The descriptor of a store that firn_store_file_make made; -1 for any other. */
int firn_store_file_descriptor(const struct firn_store *store);

/* Waits until a descriptor that does not block can be read (events POLLIN) or written (POLLOUT). */
void firn_store_file_await(int descriptor, short events);

/*
 * Opens the folder that path lies in. *name is set to the last part of path, in place.
 * Returns a descriptor, or -1 with errno. A folder that may be written but not read gives one that only names things.
 */
int firn_store_file_folder(const char *path, const char **name);

/*
 * Brings the names in a folder to the medium. Where the folder itself cannot be synced, the file system that `file` (a
 * descriptor, or -1 for all of them) lies on is. Returns 0, or -1 with errno.
 */
int firn_store_file_sync_folder(int folder, int file);

/* Tries to open a file without a name in a folder. linkable: a name may be given to it later. Returns -1 with errno. */
int firn_store_file_nameless(int folder, bool linkable);

#endif
