/* container/sheets.c - the blocks of a container in its store, judged, mended, rebuilt */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets.h"

#include "base/fault.h"
#include "base/limits.h"
#include "base/memory.h"
#include "base/threads.h"
#include "firn/reserve.h"

enum {
    CHUNK_BLOCKS = 64,           /* 256 KiB: in the second-level cache while it is judged */
    LEND_BLOCKS = 1024,          /* 4 MiB: what mapping costs, and starting the crew, is spread over enough blocks */
    MEND_READ_BLOCKS = 256,
    MEND_JOB_BLOCKS = 64
};

#define NO_SHEET UINT64_MAX

struct firn_sheets {
    struct firn_sheets_options options;
    struct firn_store *store;
    const struct firn_memory *memory;
    struct firn_threads *threads;
    struct firn_reader_layout layout;
    struct firn_reader_damage damage;
    uint64_t blocks_in_file;                 /* whole ones */
    /* reading on: good data blocks from chunk_first on, mended where needed */
    uint8_t *chunk;
    uint64_t chunk_first;
    uint32_t chunk_count;
    /* the mended sheet */
    uint8_t *sheet;
    enum firn_sheets_finding *findings;
    bool *absent;
    uint64_t sheet_index;
    struct firn_sheet_shape sheet_shape;
    uint64_t sheet_first;
    uint32_t sheet_missing;
    uint8_t *work;                           /* reserve work, one for each worker */
    /* which damaged blocks were counted already: a bit for each block, a field for each sheet that has any */
    uint8_t **counted;
};

static bool should_stop(const struct firn_sheets *sheets)
{
    return sheets->options.stop != NULL && sheets->options.stop(sheets->options.stop_self);
}

uint64_t firn_sheets_place(uint64_t number)
{
    return (number + 1) * FIRN_BLOCK_BYTES;      /* the title page is before block 0 */
}

const struct firn_reader_layout *firn_sheets_layout(const struct firn_sheets *sheets)
{
    return &sheets->layout;
}

void firn_sheets_damage(const struct firn_sheets *sheets, struct firn_reader_damage *damage)
{
    *damage = sheets->damage;
}

uint64_t firn_sheets_stream_bytes(const struct firn_sheets *sheets)
{
    return sheets->layout.data_blocks * FIRN_BLOCK_PAYLOAD_BYTES;
}

void firn_sheets_shape(const struct firn_sheets *sheets, uint64_t index, struct firn_sheet_shape *shape,
                       uint64_t *first_block)
{
    const struct firn_reader_layout *layout = &sheets->layout;

    *first_block = index * firn_sheet_full_blocks(&layout->geometry);
    if (index + 1 == layout->sheets)
        *shape = layout->last_sheet;
    else      /* a full sheet of a valid geometry has a shape */
        (void)firn_sheet_shape_of(&layout->geometry, firn_sheet_full_data(&layout->geometry), shape);
}

/* --- raw reading --- */

/*
 * Reads blocks first .. first + count - 1. Where the medium gives an error, block by block; absent[i] tells which could
 * not be read at all.
 */
static void read_raw(struct firn_sheets *sheets, uint64_t first, uint32_t count, uint8_t *bytes, bool *absent)
{
    struct firn_store *store = sheets->store;
    size_t got = 0, had;
    int os_error = 0;
    enum firn_status status = store->read_at(store->self, firn_sheets_place(first), bytes,
                                             (size_t)count * FIRN_BLOCK_BYTES, &got, &os_error);
    bool failed = status != FIRN_OK;

    had = got / FIRN_BLOCK_BYTES;
    for (uint32_t i = 0; i < count; i++) {
        absent[i] = i >= had;
        if (absent[i] && failed) {
            status = store->read_at(store->self, firn_sheets_place(first + i), bytes + (size_t)i * FIRN_BLOCK_BYTES,
                                    FIRN_BLOCK_BYTES, &got, &os_error);
            absent[i] = status != FIRN_OK || got < FIRN_BLOCK_BYTES;
        }
    }
}

/* --- finding the layout --- */

/* Whether a block that was read at place `number` is a sound one that belongs there. */
static bool opens_at(uint8_t *block, uint64_t number, struct firn_block_tag *tag, bool *foreign)
{
    enum firn_block_state state = firn_block_open(block, false, tag);

    if (state == FIRN_BLOCK_FOREIGN)
        *foreign = true;
    return (state == FIRN_BLOCK_SOUND || state == FIRN_BLOCK_MENDED) && tag->number == number;
}

