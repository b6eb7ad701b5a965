/*
 * transfer/roll.h - the roll of a container: every stored name with its type, size and digest
 *
 * Room: transfer. Read from the catalogue alone. Hard links have the facts of the file that they lead to.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_ROLL_H
#define FIRN_TRANSFER_ROLL_H

#include "firn/manifest.h"
#include "transfer/names.h"

struct firn_roll_item {
    uint64_t number;             /* of the item that counts, the last one of that name */
    char type;                   /* as firn/about.h has it */
    bool chosen;
    bool needed;                 /* chosen, or a chosen hard link leads to it */
    bool seen;                   /* for whoever compares */
    bool known;                  /* digest is */
    uint64_t bytes;
    uint8_t digest[FIRN_MANIFEST_DIGEST_BYTES_MAX];
    const char *target;          /* of a symbolic link; else NULL */
    struct firn_roll_item *file; /* of a hard link: where it leads, NULL if nowhere; of others the item itself */
};

struct firn_roll {
    struct firn_names *items;    /* struct firn_roll_item by stored name */
    size_t below_bytes;          /* how much of a chosen name comes before its path, the slash included */
    uint64_t items_unknown;
    bool cut_short;
};

/* To be ended in any case. What firn_reader_walk returns, or FIRN_BAD_ARGUMENT for a `below` that is too long. */
enum firn_status firn_roll_make(struct firn_reader *reader, const struct firn_memory *memory,
                                const struct firn_manifest_choice *choice, struct firn_fault *fault,
                                struct firn_roll *roll);
void firn_roll_end(struct firn_roll *roll);

#endif
