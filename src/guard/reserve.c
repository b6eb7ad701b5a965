/*
 * guard/reserve.c - the Reed-Solomon reserve of a row, by additive transforms, and lost payloads by Lagrange's formula
 *
 * Encoding. Polynomials are written in the basis X_i = the product of S_j over the bits j of i, where S_j is the
 * polynomial that is 0 on the points 0 .. 2^j - 1 and 1 at the point 2^j. S_j is additive, and 1 more on the second
 * half of an aligned run of 2^(j+1) points than on the first. So a transform between the m coefficients and the values
 * on an aligned run of m points (a coset) is log2(m) levels of butterflies, with the value of S_j on the first half as
 * factor. A word f has degree < 256 - m: f = the sum over c < 256/m - 1 of X_cm times g_c, deg g_c < m, and X_cm is
 * constant on a coset. Inverse transforms of all 256/m cosets, added up, give each g_c times the sum of X_cm over the
 * cosets, which is 0 as c is not the last. So the inverse transform of the reserve (coset 0) is the sum of those of the
 * data, and one forward transform makes the reserve of it.
 *
 * Rebuilding. With the lost payloads taken as zeros, the recomputed reserve differs from the received one by a word g
 * that is 0 on all data that is there; so the sum in Lagrange's formula runs over reserve payloads only. As many of
 * them are used as data payloads are lost, the others count as lost too: fewer sources, the same result.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/reserve.h"

#include "guard/gf.h"
#include "guard/reserve_engine.h"

#include <string.h>

enum {
    POINTS = 256,
    LEVELS = 8,
    MOST_M = 128,
    LINE = 64,                    /* bytes between the runs of a tile, lest they all fall into one cache set */
    TILE_MOST = 4096,             /* bytes taken of each payload at a time: all that a block has */
    TILE_ALL = 1 << 17,           /* and of m payloads together, so that two tiles stay in a second-level cache */
    TILE_ROOM = MOST_M * (TILE_ALL / MOST_M + LINE)
};

/* What the caller lends. Arrays of bytes only, so that any lent bytes will do. */
struct work {
    _Alignas(LINE) uint8_t tables[POINTS][FIRN_RESERVE_TABLE_BYTES];
    uint8_t values[LEVELS][POINTS / 2];        /* S_j on the aligned run of 2^(j+1) points number i, first half */
    uint8_t factors[MOST_M][MOST_M];           /* of lost payload i and source j */
    _Alignas(LINE) uint8_t zeros[TILE_MOST];
    uint8_t spare[FIRN_RESERVE_TOGETHER][TILE_MOST];
    _Alignas(LINE) uint8_t coset[TILE_ROOM], sum[TILE_ROOM], again[TILE_ROOM];
};

/* One call, and how far it got. */
struct job {
    const struct firn_reserve_engine *engine;
    struct work *work;
    unsigned k, m, levels;
    size_t stride;
    size_t at, bytes;                 /* of the tile at hand, in every payload */
    const uint8_t *const *ahead;      /* m runs that are wanted after the coset at hand, NULL when there are none */
    unsigned ahead_asked;             /* how many of them an engine was told of */
};

const struct firn_reserve_engine *const firn_reserve_engines[] = {
#if defined(__x86_64__) && !defined(FIRN_PLAIN)
    &firn_reserve_avx2, &firn_reserve_ssse3,
#elif defined(__aarch64__) && !defined(FIRN_PLAIN)
    &firn_reserve_neon,
#endif
    &firn_reserve_plain,
    NULL,
};

const struct firn_reserve_engine *firn_reserve_engine_here(void)
{
    unsigned i = 0;

    while (!firn_reserve_engines[i]->usable())
        i++;
    return firn_reserve_engines[i];
}

static size_t least(size_t a, size_t b)
{
    return a < b ? a : b;
}

/* S_0(x) = x, and S_(j+1) is S_j (S_j + 1), scaled to be 1 at 2^(j+1). */
static void make_values(struct work *work)
{
    uint8_t at_bit[LEVELS];

    for (unsigned bit = 0; bit < LEVELS; bit++)
        at_bit[bit] = (uint8_t)(1U << bit);
    for (unsigned j = 0; j < LEVELS; j++) {
        uint8_t scale = firn_gf_inverse(at_bit[j]);

        for (unsigned bit = j; bit < LEVELS; bit++)
            at_bit[bit] = firn_gf_multiply(at_bit[bit], scale);
        work->values[j][0] = 0;
        for (unsigned bit = j + 1; bit < LEVELS; bit++)
            for (unsigned i = 0, half = 1U << (bit - j - 1); i < half; i++)
                work->values[j][half + i] = work->values[j][i] ^ at_bit[bit];
        for (unsigned bit = j; bit < LEVELS; bit++)
            at_bit[bit] = firn_gf_multiply(at_bit[bit], at_bit[bit] ^ 1);
    }
}

