/*
 * transfer/attributes.h - extended attributes and access control lists between the file system and libarchive's entries
 *
 * Room: transfer. Everything goes by descriptor. What cannot be opened without harm (links, devices, fifos) is reached
 * through the descriptor of its folder under /proc/self/fd.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_ATTRIBUTES_H
#define FIRN_TRANSFER_ATTRIBUTES_H

#include "firn/memory.h"
#include "transfer/people.h"

#include <archive_entry.h>

struct firn_attributes;

/* people is lent until free. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_attributes_make(const struct firn_memory *memory, struct firn_people *people,
                                      struct firn_attributes **out);
void firn_attributes_free(struct firn_attributes *attributes);      /* takes NULL */

/* Where an object is: its own descriptor, or if that is -1 a name in a folder (AT_FDCWD: a path). */
struct firn_attributes_place { int descriptor, folder; const char *name; };

/* Reads them into an entry, in the order of their names. Returns 0, or the errno of something that could not be had. */
int firn_attributes_take(struct firn_attributes *attributes, const struct firn_attributes_place *place,
                         struct archive_entry *entry);

/*
 * Sets those of an entry.
 *
 * privileged  also those outside the `user.` name space, which may hand out power (security.capability)
 * which       out, a phrase in static storage
 *
 * Returns 0, or the errno of one that could not be set; *which then says what it was.
 */
int firn_attributes_give(struct firn_attributes *attributes, const struct firn_attributes_place *place,
                         struct archive_entry *entry, bool privileged, const char **which);

#endif
