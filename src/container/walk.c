/* container/walk.c - items and content brought together */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/walk.h"

#include "base/memory.h"
#include "container/digest.h"

/*
 * Items come in the order of content space, and so do segments. An item whose content goes on in the next part is the
 * last one of its part; so going on to the next part for content never passes over an item.
 */
struct walk {
    struct firn_parts *parts;
    struct firn_decoder *decoder;
    const struct firn_memory *memory;
    const struct firn_reader_visitor *visitor;
    struct firn_digest *digest;
    struct firn_parts_part part;
    bool ended;                              /* there is no further part */
    struct firn_catalogue_cursor cursor;
    struct firn_item_extent *cursor_extents;
    size_t place;                            /* next place that may matter */
    /* the item at hand, copied: it outlives its part */
    struct firn_item item;
    uint8_t *pax;
    size_t pax_capacity;
    struct firn_item_extent *extents;
    size_t extents_capacity;
    /* how far it is */
    uint64_t stored_at;                      /* stored bytes done */
    size_t extent;                           /* extent that the next byte is in */
    uint64_t extent_at;                      /* and how far into it */
    uint64_t digested;                       /* bytes of the file that the digest has */
    struct firn_reader_outcome outcome;
};

static enum firn_status next_part(struct walk *walk)
{
    enum firn_status status = firn_parts_next(walk->parts, &walk->part);

    walk->place = 0;
    firn_decoder_forget(walk->decoder);
    walk->cursor.items_left = 0;
    walk->cursor.left = 0;
    if (status != FIRN_OK) {
        walk->part.place_count = 0;
        walk->ended = status == FIRN_END;
        return status;
    }
    if (walk->visitor->bytes != NULL || walk->visitor->digests)
        status = firn_parts_sums(walk->parts, &walk->part);
    if (status == FIRN_OK && walk->part.has_batch)
        firn_catalogue_cursor_start(&walk->part.batch, walk->part.entries, walk->cursor_extents, &walk->cursor);
    return status;
}

/* Copies the item that the cursor lent. */
static enum firn_status keep_item(struct walk *walk, const struct firn_item *item)
{
    void *pax = walk->pax, *extents = walk->extents;
    enum firn_status status = firn_memory_grow(walk->memory, &pax, &walk->pax_capacity, item->pax_bytes, 1);

    walk->pax = pax;
    if (status == FIRN_OK)
        status = firn_memory_grow(walk->memory, &extents, &walk->extents_capacity, item->extent_count + 1,
                                  sizeof *walk->extents);
    walk->extents = extents;
    if (status != FIRN_OK)
        return status;
    memcpy(walk->pax, item->pax, item->pax_bytes);
    memcpy(walk->extents, item->extents, item->extent_count * sizeof *walk->extents);
    walk->item = *item;
    walk->item.pax = walk->pax;
    walk->item.extents = walk->extents;
    walk->stored_at = walk->extent_at = walk->digested = 0;
    walk->place = 0;                   /* contents need not lie in the order of items */
    walk->extent = 0;
    walk->outcome = (struct firn_reader_outcome){ .lost_bytes = 0 };
    return FIRN_OK;
}

/* The digest of the item, if this part tells it: sums are few and ascending. */
static void find_sum(struct walk *walk)
{
    size_t low = 0, high = walk->part.sum_count;

    while (low < high) {
        size_t middle = low + (high - low) / 2;
        const struct firn_catalogue_sum *sum = &walk->part.sums[middle];

        if (sum->item == walk->item.number) {
            walk->item.summed = true;
            memcpy(walk->item.sha256, sum->sha256, sizeof sum->sha256);
            return;
        }
        if (sum->item < walk->item.number)
            low = middle + 1;
        else
            high = middle;
    }
}

/*
 * Looks for the digest of an item that goes on in the parts that follow: it stands in the one where the item ends. Only
 * the last item of a part goes on, and the first part with items of its own is the last one that can tell.
 */
static enum firn_status seek_sum(struct walk *walk)
{
    enum firn_status status = FIRN_OK;