static struct job start_job(const struct firn_reserve_engine *engine, unsigned k, unsigned m, uint8_t *lent)
{
    struct job job = { .engine = engine, .work = (struct work *)(void *)lent, .k = k, .m = m };

    while (1U << job.levels < m)
        job.levels++;
    job.bytes = TILE_ALL / m < TILE_MOST ? TILE_ALL / m : TILE_MOST;
    job.stride = job.bytes + LINE;
    firn_gf_make_tables(job.work->tables);
    make_values(job.work);
    memset(job.work->zeros, 0, sizeof job.work->zeros);
    return job;
}

/* The table of the factor of level `level` for the run of points that holds `point`. */
static const uint8_t *factor_at(const struct job *job, unsigned level, unsigned point)
{
    return job->work->tables[job->work->values[level][point >> (level + 1)]];
}

/* One level of a transform of m runs, those of index i standing for the point offset + i. */
static void pass2(const struct job *job, firn_reserve_step *step, unsigned level, unsigned offset,
                  const uint8_t *const *in, uint8_t *const *out)
{
    const unsigned apart = 1U << level;

    for (unsigned start = 0; start < job->m; start += 2 * apart) {
        const uint8_t *tables[1] = { factor_at(job, level, offset + start) };

        for (unsigned i = start; i < start + apart; i++) {
            const uint8_t *from[2] = { in[i], in[i + apart] };
            uint8_t *to[2] = { out[i], out[i + apart] };

            step(from, to, tables, job->bytes, from);
        }
    }
}

/* Two runs that will be wanted soon, or two that will do no harm. */
static void look_ahead(struct job *job, const uint8_t *const *harmless, const uint8_t *ahead[2])
{
    for (unsigned i = 0; i < 2; i++) {
        ahead[i] = harmless[i];
        if (job->ahead != NULL && job->ahead_asked < job->m)
            ahead[i] = job->ahead[job->ahead_asked++];
    }
}

/* Two levels at once, `level` and `level` + 1. */
static void pass4(struct job *job, firn_reserve_step *step, unsigned level, unsigned offset, const uint8_t *const *in,
                  uint8_t *const *out)
{
    const unsigned apart = 1U << level;

    for (unsigned start = 0; start < job->m; start += 4 * apart) {
        const unsigned point = offset + start;
        const uint8_t *tables[3] = { factor_at(job, level, point), factor_at(job, level, point + 2 * apart),
                                     factor_at(job, level + 1, point) };

        for (unsigned i = start; i < start + apart; i++) {
            const uint8_t *from[4] = { in[i], in[i + apart], in[i + 2 * apart], in[i + 3 * apart] };
            uint8_t *to[4] = { out[i], out[i + apart], out[i + 2 * apart], out[i + 3 * apart] };
            const uint8_t *ahead[2];

            look_ahead(job, from, ahead);
            step(from, to, tables, job->bytes, ahead);
        }
    }
}

static void copy_or_add(const struct job *job, const uint8_t *const *in, uint8_t *const *out, bool adding)
{
    for (unsigned i = 0; i < job->m; i++)
        for (size_t b = 0; b < job->bytes; b++)
            out[i][b] = adding ? out[i][b] ^ in[i][b] : in[i][b];
}

/* The inverse transform of the coset that starts at the point `offset`, into sum or added to it. */
static void inverse_transform(struct job *job, unsigned offset, const uint8_t *const *in, uint8_t *const *coset,
                              uint8_t *const *sum)
{
    const bool adding = offset > job->m;
    unsigned level = 0;

    if (job->levels % 2 != 0) {
        pass2(job, job->engine->inverse2, 0, offset, in, coset);
        in = (const uint8_t *const *)coset;
        level = 1;
    }
    for (; level + 2 < job->levels; level += 2) {
        pass4(job, job->engine->inverse4, level, offset, in, coset);
        in = (const uint8_t *const *)coset;
    }
    if (level < job->levels)
        pass4(job, adding ? job->engine->inverse4_add : job->engine->inverse4, level, offset, in, sum);
    else
        copy_or_add(job, in, sum, adding);
}

/* The transform at the points 0 .. m - 1; what stands in `sum` is used up. */
static void forward_transform(struct job *job, uint8_t *const *sum, uint8_t *const *out)
{
    const uint8_t *const *in = (const uint8_t *const *)sum;
    unsigned level = job->levels;

    for (; level >= 2; level -= 2)
        pass4(job, job->engine->forward4, level - 2, 0, in, level == 2 ? out : sum);
    if (level == 1)
        pass2(job, job->engine->forward2, 0, 0, in, out);
    if (job->levels == 0)
        copy_or_add(job, in, out, false);
}

