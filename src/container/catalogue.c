/* container/catalogue.c - entries, batches, sums and index parts as bytes: format-spec/catalogue.md */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/catalogue.h"

#include "base/bytes.h"
#include "base/limits.h"
#include "container/slim.h"
#include "firn/segment.h"
#include "guard/hash.h"

enum { SEALED_AT = FIRN_HASH_BYTES };      /* a sealed body is the hash of the rest, then the rest */
enum { FLAG_CONTENT = 1, FLAG_EXTENTS = 2, FLAG_SLIM = 4, FLAG_FRONT = 8, FLAGS = 15 };

/* Holes are digested as zeros; beyond this, a few bytes of catalogue could keep a reader busy for days. */
#define HOLE_BYTES_MAX (UINT64_C(1) << 43)

static void seal(uint8_t *body, size_t body_bytes)
{
    firn_hash_put(body + SEALED_AT, body_bytes - SEALED_AT, body);
}

static enum firn_status check_seal(const uint8_t *body, size_t body_bytes, size_t least)
{
    if (body_bytes < least)
        return FIRN_BAD_DATA;
    return firn_hash_matches(body + SEALED_AT, body_bytes - SEALED_AT, body) ? FIRN_OK : FIRN_MISMATCH;
}

/* A file without holes is one extent; the entry then lists none. */
static bool lists_extents(const struct firn_item *item)
{
    if (!item->has_content)
        return false;
    if (item->bytes == 0)
        return false;
    return item->extent_count != 1 || item->extents[0].at != 0 || item->extents[0].bytes != item->bytes;
}

static bool extents_valid(const struct firn_item_extent *extents, size_t count, uint64_t file_bytes, uint64_t *stored)
{
    uint64_t end = 0;

    *stored = 0;
    for (size_t i = 0; i < count; i++) {
        if (extents[i].bytes == 0 || extents[i].at < end || extents[i].at > file_bytes ||
            extents[i].bytes > file_bytes - extents[i].at)
            return false;
        end = extents[i].at + extents[i].bytes;
        *stored += extents[i].bytes;
    }
    return file_bytes - *stored <= HOLE_BYTES_MAX;
}

size_t firn_catalogue_entry_bytes(const struct firn_item *item)
{
    uint64_t stored;
    size_t extents = lists_extents(item) ? item->extent_count : 0;

    if (item->pax_bytes == 0 || item->pax_bytes % 512 != 0 || item->pax_bytes > FIRN_LIMIT_ENTRY_BYTES / 2)
        return 0;
    if (item->extent_count > FIRN_ITEM_EXTENTS_MAX || item->bytes > UINT64_MAX / 4)
        return 0;
    if (!item->has_content && (item->bytes > 0 || item->extent_count > 0))
        return 0;
    if (!extents_valid(item->extents, item->extent_count, item->bytes, &stored))
        return 0;
    return FIRN_CATALOGUE_ENTRY_HEAD_BYTES + extents * FIRN_CATALOGUE_EXTENT_BYTES + item->pax_bytes;
}

void firn_catalogue_put_entry(const struct firn_item *item, uint8_t *entry)
{
    bool listed = lists_extents(item);
    size_t extents = listed ? item->extent_count : 0;
    uint8_t *at = entry + FIRN_CATALOGUE_ENTRY_HEAD_BYTES;

    firn_bytes_put32(entry, (uint32_t)firn_catalogue_entry_bytes(item));
    firn_bytes_put32(entry + 4, (uint32_t)item->pax_bytes);
    firn_bytes_put32(entry + 8, (uint32_t)extents);
    firn_bytes_put64(entry + 16, item->bytes);
    for (size_t i = 0; i < extents; i++, at += FIRN_CATALOGUE_EXTENT_BYTES) {
        firn_bytes_put64(at, item->extents[i].at);
        firn_bytes_put64(at + 8, item->extents[i].bytes);
    }
    memcpy(at, item->pax, item->pax_bytes);
    firn_bytes_put32(entry + 12, (item->has_content ? FLAG_CONTENT : 0) | (listed ? FLAG_EXTENTS : 0) |
                                     (firn_slim_down(at, item->pax_bytes, item->bytes) ? FLAG_SLIM : 0));
}

