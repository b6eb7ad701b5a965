/* container/finder.c - blocks found wherever they lie in a source, at any byte offset, in one pass */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/finder.h"

#include "base/bytes.h"
#include "base/fault.h"

enum {
    WINDOW_BYTES = 4 << 20,
    HISTORY_BYTES = 512 << 10,         /* kept of what was passed: damaged blocks before the first good one are there */
    MISSED_MAX = 4096,                 /* blocks that may be missing, in a row, before their places are forgotten */
    PLAIN_TAG_BYTES = FIRN_BLOCK_TAG_BYTES - 16,      /* without the hash */
    TAG_ID_AT = 8, TAG_NUMBER_AT = 16,
    /* Bits of a tag that may be wrong. Of two unrelated tags 128 of 256 differ on average, 32 of the 64 of an id. */
    TAG_WRONG_MAX = 64, FIELD_WRONG_MAX = 16, MAGIC_WRONG_MAX = 8      /* zeros have 13 bits of the magic wrong */
};

struct finder {
    struct firn_store *store;
    const struct firn_finder_visitor *visitor;
    struct firn_finder_report *report;
    uint8_t *window;                   /* holds source[base .. base + have) */
    uint64_t base, bytes;              /* bytes: of the source */
    size_t have;
    uint64_t at;                       /* everything before was dealt with */
    uint64_t floor;                    /* the end of the last block that was told of */
    /* where the next block should be */
    bool locked;
    uint64_t grid;
    struct firn_block_tag expected;
    unsigned missed;
};

/* --- the window --- */

/* Tries to read source[at .. at + count) as often as is asked for. Returns how much of it could be had. */
static size_t try_piece(struct finder *f, uint64_t at, uint8_t *bytes, size_t count)
{
    size_t got = 0;
    int why;

    for (unsigned i = 0; i <= f->visitor->readings; i++) {
        if (f->store->read_at(f->store->self, at, bytes, count, &got, &why) == FIRN_OK)
            return got;
        f->store->forget(f->store->self, at, count);
    }
    return got;
}

/* Reads source[base + have ..] until the window is full; what cannot be read becomes zeros, block by block. */
static void fill(struct finder *f)
{
    uint64_t from = f->base + f->have, left = f->bytes - from;
    size_t wanted = WINDOW_BYTES - f->have, done, got = 0;
    int why;

    wanted = wanted < left ? wanted : (size_t)left;
    if (f->store->read_at(f->store->self, from, f->window + f->have, wanted, &got, &why) == FIRN_OK) {
        memset(f->window + f->have + got, 0, wanted - got);
        f->report->unreadable_bytes += wanted - got;
        f->have += wanted;
        return;
    }
    for (done = got; done < wanted; done += got) {
        uint64_t at = from + done;
        size_t step = (size_t)(FIRN_BLOCK_BYTES - at % FIRN_BLOCK_BYTES);

        step = step < wanted - done ? step : wanted - done;
        got = try_piece(f, at, f->window + f->have + done, step);
        if (got < step) {
            memset(f->window + f->have + done + got, 0, step - got);
            f->report->unreadable_bytes += step - got;
            got = step;
        }
    }
    f->have += wanted;
}

/* Makes sure that source[at .. at + count) is in the window as far as the source goes. Returns how much of it is. */
static size_t ensure(struct finder *f, uint64_t at, size_t count)
{
    uint64_t end = f->base + f->have;

    if (at + count > end && end < f->bytes) {
        uint64_t keep = at > HISTORY_BYTES ? at - HISTORY_BYTES : 0;

        keep = keep > f->base ? keep : f->base;
        keep = keep < end ? keep : end;
        memmove(f->window, f->window + (keep - f->base), (size_t)(end - keep));
        f->have = (size_t)(end - keep);
        f->base = keep;
        fill(f);
        end = f->base + f->have;
        if (f->visitor->progress != NULL)
            f->visitor->progress(f->visitor->self, at, f->bytes);
    }
    if (at >= end)
        return 0;
    return end - at < count ? (size_t)(end - at) : count;
}

static uint8_t *place(struct finder *f, uint64_t at)
{
    return f->window + (at - f->base);
}

/* --- tags --- */

static void put_tag(const struct firn_block_tag *tag, uint8_t plain[PLAIN_TAG_BYTES])
{
    uint8_t block[FIRN_BLOCK_BYTES] = { 0 };

    firn_block_seal(block, tag);
    memcpy(plain, block + FIRN_BLOCK_TAG_AT, PLAIN_TAG_BYTES);
}

static unsigned wrong_bits(const uint8_t *a, const uint8_t *b, size_t count)
{
    unsigned wrong = 0;

    for (size_t i = 0; i < count; i++)
        for (unsigned odd = a[i] ^ b[i]; odd != 0; odd &= odd - 1)
            wrong++;
    return wrong;
}

