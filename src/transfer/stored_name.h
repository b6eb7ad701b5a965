/*
 * transfer/stored_name.h - names as the container stores them: relative, no empty components, no dots
 *
 * Room: transfer. The rule stands in firn/intake.h.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_STORED_NAME_H
#define FIRN_TRANSFER_STORED_NAME_H

#include "firn/intake.h"

#include <stdbool.h>

enum { FIRN_STORED_NAME_ROOM = FIRN_INTAKE_NAME_MAX + 1 };

/*
 * Brings a name into stored form; the result may be empty.
 * dots  out, may be NULL: a `..` was in it. FIRN_OK; FIRN_OVER_LIMIT: too long, stored is cut short.
 */
enum firn_status firn_stored_name_make(const char *name, char stored[FIRN_STORED_NAME_ROOM], bool *dots);

/* Whether a name that comes from a container is in stored form, so that it leads nowhere but down. */
bool firn_stored_name_safe(const char *name);

/* Whether `name` is `folder` or lies below it; everything lies below "". */
bool firn_stored_name_within(const char *name, const char *folder, size_t folder_bytes);

#endif