    while (status == FIRN_OK && !walk->item.summed && !walk->ended && walk->cursor.items_left == 0) {
        status = next_part(walk);
        status = status == FIRN_END ? FIRN_OK : status;
        if (status == FIRN_OK && !walk->ended)
            find_sum(walk);
    }
    return status;
}

/* --- handing out --- */

/*
 * Hands out `count` stored bytes of the item, from stored_at on, as stretches of the file: raw ones, or gaps where raw
 * is NULL.
 */
static enum firn_status hand_out(struct walk *walk, const uint8_t *raw, uint64_t count, enum firn_reader_loss why,
                                 uint64_t container_at)
{
    const struct firn_reader_visitor *visitor = walk->visitor;
    enum firn_status status = FIRN_OK;

    while (count > 0 && status == FIRN_OK) {
        const struct firn_item_extent *extent = &walk->item.extents[walk->extent];
        uint64_t left = extent->bytes - walk->extent_at, step = count < left ? count : left;
        uint64_t at = extent->at + walk->extent_at;

        if (raw != NULL) {
            firn_digest_add_zeros(walk->digest, at - walk->digested);
            firn_digest_add(walk->digest, raw, (size_t)step);
            walk->digested = at + step;
            status = visitor->bytes(visitor->self, &walk->item, at, raw, (size_t)step);
            raw += step;
        } else {
            walk->outcome.lost_bytes += step;
            if (visitor->gap != NULL)
                status = visitor->gap(visitor->self, &walk->item, at, step, why, container_at);
        }
        walk->stored_at += step;
        walk->extent_at += step;
        if (walk->extent_at == extent->bytes) {
            walk->extent++;
            walk->extent_at = 0;
        }
        count -= step;
    }
    return status;
}

/* Content that no segment tells of: never written when nothing of the catalogue is missing, else lost with it. */
static enum firn_status hand_out_untold(struct walk *walk, uint64_t count)
{
    if (walk->visitor->lost_blocks != NULL)      /* nobody knows which */
        walk->visitor->lost_blocks(walk->visitor->self, 0, 0, 0);
    return hand_out(walk, NULL, count, walk->part.complete ? FIRN_READER_LOSS_WITHDRAWN : FIRN_READER_LOSS_BLOCKS, 0);
}

/* Hands out what the segment at walk->place has of the item; it has some. */
static enum firn_status hand_out_segment(struct walk *walk)
{
    const struct firn_catalogue_place *place = &walk->part.places[walk->place];
    uint64_t at = walk->item.content_at + walk->stored_at, inside = at - place->content_at;
    uint64_t count = place->raw_bytes - inside, left = walk->item.stored_bytes - walk->stored_at;
    struct firn_decoder_segment segment;
    enum firn_status status = firn_decoder_get(walk->decoder, walk->part.places, walk->part.place_count, walk->place,
                                               &segment);

    count = count < left ? count : left;
    if (status == FIRN_OK)
        return hand_out(walk, segment.raw + inside, count, FIRN_READER_LOSS_BLOCKS, 0);
    if (status == FIRN_LOST && walk->visitor->lost_blocks != NULL)
        walk->visitor->lost_blocks(walk->visitor->self, segment.first_lost, segment.last_lost, segment.lost_blocks);
    if (status == FIRN_LOST)
        return hand_out(walk, NULL, count, FIRN_READER_LOSS_BLOCKS, segment.container_at);
    if (status == FIRN_MISMATCH)
        return hand_out(walk, NULL, count, FIRN_READER_LOSS_CONTENT, 0);
    return status;
}

/* All content of the item, from this part and those that follow. */
static enum firn_status hand_out_content(struct walk *walk)
{
    enum firn_status status = FIRN_OK;

