/*
 * firn/scrub.h - looking after a container: every block checked, what can be mended is mended in place
 *
 * Room: care. Damage is a finding and stands in the report. Only blocks whose right bytes are known (by their own
 * lanes and hash, or from the reserve; where no block is intact any more, with a chance of error below 2^-81) are
 * written, through a journal beside the container, so that a power cut never leaves it worse. Memory is bounded by
 * one sheet.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_SCRUB_H
#define FIRN_SCRUB_H

#include "firn/memory.h"
#include "firn/sheet.h"

#include <stdbool.h>

/* What a block that is not sound was found to be. */
enum firn_scrub_found { FIRN_SCRUB_MENDED, FIRN_SCRUB_REBUILT, FIRN_SCRUB_LOST };

struct firn_scrub_options {
    const char *path;
    const struct firn_memory *memory;
    unsigned threads;                  /* 1 .. 256 */
    bool report_only;                  /* nothing is written; the report tells what would be */
    uint64_t rate_bytes;               /* read no more than so many a second; 0: as fast as it goes */
    unsigned readings;                 /* a block that does not read right is read again so often, 31 at most */
    /* Called now and then from the calling thread; each may be NULL. */
    void *self;
    bool (*stop)(void *self);          /* true ends the scrub with FIRN_STOPPED between two repairs */
    void (*progress)(void *self, uint64_t blocks_done, uint64_t blocks);
    /* A run of lost blocks; runs come in ascending order and do not touch. Block n is at 4096 * (n + 1) of the file. */
    void (*lost)(void *self, uint64_t first_block, uint64_t count);
    /* A block that is not sound; in ascending order. */
    void (*found)(void *self, uint64_t block, enum firn_scrub_found what);
    /*
     * Once, before any block is told of: what the container is, as far as its blocks tell. Returns the first block to
     * check: sheets that begin before it are left out, an earlier scrub has checked them.
     */
    uint64_t (*begin_at)(void *self, const uint8_t id[8], uint64_t blocks);
};

/* What came of the title page, the first 4096 bytes. */
enum firn_scrub_title {
    FIRN_SCRUB_TITLE_SOUND,
    FIRN_SCRUB_TITLE_DAMAGED,          /* its protected copy is there to heal it from */
    FIRN_SCRUB_TITLE_HEALED,
    FIRN_SCRUB_TITLE_UNKNOWN           /* its protected copy is lost, so nobody can tell; it is left alone */
};

/* What was found beside the container at the start. */
enum firn_scrub_journal {
    FIRN_SCRUB_JOURNAL_NONE,
    FIRN_SCRUB_JOURNAL_WAITS,          /* report only: a repair was cut off and waits to be finished */
    FIRN_SCRUB_JOURNAL_DROPPED,        /* a repair was cut off before it touched the container; its journal is gone */
    FIRN_SCRUB_JOURNAL_REPLAYED,       /* a repair was cut off half-way and has been finished */
    FIRN_SCRUB_JOURNAL_STRANGE         /* report only: something there is not this container's; a repair would refuse */
};

struct firn_scrub_report {
    uint8_t id[8];
    struct firn_sheet_geometry geometry;
    uint64_t file_bytes;               /* before */
    uint64_t blocks;                   /* that the container has, as far as its tags tell */
    uint64_t checked;                  /* of these; less than blocks when stopped, or begun at a later one */
    uint64_t reached;                  /* the first block that was not checked, where a sheet begins; else blocks */
    bool end_known;                    /* false: the last sheets may be gone, so nobody knows how much there was */
    /* of the blocks checked; what mended and rebuilt count is mendable only, unless written says otherwise */
    uint64_t mended;                   /* had stray bits that their own lanes put right */
    uint64_t mended_bits;              /* how many bits that were */
    uint64_t rebuilt;                  /* come from the reserve */
    uint64_t lost;
    uint64_t unreadable;               /* of the rebuilt and lost: the medium gave an error, or the file ended before */
    enum firn_scrub_title title;
    enum firn_scrub_journal journal;
    uint64_t replayed;                 /* blocks put in place by finishing a repair that was cut off */
    uint64_t written;                  /* blocks, title page included, that were repaired in place and read back */
    uint64_t refused;                  /* that the medium did not take; status FIRN_IO */
    uint64_t extended_bytes;           /* the file was cut short, and has grown by so much */
    uint64_t foreign_bytes;            /* behind the end of the container; left alone */
    uint64_t reread;                   /* blocks that read right only when they were read again */
    /*
     * 0: blocks are where they belong. Else the head of the file is missing, or bytes were inserted or lost, and they
     * lie in so many pieces: checked where they are, but nothing is written, for a repair could only make it worse.
     */
    uint64_t stretches;
};

/*
 * Checks a container and repairs it in place. Keeps a second scrub of it out by a lock. report is always filled in with
 * what was found so far.
 *
 * FIRN_OK              all of it was checked, and whatever could be repaired was (or, report only, would be); see the
 *                      report
 * FIRN_READ_ONLY       the file cannot be written, and report_only was not asked for; nothing was checked
 * FIRN_CANNOT_CREATE   all of it was checked, but there was something to repair and no journal could be made: nothing
 *                      written
 * FIRN_BAD_DATA        all of it was checked, but something is in the journal's place that must not be touched: nothing
 *                      written
 * FIRN_IO              all of it was checked, but writing failed: what could be written was. Or reading failed from the
 *                      start.
 * FIRN_BUSY            another scrub is at it
 * FIRN_NO_INPUT, FIRN_NOT_CONTAINER, FIRN_FOREIGN_FORMAT, FIRN_NO_MEMORY, FIRN_STOPPED
 */
FIRN_API enum firn_status firn_scrub(const struct firn_scrub_options *options, struct firn_scrub_report *report,
                                     struct firn_fault *fault);

#endif
