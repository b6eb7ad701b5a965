/*
 * container/parts.h - the catalogue of a container, part by part
 *
 * Room: container. A part comes from its INDEX record; where that is gone, from the BATCH, SEGMENT and SUMS records in
 * the stream, found again after every gap.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_PARTS_H
#define FIRN_CONTAINER_PARTS_H

#include "container/catalogue.h"
#include "container/record.h"
#include "container/sheets.h"

struct firn_parts;

/* What the colophon says. */
struct firn_parts_colophon {
    bool found;
    uint64_t items, withdrawn, content_bytes, stored_bytes, segments, coded_bytes, parts, index_at;
    uint64_t at;                                /* of the colophon itself */
    uint8_t catalogue_sha256[FIRN_ITEM_SHA256_BYTES];
};

/* One part; lent until the next call to firn_parts_next. */
struct firn_parts_part {
    bool has_batch;
    struct firn_catalogue_batch batch;
    const uint8_t *entries;                     /* decoded */
    const struct firn_catalogue_sum *sums;      /* ascending; of an index part after firn_parts_sums */
    size_t sum_count;
    const struct firn_catalogue_place *places;  /* ascending in content space */
    size_t place_count;
    bool complete;                              /* nothing of it was lost: what is not told of was never written */
};

/* sheets are lent. FIRN_OK also when neither colophon nor index can be found. */
enum firn_status firn_parts_open(struct firn_sheets *sheets, const struct firn_memory *memory, struct firn_parts **out);
void firn_parts_close(struct firn_parts *parts);      /* takes NULL */

const struct firn_parts_colophon *firn_parts_colophon_of(const struct firn_parts *parts);

/* Back to the first part. */
void firn_parts_rewind(struct firn_parts *parts);
/* FIRN_OK, FIRN_END, FIRN_NO_MEMORY, FIRN_STOPPED. What is damaged is passed over. */
enum firn_status firn_parts_next(struct firn_parts *parts, struct firn_parts_part *part);
/*
 * Fetches the sums of the part at hand where that takes another read. A SUMS record that is lost leaves the part
 * without sums. FIRN_OK, FIRN_NO_MEMORY, FIRN_STOPPED.
 */
enum firn_status firn_parts_sums(struct firn_parts *parts, struct firn_parts_part *part);
/* Parts since the last rewind whose INDEX record was gone. */
uint64_t firn_parts_index_lost(const struct firn_parts *parts);

/*
 * Finds the next record at or after `at`, below limit; passes over what is damaged and says so in *skipped (which is
 * never set back). FIRN_OK, FIRN_END, FIRN_NO_MEMORY, FIRN_STOPPED.
 */
enum firn_status firn_parts_find_record(struct firn_sheets *sheets, uint64_t at, uint64_t limit,
                                        struct firn_record *record, bool *skipped);

#endif