void firn_catalogue_seal_batch(const struct firn_catalogue_batch *batch, uint8_t *body)
{
    firn_bytes_put64(body + 16, batch->first_item);
    firn_bytes_put64(body + 24, batch->content_at);
    firn_bytes_put32(body + 32, batch->items);
    firn_bytes_put32(body + 36, batch->raw_bytes);
    seal(body, FIRN_CATALOGUE_BATCH_HEAD_BYTES + batch->coded_bytes);
}

enum firn_status firn_catalogue_open_batch(const uint8_t *body, size_t body_bytes, struct firn_catalogue_batch *batch)
{
    enum firn_status status = check_seal(body, body_bytes, FIRN_CATALOGUE_BATCH_HEAD_BYTES);

    if (status != FIRN_OK)
        return status;
    batch->first_item = firn_bytes_get64(body + 16);
    batch->content_at = firn_bytes_get64(body + 24);
    batch->items = firn_bytes_get32(body + 32);
    batch->raw_bytes = firn_bytes_get32(body + 36);
    batch->coded = body + FIRN_CATALOGUE_BATCH_HEAD_BYTES;
    batch->coded_bytes = body_bytes - FIRN_CATALOGUE_BATCH_HEAD_BYTES;
    if (batch->raw_bytes == 0 || batch->raw_bytes > FIRN_LIMIT_BATCH_RAW_BYTES)
        return FIRN_OVER_LIMIT;
    if (batch->items == 0 || batch->items > batch->raw_bytes / FIRN_CATALOGUE_ENTRY_HEAD_BYTES ||
        batch->first_item > UINT64_MAX / 4 || batch->content_at > UINT64_MAX / 4)
        return FIRN_BAD_DATA;
    return FIRN_OK;
}

/* Whether sizes of an entry agree with one another and with what is left. */
static bool sizes_agree(const uint8_t *entry, size_t left)
{
    size_t bytes, pax, extents;

    if (left < FIRN_CATALOGUE_ENTRY_HEAD_BYTES)
        return false;
    bytes = firn_bytes_get32(entry);
    pax = firn_bytes_get32(entry + 4);
    extents = firn_bytes_get32(entry + 8);
    return bytes <= left && bytes <= FIRN_LIMIT_ENTRY_BYTES && extents <= FIRN_ITEM_EXTENTS_MAX && pax != 0 &&
           pax % 512 == 0 && pax <= FIRN_LIMIT_ENTRY_BYTES &&
           bytes == FIRN_CATALOGUE_ENTRY_HEAD_BYTES + extents * FIRN_CATALOGUE_EXTENT_BYTES + pax;
}

/* Headers get back what was left out of them; an entry that makes no sense ends it, and is met again later. */
static void fill_headers(uint8_t *raw, size_t left)
{
    while (sizes_agree(raw, left)) {
        size_t bytes = firn_bytes_get32(raw), pax = firn_bytes_get32(raw + 4);

        if ((firn_bytes_get32(raw + 12) & FLAG_SLIM) != 0)
            firn_slim_fill(raw + bytes - pax, pax, firn_bytes_get64(raw + 16));
        raw += bytes;
        left -= bytes;
    }
}

enum firn_status firn_catalogue_decode_batch(const struct firn_catalogue_batch *batch, uint8_t *raw, void *work)
{
    const uint8_t *from = batch->coded;
    size_t left = batch->coded_bytes, done = 0;

    while (done < batch->raw_bytes) {
        size_t piece = batch->raw_bytes - done, coded;
        enum firn_status status;

        if (piece > FIRN_LIMIT_SEGMENT_RAW_BYTES)
            piece = FIRN_LIMIT_SEGMENT_RAW_BYTES;
        if (left < 4)
            return FIRN_BAD_DATA;
        coded = firn_bytes_get32(from);
        if (coded > left - 4)
            return FIRN_BAD_DATA;
        status = firn_segment_decode(from + 4, coded, raw + done, piece, work);
        if (status != FIRN_OK)
            return status;
        from += 4 + coded;
        left -= 4 + coded;
        done += piece;
    }
    if (left != 0)
        return FIRN_BAD_DATA;
    fill_headers(raw, batch->raw_bytes);
    return FIRN_OK;
}

