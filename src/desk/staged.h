/*
 * desk/staged.h - a report that appears under its name only when it is whole, in the place of the one before
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_STAGED_H
#define FIRN_DESK_STAGED_H

#include "firn/status.h"

#include <stdio.h>

typedef void (firn_staged_writer)(void *self, FILE *out);

/* FIRN_OK, FIRN_CANNOT_CREATE, FIRN_IO, FIRN_NO_MEMORY; on anything but FIRN_OK what was there before still is. */
enum firn_status firn_staged_write(const char *path, firn_staged_writer *write, void *self, struct firn_fault *fault);

#endif
