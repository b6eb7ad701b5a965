/* container/arrange.c - contents moved, cuts made anew */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/arrange.h"

#include "coding/cost.h"
#include "coding/sample.h"

#include <string.h>

enum { WORTH_BYTES = 64 << 10 };       /* less than this of either kind is left where it is */

struct arranging {
    struct firn_window *window;
    bool packed[FIRN_WINDOW_ITEMS];
    size_t front_bytes, small_bytes;   /* of packed small files, and of the others */
    uint8_t *to;                       /* where the next content goes */
    size_t sizes[FIRN_WINDOW_CUTS];    /* of the new cuts */
    size_t cuts, open;                 /* open: bytes of the one that is not ended */
    bool fits;
};

static bool is_small(const struct firn_window_item *item)
{
    return item->raw_bytes < FIRN_WINDOW_LARGE_BYTES;
}

/* Content without gaps: nothing that was withdrawn lies in it. */
static bool is_contiguous(const struct firn_window *window)
{
    for (size_t i = 1; i < window->cut_count; i++)
        if (window->cuts[i].content_at != window->cuts[i - 1].content_at + window->cuts[i - 1].raw_bytes)
            return false;
    return window->cut_count > 0 && window->item_count > 0;
}

static void classify(struct arranging *a)
{
    struct firn_cost_logs logs;

    firn_cost_prepare(&logs);
    for (size_t i = 0; i < a->window->item_count; i++) {
        const struct firn_window_item *item = &a->window->items[i];

        a->packed[i] = is_small(item) && firn_sample_is_packed(&logs, a->window->raw + item->raw_at, item->raw_bytes);
        if (a->packed[i])
            a->front_bytes += item->raw_bytes;
        else if (is_small(item))
            a->small_bytes += item->raw_bytes;
    }
}

static void end_cut(struct arranging *a)
{
    if (a->open == 0)
        return;
    a->fits = a->cuts < FIRN_WINDOW_CUTS;
    if (a->fits)
        a->sizes[a->cuts++] = a->open;
    a->open = 0;
}

/* Moves content of one file, or what is left of one. Small files share a cut as long as they fit into it whole. */
static void move(struct arranging *a, size_t raw_at, size_t raw_bytes, bool small)
{
    memcpy(a->to, a->window->raw + raw_at, raw_bytes);
    a->to += raw_bytes;
    if (!small || a->open + raw_bytes > FIRN_SEGMENT_RAW_MAX)
        end_cut(a);
    while (raw_bytes > 0 && a->fits) {
        size_t step = FIRN_SEGMENT_RAW_MAX - a->open;

        step = step < raw_bytes ? step : raw_bytes;
        a->open += step;
        raw_bytes -= step;
        if (a->open == FIRN_SEGMENT_RAW_MAX)
            end_cut(a);
    }
    if (!small)
        end_cut(a);
}

/* What belongs to an earlier item; packed small files; all others; what there is of an item that goes on. */
static void move_all(struct arranging *a)
{
    const struct firn_window *window = a->window;
    const struct firn_window_item *items = window->items, *last = &items[window->item_count - 1];
    size_t end = last->raw_at + last->raw_bytes;

    move(a, 0, items[0].raw_at, false);
    for (size_t i = 0; i < window->item_count && a->fits; i++)
        if (a->packed[i])
            move(a, items[i].raw_at, items[i].raw_bytes, true);
    end_cut(a);
    for (size_t i = 0; i < window->item_count && a->fits; i++)
        if (!a->packed[i])
            move(a, items[i].raw_at, items[i].raw_bytes, is_small(&items[i]));
    if (a->fits)
        move(a, end, window->raw_used - end, false);
    end_cut(a);
}

void firn_arrange(struct firn_window *window)
{
    struct arranging a = { .window = window, .to = window->coded, .fits = true };
    uint64_t content_at;
    uint8_t *raw = window->raw;

    if (!is_contiguous(window))
        return;
    classify(&a);
    if (a.front_bytes < WORTH_BYTES || a.small_bytes < WORTH_BYTES)
        return;
    move_all(&a);
    if (!a.fits)
        return;
    memcpy(window->raw, window->coded, window->raw_used);
    content_at = window->cuts[0].content_at;
    for (size_t i = 0; i < a.cuts; i++) {
        window->cuts[i] = (struct firn_window_cut){ .raw = raw, .raw_bytes = a.sizes[i], .content_at = content_at };
        raw += a.sizes[i];
        content_at += a.sizes[i];
    }
    window->cut_count = a.cuts;
    for (size_t i = 0; i < window->item_count; i++)
        if (a.packed[i])
            firn_catalogue_move_to_front(window->entries + window->items[i].entry_at);
}