/* The first block from the front that is good and in its place tells geometry and id. */
static enum firn_status find_first(struct firn_sheets *sheets, struct firn_block_tag *tag)
{
    bool absent[CHUNK_BLOCKS], foreign = false;

    for (uint64_t first = 0; first < sheets->blocks_in_file; first += CHUNK_BLOCKS) {
        uint64_t left = sheets->blocks_in_file - first;
        uint32_t count = left < CHUNK_BLOCKS ? (uint32_t)left : CHUNK_BLOCKS;

        if (should_stop(sheets))
            return FIRN_STOPPED;
        read_raw(sheets, first, count, sheets->chunk, absent);
        for (uint32_t i = 0; i < count; i++)
            if (!absent[i] && opens_at(sheets->chunk + (size_t)i * FIRN_BLOCK_BYTES, first + i, tag, &foreign))
                return FIRN_OK;
    }
    return foreign ? FIRN_FOREIGN_FORMAT : FIRN_NOT_CONTAINER;
}

static bool same_container(const struct firn_block_tag *a, const struct firn_block_tag *b)
{
    return memcmp(a->id, b->id, sizeof a->id) == 0 && a->geometry.k == b->geometry.k &&
           a->geometry.m == b->geometry.m && a->geometry.depth == b->geometry.depth;
}

/* The last good block of this container, from the back. There is one: find_first found it, at the latest. */
static enum firn_status find_last(struct firn_sheets *sheets, const struct firn_block_tag *like,
                                  struct firn_block_tag *tag)
{
    bool absent[CHUNK_BLOCKS], foreign = false;
    uint64_t end = sheets->blocks_in_file;

    while (end > 0) {
        uint32_t count = end < CHUNK_BLOCKS ? (uint32_t)end : CHUNK_BLOCKS;

        if (should_stop(sheets))
            return FIRN_STOPPED;
        read_raw(sheets, end - count, count, sheets->chunk, absent);
        for (uint32_t i = count; i-- > 0;)
            if (!absent[i] && opens_at(sheets->chunk + (size_t)i * FIRN_BLOCK_BYTES, end - count + i, tag, &foreign) &&
                same_container(tag, like))
                return FIRN_OK;
        end -= count;
    }
    return FIRN_NOT_CONTAINER;
}

static enum firn_status find_layout(struct firn_sheets *sheets)
{
    struct firn_reader_layout *layout = &sheets->layout;
    struct firn_block_tag first, last;
    enum firn_status status = find_first(sheets, &first);
    uint64_t full, begin, end;

    if (status == FIRN_OK)
        status = find_last(sheets, &first, &last);
    if (status != FIRN_OK)
        return status;
    layout->geometry = first.geometry;
    memcpy(layout->id, first.id, sizeof layout->id);
    full = firn_sheet_full_blocks(&first.geometry);
    layout->sheets = last.number / full + 1;
    status = firn_sheet_shape_of(&first.geometry, last.data_blocks, &layout->last_sheet);
    if (status != FIRN_OK)
        return FIRN_NOT_CONTAINER;
    begin = (layout->sheets - 1) * full;
    layout->blocks = begin + layout->last_sheet.data_blocks + layout->last_sheet.reserve_blocks;
    layout->data_blocks = (layout->sheets - 1) * firn_sheet_full_data(&first.geometry) + layout->last_sheet.data_blocks;
    layout->blocks_missing = layout->blocks > sheets->blocks_in_file ? layout->blocks - sheets->blocks_in_file : 0;
    end = firn_sheets_place(layout->blocks);
    if (layout->file_bytes > end)
        layout->foreign_bytes = layout->file_bytes - end;
    else if (layout->file_bytes >= FIRN_BLOCK_BYTES)
        layout->foreign_bytes = layout->file_bytes % FIRN_BLOCK_BYTES;
    layout->end_known = last.data_blocks < firn_sheet_full_data(&first.geometry);
    return FIRN_OK;
}

static enum firn_status make_rooms(struct firn_sheets *sheets)
{
    sheets->chunk = sheets->memory->get(sheets->memory->self, CHUNK_BLOCKS * FIRN_BLOCK_BYTES);
    if (sheets->chunk == NULL)
        return FIRN_NO_MEMORY;
    return firn_threads_make(sheets->memory, sheets->options.threads, &sheets->threads);
}

