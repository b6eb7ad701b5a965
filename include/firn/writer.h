/*
 * firn/writer.h - writing a container, item by item, to a file or a pipe
 *
 * Room: container. Memory is bounded by the sheet, whatever the collection. Same items, same options, same nonce: the
 * same bytes, whatever the number of threads. Layout of what is written: format-spec/.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_WRITER_H
#define FIRN_WRITER_H

#include "firn/item.h"
#include "firn/segment.h"
#include "firn/sheet.h"
#include "firn/store.h"

enum { FIRN_WRITER_NONCE_BYTES = 16 };

/*
 * What the title page says of the collection; UTF-8 without control characters; NULL or "" where there is nothing to
 * say.
 */
struct firn_writer_title {
    const char *accession, *title, *custodian, *note;
    int64_t date;                      /* seconds since 1970-01-01T00:00:00Z */
};

struct firn_writer_options {
    struct firn_store *store;          /* lent until free */
    struct firn_store *spool;          /* lent; a temporary file that the catalogue waits in */
    const struct firn_memory *memory;
    unsigned threads;                  /* 1 .. 256 */
    struct firn_sheet_geometry geometry;
    enum firn_segment_effort effort;
    struct firn_writer_title title;
    bool carry_reader;                 /* put the specification of the format and the source of a reader in front */
    uint8_t nonce[FIRN_WRITER_NONCE_BYTES];   /* makes the id the container's own; it also depends on what is packed */
    /* asked now and then; true stops the work with FIRN_STOPPED. May be NULL. */
    bool (*stop)(void *self);
    void *stop_self;
};

struct firn_writer_totals {
    uint64_t items, withdrawn;         /* withdrawn: announced, but the source could not be read whole */
    uint64_t content_bytes;            /* of all files, holes included */
    uint64_t stored_bytes;             /* without holes, before coding */
    uint64_t coded_bytes;              /* after coding */
    uint64_t segments;
    uint64_t catalogue_bytes;          /* BATCH, SUMS and INDEX records */
    uint64_t blocks, data_blocks;
    uint64_t container_bytes;
    uint8_t id[8];
    uint8_t catalogue_sha256[FIRN_ITEM_SHA256_BYTES];
};

struct firn_writer;

/* fault is filled in by this and every later call that fails. FIRN_OK, FIRN_NO_MEMORY, FIRN_BAD_ARGUMENT, FIRN_BUSY. */
FIRN_API enum firn_status firn_writer_make(const struct firn_writer_options *options, struct firn_fault *fault,
                                           struct firn_writer **out);

/* Takes NULL. A writer that was not finished leaves its store unfinished. */
FIRN_API void firn_writer_free(struct firn_writer *writer);

/*
 * Announces the next item. Of `item` the fields pax, pax_bytes, has_content, bytes, extents and extent_count are read;
 * the arrays are lent for the call. Every item is ended (firn_writer_end) or withdrawn before the next one. Number,
 * place and digest are the writer's affair.
 */
FIRN_API enum firn_status firn_writer_item(struct firn_writer *writer, const struct firn_item *item);

/* Bytes of the announced item's extents, in order; in as many calls as it takes. */
FIRN_API enum firn_status firn_writer_content(struct firn_writer *writer, const uint8_t *bytes, size_t count);

/* Ends the item; all its stored bytes must have come. sha256 (may be NULL) gets the digest of an item with content. */
FIRN_API enum firn_status firn_writer_end(struct firn_writer *writer, uint8_t *sha256);

/*
 * Takes the announced item back because its source failed. *traceless tells whether no trace of it is left; otherwise
 * it stands in the catalogue as an item whose content was never written, and readers say so.
 */
FIRN_API enum firn_status firn_writer_withdraw(struct firn_writer *writer, bool *traceless);

/* Writes what is left: index, colophon, last sheet; does not sync. No other call but free may follow. */
FIRN_API enum firn_status firn_writer_finish(struct firn_writer *writer, struct firn_writer_totals *totals);

#endif
