/*
 * guard/columns.c - wrong bytes of a row, found and put right column by column
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/columns.h"

#include "guard/locator.h"

#include <string.h>

enum {
    POINTS = 256,
    MOST_M = 128,
    LINE = 64,
    STRIDE = FIRN_COLUMNS_BYTES_MOST + LINE,      /* an odd number of lines, lest all runs fall into one cache set */
    TOGETHER = FIRN_RESERVE_TOGETHER
};

/* What the caller lends; the work space of the reserve stands behind it. */
struct work {
    _Alignas(LINE) uint8_t tables[POINTS][FIRN_RESERVE_TABLE_BYTES];
    _Alignas(LINE) uint8_t powers[FIRN_LOCATOR_WRONG_MOST + 1][POINTS];      /* [l][i]: point of position i to the l */
    _Alignas(LINE) uint8_t values[TOGETHER][POINTS];
    _Alignas(LINE) uint8_t differences[MOST_M][STRIDE];
    _Alignas(LINE) uint8_t syndromes[MOST_M][STRIDE];
    _Alignas(LINE) uint8_t spare[TOGETHER][STRIDE];
    _Alignas(LINE) uint8_t again[STRIDE];
    struct firn_locator_logs logs;
};

struct job {
    const struct firn_reserve_engine *engine;
    const struct firn_columns_row *row;
    struct work *work;
    unsigned positions;                      /* k + m */
    unsigned count;                          /* syndromes: m less what is gone */
    uint8_t gone[POINTS];                    /* G at the point of each position */
    unsigned bytes_most, bits_most;          /* that may be wrong in a column that is believed */
    uint8_t *solved;
    uint32_t *wrong;
};

/* A column at work: its locator, and whether there is one. */
struct column {
    size_t at;
    bool found;
    struct firn_locator locator;
};

static uint8_t point_of(const struct firn_columns_row *row, unsigned position)
{
    return (uint8_t)(position < row->k ? row->m + position : position - row->k);
}

static bool is_gone(const struct job *job, unsigned position)
{
    return job->row->standings[position] == FIRN_COLUMNS_GONE;
}

/*
 * How many of `places`, each changed in one of `ways` ways, can be tried in all combinations before the chance that
 * one of them turns a random column into a word of the code is above 2^-chance_bits; `count` syndromes would have to
 * be 0 by accident.
 */
static unsigned tries(unsigned places, unsigned ways, unsigned count, unsigned chance_bits)
{
    double words = 1;                        /* combinations, divided by 256 as often as `left` went down */
    unsigned most = 0, left = count;

    for (unsigned n = 1; n <= places; n++) {
        double chance;

        words = words * (places - n + 1) / n * ways;
        while (words > 1 && left > 0) {
            words /= 256;
            left--;
        }
        chance = words;
        for (unsigned i = 0; i < left; i++)
            chance /= 256;
        for (unsigned i = 0; i < chance_bits; i++)
            chance *= 2;
        if (chance > 1)
            break;
        most = n;
    }
    return most;
}

static void set_bounds(struct job *job)
{
    unsigned read = 0;

    for (unsigned i = 0; i < job->positions; i++)
        read += job->row->standings[i] == FIRN_COLUMNS_READ;
    job->bytes_most = tries(read, 255, job->count, job->row->chance_bits);
    job->bits_most = tries(8 * read, 1, job->count, job->row->chance_bits);
}

static void make_powers(const struct job *job)
{
    struct work *work = job->work;

    memset(work->powers, 0, sizeof work->powers);
    for (unsigned i = 0; i < job->positions; i++) {
        const uint8_t point = point_of(job->row, i);

        work->powers[0][i] = 1;
        for (unsigned l = 1; l <= FIRN_LOCATOR_WRONG_MOST; l++)
            work->powers[l][i] = firn_gf_multiply(work->powers[l - 1][i], point);
    }
}

