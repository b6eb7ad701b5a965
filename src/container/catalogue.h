/*
 * container/catalogue.h - entries, batches, sums and index parts as bytes
 *
 * Room: container. A part of the catalogue is what one window of the writer holds: a batch of entries (or none, inside
 * a large file), the sums of the items that end in it, and the places of its segments. It stands twice: spread over
 * BATCH, SUMS and SEGMENT records where its content is, and whole in an INDEX record. Layout: format-spec/catalogue.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_CATALOGUE_H
#define FIRN_CONTAINER_CATALOGUE_H

#include "firn/item.h"

enum {
    FIRN_CATALOGUE_ENTRY_HEAD_BYTES = 24,
    FIRN_CATALOGUE_EXTENT_BYTES = 16,
    FIRN_CATALOGUE_BATCH_HEAD_BYTES = 40,
    FIRN_CATALOGUE_SUMS_HEAD_BYTES = 32,
    FIRN_CATALOGUE_SUM_BYTES = 34,
    FIRN_CATALOGUE_SEGMENT_HEAD_BYTES = 32,
    FIRN_CATALOGUE_INDEX_HEAD_BYTES = 80,
    FIRN_CATALOGUE_PLACE_BYTES = 24
};

/* --- an entry --- */

/* Bytes an entry takes, or 0 when the item is beyond the limits of the format. */
size_t firn_catalogue_entry_bytes(const struct firn_item *item);
void firn_catalogue_put_entry(const struct firn_item *item, uint8_t *entry);

/* The content of an entry that was put lies in front of that of all others of the batch, in order among its like. */
void firn_catalogue_move_to_front(uint8_t *entry);

/* --- the head of a batch --- */

struct firn_catalogue_batch {
    uint64_t first_item;
    uint64_t content_at;           /* content space where the first entry's content begins */
    uint32_t items;
    uint32_t raw_bytes;            /* of the entries, before coding */
    const uint8_t *coded;          /* pieces: length (u32), coded bytes; each piece at most 1 MiB raw */
    size_t coded_bytes;
};

/* Writes head and seal of a batch body whose pieces stand behind the head already. */
void firn_catalogue_seal_batch(const struct firn_catalogue_batch *batch, uint8_t *body);
/* FIRN_OK, FIRN_MISMATCH (its hash), FIRN_BAD_DATA, FIRN_OVER_LIMIT. Pointers point into body. */
enum firn_status firn_catalogue_open_batch(const uint8_t *body, size_t body_bytes, struct firn_catalogue_batch *batch);
/* Decodes the entries into raw[0 .. batch->raw_bytes). work: firn_segment_decode_work_bytes(). */
enum firn_status firn_catalogue_decode_batch(const struct firn_catalogue_batch *batch, uint8_t *raw, void *work);

/* Steps through the decoded entries of a batch. */
struct firn_catalogue_cursor {
    const uint8_t *raw;
    size_t left;
    uint32_t items_left;
    uint64_t number;
    uint64_t front_at, content_at;         /* where the next content lies, of an item in front and of any other */
    struct firn_item_extent *extents;      /* lent: FIRN_ITEM_EXTENTS_MAX of them */
};
void firn_catalogue_cursor_start(const struct firn_catalogue_batch *batch, const uint8_t *raw,
                                 struct firn_item_extent *extents, struct firn_catalogue_cursor *cursor);
/* FIRN_OK, FIRN_END, FIRN_BAD_DATA. The item points into raw and extents. */
enum firn_status firn_catalogue_next(struct firn_catalogue_cursor *cursor, struct firn_item *item);

/* --- sums --- */

struct firn_catalogue_sum {
    uint64_t item;
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
};

/* A whole sealed body, FIRN_CATALOGUE_SUMS_HEAD_BYTES and FIRN_CATALOGUE_SUM_BYTES for each of 1 .. 65 536 sums. Items
   ascend, and two neighbours are less than 65 536 apart: a window of the writer holds far fewer. */
void firn_catalogue_put_sums(const struct firn_catalogue_sum *sums, uint32_t count, uint8_t *body);
/* How many sums a body holds. FIRN_OK, FIRN_MISMATCH, FIRN_BAD_DATA, FIRN_OVER_LIMIT. */
enum firn_status firn_catalogue_count_sums(const uint8_t *body, size_t body_bytes, uint32_t *count);
/* The sums of a body that was counted; sums has room for all. FIRN_OK or FIRN_BAD_DATA. */
enum firn_status firn_catalogue_get_sums(const uint8_t *body, struct firn_catalogue_sum *sums);

/* --- segments --- */

struct firn_catalogue_place {
    uint64_t content_at;           /* in content space */
    uint64_t at;                   /* of its record in the stream */
    uint32_t raw_bytes;
    uint32_t body_bytes;           /* of its record: head and coded bytes */
};
void firn_catalogue_put_place(const struct firn_catalogue_place *place, uint8_t *bytes);
/* FIRN_OK or FIRN_BAD_DATA when a number is beyond the format */
enum firn_status firn_catalogue_get_place(const uint8_t *bytes, struct firn_catalogue_place *place);
/* The head of a SEGMENT body; hash is that of the raw bytes. */
void firn_catalogue_put_segment(const struct firn_catalogue_place *place, const uint8_t *hash, uint8_t *head);
/* Reads raw_bytes and content_at of a segment whose record is known; FIRN_OK or FIRN_BAD_DATA. */
enum firn_status firn_catalogue_get_segment(const uint8_t *head, struct firn_catalogue_place *place);
enum { FIRN_CATALOGUE_SEGMENT_HASH_AT = 16 };

/* --- index parts --- */

struct firn_catalogue_index {
    uint64_t part;                 /* from 0 */
    uint64_t at, end;              /* the stretch of the stream that it tells of */
    const uint8_t *batch;          /* a whole BATCH body, or nothing */
    uint32_t batch_bytes, segments;
    uint64_t sums_at;              /* place of the SUMS record, 0 when the part has none */
    uint32_t sums_bytes;           /* of its body */
    uint8_t sums_seal[16];         /* the first 16 bytes of its body, so that the index answers for the digests too */
    const uint8_t *place_bytes;
};
size_t firn_catalogue_index_bytes(const struct firn_catalogue_index *index);
void firn_catalogue_put_index(const struct firn_catalogue_index *index, uint8_t *body);
enum firn_status firn_catalogue_open_index(const uint8_t *body, size_t body_bytes, struct firn_catalogue_index *index);

#endif