void firn_catalogue_move_to_front(uint8_t *entry)
{
    firn_bytes_put32(entry + 12, firn_bytes_get32(entry + 12) | FLAG_FRONT);
}

/* Stored bytes that an entry tells of, sound or not: what is not is met again when the entry is read. */
static uint64_t stored_bytes_of(const uint8_t *entry)
{
    const uint8_t *at = entry + FIRN_CATALOGUE_ENTRY_HEAD_BYTES;
    uint64_t stored = 0;

    if ((firn_bytes_get32(entry + 12) & FLAG_EXTENTS) == 0)
        return firn_bytes_get64(entry + 16);
    for (uint32_t i = firn_bytes_get32(entry + 8); i > 0; i--, at += FIRN_CATALOGUE_EXTENT_BYTES)
        stored += firn_bytes_get64(at + 8);
    return stored;
}

/* Content of the entries that lie in front. */
static uint64_t front_bytes(const uint8_t *raw, size_t left)
{
    uint64_t bytes = 0;

    while (sizes_agree(raw, left)) {
        size_t entry = firn_bytes_get32(raw);

        if ((firn_bytes_get32(raw + 12) & FLAG_FRONT) != 0)
            bytes += stored_bytes_of(raw);
        raw += entry;
        left -= entry;
    }
    return bytes;
}

void firn_catalogue_cursor_start(const struct firn_catalogue_batch *batch, const uint8_t *raw,
                                 struct firn_item_extent *extents, struct firn_catalogue_cursor *cursor)
{
    *cursor = (struct firn_catalogue_cursor){
        .raw = raw, .left = batch->raw_bytes, .items_left = batch->items, .number = batch->first_item,
        .front_at = batch->content_at, .content_at = batch->content_at + front_bytes(raw, batch->raw_bytes),
        .extents = extents
    };
}

/* Extents of the entry at raw, told or implied, into the cursor's array. */
static bool read_extents(struct firn_catalogue_cursor *cursor, const uint8_t *raw, bool listed, struct firn_item *item)
{
    const uint8_t *at = raw + FIRN_CATALOGUE_ENTRY_HEAD_BYTES;

    item->extents = cursor->extents;
    if (!listed) {
        cursor->extents[0] = (struct firn_item_extent){ 0, item->bytes };
        item->extent_count = item->bytes > 0 ? 1 : 0;
    } else {
        for (size_t i = 0; i < item->extent_count; i++, at += FIRN_CATALOGUE_EXTENT_BYTES)
            cursor->extents[i] = (struct firn_item_extent){ firn_bytes_get64(at), firn_bytes_get64(at + 8) };
    }
    return extents_valid(item->extents, item->extent_count, item->bytes, &item->stored_bytes);
}

enum firn_status firn_catalogue_next(struct firn_catalogue_cursor *cursor, struct firn_item *item)
{
    const uint8_t *raw = cursor->raw;
    size_t entry, extents;
    uint64_t *at;
    uint32_t flags;

    if (cursor->items_left == 0)
        return cursor->left == 0 ? FIRN_END : FIRN_BAD_DATA;
    if (!sizes_agree(raw, cursor->left))
        return FIRN_BAD_DATA;
    entry = firn_bytes_get32(raw);
    flags = firn_bytes_get32(raw + 12);
    extents = firn_bytes_get32(raw + 8);
    *item = (struct firn_item){
        .number = cursor->number, .pax_bytes = firn_bytes_get32(raw + 4), .has_content = (flags & FLAG_CONTENT) != 0,
        .bytes = firn_bytes_get64(raw + 16), .extent_count = extents
    };
    if (flags > FLAGS || (extents > 0 && (flags & FLAG_EXTENTS) == 0) ||
        item->bytes > UINT64_MAX / 4 ||
        (!item->has_content && (item->bytes > 0 || (flags & (FLAG_EXTENTS | FLAG_FRONT)) != 0)))
        return FIRN_BAD_DATA;
    if (!read_extents(cursor, raw, (flags & FLAG_EXTENTS) != 0, item))
        return FIRN_BAD_DATA;
    item->pax = raw + entry - item->pax_bytes;
    cursor->raw += entry;
    cursor->left -= entry;
    cursor->items_left--;
    cursor->number++;
    at = (flags & FLAG_FRONT) != 0 ? &cursor->front_at : &cursor->content_at;
    item->content_at = *at;
    *at += item->stored_bytes;
    return item->content_at > UINT64_MAX / 2 || *at > UINT64_MAX / 2 ? FIRN_BAD_DATA : FIRN_OK;
}

