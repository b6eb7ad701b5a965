/*
 * container/window.h - what the writer gathers before it codes: some items, some megabytes of content
 *
 * Room: container. A window becomes one part of the catalogue. Content is cut into segments as it comes: a large file
 * starts its own, small neighbours share one; a segment is at most 1 MiB. Everything in a window that has not been
 * given out yet can be taken back without a trace.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_WINDOW_H
#define FIRN_CONTAINER_WINDOW_H

#include "base/threads.h"
#include "container/catalogue.h"
#include "firn/segment.h"

enum {
    FIRN_WINDOW_RAW_BYTES = 8 << 20,        /* content; measured: more gains nothing, less codes in fewer threads */
    FIRN_WINDOW_ENTRY_BYTES = 1 << 20,      /* entries that fill a window; one more entry may go over it */
    FIRN_WINDOW_CUTS = 64,                  /* a cut is ended only when a large item begins or ends, or at 1 MiB */
    FIRN_WINDOW_LARGE_BYTES = 256 << 10,    /* a file of this size starts its own segment */
    FIRN_WINDOW_ITEMS = FIRN_WINDOW_ENTRY_BYTES / (FIRN_CATALOGUE_ENTRY_HEAD_BYTES + 512) + 2,
    FIRN_WINDOW_PIECES = 4                  /* 1 MiB pieces of entries: 1 MiB and one entry of at most 2 MiB */
};

/* A stretch to be coded on its own: a segment of content, or a piece of the entries. */
struct firn_window_cut {
    const uint8_t *raw;
    size_t raw_bytes;
    uint64_t content_at;
    uint8_t hash[16];
    uint8_t *coded;
    size_t coded_bytes;
};

/* An item whose content lies whole in the window, and is not empty. */
struct firn_window_item {
    size_t entry_at, raw_at, raw_bytes;
};

struct firn_window {
    const struct firn_memory *memory;
    uint8_t *raw, *coded;                   /* content, and room for it coded */
    size_t raw_used, cut_from;              /* raw[cut_from .. raw_used) is the open cut */
    uint64_t cut_content_at;                /* where the open cut begins in content space */
    struct firn_window_cut cuts[FIRN_WINDOW_CUTS];
    size_t cut_count;
    struct firn_window_item items[FIRN_WINDOW_ITEMS];
    size_t item_count, entry_at;            /* entry_at: of the latest */
    uint8_t *entries, *entries_coded;
    size_t entries_used;
    struct firn_window_cut pieces[FIRN_WINDOW_PIECES];
    size_t piece_count;
    struct firn_catalogue_batch batch;      /* items, first_item, content_at; the rest when it is given out */
    struct firn_catalogue_sum *sums;
    size_t sum_count, sum_capacity;
};

/* Where a window stood when an item began. */
struct firn_window_mark {
    size_t raw_used, cut_from, cut_count, entries_used, sum_count, item_count;
    uint64_t cut_content_at;
    uint32_t items;
};

enum firn_status firn_window_make(const struct firn_memory *memory, struct firn_window *window);
void firn_window_free(struct firn_window *window);      /* takes one that is all zeros */

/* Empties it. */
void firn_window_clear(struct firn_window *window);

bool firn_window_empty(const struct firn_window *window);
/* True when neither content nor cuts nor entries should be added before the window is turned. */
bool firn_window_full(const struct firn_window *window);

void firn_window_mark(const struct firn_window *window, struct firn_window_mark *mark);
void firn_window_return(struct firn_window *window, const struct firn_window_mark *mark);

/* Ends the open cut, if there is anything in it; the next content belongs at content_at. */
void firn_window_cut_here(struct firn_window *window, uint64_t content_at);

/* Adds the entry of an item; firn_catalogue_entry_bytes(item) is not 0, and the window is not full. */
void firn_window_add_entry(struct firn_window *window, const struct firn_item *item);

/* Adds as much of the content as fits before the window is full; returns how much. */
size_t firn_window_add_content(struct firn_window *window, const uint8_t *bytes, size_t count);

/* The latest entry's content is whole: its last raw_bytes, all in this window. */
void firn_window_item_whole(struct firn_window *window, size_t raw_bytes);

enum firn_status firn_window_add_sum(struct firn_window *window, const struct firn_catalogue_sum *sum);

/* Moves the open cut, unfinished, into an empty window. */
void firn_window_carry(struct firn_window *from, struct firn_window *to);

/*
 * Ends the open cut, moves packed small files to the front (container/arrange.h), lays out all cuts and pieces for
 * coding; returns the number of jobs for firn_window_code.
 */
size_t firn_window_close(struct firn_window *window);

/*
 * Codes cut or piece number `job`, and decodes it again: what does not come back as it was, whether the memory failed
 * or the coder, is stored as it is. work: firn_window_work_bytes(), aligned to 64. Jobs share nothing.
 */
void firn_window_code(struct firn_window *window, size_t job, enum firn_segment_effort effort, uint8_t *work);
size_t firn_window_work_bytes(void);

#endif
