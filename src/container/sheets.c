/* container/sheets.c - the blocks of a container as one stream */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets.h"

#include "base/fault.h"
#include "base/memory.h"
#include "container/sheets_block.h"
#include "container/sheets_kept.h"
#include "container/sheets_layout.h"

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

static enum firn_status make_rooms(struct firn_sheets *sheets)
{
    sheets->chunk = sheets->memory->get(sheets->memory->self, FIRN_SHEETS_CHUNK_BLOCKS * FIRN_BLOCK_BYTES);
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
    sheets->sheet_index = FIRN_SHEETS_NONE;
    status = make_rooms(sheets);
    if (status == FIRN_OK)
        status = sheets->store->size(sheets->store->self, &sheets->layout.file_bytes, &os_error);
    if (status == FIRN_OK) {
        sheets->blocks_in_file = sheets->layout.file_bytes / FIRN_BLOCK_BYTES;
        sheets->blocks_in_file -= sheets->blocks_in_file > 0;      /* the title page */
        status = firn_sheets_layout_find(sheets);
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
    firn_sheets_kept_free(sheets);
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

/* --- the stream --- */

/* Reads on from data block `number`, as far as blocks are good; chunk_count is 0 when this one is not. */
static void load_chunk(struct firn_sheets *sheets, uint64_t number, const struct firn_sheet_shape *shape,
                       uint64_t first)
{
    uint32_t index = (uint32_t)(number - first), left = shape->data_blocks - index;
    uint32_t count = left < FIRN_SHEETS_CHUNK_BLOCKS ? left : FIRN_SHEETS_CHUNK_BLOCKS;
    bool absent[FIRN_SHEETS_CHUNK_BLOCKS];

    sheets->chunk_first = number;
    sheets->chunk_count = 0;
    firn_sheets_block_read(sheets, number, count, sheets->chunk, absent);
    for (uint32_t i = 0; i < count && !absent[i]; i++) {
        struct firn_block_tag expected = firn_sheets_block_tag(sheets, shape, first, index + i);
        enum firn_sheets_finding finding = firn_sheets_block_judge(sheets->chunk + (size_t)i * FIRN_BLOCK_BYTES,
                                                                   &expected, false);

        if (finding == FIRN_SHEETS_LOST)
            break;
        if (finding == FIRN_SHEETS_MENDED)
            firn_sheets_block_count(sheets, number + i, finding, false);
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
        *payload = firn_sheets_kept_find(sheets, number);
        if (*payload != NULL)
            return FIRN_OK;
        if (number - sheets->chunk_first >= sheets->chunk_count) {
            firn_sheets_shape(sheets, index, &shape, &first);
            load_chunk(sheets, number, &shape, first);
        }
        if (sheets->chunk_count > 0) {
            *payload = sheets->chunk + (size_t)(number - sheets->chunk_first) * FIRN_BLOCK_BYTES;
            return FIRN_OK;
        }
    }
    status = firn_sheets_mend(sheets, index, &blocks, &findings, &missing);
    if (status != FIRN_OK)
        return status;
    first = number - sheets->sheet_first;
    sheets->served = (uint32_t)first;
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
    if (firn_sheets_state_stopped(sheets))
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