void firn_catalogue_put_sums(const struct firn_catalogue_sum *sums, uint32_t count, uint8_t *body)
{
    uint8_t *steps = body + FIRN_CATALOGUE_SUMS_HEAD_BYTES, *digests = steps + 2 * (size_t)count;

    firn_bytes_put32(body + 16, count);
    firn_bytes_put32(body + 20, 0);
    firn_bytes_put64(body + 24, sums[0].item);
    for (uint32_t i = 0; i < count; i++) {
        firn_bytes_put16(steps + 2 * (size_t)i, (uint16_t)(i == 0 ? 0 : sums[i].item - sums[i - 1].item));
        memcpy(digests + (size_t)i * FIRN_ITEM_SHA256_BYTES, sums[i].sha256, FIRN_ITEM_SHA256_BYTES);
    }
    seal(body, FIRN_CATALOGUE_SUMS_HEAD_BYTES + (size_t)count * FIRN_CATALOGUE_SUM_BYTES);
}

enum firn_status firn_catalogue_count_sums(const uint8_t *body, size_t body_bytes, uint32_t *count)
{
    enum firn_status status = check_seal(body, body_bytes, FIRN_CATALOGUE_SUMS_HEAD_BYTES);

    if (status != FIRN_OK)
        return status;
    *count = firn_bytes_get32(body + 16);
    if (*count > FIRN_LIMIT_PART_SUMS)
        return FIRN_OVER_LIMIT;
    return *count > 0 && firn_bytes_get64(body + 24) <= UINT64_MAX / 4 &&
           body_bytes == FIRN_CATALOGUE_SUMS_HEAD_BYTES + (size_t)*count * FIRN_CATALOGUE_SUM_BYTES ? FIRN_OK
                                                                                                     : FIRN_BAD_DATA;
}

enum firn_status firn_catalogue_get_sums(const uint8_t *body, struct firn_catalogue_sum *sums)
{
    uint32_t count = firn_bytes_get32(body + 16);
    const uint8_t *steps = body + FIRN_CATALOGUE_SUMS_HEAD_BYTES, *digests = steps + 2 * (size_t)count;
    uint64_t item = firn_bytes_get64(body + 24);

    for (uint32_t i = 0; i < count; i++) {
        uint16_t step = firn_bytes_get16(steps + 2 * (size_t)i);

        if ((i == 0) != (step == 0))
            return FIRN_BAD_DATA;      /* the first item is told whole, and no item has two sums */
        item += step;
        sums[i].item = item;
        memcpy(sums[i].sha256, digests + (size_t)i * FIRN_ITEM_SHA256_BYTES, FIRN_ITEM_SHA256_BYTES);
    }
    return FIRN_OK;
}

void firn_catalogue_put_place(const struct firn_catalogue_place *place, uint8_t *bytes)
{
    firn_bytes_put64(bytes, place->content_at);
    firn_bytes_put64(bytes + 8, place->at);
    firn_bytes_put32(bytes + 16, place->raw_bytes);
    firn_bytes_put32(bytes + 20, place->body_bytes);
}

