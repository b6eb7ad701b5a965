/*
 * transfer/outlet_place.h - finding the folder an item belongs in, without ever leaving the target
 *
 * Room: transfer. Goes from folder to folder by descriptor, follows no symbolic link, and knows only names in stored
 * form (transfer/stored_name.h). The folders of the last name stay open, so that neighbours cost nothing; at most
 * FIRN_OUTLET_PLACE_OPEN of them.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_OUTLET_PLACE_H
#define FIRN_TRANSFER_OUTLET_PLACE_H

#include "firn/memory.h"
#include "transfer/stored_name.h"

enum { FIRN_OUTLET_PLACE_OPEN = 32 };

struct firn_outlet_place {
    int root;                               /* lent */
    void *self;
    /* a folder was made that no item asked for yet; may be NULL */
    enum firn_status (*made)(void *self, const char *name, size_t name_bytes);
    char path[FIRN_STORED_NAME_ROOM];       /* of the folders that are open */
    unsigned depth;
    struct { int descriptor; size_t path_bytes; } open[FIRN_OUTLET_PLACE_OPEN];
};

void firn_outlet_place_start(struct firn_outlet_place *place, int root);
void firn_outlet_place_end(struct firn_outlet_place *place);

/*
 * name    in stored form
 * make    folders on the way that are not there are made
 * folder  out, lent until the next call; last: out, the last component of name, in name
 *
 * FIRN_OK; FIRN_NO_INPUT: a folder on the way is not there; FIRN_EXISTS: something else is in the way;
 * FIRN_CANNOT_CREATE with *os_error; what made returns.
 */
enum firn_status firn_outlet_place_find(struct firn_outlet_place *place, const char *name, bool make, int *folder,
                                        const char **last, int *os_error);

#endif
