/* container/store_realign.c - a store in front of another one whose blocks are not where they belong */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/store.h"

#include "base/fault.h"
#include "base/memory.h"
#include "container/finder.h"

#include <errno.h>
#include <string.h>

enum {
    CONTAINERS_MAX = 16, STRETCHES_MAX = 1 << 16,
    DAMAGED_MIN = 16      /* so many damaged blocks make a container without a good one; fewer may be an accident */
};

/* Up to 16 GiB, and else up to so many times what is there. Where still more is missing, collate puts it together. */
#define NUMBER_PLAIN (UINT64_C(1) << 22)
#define LENGTHENED_MAX 64
#define SHEETS_MAX (UINT64_C(1) << 20)

/* Blocks first .. last lie one behind the other, the first one at byte `at`. */
struct stretch { uint64_t first, last, at; };

/* What was found of one container. Stretches ascend, in number and in place, and do not touch. */
struct container {
    struct firn_block_tag like;
    struct stretch *stretches;
    size_t count, capacity;
    uint64_t good, known;      /* known: the damaged ones too */
};

struct search {
    const struct firn_memory *memory;
    const struct firn_store_watch *watch;
    uint64_t inner_bytes;
    struct container containers[CONTAINERS_MAX];
    unsigned count;
};

struct realigned {
    const struct firn_memory *memory;
    struct firn_store inner;
    struct stretch *stretches;
    size_t count;
    uint64_t inner_bytes;
};

/* --- finding the stretches --- */

static struct container *container_of(struct search *search, const struct firn_block_tag *tag)
{
    for (unsigned i = 0; i < search->count; i++) {
        const struct firn_block_tag *like = &search->containers[i].like;

        if (memcmp(like->id, tag->id, sizeof like->id) == 0 && like->geometry.k == tag->geometry.k &&
            like->geometry.m == tag->geometry.m && like->geometry.depth == tag->geometry.depth)
            return &search->containers[i];
    }
    if (search->count == CONTAINERS_MAX)
        return NULL;
    search->containers[search->count].like = *tag;
    return &search->containers[search->count++];
}

/*
 * Whether the aligned file may be as long as this block tells. Who reads it goes through all of it and keeps a few
 * bytes for each sheet, and a small file with an absurd number in it shall cost neither days nor memory.
 */
static bool within_reason(const struct search *search, const struct firn_block_tag *tag)
{
    return (tag->number < NUMBER_PLAIN || tag->number / LENGTHENED_MAX < search->inner_bytes / FIRN_BLOCK_BYTES) &&
           tag->number / firn_sheet_full_blocks(&tag->geometry) < SHEETS_MAX;
}

static enum firn_status note_block(void *self, const struct firn_finder_block *block)
{
    struct search *search = self;
    struct container *container = within_reason(search, &block->tag) ? container_of(search, &block->tag) : NULL;
    struct stretch *last;
    uint64_t number = block->tag.number;
    void *stretches;
    enum firn_status status;

    if (container == NULL)
        return FIRN_OK;
    container->good += block->state != FIRN_BLOCK_GONE;
    container->known++;
    last = container->count > 0 ? &container->stretches[container->count - 1] : NULL;
    if (last != NULL && number > last->last && block->at > last->at &&
        (block->at - last->at) / FIRN_BLOCK_BYTES == number - last->first &&
        (block->at - last->at) % FIRN_BLOCK_BYTES == 0) {
        last->last = number;
        return FIRN_OK;
    }
    /* the search also goes back from a place where it found its way again */
    if (last != NULL && number + 1 == last->first && block->at + FIRN_BLOCK_BYTES == last->at &&
        (container->count == 1 || number > last[-1].last)) {
        last->first = number;
        last->at = block->at;
        return FIRN_OK;
    }
    if ((last != NULL && number <= last->last) || container->count == STRETCHES_MAX)
        return FIRN_OK;      /* a second copy, or blocks out of order: work for a collation */
    stretches = container->stretches;
    status = firn_memory_grow(search->memory, &stretches, &container->capacity, container->count + 1, sizeof *last);
    container->stretches = stretches;
    if (status == FIRN_OK)
        container->stretches[container->count++] = (struct stretch){ number, number, block->at };
    return status;
}

static void pass_progress(void *self, uint64_t at, uint64_t bytes)
{
    const struct firn_store_watch *watch = ((struct search *)self)->watch;

    if (watch != NULL && watch->progress != NULL)
        watch->progress(watch->self, at, bytes);
}

static bool pass_stop(void *self)
{
    const struct firn_store_watch *watch = ((struct search *)self)->watch;

    return watch != NULL && watch->stop != NULL && watch->stop(watch->self);
}

/* The container with the most good blocks, else the most damaged ones; NULL: none, or it lies where it should. */
static struct container *choose(struct search *search)
{
    struct container *best = NULL;

    for (unsigned i = 0; i < search->count; i++) {
        struct container *c = &search->containers[i];

        if ((c->good > 0 || c->known >= DAMAGED_MIN) &&
            (best == NULL || c->good > best->good || (c->good == best->good && c->known > best->known)))
            best = c;
    }
    if (best == NULL || (best->count == 1 &&
                         best->stretches[0].at == (best->stretches[0].first + 1) * FIRN_BLOCK_BYTES))
        return NULL;
    return best;
}

/* --- reading --- */

/*
 * Where page `page` of the aligned file (0: the title page, n + 1: block n) begins in the inner one, and how many pages
 * from there on lie one behind the other, at most `most`. False: nowhere that is known.
 */
