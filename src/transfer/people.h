/*
 * transfer/people.h - names and numbers of users and groups on this system, remembered by libarchive's lookups
 *
 * Room: transfer.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_PEOPLE_H
#define FIRN_TRANSFER_PEOPLE_H

#include "firn/status.h"

#include <archive.h>
#include <stdbool.h>
#include <stdint.h>

struct firn_people {
    struct archive *names;       /* from numbers to names */
    struct archive *numbers;     /* from names to numbers */
};

/* by_name false: names are not asked for when numbers are wanted, the stored ones stand. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_people_start(struct firn_people *people, bool by_name);
void firn_people_end(struct firn_people *people);      /* takes a zeroed one */

/* NULL: nobody is known by this number. */
const char *firn_people_name(struct firn_people *people, bool group, int64_t id);

/* The number this system has for the name; id when it has none, or when names are not asked for. name may be NULL. */
int64_t firn_people_number(struct firn_people *people, bool group, const char *name, int64_t id);

#endif