/* G, at the point of every position. */
static void make_gone(struct job *job)
{
    for (unsigned i = 0; i < job->positions; i++) {
        job->gone[i] = 1;
        for (unsigned g = 0; g < job->positions; g++)
            if (is_gone(job, g))
                job->gone[i] = firn_gf_multiply(job->gone[i], point_of(job->row, i) ^ point_of(job->row, g));
    }
}

static enum firn_status find_differences(struct job *job)
{
    const struct firn_columns_row *row = job->row;
    const uint8_t *data[POINTS];
    uint8_t *out[MOST_M];
    enum firn_status status;

    for (unsigned i = 0; i < row->k; i++)
        data[i] = is_gone(job, i) ? NULL : row->payloads[i];
    for (unsigned j = 0; j < row->m; j++)
        out[j] = job->work->differences[j];
    status = firn_reserve_encode_by(job->engine, row->k, row->m, data, out, row->bytes,
                                    (uint8_t *)job->work + sizeof *job->work);
    for (unsigned j = 0; j < row->m && status == FIRN_OK; j++)
        if (!is_gone(job, row->k + j))
            for (size_t b = 0; b < row->bytes; b++)
                out[j][b] ^= row->payloads[row->k + j][b];
    return status;
}

/* Four syndromes at a time of all columns: sums of the differences at the reserve points, times G(j) j^l. */
static void find_syndromes(struct job *job)
{
    const struct firn_columns_row *row = job->row;
    struct work *work = job->work;
    const uint8_t *from[MOST_M], *tables[TOGETHER * MOST_M];
    uint8_t factors[MOST_M];
    unsigned sources = 0;

    for (unsigned j = 0; j < row->m; j++)
        if (!is_gone(job, row->k + j)) {
            factors[sources] = job->gone[row->k + j];
            from[sources++] = work->differences[j];
        }
    for (unsigned first = 0; first < job->count; first += TOGETHER) {
        uint8_t *to[TOGETHER];

        for (unsigned i = 0; i < TOGETHER; i++) {
            to[i] = first + i < job->count ? work->syndromes[first + i] : work->spare[i];
            for (unsigned j = 0, source = 0; j < row->m; j++)
                if (!is_gone(job, row->k + j)) {
                    tables[i * sources + source] = work->tables[factors[source]];
                    factors[source] = firn_gf_multiply(factors[source], (uint8_t)j);
                    source++;
                }
        }
        job->engine->combine(from, sources, tables, to, row->bytes);
    }
}

/* Columns whose syndromes are all 0 are solved. */
static void note_clean(struct job *job)
{
    uint8_t *any = job->work->again;

    memset(any, 0, job->row->bytes);
    for (unsigned l = 0; l < job->count; l++)
        for (size_t b = 0; b < job->row->bytes; b++)
            any[b] |= job->work->syndromes[l][b];
    for (size_t b = 0; b < job->row->bytes; b++)
        job->solved[b] |= any[b] == 0;
}

static void locate(struct job *job, struct column *column)
{
    uint8_t syndromes[MOST_M];

    for (unsigned l = 0; l < job->count; l++)
        syndromes[l] = job->work->syndromes[l][column->at];
    column->found = firn_locator_find(&job->work->logs, syndromes, job->count, &column->locator);
    if (!column->found)
        column->locator.degree = 0;
}

/* sigma of up to four columns at the points of all positions. */
static void evaluate(struct job *job, const struct column *columns, unsigned count)
{
    const uint8_t *from[FIRN_LOCATOR_WRONG_MOST + 1], *tables[TOGETHER * (FIRN_LOCATOR_WRONG_MOST + 1)];
    uint8_t *to[TOGETHER];
    unsigned terms = 0;

    for (unsigned i = 0; i < count; i++)
        if (columns[i].found && columns[i].locator.degree >= terms)
            terms = columns[i].locator.degree + 1;
    for (unsigned l = 0; l < terms; l++)
        from[l] = job->work->powers[l];
    for (unsigned i = 0; i < TOGETHER; i++) {
        to[i] = job->work->values[i];
        for (unsigned l = 0; l < terms; l++) {
            const bool has = i < count && columns[i].found && l <= columns[i].locator.degree;

            tables[i * terms + l] = job->work->tables[has ? columns[i].locator.sigma[l] : 0];
        }
    }
    if (terms > 0)
        job->engine->combine(from, terms, tables, to, POINTS);
}