enum firn_status firn_sheets_open(const struct firn_sheets_options *options, struct firn_fault *fault,
                                  struct firn_sheets **out)
{
    struct firn_sheets *sheets = firn_memory_get_zeroed(options->memory, 1, sizeof *sheets);
    enum firn_status status;
    int os_error = 0;

    *out = NULL;
    if (sheets == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "the reader");
    sheets->options = *options;
    sheets->store = options->store;
    sheets->memory = options->memory;
    sheets->sheet_index = NO_SHEET;
    status = make_rooms(sheets);
    if (status == FIRN_OK)
        status = sheets->store->size(sheets->store->self, &sheets->layout.file_bytes, &os_error);
    if (status == FIRN_OK) {
        sheets->blocks_in_file = sheets->layout.file_bytes / FIRN_BLOCK_BYTES;
        sheets->blocks_in_file -= sheets->blocks_in_file > 0;      /* the title page */
        status = find_layout(sheets);
    }
    if (status == FIRN_OK) {
        sheets->counted = firn_memory_get_zeroed(sheets->memory, sheets->layout.sheets, sizeof sheets->counted[0]);
        status = sheets->counted == NULL ? FIRN_NO_MEMORY : FIRN_OK;
    }
    if (status != FIRN_OK) {
        firn_sheets_close(sheets);
        return firn_fault_tell(fault, status, os_error, 0, "");
    }
    *out = sheets;
    return FIRN_OK;
}

void firn_sheets_close(struct firn_sheets *sheets)
{
    const struct firn_memory *memory;

    if (sheets == NULL)
        return;
    memory = sheets->memory;
    firn_threads_free(sheets->threads);
    if (sheets->counted != NULL)
        for (uint64_t i = 0; i < sheets->layout.sheets; i++)
            memory->put(memory->self, sheets->counted[i]);
    memory->put(memory->self, sheets->counted);
    memory->put(memory->self, sheets->chunk);
    memory->put(memory->self, sheets->sheet);
    memory->put(memory->self, sheets->findings);
    memory->put(memory->self, sheets->absent);
    memory->put(memory->self, sheets->work);
    memory->put(memory->self, sheets);
}

/* --- judging --- */

/*
 * Counts a damaged block, once however often it is read. Without memory for the mark it may count twice: only a figure.
 */
static void count_damage(struct firn_sheets *sheets, uint64_t number, enum firn_sheets_finding finding, bool absent)
{
    uint32_t full = firn_sheet_full_blocks(&sheets->layout.geometry);
    uint64_t sheet = number / full, index = number % full;
    uint8_t bit = (uint8_t)(1U << index % 8);

    if (sheets->counted[sheet] == NULL)
        sheets->counted[sheet] = firn_memory_get_zeroed(sheets->memory, full / 8 + 1, 1);
    if (sheets->counted[sheet] != NULL) {
        if (sheets->counted[sheet][index / 8] & bit)
            return;
        sheets->counted[sheet][index / 8] |= bit;
    }
    sheets->damage.mended += finding == FIRN_SHEETS_MENDED;
    sheets->damage.rebuilt += finding == FIRN_SHEETS_REBUILT;
    sheets->damage.lost += finding == FIRN_SHEETS_LOST;
    sheets->damage.unreadable += absent;
}

/* The tag that a block must have at its place. */
static struct firn_block_tag expected_tag(const struct firn_sheets *sheets, const struct firn_sheet_shape *shape,
                                          uint64_t first_block, uint32_t index)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = index < shape->data_blocks ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE,
        .geometry = sheets->layout.geometry, .number = first_block + index, .data_blocks = shape->data_blocks
    };

    memcpy(tag.id, sheets->layout.id, sizeof tag.id);
    return tag;
}

static enum firn_sheets_finding judge(uint8_t *block, const struct firn_block_tag *expected, bool check_all)
{
    struct firn_block_tag tag;
    enum firn_block_state state = firn_block_open(block, check_all, &tag);

