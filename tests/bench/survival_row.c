/*
 * tests/bench/survival_row.c - one row of default settings, written, spoilt, and brought back layer by layer
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "survival_row.h"

#include "firn/block.h"
#include "firn/reserve.h"
#include "guard/columns.h"
#include "guard/random.h"
#include "guard/rescue.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

struct row {
    struct random random;
    struct firn_block_tag tags[ROW_N];
    uint8_t written[ROW_N][FIRN_BLOCK_BYTES], read[ROW_N][FIRN_BLOCK_BYTES], trial[ROW_N][FIRN_BLOCK_BYTES];
    uint8_t *blocks[ROW_N];      /* of trial */
    bool good[ROW_N];            /* by its own lanes */
    uint8_t *reserve_work, *columns_work, *rescue_work;
};

static uint8_t *lend(size_t bytes)
{
    return aligned_alloc(64, (bytes + 63) / 64 * 64);
}

struct row *row_make(uint64_t seed)
{
    struct row *row = calloc(1, sizeof *row);

    if (row == NULL)
        abort();
    row->random.state = seed;
    row->reserve_work = lend(firn_reserve_work_bytes());
    row->columns_work = lend(firn_columns_work_bytes());
    row->rescue_work = lend(firn_rescue_work_bytes());
    if (row->reserve_work == NULL || row->columns_work == NULL || row->rescue_work == NULL)
        abort();
    for (unsigned i = 0; i < ROW_N; i++)
        row->blocks[i] = row->trial[i];
    return row;
}

void row_free(struct row *row)
{
    free(row->reserve_work);
    free(row->columns_work);
    free(row->rescue_work);
    free(row);
}

void row_write(struct row *row)
{
    const uint8_t *data[ROW_K];
    uint8_t *reserve[ROW_M];

    for (unsigned i = 0; i < ROW_N; i++) {
        random_fill(&row->random, row->written[i], FIRN_BLOCK_PAYLOAD_BYTES);
        if (i < ROW_K)
            data[i] = row->written[i];
        else
            reserve[i - ROW_K] = row->written[i];
    }
    if (firn_reserve_encode(ROW_K, ROW_M, data, reserve, FIRN_BLOCK_PAYLOAD_BYTES, row->reserve_work) != FIRN_OK)
        abort();
    for (unsigned i = 0; i < ROW_N; i++) {
        row->tags[i] = (struct firn_block_tag){
            .version = FIRN_BLOCK_FORMAT_VERSION, .kind = i < ROW_K ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE,
            .geometry = { ROW_K, ROW_M, 1 }, .id = { 0x5E, 0xA1, 0x77, 0x0C, 0x3B, 0x92, 0xD4, 0x68 }, .number = i,
            .data_blocks = ROW_K
        };
        firn_block_seal(row->written[i], &row->tags[i]);
    }
    row_refresh(row);
}

void row_refresh(struct row *row)
{
    memcpy(row->read, row->written, sizeof row->read);
}

void row_flip(struct row *row, double rate)
{
    uint8_t *bytes = row->read[0];

    for (double at = 0; rate > 0; at += 1) {
        double fraction = ((double)(random_next(&row->random) >> 11) + 0.5) / 9007199254740992.0;

        at += floor(log(fraction) / log1p(-rate));
        if (at >= 8.0 * sizeof row->read)
            return;
        bytes[(size_t)at / 8] ^= (uint8_t)(1U << (size_t)at % 8);
    }
}

unsigned row_lose(struct row *row, double rate)
{
    unsigned lost = 0;

    for (unsigned i = 0; i < ROW_N; i++)
        if ((double)(random_next(&row->random) >> 11) / 9007199254740992.0 < rate) {
            random_fill(&row->random, row->read[i], FIRN_BLOCK_BYTES);
            lost++;
        }
    return lost;
}

void row_wipe(struct row *row, unsigned first, unsigned count)
{
    for (unsigned i = 0; i < count; i++)
        memset(row->read[(first + i) % ROW_N], 0xA5, FIRN_BLOCK_BYTES);
}

unsigned row_random(struct row *row, unsigned bound)
{
    return random_below(&row->random, bound);
}

static bool right(const struct row *row, unsigned i)
{
    return memcmp(row->trial[i], row->written[i], FIRN_BLOCK_PAYLOAD_BYTES) == 0;
}