static unsigned count_ones(uint8_t byte)
{
    unsigned count = 0;

    for (; byte != 0; byte &= (uint8_t)(byte - 1))
        count++;
    return count;
}

/* Puts the column right if all roots of sigma are at payloads that may be wrong, and chance is no explanation. */
static void correct(struct job *job, const struct column *column, const uint8_t *values)
{
    unsigned places[FIRN_LOCATOR_WRONG_MOST], found = 0, bits = 0;
    uint8_t changes[FIRN_LOCATOR_WRONG_MOST];

    for (unsigned i = 0; i < job->positions && found < column->locator.degree; i++)
        if (values[i] == 0 && job->row->standings[i] == FIRN_COLUMNS_READ)
            places[found++] = i;
    if (found < column->locator.degree)
        return;
    for (unsigned i = 0; i < found; i++) {
        uint8_t scaled = firn_locator_value(&job->work->logs, &column->locator, point_of(job->row, places[i]));

        if (scaled == 0)
            return;
        changes[i] = firn_gf_multiply(scaled, firn_gf_inverse(job->gone[places[i]]));
        bits += count_ones(changes[i]);
    }
    if (job->row->chance_bits > 0 && found > job->bytes_most && bits > job->bits_most)
        return;
    for (unsigned i = 0; i < found; i++) {
        job->row->payloads[places[i]][column->at] ^= changes[i];
        job->wrong[places[i]]++;
    }
    job->solved[column->at] = 1;
}

static void solve(struct job *job)
{
    struct column columns[TOGETHER];
    unsigned count = 0;

    for (size_t b = 0; b < job->row->bytes; b++) {
        if (!job->solved[b]) {
            columns[count].at = b;
            locate(job, &columns[count++]);
        }
        if (count == TOGETHER || (count > 0 && b + 1 == job->row->bytes)) {
            evaluate(job, columns, count);
            for (unsigned i = 0; i < count; i++)
                if (columns[i].found)
                    correct(job, &columns[i], job->work->values[i]);
            count = 0;
        }
    }
}

static bool valid(const struct firn_columns_row *row)
{
    return row->m >= 1 && row->m <= MOST_M && (row->m & (row->m - 1)) == 0 && row->k >= 1 && row->k <= POINTS - row->m
        && row->bytes <= FIRN_COLUMNS_BYTES_MOST;
}

enum firn_status firn_columns_mend_by(const struct firn_reserve_engine *engine, const struct firn_columns_row *row,
                                      uint8_t *solved, uint32_t *wrong, uint8_t *work)
{
    struct job job = {
        .engine = engine, .row = row, .work = (struct work *)(void *)work, .positions = row->k + row->m,
        .count = row->m, .solved = solved, .wrong = wrong
    };
    enum firn_status status;

    if (!valid(row))
        return FIRN_BAD_ARGUMENT;
    for (unsigned i = 0; i < job.positions; i++)
        if (is_gone(&job, i) && job.count-- == 0)
            return FIRN_BEYOND_REPAIR;
    if (job.count == 0 || 8 * job.count < row->chance_bits)      /* nothing that could tell right from wrong */
        return FIRN_OK;
    firn_gf_make_tables(job.work->tables);
    firn_locator_make_logs(&job.work->logs);
    set_bounds(&job);
    make_powers(&job);
    make_gone(&job);
    status = find_differences(&job);
    if (status != FIRN_OK)
        return status;
    find_syndromes(&job);
    note_clean(&job);
    solve(&job);
    return FIRN_OK;
}

enum firn_status firn_columns_mend(const struct firn_columns_row *row, uint8_t *solved, uint32_t *wrong, uint8_t *work)
{
    return firn_columns_mend_by(firn_reserve_engine_here(), row, solved, wrong, work);
}

size_t firn_columns_work_bytes(void)
{
    return sizeof(struct work) + firn_reserve_work_bytes();
}
