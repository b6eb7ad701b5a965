/* container/window.c - what the writer gathers before it codes */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/window.h"

#include "base/limits.h"
#include "base/memory.h"
#include "container/arrange.h"
#include "guard/hash.h"

enum { ENTRIES_ROOM = FIRN_WINDOW_ENTRY_BYTES + FIRN_LIMIT_ENTRY_BYTES };

/*
 * Room for `count` stretches of `raw` bytes in all, coded: a bound for each, and none of them is longer than its bound.
 */
static size_t coded_room(size_t raw, size_t count)
{
    size_t slack = firn_segment_bound(FIRN_SEGMENT_RAW_MAX) - FIRN_SEGMENT_RAW_MAX;

    return raw + count * slack;
}

enum firn_status firn_window_make(const struct firn_memory *memory, struct firn_window *window)
{
    *window = (struct firn_window){ .memory = memory };
    window->raw = memory->get(memory->self, FIRN_WINDOW_RAW_BYTES);
    window->coded = memory->get(memory->self, coded_room(FIRN_WINDOW_RAW_BYTES, FIRN_WINDOW_CUTS));
    window->entries = memory->get(memory->self, ENTRIES_ROOM);
    window->entries_coded = memory->get(memory->self, coded_room(ENTRIES_ROOM, FIRN_WINDOW_PIECES));
    if (window->raw == NULL || window->coded == NULL || window->entries == NULL || window->entries_coded == NULL) {
        firn_window_free(window);
        return FIRN_NO_MEMORY;
    }
    return FIRN_OK;
}

void firn_window_free(struct firn_window *window)
{
    const struct firn_memory *memory = window->memory;

    if (memory == NULL)
        return;
    memory->put(memory->self, window->raw);
    memory->put(memory->self, window->coded);
    memory->put(memory->self, window->entries);
    memory->put(memory->self, window->entries_coded);
    memory->put(memory->self, window->sums);
    *window = (struct firn_window){ .memory = NULL };
}

void firn_window_clear(struct firn_window *window)
{
    window->raw_used = window->cut_from = window->cut_count = 0;
    window->entries_used = window->piece_count = window->sum_count = window->item_count = 0;
    window->batch = (struct firn_catalogue_batch){ .items = 0 };
}

bool firn_window_empty(const struct firn_window *window)
{
    return window->raw_used == 0 && window->entries_used == 0 && window->sum_count == 0;
}

bool firn_window_full(const struct firn_window *window)
{
    /* an item adds at most two cuts before its content: the one before it, and its own */
    return window->raw_used == FIRN_WINDOW_RAW_BYTES || window->cut_count + 3 > FIRN_WINDOW_CUTS ||
           window->entries_used >= FIRN_WINDOW_ENTRY_BYTES;
}

void firn_window_mark(const struct firn_window *window, struct firn_window_mark *mark)
{
    *mark = (struct firn_window_mark){
        .raw_used = window->raw_used, .cut_from = window->cut_from, .cut_count = window->cut_count,
        .entries_used = window->entries_used, .sum_count = window->sum_count, .item_count = window->item_count,
        .cut_content_at = window->cut_content_at, .items = window->batch.items
    };
}

void firn_window_return(struct firn_window *window, const struct firn_window_mark *mark)
{
    window->raw_used = mark->raw_used;
    window->cut_from = mark->cut_from;
    window->cut_count = mark->cut_count;
    window->entries_used = mark->entries_used;
    window->sum_count = mark->sum_count;
    window->item_count = mark->item_count;
    window->cut_content_at = mark->cut_content_at;
    window->batch.items = mark->items;
}

void firn_window_cut_here(struct firn_window *window, uint64_t content_at)
{
    if (window->raw_used > window->cut_from) {
        window->cuts[window->cut_count++] = (struct firn_window_cut){
            .raw = window->raw + window->cut_from, .raw_bytes = window->raw_used - window->cut_from,
            .content_at = window->cut_content_at
        };
        window->cut_from = window->raw_used;
    }
    window->cut_content_at = content_at;
}

void firn_window_add_entry(struct firn_window *window, const struct firn_item *item)
{
    if (window->batch.items == 0) {
        window->batch.first_item = item->number;
        window->batch.content_at = item->content_at;
    }
    window->entry_at = window->entries_used;
    firn_catalogue_put_entry(item, window->entries + window->entries_used);
    window->entries_used += firn_catalogue_entry_bytes(item);
    window->batch.items++;
}

