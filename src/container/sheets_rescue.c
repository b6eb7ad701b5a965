/* container/sheets_rescue.c - the last resort for a sheet in memory: what the reserve did not bring back */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/sheets_rescue.h"

#include "container/sheets_block.h"
#include "guard/deep.h"
#include "guard/rescue.h"

enum { JOBS_A_WORKER = 8 };      /* between two questions whether to stop: less than a second */

struct rescue {
    struct firn_sheets *sheets;
    uint8_t *work;                /* of the rows, one for each worker */
    uint32_t *list;               /* rows or blocks to be worked on */
    uint32_t count, done;
};

static bool row_lacks(const struct firn_sheets *sheets, uint32_t row)
{
    for (uint32_t index = row; index < firn_sheets_state_count(sheets); index += sheets->sheet_shape.rows)
        if (sheets->findings[index] == FIRN_SHEETS_LOST)
            return true;
    return false;
}

static void list_rows(struct rescue *rescue)
{
    rescue->count = 0;
    for (uint32_t row = 0; row < rescue->sheets->sheet_shape.rows; row++)
        if (row_lacks(rescue->sheets, row))
            rescue->list[rescue->count++] = row;
}

/* Runs one job for each entry of the list, a few at a time. */
static enum firn_status run_list(struct rescue *rescue, firn_threads_job *job)
{
    struct firn_threads *threads = rescue->sheets->threads;
    uint32_t most = JOBS_A_WORKER * firn_threads_count(threads);

    for (rescue->done = 0; rescue->done < rescue->count;) {
        uint32_t left = rescue->count - rescue->done, jobs = left < most ? left : most;

        if (firn_sheets_state_stopped(rescue->sheets))
            return FIRN_STOPPED;
        firn_threads_run(threads, job, rescue, jobs);
        rescue->done += jobs;
    }
    return FIRN_OK;
}

/* --- rows --- */

static uint8_t state_of(const struct firn_sheets *sheets, uint32_t index)
{
    if (sheets->findings[index] != FIRN_SHEETS_LOST)
        return FIRN_RESCUE_KNOWN;
    return sheets->absent[index] ? FIRN_RESCUE_GONE : FIRN_RESCUE_READ;
}

/* A job: one row. Rows share no block. */
static void rescue_row(void *self, size_t job, unsigned worker)
{
    struct rescue *rescue = self;
    struct firn_sheets *sheets = rescue->sheets;
    const struct firn_sheet_shape *shape = &sheets->sheet_shape;
    const uint32_t row = rescue->list[rescue->done + job];
    uint32_t indices[FIRN_RESCUE_BLOCKS_MOST];
    uint8_t *blocks[FIRN_RESCUE_BLOCKS_MOST], states[FIRN_RESCUE_BLOCKS_MOST];
    struct firn_block_tag tags[FIRN_RESCUE_BLOCKS_MOST];
    const struct firn_rescue_row subject = { shape->k, shape->m, blocks, tags, states };
    struct firn_rescue_report report;

    for (unsigned column = 0; column < shape->k + shape->m; column++) {
        indices[column] = firn_sheet_index(shape, row, column);
        blocks[column] = NULL;
        states[column] = FIRN_RESCUE_KNOWN;
        if (indices[column] == UINT32_MAX)
            continue;
        blocks[column] = firn_sheets_state_block(sheets, indices[column]);
        states[column] = state_of(sheets, indices[column]);
        tags[column] = firn_sheets_block_tag(sheets, shape, sheets->sheet_first, indices[column]);
    }
    (void)firn_rescue_row(&subject, &report, rescue->work + worker * firn_rescue_work_bytes());
    for (unsigned column = 0; column < shape->k + shape->m; column++)
        if (states[column] == FIRN_RESCUE_BACK)
            sheets->findings[indices[column]] = FIRN_SHEETS_REBUILT;
}

static enum firn_status rescue_rows(struct rescue *rescue)
{
    const struct firn_memory *memory = rescue->sheets->memory;
    enum firn_status status;

    if (rescue->sheets->sheet_shape.m == 0 || rescue->count == 0)
        return FIRN_OK;
    rescue->work = memory->get(memory->self, firn_rescue_work_bytes() * firn_threads_count(rescue->sheets->threads));
    if (rescue->work == NULL)
        return FIRN_NO_MEMORY;
    status = run_list(rescue, rescue_row);
    memory->put(memory->self, rescue->work);
    return status;
}

/* --- blocks --- */

/* Blocks within the reach of deep repair, in their order, until the budget is spent. */
static void list_blocks(struct rescue *rescue)
{
    struct firn_sheets *sheets = rescue->sheets;
    uint32_t budget = FIRN_SHEETS_RESCUE_TRIALS;

    rescue->count = 0;
    for (uint32_t index = 0; index < firn_sheets_state_count(sheets); index++) {
        struct firn_block_tag tag;
        uint32_t trials;

        if (state_of(sheets, index) != FIRN_RESCUE_READ)
            continue;
        tag = firn_sheets_block_tag(sheets, &sheets->sheet_shape, sheets->sheet_first, index);
        trials = firn_deep_trials(firn_sheets_state_block(sheets, index), &tag);
        if (trials == 0 || trials > budget)
            continue;
        budget -= trials;
        rescue->list[rescue->count++] = index;
    }
}

/* A job: one block. */
static void deep_block(void *self, size_t job, unsigned worker)
{
    struct rescue *rescue = self;
    struct firn_sheets *sheets = rescue->sheets;
    const uint32_t index = rescue->list[rescue->done + job];
    struct firn_block_tag tag = firn_sheets_block_tag(sheets, &sheets->sheet_shape, sheets->sheet_first, index);

    (void)worker;
    if (firn_deep_mend(firn_sheets_state_block(sheets, index), &tag))
        sheets->findings[index] = FIRN_SHEETS_MENDED;
}

static bool deep_helped(const struct rescue *rescue)
{
    for (uint32_t i = 0; i < rescue->count; i++)
        if (rescue->sheets->findings[rescue->list[i]] == FIRN_SHEETS_MENDED)
            return true;
    return false;
}

enum firn_status firn_sheets_rescue(struct firn_sheets *sheets)
{
    struct rescue rescue = { .sheets = sheets };
    bool lacking = false;
    enum firn_status status;

    for (uint32_t row = 0; row < sheets->sheet_shape.rows && !lacking; row++)
        lacking = row_lacks(sheets, row);
    if (!lacking)
        return FIRN_OK;
    rescue.list = sheets->memory->get(sheets->memory->self, firn_sheets_state_count(sheets) * sizeof rescue.list[0]);
    if (rescue.list == NULL)
        return FIRN_NO_MEMORY;
    list_rows(&rescue);
    status = rescue_rows(&rescue);
    if (status == FIRN_OK) {
        list_blocks(&rescue);
        status = run_list(&rescue, deep_block);
    }
    if (status == FIRN_OK && deep_helped(&rescue)) {
        list_rows(&rescue);
        status = rescue_rows(&rescue);
    }
    sheets->memory->put(sheets->memory->self, rescue.list);
    return status;
}