static void make_rows(const struct job *job, uint8_t *tile, uint8_t **rows)
{
    for (unsigned i = 0; i < job->m; i++)
        rows[i] = tile + i * job->stride;
}

/* Where the runs of the coset are whose first data payload is `first`. */
static void find_runs(const struct job *job, const uint8_t *const *data, unsigned first, const uint8_t **runs)
{
    for (unsigned i = 0; i < job->m; i++) {
        const uint8_t *payload = first + i < job->k ? data[first + i] : NULL;

        runs[i] = payload != NULL ? payload + job->at : job->work->zeros;
    }
}

/* The reserve of one tile: data are the whole payloads, out is where the tile goes. */
static void encode_tile(struct job *job, const uint8_t *const *data, uint8_t *const *out)
{
    const uint8_t *runs[2][MOST_M];
    uint8_t *coset[MOST_M], *sum[MOST_M];
    unsigned turn = 0;

    make_rows(job, job->work->coset, coset);
    make_rows(job, job->work->sum, sum);
    find_runs(job, data, 0, runs[0]);
    for (unsigned first = 0; first < job->k; first += job->m, turn ^= 1) {
        find_runs(job, data, first + job->m, runs[turn ^ 1]);
        job->ahead = first + job->m < job->k ? runs[turn ^ 1] : (const uint8_t *const *)out;
        job->ahead_asked = 0;
        inverse_transform(job, job->m + first, runs[turn], coset, sum);
    }
    job->ahead = NULL;
    forward_transform(job, sum, out);
}

static bool valid(unsigned k, unsigned m)
{
    return m >= 1 && m <= MOST_M && (m & (m - 1)) == 0 && k >= 1 && k <= POINTS - m;
}

enum firn_status firn_reserve_encode_by(const struct firn_reserve_engine *engine, unsigned k, unsigned m,
                                        const uint8_t *const *data, uint8_t *const *reserve, size_t bytes,
                                        uint8_t *work)
{
    uint8_t *out[MOST_M];
    struct job job;

    if (!valid(k, m))
        return FIRN_BAD_ARGUMENT;
    job = start_job(engine, k, m, work);
    for (; job.at < bytes; job.at += job.bytes) {
        job.bytes = least(job.bytes, bytes - job.at);
        for (unsigned i = 0; i < m; i++)
            out[i] = reserve[i] + job.at;
        encode_tile(&job, data, out);
    }
    return FIRN_OK;
}

/* What a rebuilding needs to know beside the job. */
struct loss {
    const uint8_t *data[POINTS];                /* NULL where lost */
    uint8_t *const *payloads;
    const unsigned *lost;                       /* positions in payloads */
    unsigned lost_count, lost_data;             /* data positions come first */
    unsigned sources[MOST_M];                   /* reserve payloads that are used: lost_data of them */
};

/* The point of a position: data stand behind the reserve. */
static uint8_t point_of(const struct job *job, unsigned position)
{
    return (uint8_t)(position < job->k ? job->m + position : position - job->k);
}

static bool find_losses(const struct job *job, struct loss *loss, uint8_t *const *payloads, const unsigned *lost,
                        unsigned lost_count)
{
    bool gone[MOST_M] = { false };
    unsigned found = 0;

    *loss = (struct loss){ .payloads = payloads, .lost = lost, .lost_count = lost_count };
    for (unsigned i = 0; i < job->k; i++)
        loss->data[i] = payloads[i];
    for (unsigned i = 0; i < lost_count; i++) {
        if (lost[i] >= job->k + job->m || (i > 0 && lost[i] <= lost[i - 1]))
            return false;
        if (lost[i] < job->k) {
            loss->data[lost[i]] = NULL;
            loss->lost_data++;
        } else {
            gone[lost[i] - job->k] = true;
        }
    }
    for (unsigned j = 0; found < loss->lost_data; j++)
        if (!gone[j])
            loss->sources[found++] = j;
    return true;
}

/*
 * Lagrange's formula: with E the lost points, those of unused reserve payloads included, and L(x) the product of x + e
 * over E, the value at e is the sum over the sources s of the value at s times L(s) / (L'(e) (e + s)).
 */
