/* container/press.c - turns the stream into sheets of blocks in a store */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/press.h"

#include "base/fault.h"
#include "base/memory.h"
#include "container/title.h"
#include "firn/block.h"
#include "firn/reserve.h"
#include "guard/hash.h"

enum { WRITE_BYTES = 8 << 20 };      /* a write call of this size is long enough for any medium */

struct firn_press {
    struct firn_store *store;
    const struct firn_memory *memory;
    struct firn_threads *threads;
    struct firn_sheet_geometry geometry;
    uint8_t page[FIRN_TITLE_PAGE_BYTES];
    bool page_written;
    uint8_t *sheet;                  /* a full sheet of blocks, in order */
    uint8_t *work;                   /* reserve work, one for each worker */
    uint32_t filled;                 /* whole data payloads in the sheet */
    size_t payload_used;             /* of the next one */
    uint64_t stream_at;
    uint64_t first_block;            /* of the sheet in the container */
    uint64_t data_blocks;
    uint8_t chain[2 * FIRN_HASH_BYTES];      /* what the id is made of */
    bool id_known;
    struct firn_sheet_shape shape;   /* of the sheet being sealed */
};

enum firn_status firn_press_make(const struct firn_press_options *options, struct firn_press **out)
{
    size_t blocks = firn_sheet_full_blocks(&options->geometry);
    struct firn_press *press = firn_memory_get_zeroed(options->memory, 1, sizeof *press);

    *out = NULL;
    if (press == NULL)
        return FIRN_NO_MEMORY;
    press->store = options->store;
    press->memory = options->memory;
    press->threads = options->threads;
    press->geometry = options->geometry;
    memcpy(press->page, options->page, sizeof press->page);
    memcpy(press->chain, options->nonce, FIRN_HASH_BYTES);
    press->sheet = press->memory->get(press->memory->self, blocks * FIRN_BLOCK_BYTES);
    press->work = press->memory->get(press->memory->self,
                                     firn_reserve_work_bytes() * firn_threads_count(press->threads));
    if (press->sheet == NULL || press->work == NULL) {
        firn_press_free(press);
        return FIRN_NO_MEMORY;
    }
    *out = press;
    return FIRN_OK;
}

void firn_press_free(struct firn_press *press)
{
    if (press == NULL)
        return;
    press->memory->put(press->memory->self, press->sheet);
    press->memory->put(press->memory->self, press->work);
    press->memory->put(press->memory->self, press);
}

uint64_t firn_press_at(const struct firn_press *press)
{
    return press->stream_at;
}

static uint8_t *block_at(struct firn_press *press, uint32_t index)
{
    return press->sheet + (size_t)index * FIRN_BLOCK_BYTES;
}

/* The id: a hash chained over the nonce and every payload of the first sheet, so that it names what is packed. */
static void make_id(struct firn_press *press)
{
    for (uint32_t i = 0; i < press->filled; i++) {
        firn_hash_put(block_at(press, i), FIRN_BLOCK_PAYLOAD_BYTES, press->chain + FIRN_HASH_BYTES);
        firn_hash_put(press->chain, sizeof press->chain, press->chain);
    }
    press->id_known = true;
}

static void seal(struct firn_press *press, uint32_t index, enum firn_block_kind kind)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = kind, .geometry = press->geometry,
        .number = press->first_block + index, .data_blocks = press->shape.data_blocks
    };

    memcpy(tag.id, press->chain, sizeof tag.id);
    firn_block_seal(block_at(press, index), &tag);
}

/* A job: one row of the sheet, reserve and seals. Rows share no block. */
static void finish_row(void *self, size_t row, unsigned worker)
{
    struct firn_press *press = self;
    const struct firn_sheet_shape *shape = &press->shape;
    const uint8_t *data[256];
    uint8_t *reserve[256];

    for (unsigned column = 0; column < shape->k; column++) {
        uint32_t index = firn_sheet_index(shape, (uint32_t)row, column);

        data[column] = index == UINT32_MAX ? NULL : block_at(press, index);
        if (index != UINT32_MAX)
            seal(press, index, FIRN_BLOCK_DATA);
    }
    if (shape->m == 0)
        return;
    for (unsigned j = 0; j < shape->m; j++)
        reserve[j] = block_at(press, firn_sheet_index(shape, (uint32_t)row, shape->k + j));
    /* k and m come from a valid geometry, so this cannot be refused */
    (void)firn_reserve_encode(shape->k, shape->m, data, reserve, FIRN_BLOCK_PAYLOAD_BYTES,
                              press->work + worker * firn_reserve_work_bytes());
    for (unsigned j = 0; j < shape->m; j++)
        seal(press, firn_sheet_index(shape, (uint32_t)row, shape->k + j), FIRN_BLOCK_RESERVE);
}

