/*
 * transfer/intake_run.h - what taking in folders and taking in archives share: findings, counters, the way into the
 * writer
 *
 * Room: transfer.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_INTAKE_RUN_H
#define FIRN_TRANSFER_INTAKE_RUN_H

#include "firn/intake.h"
#include "transfer/intake_more.h"
#include "transfer/pax.h"

enum { FIRN_INTAKE_RUN_BUFFER_BYTES = 1 << 20 };

struct firn_intake_run {
    struct firn_writer *writer;
    const struct firn_intake_options *options;
    const struct firn_memory *memory;
    struct firn_fault *fault;
    struct firn_intake_report *report;
    struct firn_pax *pax;
    uint8_t *buffer;                     /* FIRN_INTAKE_RUN_BUFFER_BYTES, for content on its way */
    struct firn_intake_more *more;       /* digests beyond SHA-256, NULL when none are asked for */
};

/* report is zeroed. FIRN_OK, FIRN_NO_MEMORY, FIRN_FOREIGN_FORMAT; to be ended in any case. */
enum firn_status firn_intake_run_start(struct firn_intake_run *run, struct firn_writer *writer,
                                       const struct firn_intake_options *options, struct firn_fault *fault,
                                       struct firn_intake_report *report);
void firn_intake_run_end(struct firn_intake_run *run);

/* Tells and counts a finding. */
void firn_intake_run_tell(struct firn_intake_run *run, enum firn_intake_kind kind, const char *path, int os_error,
                          const char *detail);

/* FIRN_OK, or FIRN_STOPPED when the caller wants no more. */
enum firn_status firn_intake_run_go_on(const struct firn_intake_run *run);

/*
 * Announces an item to the writer. Of `item` has_content, bytes, extents and extent_count are read; the header is made
 * of the entry. If the header becomes too long, attributes and lists are left out and FIRN_INTAKE_PARTIAL tells of it.
 *
 * path  of the source, for findings
 *
 * FIRN_OK; FIRN_END: cannot be stored, FIRN_INTAKE_UNSUPPORTED was told, nothing was announced; else the work is over.
 */
enum firn_status firn_intake_run_announce(struct firn_intake_run *run, struct archive_entry *entry,
                                          const struct firn_item *item, const char *path);

/* Content of the announced item, counted. bytes NULL: zeros. */
enum firn_status firn_intake_run_content(struct firn_intake_run *run, const uint8_t *bytes, uint64_t count);

/*
 * Ends the announced item and tells of it. sha256 (may be NULL) gets the digest of an item with content; told->sha256
 * is filled in if it has content, and lent to callbacks only.
 */
enum firn_status firn_intake_run_stored(struct firn_intake_run *run, struct firn_intake_item *told, uint8_t *sha256);

/* Withdraws the announced item and tells why. */
enum firn_status firn_intake_run_withdraw(struct firn_intake_run *run, enum firn_intake_kind kind, const char *path,
                                          int os_error, const char *detail);

#endif
