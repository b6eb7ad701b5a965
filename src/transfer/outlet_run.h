/*
 * transfer/outlet_run.h - what the folder outlet and the tar outlet share: choosing, hard links, findings
 *
 * Room: transfer.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_OUTLET_RUN_H
#define FIRN_TRANSFER_OUTLET_RUN_H

#include "firn/outlet.h"
#include "transfer/names.h"
#include "transfer/pax.h"
#include "transfer/stored_name.h"

/* A file that chosen hard links lead to. */
struct firn_outlet_target {
    const char *stand_in;          /* the first chosen link, if the file itself is not chosen; else NULL */
    bool met;                      /* its item came by */
    bool written;
    bool incomplete;               /* but not whole */
    const char *place;             /* the name it was given back under */
    uint64_t device, inode;        /* in a folder: of what was written */
};

struct firn_outlet_run {
    const struct firn_outlet_options *options;
    const struct firn_memory *memory;
    struct firn_fault *fault;
    struct firn_outlet_report *report;
    struct firn_pax *pax;
    bool quiet;                             /* take neither counts nor tells */
    struct firn_names *targets;             /* struct firn_outlet_target by stored name */
    /* the item at hand */
    uint64_t number;
    struct archive_entry *entry;            /* lent by pax */
    char name[FIRN_STORED_NAME_ROOM];       /* where it goes: its stored name, or that of the link it stands in for */
    struct firn_outlet_target *target;      /* if hard links lead to it */
    struct firn_outlet_target *link;        /* if it is a hard link: where it leads; NULL if nowhere */
    struct firn_outlet_range *ranges;       /* that are gone */
    size_t range_count, range_capacity;
    uint64_t first_block, last_block, lost_blocks;      /* of the stretch that the next gap is about */
    uint64_t lost_bytes;
};

/* What became of the content of an item. */
enum firn_outlet_verdict { FIRN_OUTLET_IS_WHOLE, FIRN_OUTLET_IS_LOSSY, FIRN_OUTLET_IS_WRONG };

/* Zeroes the report, reads the catalogue for hard links. What firn_reader_walk returns; to be ended in any case. */
enum firn_status firn_outlet_run_start(struct firn_outlet_run *run, struct firn_reader *reader,
                                       const struct firn_outlet_options *options, struct firn_fault *fault,
                                       struct firn_outlet_report *report);
void firn_outlet_run_end(struct firn_outlet_run *run);

/* firn_reader_walk; what a visitor of ours has told in run->fault stays, and report gets what the walk tells of. */
enum firn_status firn_outlet_run_walk(struct firn_outlet_run *run, struct firn_reader *reader,
                                      const struct firn_reader_visitor *visitor);

/*
 * Makes an item the one at hand. False: it is not wanted, or cannot be given back, and that was told and counted.
 * status: FIRN_OK or FIRN_NO_MEMORY.
 */
bool firn_outlet_run_take(struct firn_outlet_run *run, const struct firn_item *item, enum firn_status *status);

/* Where the hard link at hand leads to, if that was given back; else NULL, and it was told. */
struct firn_outlet_target *firn_outlet_run_link(struct firn_outlet_run *run);

/* Notes a gap of the item at hand; adjoining ones become one. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_outlet_run_gap(struct firn_outlet_run *run, uint64_t at, uint64_t count,
                                     enum firn_reader_loss why, uint64_t container_at);

/* Notes the blocks that the next gaps are about. */
void firn_outlet_run_lost_blocks(struct firn_outlet_run *run, uint64_t first, uint64_t last, uint64_t count);

/* What the outcome means; nothing is told yet. */
enum firn_outlet_verdict firn_outlet_run_judge(const struct firn_outlet_run *run,
                                               const struct firn_reader_outcome *outcome);

/* Tells a finding about the item at hand. */
void firn_outlet_run_tell(struct firn_outlet_run *run, enum firn_outlet_kind kind, int os_error, const char *detail);

/* Tells of a verdict that is not WHOLE. kept: the item is given back nevertheless. */
void firn_outlet_run_tell_verdict(struct firn_outlet_run *run, enum firn_outlet_verdict verdict,
                                  const struct firn_item *item, bool kept);

/* Counts the item at hand as given back, and a link to something incomplete as kept. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_outlet_run_written(struct firn_outlet_run *run, bool kept);

/* The content of NAME.gaps for the item at hand. FIRN_OK or FIRN_NO_MEMORY. text is to be put back by the caller. */
enum firn_status firn_outlet_run_gaps(struct firn_outlet_run *run, const struct firn_item *item,
                                      enum firn_outlet_verdict verdict, char **text, size_t *bytes);

/* Tells progress. */
void firn_outlet_run_progress(const struct firn_outlet_run *run);

#endif