/* What the tag of block `number` is, going by that of another block. A short sheet behind it has a t of its own. */
static struct firn_block_tag tag_of(const struct firn_block_tag *like, uint64_t number)
{
    struct firn_block_tag tag = *like;
    uint32_t full = firn_sheet_full_blocks(&like->geometry);

    tag.number = number;
    if (number / full < like->number / full)
        tag.data_blocks = firn_sheet_full_data(&like->geometry);
    tag.kind = number % full < tag.data_blocks ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE;
    return tag;
}

/* Whether the tag in a block is nearly the one given. */
static bool nearly(const uint8_t *block, const struct firn_block_tag *tag)
{
    const uint8_t *found = block + FIRN_BLOCK_TAG_AT;
    uint8_t plain[PLAIN_TAG_BYTES];

    put_tag(tag, plain);
    return wrong_bits(found, plain, 4) <= MAGIC_WRONG_MAX &&
           wrong_bits(found, plain, PLAIN_TAG_BYTES) <= TAG_WRONG_MAX &&
           wrong_bits(found + TAG_ID_AT, plain + TAG_ID_AT, FIRN_BLOCK_ID_BYTES) <= FIELD_WRONG_MAX &&
           wrong_bits(found + TAG_NUMBER_AT, plain + TAG_NUMBER_AT, 8) <= FIELD_WRONG_MAX;
}

static bool same_container(const struct firn_block_tag *a, const struct firn_block_tag *b)
{
    return memcmp(a->id, b->id, sizeof a->id) == 0 && a->geometry.k == b->geometry.k &&
           a->geometry.m == b->geometry.m && a->geometry.depth == b->geometry.depth;
}

/* Reads the tag of a damaged block as it stands. False when no writer could have made it. */
static bool read_damaged_tag(const uint8_t *block, struct firn_block_tag *tag)
{
    uint8_t again[PLAIN_TAG_BYTES];
    const uint8_t *at = block + FIRN_BLOCK_TAG_AT;

    *tag = (struct firn_block_tag){
        .version = at[4], .kind = at[5] == FIRN_BLOCK_RESERVE ? FIRN_BLOCK_RESERVE : FIRN_BLOCK_DATA,
        .geometry = { at[6], at[7], firn_bytes_get16(at + 28) },
        .number = firn_bytes_get64(at + TAG_NUMBER_AT), .data_blocks = firn_bytes_get32(at + 24)
    };
    memcpy(tag->id, at + TAG_ID_AT, sizeof tag->id);
    if (tag->version != FIRN_BLOCK_FORMAT_VERSION || !firn_sheet_geometry_valid(&tag->geometry) ||
        tag->data_blocks < 1 || tag->data_blocks > firn_sheet_full_data(&tag->geometry))
        return false;
    put_tag(tag, again);
    return memcmp(again, at, PLAIN_TAG_BYTES) == 0;
}

/* --- telling --- */

static enum firn_status tell(struct finder *f, uint64_t at, enum firn_block_state state,
                             const struct firn_block_tag *tag)
{
    struct firn_finder_block found = { .at = at, .bytes = place(f, at), .state = state, .tag = *tag };

    if (tag->number == 0 && at >= f->base + FIRN_BLOCK_BYTES)
        found.page = place(f, at - FIRN_BLOCK_BYTES);
    f->report->good += state == FIRN_BLOCK_SOUND;
    f->report->mended += state == FIRN_BLOCK_MENDED;
    f->report->damaged += state == FIRN_BLOCK_GONE;
    return f->visitor->block(f->visitor->self, &found);
}

static bool good(enum firn_block_state state)
{
    return state == FIRN_BLOCK_SOUND || state == FIRN_BLOCK_MENDED;
}

/* Behind a block that was told of, the next one is expected. */
static void lock(struct finder *f, uint64_t at, const struct firn_block_tag *tag)
{
    f->locked = true;
    f->missed = 0;
    f->grid = f->at = f->floor = at + FIRN_BLOCK_BYTES;
    f->expected = tag_of(tag, tag->number + 1);
}

/*
 * From a block that was found at `at`, back over those before it that were not recognised when they were passed: not
 * beyond what has been told of, and what is still in the window.
 */
static enum firn_status look_back(struct finder *f, uint64_t at, const struct firn_block_tag *tag)
{
    uint64_t number = tag->number;
    enum firn_status status = FIRN_OK;

    while (status == FIRN_OK && number > 0 && at >= f->floor + FIRN_BLOCK_BYTES && at >= f->base + FIRN_BLOCK_BYTES) {
        struct firn_block_tag expected = tag_of(tag, --number), seen;
        enum firn_block_state state;

        at -= FIRN_BLOCK_BYTES;
        state = firn_block_open(place(f, at), true, &seen);
        if (good(state) && same_container(&seen, tag) && seen.number == number)
            status = tell(f, at, state, &seen);
        else if (nearly(place(f, at), &expected))
            status = tell(f, at, FIRN_BLOCK_GONE, &expected);
    }
    return status;
}

