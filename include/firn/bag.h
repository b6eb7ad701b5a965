/*
 * firn/bag.h - a BagIt bag, checked as a bag while it is taken in
 *
 * Room: transfer. RFC 8493 (2018), and the versions before it (0.93 to 0.97), of which only those with UTF-8 tag files
 * are read. A bag is complete when every file that its manifests list is there, and every payload file is listed: in
 * each payload manifest from version 1.0 on, in one of them before. It is valid when it is complete and every digest in
 * payload and tag manifests is right. Payload-Oxum of bag-info.txt, where it is, must agree as well.
 *
 * What is checked are the bytes that are stored, not another reading of them. A listed file that is left out, or stored
 * as a symbolic link, is missing. Memory grows with the manifests and the files of the bag.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BAG_H
#define FIRN_BAG_H

#include "firn/intake.h"

struct firn_bag;

enum firn_bag_kind {
    FIRN_BAG_MISSING,          /* listed, and not taken in */
    FIRN_BAG_MISMATCH,         /* does not have the digest that is listed */
    FIRN_BAG_UNLISTED,         /* a payload file that a manifest should list and does not */
    FIRN_BAG_UNPROVED,         /* a hard link to a file that was not taken in with this bag */
    FIRN_BAG_OXUM,             /* octets or files are not what Payload-Oxum says */
    FIRN_BAG_KINDS
};

struct firn_bag_finding {
    enum firn_bag_kind kind;
    const char *path;          /* from inside the bag; "bag-info.txt" for FIRN_BAG_OXUM */
    const char *detail;        /* which manifest, which numbers; or "" */
};

struct firn_bag_report {
    uint64_t files, bytes;     /* of the payload, as taken in */
    uint64_t findings[FIRN_BAG_KINDS];
    bool valid;                /* complete too: no findings */
    const char *algorithms;    /* "sha256, sha512": by which the payload was checked; lives as long as the bag */
    const char *unknown;       /* payload manifests that cannot be checked here; likewise */
};

/*
 * Reads the tag files of the folder at path. *out is NULL, with FIRN_OK, when it is no bag: no folder, or no bagit.txt.
 *
 * FIRN_OK; FIRN_NO_MEMORY; FIRN_IO; FIRN_BAD_DATA: bagit.txt is there, but what it makes a bag of is not: fault->what
 * tells the file and what is wrong with it, fault->at the line, if it is one.
 */
FIRN_API enum firn_status firn_bag_open(const char *path, const struct firn_memory *memory, struct firn_fault *fault,
                                        struct firn_bag **out);
FIRN_API void firn_bag_free(struct firn_bag *bag);      /* takes NULL */

/* The digests to ask the intake for: enum firn_intake_digest, or'ed. */
FIRN_API unsigned firn_bag_digests(const struct firn_bag *bag);

/*
 * Holds an item against the manifests; items of other operands are passed over. For struct firn_intake_options.item.
 * FIRN_OK or FIRN_NO_MEMORY.
 */
FIRN_API enum firn_status firn_bag_see(struct firn_bag *bag, const struct firn_intake_item *item);

/* When all items have been seen: tells what is wrong, in the order of the manifests. */
FIRN_API void firn_bag_finish(struct firn_bag *bag,
                              void (*finding)(void *self, const struct firn_bag_finding *finding), void *self,
                              struct firn_bag_report *report);

#endif
