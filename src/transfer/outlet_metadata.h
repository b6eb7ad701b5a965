/*
 * transfer/outlet_metadata.h - giving something that was just made the metadata it had
 *
 * Room: transfer.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_OUTLET_METADATA_H
#define FIRN_TRANSFER_OUTLET_METADATA_H

#include "firn/outlet.h"
#include "transfer/attributes.h"

struct firn_outlet_metadata {
    struct firn_people people;
    struct firn_attributes *attributes;
    enum firn_outlet_owner owner;
};

/* What could not be set; what NULL: nothing. */
struct firn_outlet_shortfall {
    const char *what;
    int os_error;
};

/* FIRN_OK or FIRN_NO_MEMORY; to be ended in either case. */
enum firn_status firn_outlet_metadata_start(struct firn_outlet_metadata *metadata, const struct firn_memory *memory,
                                            enum firn_outlet_owner owner);
void firn_outlet_metadata_end(struct firn_outlet_metadata *metadata);

/* The owner and group of an entry as numbers of this system. */
void firn_outlet_metadata_owner(struct firn_outlet_metadata *metadata, struct archive_entry *entry, int64_t *uid,
                                int64_t *gid);

/* Sets owner, mode, attributes and time. shortfall tells the first thing that could not be set. */
void firn_outlet_metadata_give(struct firn_outlet_metadata *metadata, const struct firn_attributes_place *place,
                               struct archive_entry *entry, struct firn_outlet_shortfall *shortfall);

#endif