    if (state == FIRN_BLOCK_GONE || state == FIRN_BLOCK_FOREIGN)
        return FIRN_SHEETS_LOST;
    if (!same_container(&tag, expected) || tag.number != expected->number || tag.kind != expected->kind ||
        tag.data_blocks != expected->data_blocks)
        return FIRN_SHEETS_LOST;
    return state == FIRN_BLOCK_MENDED ? FIRN_SHEETS_MENDED : FIRN_SHEETS_SOUND;
}

/* Blocks that lie together in memory, judged by the crew piece by piece. */
struct checking {
    const struct firn_sheets *sheets;
    struct firn_sheet_shape shape;
    uint64_t first;                              /* block of the sheet */
    uint32_t at, count;                          /* of these, in the sheet */
    uint8_t *bytes;
    bool sound[LEND_BLOCKS / CHUNK_BLOCKS];      /* each job writes its own */
};

static void check_chunk(void *self, size_t job, unsigned worker)
{
    struct checking *c = self;
    uint32_t from = (uint32_t)job * CHUNK_BLOCKS, end = c->count - from < CHUNK_BLOCKS ? c->count : from + CHUNK_BLOCKS;

    (void)worker;
    c->sound[job] = true;
    for (uint32_t i = from; i < end && c->sound[job]; i++) {
        struct firn_block_tag expected = expected_tag(c->sheets, &c->shape, c->first, c->at + i);

        c->sound[job] = judge(c->bytes + (size_t)i * FIRN_BLOCK_BYTES, &expected, true) == FIRN_SHEETS_SOUND;
    }
}

static bool check_blocks(struct firn_sheets *sheets, struct checking *c)
{
    size_t jobs = (c->count + CHUNK_BLOCKS - 1) / CHUNK_BLOCKS;
    bool sound = true;

    firn_threads_run(sheets->threads, check_chunk, c, jobs);
    for (size_t i = 0; i < jobs; i++)
        sound = sound && c->sound[i];
    return sound;
}

enum firn_status firn_sheets_check(struct firn_sheets *sheets, uint64_t index, bool *clean)
{
    struct firn_store *store = sheets->store;
    struct checking c = { .sheets = sheets };
    bool absent[CHUNK_BLOCKS], whole = true;
    uint32_t blocks;

    firn_sheets_shape(sheets, index, &c.shape, &c.first);
    blocks = c.shape.data_blocks + c.shape.reserve_blocks;
    sheets->chunk_count = 0;
    *clean = false;
    for (c.at = 0; c.at < blocks; c.at += c.count) {
        if (should_stop(sheets))
            return FIRN_STOPPED;
        c.count = blocks - c.at < LEND_BLOCKS ? blocks - c.at : LEND_BLOCKS;
        if (store->lend == NULL || store->lend(store->self, firn_sheets_place(c.first + c.at),
                                               (size_t)c.count * FIRN_BLOCK_BYTES, &c.bytes) != FIRN_OK) {
            c.count = c.count < CHUNK_BLOCKS ? c.count : CHUNK_BLOCKS;
            c.bytes = sheets->chunk;
            read_raw(sheets, c.first + c.at, c.count, c.bytes, absent);
            for (uint32_t i = 0; i < c.count; i++)
                whole = whole && !absent[i];
        }
        if (!whole || !check_blocks(sheets, &c))
            return FIRN_OK;
        sheets->damage.blocks_read += c.count;
    }
    *clean = true;
    return FIRN_OK;
}

/* --- a whole sheet --- */

static enum firn_status make_sheet_rooms(struct firn_sheets *sheets)
{
    const struct firn_memory *memory = sheets->memory;
    size_t full = firn_sheet_full_blocks(&sheets->layout.geometry);

    if (sheets->sheet == NULL)
        sheets->sheet = memory->get(memory->self, full * FIRN_BLOCK_BYTES);
    if (sheets->findings == NULL)
        sheets->findings = memory->get(memory->self, full * sizeof sheets->findings[0]);
    if (sheets->absent == NULL)
        sheets->absent = memory->get(memory->self, full * sizeof sheets->absent[0]);
    if (sheets->work == NULL)
        sheets->work = memory->get(memory->self, firn_reserve_work_bytes() * firn_threads_count(sheets->threads));
    return sheets->sheet == NULL || sheets->findings == NULL || sheets->absent == NULL || sheets->work == NULL
               ? FIRN_NO_MEMORY : FIRN_OK;
}

static uint8_t *sheet_block(struct firn_sheets *sheets, uint32_t index)
{
    return sheets->sheet + (size_t)index * FIRN_BLOCK_BYTES;
}