static enum firn_status write_out(struct firn_press *press, uint64_t at, const uint8_t *bytes, size_t count,
                                  struct firn_fault *fault)
{
    while (count > 0) {
        size_t step = count < WRITE_BYTES ? count : WRITE_BYTES;
        int os_error = 0;
        enum firn_status status = press->store->write_at(press->store->self, at, bytes, step, &os_error);

        if (status != FIRN_OK)
            return firn_fault_tell(fault, status, os_error, at, "the container being written");
        at += step;
        bytes += step;
        count -= step;
    }
    return FIRN_OK;
}

static enum firn_status flush_sheet(struct firn_press *press, struct firn_fault *fault)
{
    enum firn_status status = firn_sheet_shape_of(&press->geometry, press->filled, &press->shape);
    size_t blocks;

    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, press->stream_at, "the shape of a sheet");
    if (!press->id_known)
        make_id(press);
    firn_threads_run(press->threads, finish_row, press, press->shape.rows);
    if (!press->page_written) {
        status = write_out(press, 0, press->page, sizeof press->page, fault);
        if (status != FIRN_OK)
            return status;
        press->page_written = true;
    }
    blocks = (size_t)press->shape.data_blocks + press->shape.reserve_blocks;
    status = write_out(press, FIRN_TITLE_PAGE_BYTES + press->first_block * FIRN_BLOCK_BYTES, press->sheet,
                       blocks * FIRN_BLOCK_BYTES, fault);
    press->first_block += blocks;
    press->data_blocks += press->filled;
    press->filled = 0;
    return status;
}

/* Appends bytes, or zeros where bytes is NULL. */
static enum firn_status append(struct firn_press *press, const uint8_t *bytes, size_t count, struct firn_fault *fault)
{
    uint32_t full = firn_sheet_full_data(&press->geometry);

    while (count > 0) {
        size_t room = FIRN_BLOCK_PAYLOAD_BYTES - press->payload_used, step = count < room ? count : room;
        uint8_t *to = block_at(press, press->filled) + press->payload_used;

        if (bytes != NULL) {
            memcpy(to, bytes, step);
            bytes += step;
        } else {
            memset(to, 0, step);
        }
        count -= step;
        press->stream_at += step;
        press->payload_used += step;
        if (press->payload_used < FIRN_BLOCK_PAYLOAD_BYTES)
            continue;
        press->payload_used = 0;
        if (++press->filled == full) {
            enum firn_status status = flush_sheet(press, fault);

            if (status != FIRN_OK)
                return status;
        }
    }
    return FIRN_OK;
}

enum firn_status firn_press_put(struct firn_press *press, const uint8_t *bytes, size_t count, struct firn_fault *fault)
{
    return append(press, bytes, count, fault);
}

enum firn_status firn_press_put_zeros(struct firn_press *press, size_t count, struct firn_fault *fault)
{
    return append(press, NULL, count, fault);
}

enum firn_status firn_press_finish(struct firn_press *press, struct firn_fault *fault, struct firn_press_totals *totals)
{
    enum firn_status status = FIRN_OK;

    if (press->payload_used > 0)
        status = append(press, NULL, FIRN_BLOCK_PAYLOAD_BYTES - press->payload_used, fault);
    if (status == FIRN_OK && press->filled > 0)
        status = flush_sheet(press, fault);
    totals->blocks = press->first_block;
    totals->data_blocks = press->data_blocks;
    totals->container_bytes = FIRN_TITLE_PAGE_BYTES + press->first_block * FIRN_BLOCK_BYTES;
    memcpy(totals->id, press->chain, sizeof totals->id);
    return status;
}
