/*
 * firn/drill.h - rehearsing damage on a copy: what would come back?
 *
 * Room: care. A drill copies a container into a nameless temporary file, spoils the copy by models of damage, reads
 * everything back from it as restore does, repairs it as scrub does, and compares it with the original, which is only
 * ever read. The same seed spoils the same bytes, on every platform.
 *
 * A drill shows what the container's codes do about the damage that was asked for. Which damage a medium will suffer,
 * it cannot know.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DRILL_H
#define FIRN_DRILL_H

#include "firn/memory.h"

#include <stdbool.h>

enum { FIRN_DRILL_RUNS_MAX = 16 };

/*
 * What shall happen to the bytes of a file; all zero is nothing. Rates are chances from 0 to 1. The models work one
 * after the other, each with random numbers of its own, so that one does not change what another does.
 *
 * The bursts are those of Gilbert (Bell System Technical Journal 39, 1960, pp. 1253-1265) and Elliott (42, 1963, pp.
 * 1977-1997): a chain with a good and a bad state makes a step with every bit. It spends good_to_bad / (good_to_bad +
 * bad_to_good) of its time in the bad state, and 1 / bad_to_good bits on average whenever it is there.
 */
struct firn_drill_damage {
    double flip_rate;                  /* every bit is flipped with this chance */
    double lose_rate;                  /* every 4096 bytes, from byte 0 on, are overwritten with this chance */
    double good_to_bad, bad_to_good;   /* bursts; none when good_to_bad is 0 */
    double wrong_in_good, wrong_in_bad;      /* chances of a bit to be flipped */
    uint64_t runs[FIRN_DRILL_RUNS_MAX];      /* so many bytes in a row are overwritten, somewhere */
    size_t run_count;
    uint64_t cut_bytes;                /* taken off the end */
};

/* What was done to a copy. Flips by several models may fall together, and into what is overwritten or cut off. */
struct firn_drill_spoiled {
    uint64_t bytes;                    /* of the file before */
    uint64_t flipped_bits;
    uint64_t lost_blocks;
    uint64_t bursts, bad_bits;         /* how often the chain was in its bad state, and for how many bits in all */
    uint64_t burst_bits;               /* flipped by it, in either state */
    uint64_t run_bytes, cut_bytes;
};

struct firn_drill_trial {
    uint64_t number;                   /* from 1 */
    struct firn_drill_spoiled spoiled;
    bool recognised;                   /* false: no block was left by which to know the container */
    /* what a restore gives back */
    uint64_t items, items_whole;       /* of the original; of these, whole */
    uint64_t content_bytes_lost;       /* of items whose catalogue entries are there */
    /* what a scrub makes of it, in blocks */
    uint64_t blocks_mended;            /* by their own lanes */
    uint64_t blocks_rebuilt;           /* from the reserve */
    uint64_t blocks_lost;
    uint64_t blocks_wrong;             /* passed as good, but not as in the original: must never be anything but 0 */
    bool whole;                        /* the repaired copy is the original again, byte for byte */
};

struct firn_drill_options {
    const char *path;
    const char *scratch;               /* folder of the copy; NULL: TMPDIR, else /tmp */
    const struct firn_memory *memory;
    unsigned threads;
    struct firn_drill_damage damage;
    uint64_t seed;
    uint64_t trials;                   /* at least 1; each with its own damage */
    /* Called from the calling thread; each may be NULL. */
    void *self;
    bool (*stop)(void *self);
    void (*progress)(void *self, uint64_t bytes_done, uint64_t bytes);
    void (*trial)(void *self, const struct firn_drill_trial *trial);
};

struct firn_drill_report {
    uint64_t file_bytes;
    uint64_t items;                    /* of the original */
    uint64_t trials;                   /* that were done */
    uint64_t whole;                    /* of these */
    uint64_t least_items_whole;        /* of the worst one */
};

/*
 * FIRN_OK            all trials were done; the report tells how they came out
 * FIRN_BAD_ARGUMENT  a rate is no chance, or a run is longer than the file; fault->what names it
 * FIRN_BAD_DATA      the original is damaged itself, so nothing can be compared with it: scrub it first
 * FIRN_CANNOT_CREATE, FIRN_IO: the copy; FIRN_NO_INPUT, FIRN_NOT_CONTAINER, FIRN_FOREIGN_FORMAT, FIRN_NO_MEMORY,
 * FIRN_STOPPED
 */
FIRN_API enum firn_status firn_drill(const struct firn_drill_options *options, struct firn_drill_report *report,
                                     struct firn_fault *fault);

#endif