static void make_factors(const struct job *job, const struct loss *loss)
{
    uint8_t erased[POINTS], at_source[MOST_M];
    bool used[MOST_M] = { false };
    unsigned count = 0;

    for (unsigned j = 0; j < loss->lost_data; j++)
        used[loss->sources[j]] = true;
    for (unsigned i = 0; i < loss->lost_data; i++)
        erased[count++] = point_of(job, loss->lost[i]);
    for (unsigned j = 0; j < job->m; j++)
        if (!used[j])
            erased[count++] = (uint8_t)j;
    for (unsigned j = 0; j < loss->lost_data; j++) {
        at_source[j] = 1;
        for (unsigned i = 0; i < count; i++)
            at_source[j] = firn_gf_multiply(at_source[j], erased[i] ^ (uint8_t)loss->sources[j]);
    }
    for (unsigned i = 0; i < loss->lost_count; i++) {
        uint8_t e = point_of(job, loss->lost[i]), slope = 1;

        for (unsigned o = 0; o < count; o++)
            if (erased[o] != e)
                slope = firn_gf_multiply(slope, erased[o] ^ e);
        for (unsigned j = 0; j < loss->lost_data; j++) {
            uint8_t under = firn_gf_multiply(slope, e ^ (uint8_t)loss->sources[j]);

            job->work->factors[i][j] = firn_gf_multiply(at_source[j], firn_gf_inverse(under));
        }
    }
}

/* Rebuilds lost payloads `first` and up to three after it, from the differences at the sources. */
static void combine_tile(const struct job *job, const struct loss *loss, unsigned first,
                         const uint8_t *const *differences)
{
    const uint8_t *tables[FIRN_RESERVE_TOGETHER * MOST_M];
    uint8_t *to[FIRN_RESERVE_TOGETHER];

    for (unsigned i = 0; i < FIRN_RESERVE_TOGETHER; i++) {
        const bool wanted = first + i < loss->lost_count;

        to[i] = wanted ? loss->payloads[loss->lost[first + i]] + job->at : job->work->spare[i];
        for (unsigned j = 0; j < loss->lost_data; j++)
            tables[i * loss->lost_data + j] = job->work->tables[wanted ? job->work->factors[first + i][j] : 0];
    }
    job->engine->combine(differences, loss->lost_data, tables, to, job->bytes);
}

static void add_run(uint8_t *restrict to, const uint8_t *restrict from, size_t bytes)
{
    for (size_t i = 0; i < bytes; i++)
        to[i] ^= from[i];
}

static void rebuild_tile(struct job *job, const struct loss *loss)
{
    const uint8_t *differences[MOST_M];
    uint8_t *again[MOST_M];

    make_rows(job, job->work->again, again);
    encode_tile(job, loss->data, again);
    for (unsigned j = 0; j < loss->lost_data; j++) {
        uint8_t *row = again[loss->sources[j]];

        add_run(row, loss->payloads[job->k + loss->sources[j]] + job->at, job->bytes);
        differences[j] = row;
    }
    for (unsigned first = 0; first < loss->lost_count; first += FIRN_RESERVE_TOGETHER)
        combine_tile(job, loss, first, differences);
    for (unsigned i = loss->lost_data; i < loss->lost_count; i++)
        add_run(loss->payloads[loss->lost[i]] + job->at, again[loss->lost[i] - job->k], job->bytes);
}

enum firn_status firn_reserve_rebuild_by(const struct firn_reserve_engine *engine, unsigned k, unsigned m,
                                         uint8_t *const *payloads, const unsigned *lost, unsigned lost_count,
                                         size_t bytes, uint8_t *work)
{
    struct loss loss;
    struct job job;

    if (!valid(k, m))
        return FIRN_BAD_ARGUMENT;
    if (lost_count > m)
        return FIRN_BEYOND_REPAIR;
    job = start_job(engine, k, m, work);
    if (!find_losses(&job, &loss, payloads, lost, lost_count))
        return FIRN_BAD_ARGUMENT;
    if (lost_count == 0)
        return FIRN_OK;
    make_factors(&job, &loss);
    for (; job.at < bytes; job.at += job.bytes) {
        job.bytes = least(job.bytes, bytes - job.at);
        rebuild_tile(&job, &loss);
    }
    return FIRN_OK;
}

size_t firn_reserve_work_bytes(void)
{
    return sizeof(struct work);
}

enum firn_status firn_reserve_encode(unsigned k, unsigned m, const uint8_t *const *data, uint8_t *const *reserve,
                                     size_t bytes, uint8_t *work)
{
    return firn_reserve_encode_by(firn_reserve_engine_here(), k, m, data, reserve, bytes, work);
}

enum firn_status firn_reserve_rebuild(unsigned k, unsigned m, uint8_t *const *payloads, const unsigned *lost,
                                      unsigned lost_count, size_t bytes, uint8_t *work)
{
    return firn_reserve_rebuild_by(firn_reserve_engine_here(), k, m, payloads, lost, lost_count, bytes, work);
}