/* --- searching --- */

/* Takes what is at the place where the next block should be. *taken: there was one, good or not. */
static enum firn_status take_expected(struct finder *f, bool *taken)
{
    uint8_t *block = place(f, f->grid);
    struct firn_block_tag tag;
    enum firn_block_state state = firn_block_open(block, true, &tag);
    enum firn_status status;

    *taken = true;
    if (good(state)) {
        status = tell(f, f->grid, state, &tag);
        lock(f, f->grid, &tag);
        return status;
    }
    if (nearly(block, &f->expected)) {
        tag = f->expected;
        status = tell(f, f->grid, FIRN_BLOCK_GONE, &tag);
        lock(f, f->grid, &tag);
        f->at -= FIRN_BLOCK_BYTES - 1;      /* if bytes were lost inside of it, the next block begins before its end */
        return status;
    }
    *taken = false;
    f->expected = tag_of(&f->expected, f->expected.number + 1);
    f->grid += FIRN_BLOCK_BYTES;
    f->locked = ++f->missed < MISSED_MAX;
    return FIRN_OK;
}

/* The first place from `at` on where the magic stands as if a block began there; limit if there is none before. */
static uint64_t find_magic(struct finder *f, uint64_t at, uint64_t limit)
{
    const uint8_t *from = place(f, at + FIRN_BLOCK_TAG_AT), *end = place(f, limit + FIRN_BLOCK_TAG_AT);

    while (from < end && (from = memchr(from, 'F', (size_t)(end - from))) != NULL) {
        if (from[1] == 'I' && from[2] == 'R' && from[3] == 'N')
            return f->base + (uint64_t)(from - f->window) - FIRN_BLOCK_TAG_AT;
        from++;
    }
    return limit;
}

/* A damaged block that begins a row of them: its tag and the next one's are whole and fit together. */
static bool begins_row(struct finder *f, uint64_t at, struct firn_block_tag *tag)
{
    struct firn_block_tag next;

    return read_damaged_tag(place(f, at), tag) && ensure(f, at, 2 * FIRN_BLOCK_BYTES) == 2 * FIRN_BLOCK_BYTES &&
           read_damaged_tag(place(f, at + FIRN_BLOCK_BYTES), &next) && same_container(&next, tag) &&
           next.number == tag->number + 1;
}

/* Looks for a block that begins in [f->at, limit), and moves f->at behind it, or to limit. */
static enum firn_status search(struct finder *f, uint64_t limit)
{
    while (f->at < limit) {
        uint64_t at = find_magic(f, f->at, limit);
        struct firn_block_tag tag;
        enum firn_block_state state;
        enum firn_status status;

        f->at = at;
        if (at == limit)
            break;
        state = firn_block_open(place(f, at), true, &tag);
        if (!good(state) && !begins_row(f, at, &tag)) {
            f->at++;
            continue;
        }
        status = look_back(f, at, &tag);
        if (status == FIRN_OK)
            status = tell(f, at, good(state) ? state : FIRN_BLOCK_GONE, &tag);
        lock(f, at, &tag);
        return status;
    }
    return FIRN_OK;
}

/* One step on: the block that is expected, or a search up to where the next one is. */
static enum firn_status step(struct finder *f)
{
    enum firn_status status = FIRN_OK;
    size_t had = ensure(f, f->at, HISTORY_BYTES);
    bool taken = false;
    uint64_t limit;

    if (had < FIRN_BLOCK_BYTES) {
        f->at = f->bytes;
        return FIRN_OK;
    }
    if (f->locked && f->grid == f->at) {
        status = take_expected(f, &taken);
        if (status != FIRN_OK || taken)
            return status;
    }
    /* the last place in the window where a whole block can begin, and one more */
    limit = f->at + had - FIRN_BLOCK_BYTES + 1;
    if (f->locked && f->grid < limit)
        limit = f->grid;
    return search(f, limit);
}

enum firn_status firn_finder_run(struct firn_store *store, const struct firn_memory *memory,
                                 const struct firn_finder_visitor *visitor, struct firn_finder_report *report,
                                 struct firn_fault *fault)
{
    struct finder f = { .store = store, .visitor = visitor, .report = report };
    int why = 0;
    enum firn_status status = store->size(store->self, &f.bytes, &why);

    *report = (struct firn_finder_report){ .bytes = f.bytes };
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, why, 0, "");
    f.window = memory->get(memory->self, WINDOW_BYTES);
    if (f.window == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    while (status == FIRN_OK && f.at < f.bytes)
        status = visitor->stop != NULL && visitor->stop(visitor->self) ? FIRN_STOPPED : step(&f);
    memory->put(memory->self, f.window);
    return status;
}
