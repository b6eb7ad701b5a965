/* container/sheets_check.c - a sheet looked through in one pass that keeps nothing */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets_block.h"

enum {
    CHUNK = FIRN_SHEETS_CHUNK_BLOCKS,
    LEND_BLOCKS = 1024      /* 4 MiB: what mapping costs, and starting the crew, is spread over enough blocks */
};

/* Blocks that lie together in memory, judged by the crew piece by piece. */
struct checking {
    const struct firn_sheets *sheets;
    struct firn_sheet_shape shape;
    uint64_t first;                              /* block of the sheet */
    uint32_t at, count;                          /* of these, in the sheet */
    uint8_t *bytes;
    bool sound[LEND_BLOCKS / CHUNK];      /* each job writes its own */
};

static void check_chunk(void *self, size_t job, unsigned worker)
{
    struct checking *c = self;
    uint32_t from = (uint32_t)job * CHUNK, end = c->count - from < CHUNK ? c->count : from + CHUNK;

    (void)worker;
    c->sound[job] = true;
    for (uint32_t i = from; i < end && c->sound[job]; i++) {
        struct firn_block_tag expected = firn_sheets_block_tag(c->sheets, &c->shape, c->first, c->at + i);

        c->sound[job] = firn_sheets_block_judge(c->bytes + (size_t)i * FIRN_BLOCK_BYTES, &expected, true)
                        == FIRN_SHEETS_SOUND;
    }
}

static bool check_blocks(struct firn_sheets *sheets, struct checking *c)
{
    size_t jobs = (c->count + CHUNK - 1) / CHUNK;
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
    bool absent[CHUNK], whole = true;
    uint32_t blocks;

    firn_sheets_shape(sheets, index, &c.shape, &c.first);
    blocks = c.shape.data_blocks + c.shape.reserve_blocks;
    sheets->chunk_count = 0;
    *clean = false;
    for (c.at = 0; c.at < blocks; c.at += c.count) {
        if (firn_sheets_state_stopped(sheets))
            return FIRN_STOPPED;
        c.count = blocks - c.at < LEND_BLOCKS ? blocks - c.at : LEND_BLOCKS;
        if (store->lend == NULL || store->lend(store->self, firn_sheets_place(c.first + c.at),
                                               (size_t)c.count * FIRN_BLOCK_BYTES, &c.bytes) != FIRN_OK) {
            c.count = c.count < CHUNK ? c.count : CHUNK;
            c.bytes = sheets->chunk;
            firn_sheets_block_read(sheets, c.first + c.at, c.count, c.bytes, absent);
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
