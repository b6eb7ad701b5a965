/*
 * transfer/outlet_stage.h - things that are made beside their place and get their name when they are whole
 *
 * Room: transfer.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_OUTLET_STAGE_H
#define FIRN_TRANSFER_OUTLET_STAGE_H

#include <stdbool.h>
#include <stdint.h>

enum { FIRN_OUTLET_STAGE_NAME_ROOM = 48 };

struct firn_outlet_stage {
    uint64_t counter;                              /* kept from one to the next */
    int folder;                                    /* lent */
    char name[FIRN_OUTLET_STAGE_NAME_ROOM];        /* "": nothing is staged */
};

/* Makes something under the given name in a folder, as self describes it: 0 or a descriptor, or -1 with errno. */
typedef int (firn_outlet_stage_maker)(void *self, int folder, const char *name);

/* Calls make with names of our own until one is free. What make returns. */
int firn_outlet_stage_make(struct firn_outlet_stage *stage, int folder, firn_outlet_stage_maker *make, void *self);

/*
 * Gives what is staged its name in the same folder. Without replace nothing is overwritten, even if it has come into
 * being this moment. A folder is never replaced. Returns 0, or an errno (EEXIST: the place is taken); what is staged is
 * gone then.
 */
int firn_outlet_stage_settle(struct firn_outlet_stage *stage, const char *name, bool replace);

/* Takes away what is staged, if anything is. */
void firn_outlet_stage_drop(struct firn_outlet_stage *stage);

#endif
