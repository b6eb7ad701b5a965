/*
 * guard/rescue.c - a row with more blocks that fail their hash than the reserve can rebuild
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/rescue.h"

#include "base/bytes.h"
#include "firn/reserve.h"
#include "guard/accept.h"
#include "guard/columns.h"
#include "guard/lanes_engine.h"
#include "guard/tag.h"

#include <string.h>

enum {
    MOST = FIRN_RESCUE_BLOCKS_MOST,
    PAYLOAD = FIRN_BLOCK_PAYLOAD_BYTES,
    PAYLOAD_WORDS = PAYLOAD / 8,
    HASH_WORD = FIRN_BLOCK_HASH_AT / 8,
    WORD_BYTES = 8,
    LANES_OF_A_BYTE = 8,
    /* Beyond so many open words of a lane, a double error has more than four pairs to choose from by accident. */
    PAIRS_OPEN_MOST = 64,
    SOLVED_ENOUGH = 64,      /* columns that tell how much of a block is wrong */
    /* A column believed in error spoils a few blocks, which the reserve or doubt_columns see to. */
    CHANCE_BITS = 5
};

struct work {
    _Alignas(64) uint8_t read[MOST][FIRN_BLOCK_BYTES];      /* blocks as they were read */
    uint8_t solved[PAYLOAD], open_mask[PAYLOAD];
    uint32_t wrong[MOST];
    /* labels of the words a lane may be wrong in, by the byte of the word it lies in; and whether a label is one */
    uint16_t open[WORD_BYTES][FIRN_BLOCK_WORDS];
    unsigned open_count[WORD_BYTES];
    uint8_t is_open[WORD_BYTES][FIRN_BLOCK_WORDS];
};

struct job {
    const struct firn_rescue_row *row;
    struct work *work;
    unsigned positions;
    size_t solved;
    unsigned known_at_start;               /* blocks, when the columns were begun with */
    bool changed;
};

static uint8_t *lower_work(const struct job *job)      /* that of the columns, that of the reserve */
{
    return (uint8_t *)job->work + sizeof *job->work;
}

/* --- the beginning --- */

/* Blocks that belong elsewhere are gone; of the others the tag is known. */
static void take_stock(struct job *job)
{
    const struct firn_rescue_row *row = job->row;
    uint8_t tag[FIRN_TAG_BYTES];

    for (unsigned i = 0; i < job->positions; i++) {
        struct firn_block_tag other;

        if (row->states[i] != FIRN_RESCUE_READ)
            continue;
        memcpy(job->work->read[i], row->blocks[i], FIRN_BLOCK_BYTES);
        firn_tag_put(&row->tags[i], tag);
        if (firn_tag_distance(tag, row->blocks[i] + FIRN_BLOCK_TAG_AT) > FIRN_TAG_STRANGE_MOST
            || firn_block_open(row->blocks[i], false, &other) != FIRN_BLOCK_GONE)
            row->states[i] = FIRN_RESCUE_GONE;
        memcpy(row->blocks[i] + FIRN_BLOCK_TAG_AT, tag, FIRN_TAG_BYTES);
    }
}

/* --- blocks --- */

static void judge(struct job *job, unsigned position)
{
    const struct firn_rescue_row *row = job->row;

    if (!firn_accept_block(row->blocks[position], job->work->read[position]))
        return;
    firn_block_seal(row->blocks[position], &row->tags[position]);
    row->states[position] = FIRN_RESCUE_BACK;
    job->changed = true;
}

/* What the lanes said last time is taken back, now that more columns are solved: they are asked anew. */
static void take_back(const struct job *job, uint8_t *block, const uint8_t *read)
{
    const uint8_t *open = job->work->open_mask;

    for (size_t b = 0; b < PAYLOAD; b++)
        block[b] = (uint8_t)((block[b] & ~open[b]) | (read[b] & open[b]));
    memcpy(block + FIRN_BLOCK_HASH_AT, read + FIRN_BLOCK_HASH_AT, FIRN_BLOCK_BYTES - FIRN_BLOCK_HASH_AT);
}