static uint32_t sheet_blocks(const struct firn_sheets *sheets)
{
    return sheets->sheet_shape.data_blocks + sheets->sheet_shape.reserve_blocks;
}

/* A job: judges some blocks of the sheet. */
static void judge_blocks(void *self, size_t job, unsigned worker)
{
    struct firn_sheets *sheets = self;
    uint32_t at = (uint32_t)job * MEND_JOB_BLOCKS, end = sheet_blocks(sheets);

    (void)worker;
    end = end - at < MEND_JOB_BLOCKS ? end : at + MEND_JOB_BLOCKS;
    for (; at < end; at++) {
        struct firn_block_tag expected = expected_tag(sheets, &sheets->sheet_shape, sheets->sheet_first, at);

        sheets->findings[at] = sheets->absent[at] ? FIRN_SHEETS_LOST : judge(sheet_block(sheets, at), &expected, true);
    }
}

/* A job: rebuilds what is lost of one row, if the reserve reaches. Rows share no block. */
static void rebuild_row(void *self, size_t row, unsigned worker)
{
    struct firn_sheets *sheets = self;
    const struct firn_sheet_shape *shape = &sheets->sheet_shape;
    uint8_t *payloads[256];
    unsigned lost[256], lost_count = 0;

    for (unsigned column = 0; column < shape->k + shape->m; column++) {
        uint32_t index = firn_sheet_index(shape, (uint32_t)row, column);

        payloads[column] = index == UINT32_MAX ? NULL : sheet_block(sheets, index);
        if (index != UINT32_MAX && sheets->findings[index] == FIRN_SHEETS_LOST)
            lost[lost_count++] = column;
    }
    if (lost_count == 0 || shape->m == 0 ||
        firn_reserve_rebuild(shape->k, shape->m, payloads, lost, lost_count, FIRN_BLOCK_PAYLOAD_BYTES,
                             sheets->work + worker * firn_reserve_work_bytes()) != FIRN_OK)
        return;
    for (unsigned i = 0; i < lost_count; i++) {
        uint32_t index = firn_sheet_index(shape, (uint32_t)row, lost[i]);
        struct firn_block_tag tag = expected_tag(sheets, shape, sheets->sheet_first, index);

        firn_block_seal(sheet_block(sheets, index), &tag);
        sheets->findings[index] = FIRN_SHEETS_REBUILT;
    }
}

static enum firn_status load_sheet(struct firn_sheets *sheets, uint64_t index)
{
    uint32_t blocks;

    sheets->sheet_index = NO_SHEET;
    firn_sheets_shape(sheets, index, &sheets->sheet_shape, &sheets->sheet_first);
    blocks = sheet_blocks(sheets);
    for (uint32_t at = 0; at < blocks; at += MEND_READ_BLOCKS) {
        uint32_t count = blocks - at < MEND_READ_BLOCKS ? blocks - at : MEND_READ_BLOCKS;

        if (should_stop(sheets))
            return FIRN_STOPPED;
        read_raw(sheets, sheets->sheet_first + at, count, sheet_block(sheets, at), sheets->absent + at);
    }
    return FIRN_OK;
}

enum firn_status firn_sheets_mend(struct firn_sheets *sheets, uint64_t index, const uint8_t **blocks,
                                  const enum firn_sheets_finding **findings, uint32_t *missing)
{
    enum firn_status status = make_sheet_rooms(sheets);
    uint32_t count;

    if (status == FIRN_OK && sheets->sheet_index != index) {
        status = load_sheet(sheets, index);
        if (status != FIRN_OK)
            return status;
        count = sheet_blocks(sheets);
        firn_threads_run(sheets->threads, judge_blocks, sheets, (count + MEND_JOB_BLOCKS - 1) / MEND_JOB_BLOCKS);
        firn_threads_run(sheets->threads, rebuild_row, sheets, sheets->sheet_shape.rows);
        sheets->sheet_missing = 0;
        for (uint32_t i = 0; i < count; i++) {
            sheets->sheet_missing += sheets->absent[i];
            if (sheets->findings[i] != FIRN_SHEETS_SOUND)
                count_damage(sheets, sheets->sheet_first + i, sheets->findings[i], sheets->absent[i]);
        }
        sheets->damage.blocks_read += count;
        sheets->sheet_index = index;
    }
    if (status != FIRN_OK)
        return status;
    *blocks = sheets->sheet;
    *findings = sheets->findings;
    *missing = sheets->sheet_missing;
    return FIRN_OK;
}