    while (walk->stored_at < walk->item.stored_bytes && status == FIRN_OK) {
        uint64_t at = walk->item.content_at + walk->stored_at, left = walk->item.stored_bytes - walk->stored_at;
        const struct firn_catalogue_place *place;

        while (walk->place < walk->part.place_count && walk->part.places[walk->place].content_at
                                                         + walk->part.places[walk->place].raw_bytes <= at)
            walk->place++;
        if (walk->place == walk->part.place_count) {
            if (walk->ended || walk->cursor.items_left > 0) {
                status = hand_out_untold(walk, left);
                continue;
            }
            status = next_part(walk);
            status = status == FIRN_END ? FIRN_OK : status;
            continue;
        }
        place = &walk->part.places[walk->place];
        if (place->content_at > at) {
            uint64_t distance = place->content_at - at;

            status = hand_out_untold(walk, distance < left ? distance : left);
        } else {
            status = hand_out_segment(walk);
        }
    }
    return status;
}

static enum firn_status visit(struct walk *walk)
{
    const struct firn_reader_visitor *visitor = walk->visitor;
    bool content = walk->item.has_content && visitor->bytes != NULL;
    enum firn_status status = FIRN_OK;

    find_sum(walk);
    if (visitor->wants != NULL && !visitor->wants(visitor->self, &walk->item))
        return FIRN_OK;
    if (!content && visitor->digests && walk->item.has_content)
        status = seek_sum(walk);
    if (status == FIRN_OK && visitor->begin != NULL)
        status = visitor->begin(visitor->self, &walk->item, 0);
    if (status == FIRN_OK && content) {
        firn_digest_start(walk->digest);
        status = hand_out_content(walk);
        find_sum(walk);
        if (status == FIRN_OK && walk->outcome.lost_bytes == 0) {
            firn_digest_add_zeros(walk->digest, walk->item.bytes - walk->digested);
            firn_digest_finish(walk->digest, walk->outcome.sha256);
            walk->outcome.sum_known = walk->item.summed;
            walk->outcome.sum_right = walk->item.summed && memcmp(walk->outcome.sha256, walk->item.sha256,
                                                                  sizeof walk->item.sha256) == 0;
        }
    }
    if (status == FIRN_OK && visitor->end != NULL)
        status = visitor->end(visitor->self, &walk->item, &walk->outcome);
    return status;
}

static enum firn_status go_through(struct walk *walk, struct firn_reader_walk_report *report)
{
    enum firn_status status = FIRN_OK;

    while (!walk->ended && status == FIRN_OK) {
        struct firn_item item;

        status = firn_catalogue_next(&walk->cursor, &item);
        if (status == FIRN_END || status == FIRN_BAD_DATA) {
            if (walk->cursor.items_left > 0 || walk->cursor.left > 0)
                walk->cursor.items_left = 0;      /* a batch that contradicts itself: its other items stay unknown */
            status = next_part(walk);
            status = status == FIRN_END ? FIRN_OK : status;
            continue;
        }
        if (status == FIRN_OK)
            status = keep_item(walk, &item);
        if (status == FIRN_OK) {
            report->items++;
            status = visit(walk);
        }
    }
    return status;
}

enum firn_status firn_walk(struct firn_parts *parts, struct firn_decoder *decoder, const struct firn_memory *memory,
                           const struct firn_reader_visitor *visitor, struct firn_reader_walk_report *report)
{
    struct walk walk = { .parts = parts, .decoder = decoder, .memory = memory, .visitor = visitor };
    enum firn_status status = firn_digest_make(&walk.digest);

    *report = (struct firn_reader_walk_report){ .items = 0 };
    walk.cursor_extents = memory->get(memory->self, FIRN_ITEM_EXTENTS_MAX * sizeof *walk.cursor_extents);
    if (status == FIRN_OK && walk.cursor_extents == NULL)
        status = FIRN_NO_MEMORY;
    if (status == FIRN_OK) {
        firn_parts_rewind(parts);
        status = go_through(&walk, report);
        report->index_parts_lost = firn_parts_index_lost(parts);
    }
    firn_digest_free(walk.digest);
    memory->put(memory->self, walk.cursor_extents);
    memory->put(memory->self, walk.pax);
    memory->put(memory->self, walk.extents);
    return status;
}