static void list_open_words(struct job *job)
{
    struct work *work = job->work;

    for (size_t b = 0; b < PAYLOAD; b++)
        work->open_mask[b] = work->solved[b] ? 0 : 0xFF;
    for (unsigned byte = 0; byte < WORD_BYTES; byte++) {
        work->open_count[byte] = 0;
        for (unsigned label = 0; label < FIRN_BLOCK_WORDS; label++) {
            const unsigned word = firn_lanes_word_of(label);
            const bool open = word < PAYLOAD_WORDS ? !work->solved[WORD_BYTES * word + byte] : word >= HASH_WORD;

            work->is_open[byte][label] = open;
            if (open)
                work->open[byte][work->open_count[byte]++] = (uint16_t)label;
        }
    }
}

static void flip(uint8_t *block, unsigned label, unsigned lane)
{
    uint8_t *word = block + WORD_BYTES * (size_t)firn_lanes_word_of(label);

    word[lane / LANES_OF_A_BYTE] ^= (uint8_t)(1U << lane % LANES_OF_A_BYTE);
}

/* An odd lane: one flip, at its label, unless nothing can be wrong there. */
static void mend_single(const struct work *work, uint8_t *block, unsigned lane, unsigned label)
{
    if (work->is_open[lane / LANES_OF_A_BYTE][label])
        flip(block, label, lane);
}

/* An even lane: two flips, if only one pair of open words has the label as its sum. */
static void mend_double(const struct work *work, uint8_t *block, unsigned lane, unsigned label)
{
    const unsigned byte = lane / LANES_OF_A_BYTE;
    unsigned pairs = 0, one = 0;

    if (work->open_count[byte] > PAIRS_OPEN_MOST)
        return;
    for (unsigned i = 0; i < work->open_count[byte] && pairs < 2; i++) {
        const unsigned first = work->open[byte][i];

        if (first < (first ^ label) && work->is_open[byte][first ^ label]) {
            one = first;
            pairs++;
        }
    }
    if (pairs == 1) {
        flip(block, one, lane);
        flip(block, one ^ label, lane);
    }
}

static void mend_lanes(const struct work *work, uint8_t *block)
{
    uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS];

    firn_lanes_engine_here()->syndrome(block, syndrome);
    for (unsigned lane = 0; lane < FIRN_LANES; lane++) {
        unsigned label = 0;

        for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++)
            label |= (unsigned)(syndrome[j] >> lane & 1) << j;
        if ((syndrome[FIRN_LANES_PARITY_WORDS] >> lane & 1) != 0)
            mend_single(work, block, lane, label);
        else if (label != 0)
            mend_double(work, block, lane, label);
    }
}

/* Judges every block, and asks its lanes if that fails. */
static void go_through_blocks(struct job *job)
{
    list_open_words(job);
    for (unsigned i = 0; i < job->positions; i++) {
        uint8_t *block = job->row->blocks[i];

        if (job->row->states[i] != FIRN_RESCUE_READ)
            continue;
        take_back(job, block, job->work->read[i]);
        judge(job, i);
        if (job->row->states[i] != FIRN_RESCUE_READ)
            continue;
        mend_lanes(job->work, block);
        judge(job, i);
    }
}

/* --- columns --- */

/* A block that was wrong in most columns is noise: as an erasure it costs the code half as much. */
static void give_up_noise(struct job *job)
{
    for (unsigned i = 0; i < job->positions && job->solved >= SOLVED_ENOUGH; i++)
        if (job->row->states[i] == FIRN_RESCUE_READ && job->work->wrong[i] > job->solved / 2) {
            job->row->states[i] = FIRN_RESCUE_GONE;
            job->changed = true;
        }
}

static void go_through_columns(struct job *job)
{
    const struct firn_rescue_row *row = job->row;
    uint8_t standings[MOST];
    const struct firn_columns_row columns = {
        .k = row->k, .m = row->m, .payloads = row->blocks, .standings = standings, .bytes = PAYLOAD,
        .chance_bits = CHANCE_BITS
    };
    size_t solved = 0;

    for (unsigned i = 0; i < job->positions; i++)
        standings[i] = row->states[i] == FIRN_RESCUE_READ   ? FIRN_COLUMNS_READ
                       : row->states[i] == FIRN_RESCUE_GONE ? FIRN_COLUMNS_GONE
                                                            : FIRN_COLUMNS_KNOWN;
    (void)firn_columns_mend(&columns, job->work->solved, job->work->wrong, lower_work(job));
    for (size_t b = 0; b < PAYLOAD; b++)
        solved += job->work->solved[b];
    job->changed = job->changed || solved > job->solved;
    job->solved = solved;
    give_up_noise(job);
}

