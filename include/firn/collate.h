/*
 * firn/collate.h - the best container out of any copies, fragments or raw images
 *
 * Room: care. Sources are read once, from front to back; every good block found in them, at whatever byte, goes to its
 * place in a new file. Damaged ones are kept in a temporary file and, where no source has a good one, put together bit
 * by bit from what all sources say, the block's own hash deciding. What is still missing comes from the reserve, and
 * the title page from its protected copy. What cannot be had stays a hole of zeros or as damaged as it was found, which
 * a later scrub or restore sees as lost.
 *
 * Containers are told apart by their id and geometry. Memory does not grow with their size: a map of eight bytes for
 * each block lies in a temporary file, and beside it a copy of each damaged block that was met before a good one.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_COLLATE_H
#define FIRN_COLLATE_H

#include "firn/store.h"

enum {
    FIRN_COLLATE_CONTAINERS_MAX = 128,
    FIRN_COLLATE_CANDIDATES_MAX = 32       /* damaged copies of one block that are put together; further ones are not */
};

/* Where the title page came from. */
enum firn_collate_title {
    FIRN_COLLATE_TITLE_PROTECTED,      /* from the stream, so it is as it was written */
    FIRN_COLLATE_TITLE_UNPROTECTED,    /* from before block 0 of a source: looks right, but nothing vouches for it */
    FIRN_COLLATE_TITLE_NONE
};

/* What became of one container. Counts are of blocks. */
struct firn_collate_container {
    uint8_t id[8];
    const char *path;                  /* of the file that was written, lent; NULL when nothing could be */
    uint64_t blocks;                   /* that it has, as far as its tags tell */
    uint64_t found;                    /* taken from sources as they stood there */
    uint64_t mended;                   /* taken from a source and mended by their own lanes */
    uint64_t reread;                   /* good at another reading only, or by the majority of the readings */
    uint64_t voted;                    /* put together from several damaged copies */
    uint64_t rebuilt;                  /* from the reserve, or by what else repairs a sheet */
    uint64_t lost;
    uint64_t contradicting;            /* good, but other than a good one of the same place: the first one stays */
    bool end_known;                    /* false: nobody knows how much there was */
    enum firn_collate_title title;
};

/* What one source gave to one container. Counts are of blocks that no source before it gave. */
struct firn_collate_share {
    const char *source;
    uint8_t id[8];
    uint64_t found, mended, reread;
    uint64_t damaged;                  /* kept because no good one was known */
    uint64_t known;                    /* good, but known already */
};

/* What one source was. */
struct firn_collate_source { uint64_t bytes, unreadable_bytes, good, damaged; };

struct firn_collate_options {
    const char *output;                /* the file; or the folder, for files called ID.firn */
    bool into_folder;
    bool replace;                      /* existing files may be taken over */
    const uint8_t *only_id;            /* 8 bytes; NULL: every container */
    const char *scratch;               /* folder of the temporary files; NULL: TMPDIR, else /tmp */
    unsigned readings;                 /* a damaged block is read again so often; 0: not */
    const struct firn_memory *memory;
    unsigned threads;
    /* Called from the calling thread; each may be NULL. */
    void *self;
    bool (*stop)(void *self);
    void (*progress)(void *self, uint64_t bytes_done, uint64_t bytes);
    void (*share)(void *self, const struct firn_collate_share *share);
    void (*container)(void *self, const struct firn_collate_container *container);
};

struct firn_collate;

/* options are lent until free. FIRN_OK, FIRN_NO_MEMORY, FIRN_CANNOT_CREATE. */
FIRN_API enum firn_status firn_collate_open(const struct firn_collate_options *options, struct firn_collate **out,
                                            struct firn_fault *fault);
/* Takes NULL. What was not finished leaves no trace. */
FIRN_API void firn_collate_free(struct firn_collate *collate);

/*
 * Goes through one source, called `name` in reports. Sectors that cannot be read are passed over and counted.
 *
 * FIRN_OK             also when nothing was found
 * FIRN_BAD_ARGUMENT   a second container was found, and there is one file only to write to; the fault names both ids
 * FIRN_OVER_LIMIT     more than FIRN_COLLATE_CONTAINERS_MAX containers
 * FIRN_EXISTS, FIRN_CANNOT_CREATE: the output; FIRN_IO, FIRN_NO_MEMORY, FIRN_STOPPED
 */
FIRN_API enum firn_status firn_collate_take(struct firn_collate *collate, const char *name, struct firn_store *store,
                                            struct firn_collate_source *source, struct firn_fault *fault);

/*
 * Puts together what is missing and gives every file its name; then tells shares and containers. Called once, last.
 *
 * FIRN_OK             see what was told: blocks may be lost
 * FIRN_NOT_CONTAINER  no source had a block
 * FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_IO, FIRN_NO_MEMORY, FIRN_STOPPED; files that were finished before stay
 */
FIRN_API enum firn_status firn_collate_finish(struct firn_collate *collate, struct firn_fault *fault);

#endif