/* --- the stream --- */

/* Reads on from data block `number`, as far as blocks are good; chunk_count is 0 when this one is not. */
static void load_chunk(struct firn_sheets *sheets, uint64_t number, const struct firn_sheet_shape *shape,
                       uint64_t first)
{
    uint32_t index = (uint32_t)(number - first), left = shape->data_blocks - index;
    uint32_t count = left < CHUNK_BLOCKS ? left : CHUNK_BLOCKS;
    bool absent[CHUNK_BLOCKS];

    sheets->chunk_first = number;
    sheets->chunk_count = 0;
    read_raw(sheets, number, count, sheets->chunk, absent);
    for (uint32_t i = 0; i < count && !absent[i]; i++) {
        struct firn_block_tag expected = expected_tag(sheets, shape, first, index + i);
        enum firn_sheets_finding finding = judge(sheets->chunk + (size_t)i * FIRN_BLOCK_BYTES, &expected, false);

        if (finding == FIRN_SHEETS_LOST)
            break;
        if (finding == FIRN_SHEETS_MENDED)
            count_damage(sheets, number + i, finding, false);
        sheets->chunk_count++;
    }
    sheets->damage.blocks_read += sheets->chunk_count;
}

/* The payload of data block `number`, good; FIRN_LOST when it is beyond repair. */
static enum firn_status data_block(struct firn_sheets *sheets, uint64_t number, const uint8_t **payload)
{
    uint64_t index = number / firn_sheet_full_blocks(&sheets->layout.geometry), first;
    const enum firn_sheets_finding *findings;
    struct firn_sheet_shape shape;
    const uint8_t *blocks;
    enum firn_status status;
    uint32_t missing;

    if (index != sheets->sheet_index) {
        if (number - sheets->chunk_first >= sheets->chunk_count) {
            firn_sheets_shape(sheets, index, &shape, &first);
            load_chunk(sheets, number, &shape, first);
        }
        if (sheets->chunk_count > 0) {
            *payload = sheets->chunk + (size_t)(number - sheets->chunk_first) * FIRN_BLOCK_BYTES;
            return FIRN_OK;
        }
        if (sheets->layout.geometry.m == 0) {
            count_damage(sheets, number, FIRN_SHEETS_LOST, false);
            return FIRN_LOST;
        }
    }
    status = firn_sheets_mend(sheets, index, &blocks, &findings, &missing);
    if (status != FIRN_OK)
        return status;
    first = number - sheets->sheet_first;
    *payload = blocks + (size_t)first * FIRN_BLOCK_BYTES;
    return findings[first] == FIRN_SHEETS_LOST ? FIRN_LOST : FIRN_OK;
}

enum firn_status firn_sheets_read(struct firn_sheets *sheets, uint64_t at, uint8_t *bytes, size_t count,
                                  struct firn_sheets_gap *gap)
{
    uint32_t full_data = firn_sheet_full_data(&sheets->layout.geometry);
    uint64_t end = firn_sheets_stream_bytes(sheets);

    *gap = (struct firn_sheets_gap){ .good = 0 };
    if (at > end || count > end - at)
        return FIRN_END;
    if (should_stop(sheets))
        return FIRN_STOPPED;
    while (count > 0) {
        uint64_t payload_index = at / FIRN_BLOCK_PAYLOAD_BYTES;
        size_t inside = (size_t)(at % FIRN_BLOCK_PAYLOAD_BYTES), step = FIRN_BLOCK_PAYLOAD_BYTES - inside;
        uint64_t number = payload_index / full_data * firn_sheet_full_blocks(&sheets->layout.geometry)
                          + payload_index % full_data;
        const uint8_t *payload;
        enum firn_status status = data_block(sheets, number, &payload);

        if (status != FIRN_OK) {
            gap->resume = (payload_index + 1) * FIRN_BLOCK_PAYLOAD_BYTES;
            gap->container_at = firn_sheets_place(number);
            return status;
        }
        step = step < count ? step : count;
        memcpy(bytes, payload + inside, step);
        bytes += step;
        at += step;
        count -= step;
        gap->good += step;
    }
    return FIRN_OK;
}