static unsigned count_known(const struct job *job)
{
    unsigned known = 0;

    for (unsigned i = 0; i < job->positions; i++)
        known += job->row->states[i] == FIRN_RESCUE_KNOWN || job->row->states[i] == FIRN_RESCUE_BACK;
    return known;
}

/* Nothing is believed but the blocks that are known or have come back. */
static void begin_anew(struct job *job)
{
    memset(job->work->solved, 0, sizeof job->work->solved);
    memset(job->work->wrong, 0, sizeof job->work->wrong);
    job->solved = 0;
    job->known_at_start = count_known(job);
    list_open_words(job);
    for (unsigned i = 0; i < job->positions; i++)
        if (job->row->states[i] == FIRN_RESCUE_READ)
            take_back(job, job->row->blocks[i], job->work->read[i]);
    job->changed = true;
}

/*
 * For when nothing changes any more: with a small m a column may have been made a wrong word of the code. So the
 * lanes are asked once more, about all of what every block is taken to be now, solved or not; and where that brings
 * one back, all is begun anew: with one of its blocks known a wrong word cannot be made again.
 */
static void doubt_columns(struct job *job)
{
    uint8_t guess[FIRN_BLOCK_BYTES];

    memset(job->work->is_open, 1, sizeof job->work->is_open);
    for (unsigned byte = 0; byte < WORD_BYTES; byte++)
        job->work->open_count[byte] = FIRN_BLOCK_WORDS;
    for (unsigned i = 0; i < job->positions; i++) {
        uint8_t *block = job->row->blocks[i];

        if (job->row->states[i] != FIRN_RESCUE_READ)
            continue;
        memcpy(block + FIRN_BLOCK_HASH_AT, job->work->read[i] + FIRN_BLOCK_HASH_AT,
               FIRN_BLOCK_BYTES - FIRN_BLOCK_HASH_AT);
        memcpy(guess, block, sizeof guess);
        mend_lanes(job->work, block);
        judge(job, i);
        if (job->row->states[i] == FIRN_RESCUE_READ)
            memcpy(block, guess, sizeof guess);
    }
    if (count_known(job) > job->known_at_start)
        begin_anew(job);
}

/* --- the end --- */

/* Rebuilds what has no judgement from what has it, if that is enough. */
static bool rebuild(struct job *job)
{
    const struct firn_rescue_row *row = job->row;
    unsigned lost[MOST] = { 0 }, count = 0;

    for (unsigned i = 0; i < job->positions; i++)
        if (row->states[i] == FIRN_RESCUE_READ || row->states[i] == FIRN_RESCUE_GONE)
            lost[count++] = i;
    if (firn_reserve_rebuild(row->k, row->m, row->blocks, lost, count, PAYLOAD, lower_work(job)) != FIRN_OK)
        return false;
    for (unsigned i = 0; i < count; i++) {
        firn_block_seal(row->blocks[lost[i]], &row->tags[lost[i]]);
        row->states[lost[i]] = FIRN_RESCUE_BACK;
    }
    return true;
}

enum firn_status firn_rescue_row(const struct firn_rescue_row *row, struct firn_rescue_report *report, uint8_t *work)
{
    struct job job = { .row = row, .work = (struct work *)(void *)work, .positions = row->k + row->m };
    bool whole;

    *report = (struct firn_rescue_report){ .rounds = 0 };
    take_stock(&job);
    begin_anew(&job);
    whole = rebuild(&job);
    while (!whole && job.changed && report->rounds < FIRN_RESCUE_ROUNDS_MOST) {
        job.changed = false;
        go_through_columns(&job);
        go_through_blocks(&job);
        whole = rebuild(&job);
        if (!whole && !job.changed) {
            doubt_columns(&job);
            whole = rebuild(&job);
        }
        report->rounds++;
    }
    report->columns_solved = job.solved;
    if (whole)
        return FIRN_OK;
    list_open_words(&job);
    for (unsigned i = 0; i < job.positions; i++)
        if (row->states[i] == FIRN_RESCUE_READ)
            take_back(&job, row->blocks[i], job.work->read[i]);
    return FIRN_BEYOND_REPAIR;
}

size_t firn_rescue_work_bytes(void)
{
    return sizeof(struct work) + firn_columns_work_bytes();
}
