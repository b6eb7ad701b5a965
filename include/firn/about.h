/*
 * firn/about.h - what an item's pax header says, for people who want to list it
 *
 * Room: transfer.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_ABOUT_H
#define FIRN_ABOUT_H

#include "firn/item.h"
#include "firn/memory.h"

struct firn_about;        /* reads one header after another; for one thread at a time */

/* The strings are lent until the next read. Names may hold any byte but NUL: print them with care. */
struct firn_about_facts {
    const char *path;               /* without the slash that pax puts behind a folder's name */
    char type;                      /* - file, d folder, l symbolic link, h hard link, c and b devices, p fifo */
    unsigned mode;                  /* permission bits, 0 .. 07777 */
    uint64_t uid, gid;
    const char *user, *group;       /* "" when only the numbers are known */
    int64_t mtime_seconds;          /* since 1970-01-01T00:00:00Z, rounded down */
    uint32_t mtime_nanoseconds;     /* 0 .. 999 999 999 */
    const char *link;               /* what a link points to; "" for other items */
    uint64_t bytes;                 /* size of the file, holes included */
    uint32_t device_major, device_minor;
    unsigned attributes;            /* extended attributes, access control lists not counted */
    bool access_list;               /* has a POSIX access control list, or a default one */
};

FIRN_API enum firn_status firn_about_make(const struct firn_memory *memory, struct firn_about **out);
FIRN_API void firn_about_free(struct firn_about *about);      /* takes NULL */

/*
 * FIRN_OK; FIRN_BAD_DATA when the bytes are no pax header as packing makes them, or contradict the rest of the item;
 * FIRN_NO_MEMORY. On anything but FIRN_OK facts is undefined.
 */
FIRN_API enum firn_status firn_about_read(struct firn_about *about, const struct firn_item *item,
                                          struct firn_about_facts *facts);

#endif
