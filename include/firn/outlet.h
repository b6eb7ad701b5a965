/*
 * firn/outlet.h - giving items back: into a folder, or as a pax archive
 *
 * Room: transfer. Only what is whole is given back: no byte lost, and the digest of the file is right where it is
 * known. Everything else is a finding. Names that are absolute, hold `..` or empty components are refused.
 *
 * Patterns choose items by stored name. A hard link is given back as a link to the item it names, if that was given
 * back in the same run. If patterns chose the link but not the file it leads to, the first link chosen becomes the
 * file, and the other links lead to it. For this the catalogue is gone through once more beforehand; memory grows with
 * the number of files that have links and, for a folder, with the number of folders.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_OUTLET_H
#define FIRN_OUTLET_H

#include "firn/pattern.h"
#include "firn/reader.h"

enum firn_outlet_kind {
    FIRN_OUTLET_EXISTS,           /* the place is taken and may not be overwritten */
    FIRN_OUTLET_REFUSED,          /* would be written outside of the target, or is of a kind not allowed here */
    FIRN_OUTLET_LOST,             /* bytes of it are gone */
    FIRN_OUTLET_MISMATCH,         /* its bytes do not have the digest that the catalogue has */
    FIRN_OUTLET_LINK,             /* a hard link to an item that was not given back, or (kept) not whole */
    FIRN_OUTLET_FAILED,           /* the system said no: os_error */
    /* notes: the item is there */
    FIRN_OUTLET_METADATA,         /* some of its metadata could not be set: detail, os_error */
    FIRN_OUTLET_KINDS
};

struct firn_outlet_range {
    uint64_t at, bytes;           /* in the file */
    enum firn_reader_loss why;
    uint64_t container_at;        /* of the first block concerned */
    /* FIRN_READER_LOSS_BLOCKS: first and last block that is lost, and how many from one to the other are; 0: unknown */
    uint64_t first_block, last_block, lost_blocks;
};

struct firn_outlet_finding {
    enum firn_outlet_kind kind;
    const char *path;             /* stored name, or "" when it cannot be read */
    uint64_t number;              /* of the item */
    int os_error;                 /* errno, or 0 */
    const char *detail;           /* a phrase, or "" */
    uint64_t bytes, lost_bytes;   /* of the file; FIRN_OUTLET_LOST: how many of them are gone */
    uint64_t range_count;         /* stretches that are gone */
    const struct firn_outlet_range *ranges;      /* ascending, lent for the call */
    bool kept;                    /* the item was given back nevertheless, incomplete */
};

enum firn_outlet_owner {
    FIRN_OUTLET_OWNER_NONE,       /* everything belongs to who restores */
    FIRN_OUTLET_OWNER_NAMES,      /* as stored, by name where this system knows the name; needs privilege */
    FIRN_OUTLET_OWNER_NUMBERS     /* as stored, by number */
};

/* Everything may be 0 or NULL but memory. */
struct firn_outlet_options {
    const struct firn_memory *memory;
    struct firn_pattern *patterns;             /* NULL: everything */
    bool replace;                              /* folder: files that are there may be replaced; folders never are */
    bool keep_incomplete;                      /* give back what is left of a file that is not whole */
    enum firn_outlet_owner owner;              /* folder only */
    bool devices;                              /* folder: make device nodes; needs privilege. Without: refused */
    bool sync;                                 /* folder: all of it is on the medium at the end */
    void *self;
    void (*finding)(void *self, const struct firn_outlet_finding *finding);
    void (*progress)(void *self, uint64_t items, uint64_t bytes);
};

struct firn_outlet_report {
    uint64_t chosen;                           /* items that patterns chose */
    uint64_t written;                          /* items given back whole */
    uint64_t kept;                             /* items given back incomplete */
    uint64_t bytes;                            /* of file content written, without holes */
    uint64_t lost_bytes;                       /* of files that were chosen */
    uint64_t items_unknown;                    /* items whose catalogue entries are gone */
    bool cut_short;                            /* the end of the container is gone: there may have been more items */
    uint64_t findings[FIRN_OUTLET_KINDS];
};

/*
 * Restores into a folder, which is made if it is not there (not the folders above it). Nothing outside it is touched
 * whatever the container says: every step goes from folder to folder by descriptor, and a symbolic link in the way is
 * never followed (FIRN_OUTLET_REFUSED). The working directory of the process is left alone.
 *
 * Every item is written beside its place under a name that begins with `.firn-`, and gets its name when it is whole and
 * has its metadata; a run that is killed leaves at most one such file. A folder that is there already is fine for a
 * folder item, and keeps its own metadata unless replace is set; anything else in the way is FIRN_OUTLET_EXISTS unless
 * replace is set. Folders get their metadata at the end.
 *
 * Modes are as stored, whatever the umask; but set-user-id and set-group-id are dropped where the owner or group that
 * they mean was not restored. Attributes outside the `user.` name space, such as security.capability, are restored
 * together with owners only.
 *
 * keep_incomplete: gaps read as zeros, and NAME.gaps beside the file NAME lists them: one line that says what it is,
 * then for each gap its offset, its length, why, and where on the medium. If NAME.gaps cannot be made, NAME is not
 * either.
 *
 * FIRN_OK also when there are findings; FIRN_NO_MEMORY; FIRN_CANNOT_CREATE: the folder; FIRN_IO: the medium is full or
 * failing; what firn_reader_walk returns. report is always filled in.
 */
FIRN_API enum firn_status firn_outlet_folder(struct firn_reader *reader, const char *folder,
                                             const struct firn_outlet_options *options, struct firn_fault *fault,
                                             struct firn_outlet_report *report);

/*
 * Writes a pax archive (POSIX.1-2001) to a descriptor, which may be a pipe: items in the order of the catalogue, sparse
 * files with their map (GNU format 1.0 within pax). The same items give the same bytes.
 *
 * Each file is read twice, since an archive cannot take a beginning back. keep_incomplete: gaps are zeros, and an item
 * NAME.gaps follows. A file that turns out wrong after its beginning was written is in the archive, and a finding with
 * `kept` says so.
 *
 * As firn_outlet_folder; FIRN_IO when writing fails.
 */
FIRN_API enum firn_status firn_outlet_tar(struct firn_reader *reader, int descriptor,
                                          const struct firn_outlet_options *options, struct firn_fault *fault,
                                          struct firn_outlet_report *report);

#endif