static enum firn_status check_place(const struct firn_catalogue_place *place)
{
    if (place->raw_bytes == 0 || place->raw_bytes > FIRN_LIMIT_SEGMENT_RAW_BYTES ||
        place->body_bytes <= FIRN_CATALOGUE_SEGMENT_HEAD_BYTES ||
        place->body_bytes > FIRN_CATALOGUE_SEGMENT_HEAD_BYTES + firn_segment_bound(FIRN_LIMIT_SEGMENT_RAW_BYTES) ||
        place->content_at > UINT64_MAX / 4)
        return FIRN_BAD_DATA;
    return FIRN_OK;
}

enum firn_status firn_catalogue_get_place(const uint8_t *bytes, struct firn_catalogue_place *place)
{
    place->content_at = firn_bytes_get64(bytes);
    place->at = firn_bytes_get64(bytes + 8);
    place->raw_bytes = firn_bytes_get32(bytes + 16);
    place->body_bytes = firn_bytes_get32(bytes + 20);
    return check_place(place);
}

void firn_catalogue_put_segment(const struct firn_catalogue_place *place, const uint8_t *hash, uint8_t *head)
{
    firn_bytes_put32(head, place->raw_bytes);
    firn_bytes_put32(head + 4, 0);
    firn_bytes_put64(head + 8, place->content_at);
    memcpy(head + FIRN_CATALOGUE_SEGMENT_HASH_AT, hash, FIRN_HASH_BYTES);
}

enum firn_status firn_catalogue_get_segment(const uint8_t *head, struct firn_catalogue_place *place)
{
    place->raw_bytes = firn_bytes_get32(head);
    place->content_at = firn_bytes_get64(head + 8);
    return check_place(place);
}

size_t firn_catalogue_index_bytes(const struct firn_catalogue_index *index)
{
    return FIRN_CATALOGUE_INDEX_HEAD_BYTES + index->batch_bytes + (size_t)index->segments * FIRN_CATALOGUE_PLACE_BYTES;
}

void firn_catalogue_put_index(const struct firn_catalogue_index *index, uint8_t *body)
{
    size_t places = (size_t)index->segments * FIRN_CATALOGUE_PLACE_BYTES;
    uint8_t *at = body + FIRN_CATALOGUE_INDEX_HEAD_BYTES;

    firn_bytes_put64(body + 16, index->part);
    firn_bytes_put64(body + 24, index->at);
    firn_bytes_put64(body + 32, index->end);
    firn_bytes_put32(body + 40, index->batch_bytes);
    firn_bytes_put32(body + 44, index->segments);
    firn_bytes_put64(body + 48, index->sums_at);
    firn_bytes_put32(body + 56, index->sums_bytes);
    firn_bytes_put32(body + 60, 0);
    memcpy(body + 64, index->sums_seal, sizeof index->sums_seal);
    if (index->batch_bytes > 0)
        memcpy(at, index->batch, index->batch_bytes);
    if (places > 0)
        memcpy(at + index->batch_bytes, index->place_bytes, places);
    seal(body, firn_catalogue_index_bytes(index));
}

enum firn_status firn_catalogue_open_index(const uint8_t *body, size_t body_bytes, struct firn_catalogue_index *index)
{
    enum firn_status status = check_seal(body, body_bytes, FIRN_CATALOGUE_INDEX_HEAD_BYTES);

    if (status != FIRN_OK)
        return status;
    index->part = firn_bytes_get64(body + 16);
    index->at = firn_bytes_get64(body + 24);
    index->end = firn_bytes_get64(body + 32);
    index->batch_bytes = firn_bytes_get32(body + 40);
    index->segments = firn_bytes_get32(body + 44);
    index->sums_at = firn_bytes_get64(body + 48);
    index->sums_bytes = firn_bytes_get32(body + 56);
    memcpy(index->sums_seal, body + 64, sizeof index->sums_seal);
    if (index->end < index->at || index->segments > FIRN_LIMIT_PART_SEGMENTS ||
        index->batch_bytes > body_bytes || firn_catalogue_index_bytes(index) != body_bytes)
        return FIRN_BAD_DATA;
    index->batch = body + FIRN_CATALOGUE_INDEX_HEAD_BYTES;
    index->place_bytes = index->batch + index->batch_bytes;
    return FIRN_OK;
}
