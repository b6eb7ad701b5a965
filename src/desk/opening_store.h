/*
 * desk/opening_store.h - a store for whatever a command line names: file, device, pipe, standard input
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_OPENING_STORE_H
#define FIRN_DESK_OPENING_STORE_H

#include "desk/view.h"
#include "firn/store.h"

/*
 * Opens path for reading; `-` is standard input. What cannot be searched (a pipe) is copied to a temporary file first,
 * and a note says where. Whatever firn_store_open and firn_store_spool return.
 */
enum firn_status firn_opening_store(struct firn_view *view, const char *path, const struct firn_memory *memory,
                                    struct firn_store *store, struct firn_fault *fault);

#endif
