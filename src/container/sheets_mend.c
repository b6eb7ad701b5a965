/* container/sheets_mend.c - a whole sheet in memory: judged, mended, rebuilt, rescued */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets_block.h"
#include "container/sheets_kept.h"
#include "container/sheets_rescue.h"
#include "firn/reserve.h"

enum { READ_BLOCKS = 256, JOB_BLOCKS = 64 };

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

/* A job: judges some blocks of the sheet. */
static void judge_blocks(void *self, size_t job, unsigned worker)
{
    struct firn_sheets *sheets = self;
    uint32_t at = (uint32_t)job * JOB_BLOCKS, end = firn_sheets_state_count(sheets);

    (void)worker;
    end = end - at < JOB_BLOCKS ? end : at + JOB_BLOCKS;
    for (; at < end; at++) {
        struct firn_block_tag expected = firn_sheets_block_tag(sheets, &sheets->sheet_shape, sheets->sheet_first, at);

        sheets->findings[at] = FIRN_SHEETS_LOST;
        if (!sheets->absent[at])
            sheets->findings[at] = firn_sheets_block_judge(firn_sheets_state_block(sheets, at), &expected, true);
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

        payloads[column] = index == UINT32_MAX ? NULL : firn_sheets_state_block(sheets, index);
        if (index != UINT32_MAX && sheets->findings[index] == FIRN_SHEETS_LOST)
            lost[lost_count++] = column;
    }
    if (lost_count == 0 || shape->m == 0 ||
        firn_reserve_rebuild(shape->k, shape->m, payloads, lost, lost_count, FIRN_BLOCK_PAYLOAD_BYTES,
                             sheets->work + worker * firn_reserve_work_bytes()) != FIRN_OK)
        return;
    for (unsigned i = 0; i < lost_count; i++) {
        uint32_t index = firn_sheet_index(shape, (uint32_t)row, lost[i]);
        struct firn_block_tag tag = firn_sheets_block_tag(sheets, shape, sheets->sheet_first, index);

        firn_block_seal(firn_sheets_state_block(sheets, index), &tag);
        sheets->findings[index] = FIRN_SHEETS_REBUILT;
    }
}

static enum firn_status load_sheet(struct firn_sheets *sheets, uint64_t index)
{
    uint32_t blocks;

    firn_sheets_kept_save(sheets);
    sheets->sheet_index = FIRN_SHEETS_NONE;
    sheets->served = FIRN_SHEETS_NOTHING_SERVED;
    firn_sheets_shape(sheets, index, &sheets->sheet_shape, &sheets->sheet_first);
    blocks = firn_sheets_state_count(sheets);
    for (uint32_t at = 0; at < blocks; at += READ_BLOCKS) {
        uint32_t count = blocks - at < READ_BLOCKS ? blocks - at : READ_BLOCKS;

        if (firn_sheets_state_stopped(sheets))
            return FIRN_STOPPED;
        firn_sheets_block_read(sheets, sheets->sheet_first + at, count, firn_sheets_state_block(sheets, at),
                               sheets->absent + at);
    }
    return FIRN_OK;
}

static void count_findings(struct firn_sheets *sheets)
{
    const uint32_t count = firn_sheets_state_count(sheets);

    sheets->sheet_missing = 0;
    for (uint32_t i = 0; i < count; i++) {
        sheets->sheet_missing += sheets->absent[i];
        if (sheets->findings[i] != FIRN_SHEETS_SOUND)
            firn_sheets_block_count(sheets, sheets->sheet_first + i, sheets->findings[i], sheets->absent[i]);
    }
    sheets->damage.blocks_read += count;
}

static enum firn_status mend_sheet(struct firn_sheets *sheets, uint64_t index)
{
    enum firn_status status = load_sheet(sheets, index);

    if (status != FIRN_OK)
        return status;
    firn_threads_run(sheets->threads, judge_blocks, sheets,
                     (firn_sheets_state_count(sheets) + JOB_BLOCKS - 1) / JOB_BLOCKS);
    firn_threads_run(sheets->threads, rebuild_row, sheets, sheets->sheet_shape.rows);
    status = firn_sheets_rescue(sheets);
    if (status != FIRN_OK)
        return status;
    count_findings(sheets);
    sheets->sheet_index = index;
    return FIRN_OK;
}

enum firn_status firn_sheets_mend(struct firn_sheets *sheets, uint64_t index, const uint8_t **blocks,
                                  const enum firn_sheets_finding **findings, uint32_t *missing)
{
    enum firn_status status = make_sheet_rooms(sheets);

    if (status == FIRN_OK && sheets->sheet_index != index)
        status = mend_sheet(sheets, index);
    if (status != FIRN_OK)
        return status;
    *blocks = sheets->sheet;
    *findings = sheets->findings;
    *missing = sheets->sheet_missing;
    return FIRN_OK;
}
