/*
 * container/store_beside.h - a file beside a container that belongs to it: made anew, opened with suspicion
 *
 * Room: container. Used by care for the mend journal. Whoever may write into the folder could have put something there,
 * so neither links nor special files nor strangers' files are opened.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_STORE_BESIDE_H
#define FIRN_CONTAINER_STORE_BESIDE_H

#include "firn/store.h"

/*
 * The name of the file beside the one that path leads to, links followed: its path with the suffix behind it.
 *
 * beside  out  the caller puts it back into memory
 *
 * FIRN_OK; FIRN_NO_INPUT; FIRN_NO_MEMORY; FIRN_CANNOT_CREATE for a device, beside which nothing lasts.
 */
enum firn_status firn_store_beside_path(const char *path, const char *suffix, const struct firn_memory *memory,
                                        char **beside, struct firn_fault *fault);

/* Makes the file, for its owner's eyes only. FIRN_OK, FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_NO_MEMORY. */
enum firn_status firn_store_beside_make(const char *beside, const struct firn_memory *memory, struct firn_store *store,
                                        struct firn_fault *fault);

/* The file's name is on the medium when this returns FIRN_OK; else FIRN_IO. */
enum firn_status firn_store_beside_settle(const char *beside, struct firn_fault *fault);

/*
 * Opens the file for reading.
 *
 * FIRN_OK
 * FIRN_END         there is none
 * FIRN_BAD_DATA    something else is in its place, or others than this user, root and the container's owner could write
 *                  it
 * FIRN_IO, FIRN_NO_MEMORY
 */
enum firn_status firn_store_beside_open(const char *beside, const struct firn_store *container,
                                        const struct firn_memory *memory, struct firn_store *store,
                                        struct firn_fault *fault);

#endif