/* Data blocks that are not called good are lost; those that are must be right. */
static struct row_outcome take_outcome(const struct row *row, const bool *good, unsigned *wrong)
{
    unsigned lost = 0, missing = 0;

    for (unsigned i = 0; i < ROW_N; i++) {
        missing += !good[i];
        lost += i < ROW_K && !good[i];
        *wrong += good[i] && !right(row, i);
    }
    return (struct row_outcome){ missing == 0, (double)lost / ROW_K };
}

static void try_lanes(struct row *row, struct row_outcomes *outcomes)
{
    memcpy(row->trial, row->read, sizeof row->trial);
    for (unsigned i = 0; i < ROW_N; i++) {
        struct firn_block_tag tag;
        enum firn_block_state state = firn_block_open(row->trial[i], true, &tag);

        row->good[i] = state == FIRN_BLOCK_SOUND || state == FIRN_BLOCK_MENDED;
        outcomes->blocks_mended += row->good[i];
    }
    outcomes->lanes = take_outcome(row, row->good, &outcomes->wrong);
}

/* On what the lanes have left. */
static void try_reserve(struct row *row, struct row_outcomes *outcomes)
{
    unsigned lost[ROW_N] = { 0 }, count = 0;
    bool good[ROW_N];

    for (unsigned i = 0; i < ROW_N; i++)
        if (!row->good[i])
            lost[count++] = i;
    memcpy(good, row->good, sizeof good);
    if (firn_reserve_rebuild(ROW_K, ROW_M, row->blocks, lost, count, FIRN_BLOCK_PAYLOAD_BYTES, row->reserve_work)
        == FIRN_OK)
        memset(good, true, sizeof good);
    outcomes->reserve = take_outcome(row, good, &outcomes->wrong);
}

/* Columns, once, every block as read; a column that is not solved is lost. */
static void try_columns(struct row *row, struct row_outcomes *outcomes)
{
    static uint8_t solved[FIRN_COLUMNS_BYTES_MOST];
    uint32_t wrong[ROW_N] = { 0 };
    uint8_t standings[ROW_N];
    const struct firn_columns_row columns = { ROW_K, ROW_M, row->blocks, standings, sizeof solved, 5 };
    unsigned count = 0;

    memcpy(row->trial, row->read, sizeof row->trial);
    memset(standings, FIRN_COLUMNS_READ, sizeof standings);
    memset(solved, 0, sizeof solved);
    if (firn_columns_mend(&columns, solved, wrong, row->columns_work) != FIRN_OK)
        abort();
    for (size_t b = 0; b < sizeof solved; b++) {
        count += solved[b];
        for (unsigned i = 0; solved[b] && i < ROW_N; i++)
            outcomes->wrong += row->trial[i][b] != row->written[i][b];
    }
    outcomes->columns = (struct row_outcome){ count == sizeof solved, 1 - (double)count / sizeof solved };
}

static void try_rescue(struct row *row, struct row_outcomes *outcomes)
{
    uint8_t states[ROW_N];
    const struct firn_rescue_row rescue = { ROW_K, ROW_M, row->blocks, row->tags, states };
    struct firn_rescue_report report;
    bool good[ROW_N];

    memcpy(row->trial, row->read, sizeof row->trial);
    for (unsigned i = 0; i < ROW_N; i++) {
        struct firn_block_tag tag;

        if (row->good[i])
            (void)firn_block_open(row->trial[i], true, &tag);
        states[i] = row->good[i] ? FIRN_RESCUE_KNOWN : FIRN_RESCUE_READ;
    }
    (void)firn_rescue_row(&rescue, &report, row->rescue_work);
    for (unsigned i = 0; i < ROW_N; i++)
        good[i] = states[i] == FIRN_RESCUE_KNOWN || states[i] == FIRN_RESCUE_BACK;
    outcomes->rescue = take_outcome(row, good, &outcomes->wrong);
}

struct row_outcomes row_bring_back_lost(struct row *row)
{
    struct row_outcomes outcomes = { .wrong = 0 };

    try_lanes(row, &outcomes);
    try_reserve(row, &outcomes);
    return outcomes;
}

struct row_outcomes row_bring_back(struct row *row)
{
    struct row_outcomes outcomes = { .wrong = 0 };

    try_lanes(row, &outcomes);
    try_reserve(row, &outcomes);
    try_columns(row, &outcomes);
    try_rescue(row, &outcomes);
    return outcomes;
}