size_t firn_window_add_content(struct firn_window *window, const uint8_t *bytes, size_t count)
{
    size_t added = 0;

    while (added < count && window->raw_used < FIRN_WINDOW_RAW_BYTES && window->cut_count < FIRN_WINDOW_CUTS) {
        size_t step = count - added, room = FIRN_WINDOW_RAW_BYTES - window->raw_used;
        size_t cut_room = FIRN_SEGMENT_RAW_MAX - (window->raw_used - window->cut_from);

        step = step < room ? step : room;
        step = step < cut_room ? step : cut_room;
        memcpy(window->raw + window->raw_used, bytes + added, step);
        window->raw_used += step;
        added += step;
        if (window->raw_used - window->cut_from == FIRN_SEGMENT_RAW_MAX)
            firn_window_cut_here(window, window->cut_content_at + FIRN_SEGMENT_RAW_MAX);
    }
    return added;
}

void firn_window_item_whole(struct firn_window *window, size_t raw_bytes)
{
    if (raw_bytes > 0)
        window->items[window->item_count++] = (struct firn_window_item){
            .entry_at = window->entry_at, .raw_at = window->raw_used - raw_bytes, .raw_bytes = raw_bytes
        };
}

enum firn_status firn_window_add_sum(struct firn_window *window, const struct firn_catalogue_sum *sum)
{
    void *sums = window->sums;
    enum firn_status status = firn_memory_grow(window->memory, &sums, &window->sum_capacity, window->sum_count + 1,
                                               sizeof *sum);

    window->sums = sums;
    if (status == FIRN_OK)
        window->sums[window->sum_count++] = *sum;
    return status;
}

void firn_window_carry(struct firn_window *from, struct firn_window *to)
{
    size_t open = from->raw_used - from->cut_from;

    memcpy(to->raw, from->raw + from->cut_from, open);
    to->raw_used = open;
    to->cut_content_at = from->cut_content_at;
    from->raw_used = from->cut_from;
}

size_t firn_window_close(struct firn_window *window)
{
    size_t slack = coded_room(0, 1);
    uint8_t *to = window->coded;

    firn_window_cut_here(window, 0);
    firn_arrange(window);
    for (size_t i = 0; i < window->cut_count; i++) {
        window->cuts[i].coded = to;
        to += window->cuts[i].raw_bytes + slack;
    }
    to = window->entries_coded;
    window->piece_count = 0;
    for (size_t at = 0; at < window->entries_used; at += FIRN_SEGMENT_RAW_MAX) {
        size_t left = window->entries_used - at;
        struct firn_window_cut *piece = &window->pieces[window->piece_count++];

        *piece = (struct firn_window_cut){ .raw = window->entries + at,
                                           .raw_bytes = left < FIRN_SEGMENT_RAW_MAX ? left : FIRN_SEGMENT_RAW_MAX,
                                           .coded = to };
        to += piece->raw_bytes + slack;
    }
    return window->cut_count + window->piece_count;
}

static size_t rounded(size_t bytes)
{
    return (bytes + 63) / 64 * 64;
}

size_t firn_window_work_bytes(void)
{
    return rounded(firn_segment_encode_work_bytes()) + rounded(firn_segment_decode_work_bytes()) + FIRN_SEGMENT_RAW_MAX;
}

/* Entries are few bytes and much alike: effort costs little there and saves much. */
static enum firn_segment_effort effort_of(const struct firn_window *window, size_t job, enum firn_segment_effort effort)
{
    return job >= window->cut_count && effort < FIRN_SEGMENT_EFFORT_NORMAL ? FIRN_SEGMENT_EFFORT_NORMAL : effort;
}

void firn_window_code(struct firn_window *window, size_t job, enum firn_segment_effort effort, uint8_t *work)
{
    struct firn_window_cut *cut = job < window->cut_count ? &window->cuts[job]
                                                           : &window->pieces[job - window->cut_count];
    uint8_t *decode_work = work + rounded(firn_segment_encode_work_bytes());
    uint8_t *again = decode_work + rounded(firn_segment_decode_work_bytes());

    effort = effort_of(window, job, effort);
    firn_hash_put(cut->raw, cut->raw_bytes, cut->hash);
    if (firn_segment_encode(cut->raw, cut->raw_bytes, effort, cut->coded, &cut->coded_bytes, work) == FIRN_OK &&
        firn_segment_decode(cut->coded, cut->coded_bytes, again, cut->raw_bytes, decode_work) == FIRN_OK &&
        memcmp(again, cut->raw, cut->raw_bytes) == 0)
        return;
    /* 1 .. FIRN_SEGMENT_RAW_MAX bytes and the full bound of room: storing has nothing to refuse */
    (void)firn_segment_encode(cut->raw, cut->raw_bytes, FIRN_SEGMENT_EFFORT_NONE, cut->coded, &cut->coded_bytes, work);
}