static bool locate(const struct realigned *r, uint64_t page, uint64_t most, uint64_t *at, uint64_t *pages)
{
    uint64_t number = page - 1, next_page = UINT64_MAX, back;
    size_t low = 0, high = r->count;
    const struct stretch *s;

    *pages = 1;
    while (low < high) {      /* the last stretch that begins at or before this block */
        size_t middle = low + (high - low) / 2;

        if (page == 0 || r->stretches[middle].first > number)
            high = middle;
        else
            low = middle + 1;
    }
    s = &r->stretches[low > 0 ? low - 1 : 0];
    if (low == 0) {           /* before the first one: back from there, as far as the file goes */
        back = (s->first + 1 - page) * FIRN_BLOCK_BYTES;
        *at = s->at - back;
        *pages = s->first + 1 - page;
        *pages = *pages < most ? *pages : most;
        return back <= s->at;
    }
    *at = s->at + (number - s->first) * FIRN_BLOCK_BYTES;
    if (low < r->count)
        next_page = r->stretches[low].first + 1;
    *pages = number <= s->last ? s->last - number + 1 : 1;
    *pages = *pages < most ? *pages : most;
    *pages = *pages < next_page - page ? *pages : next_page - page;
    /* between two stretches a damaged block is taken to go on from the first */
    return low == r->count || *at + FIRN_BLOCK_BYTES <= r->stretches[low].at;
}

static enum firn_status realigned_read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got,
                                          int *os_error)
{
    struct realigned *r = self;

    *got = 0;
    *os_error = 0;
    while (*got < count) {
        uint64_t page = (at + *got) / FIRN_BLOCK_BYTES, inside = (at + *got) % FIRN_BLOCK_BYTES, place, pages;
        size_t left = count - *got, read = 0, step;
        enum firn_status status = FIRN_OK;
        bool known = locate(r, page, left / FIRN_BLOCK_BYTES + 1, &place, &pages);

        step = (size_t)(pages * FIRN_BLOCK_BYTES - inside);
        step = step < left ? step : left;
        if (known)
            status = r->inner.read_at(r->inner.self, place + inside, (uint8_t *)bytes + *got, step, &read, os_error);
        if (status != FIRN_OK) {
            *got += read;
            return status;
        }
        memset((uint8_t *)bytes + *got + read, 0, step - read);
        *got += step;
    }
    return FIRN_OK;
}

static enum firn_status realigned_write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    (void)self, (void)at, (void)bytes, (void)count;
    *os_error = EROFS;
    return FIRN_READ_ONLY;
}

/* As far as the last stretch goes, and the damaged blocks that may lie behind it. */
static enum firn_status realigned_size(void *self, uint64_t *bytes, int *os_error)
{
    struct realigned *r = self;
    const struct stretch *last = &r->stretches[r->count - 1];
    uint64_t end = last->at + (last->last - last->first + 1) * FIRN_BLOCK_BYTES;

    *os_error = 0;
    *bytes = (last->last + 2) * FIRN_BLOCK_BYTES + (r->inner_bytes > end ? r->inner_bytes - end : 0);
    return FIRN_OK;
}

static enum firn_status realigned_resize(void *self, uint64_t bytes, int *os_error)
{
    (void)self, (void)bytes;
    *os_error = EROFS;
    return FIRN_READ_ONLY;
}

static enum firn_status realigned_sync(void *self, int *os_error)
{
    (void)self;
    *os_error = 0;
    return FIRN_OK;
}

static void realigned_forget(void *self, uint64_t at, uint64_t bytes)
{
    struct realigned *r = self;
    uint64_t place, pages;

    for (uint64_t page = at / FIRN_BLOCK_BYTES; page * FIRN_BLOCK_BYTES < at + bytes; page += pages)
        if (locate(r, page, bytes / FIRN_BLOCK_BYTES + 1, &place, &pages))
            r->inner.forget(r->inner.self, place, pages * FIRN_BLOCK_BYTES);
}

static void realigned_close(void *self)
{
    struct realigned *r = self;

    r->memory->put(r->memory->self, r->stretches);
    r->memory->put(r->memory->self, r);
}

enum firn_status firn_store_realign(struct firn_store *inner, const struct firn_store_watch *watch,
                                    const struct firn_memory *memory, struct firn_store *store, uint64_t *stretches,
                                    struct firn_fault *fault)
{
    struct search *search = firn_memory_get_zeroed(memory, 1, sizeof *search);
    struct firn_finder_visitor visitor = {
        .self = search, .block = note_block, .progress = pass_progress, .stop = pass_stop
    };
    struct container *chosen = NULL;
    struct realigned *r = NULL;
    struct firn_finder_report found;
    enum firn_status status;
    int why;

    if (search == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    search->memory = memory;
    search->watch = watch;
    if (inner->size(inner->self, &search->inner_bytes, &why) != FIRN_OK)
        search->inner_bytes = 0;      /* the finder will say what is wrong */
    status = firn_finder_run(inner, memory, &visitor, &found, fault);
    if (status == FIRN_OK) {
        chosen = choose(search);
        status = chosen == NULL ? FIRN_END : FIRN_OK;
    }
    if (status == FIRN_OK) {
        r = memory->get(memory->self, sizeof *r);
        status = r == NULL ? firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "") : FIRN_OK;
    }
    if (status == FIRN_OK) {
        *r = (struct realigned){ memory, *inner, chosen->stretches, chosen->count, found.bytes };
        chosen->stretches = NULL;
        *stretches = r->count;
        *store = (struct firn_store){ r, realigned_read_at, realigned_write_at, realigned_size, realigned_resize,
                                      realigned_sync, realigned_forget, realigned_close, NULL };
    }
    for (unsigned i = 0; i < search->count; i++)
        memory->put(memory->self, search->containers[i].stretches);
    memory->put(memory->self, search);
    return status;
}
