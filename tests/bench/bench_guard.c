/*
 * tests/bench/bench_guard.c - what the guard room costs, each figure beside memcpy of the same bytes in the same run
 *
 * Medians of repeated runs; the machine may be busy, so the ratios say more than the GB/s.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/block.h"
#include "firn/reserve.h"
#include "guard/gf.h"
#include "guard/hash.h"
#include "guard/lanes_engine.h"
#include "guard/reserve_engine.h"

#include <isa-l/erasure_code.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

enum { K = 224, M = 32, DEPTH = 128, ROWS = 8, RUNS = 21, CACHED_BLOCKS = 4, STREAM_BLOCKS = 16384 };

static const size_t sheet_bytes = (size_t)(K + M) * DEPTH * FIRN_BLOCK_BYTES;

/* Everything the measured calls work on. */
struct bench {
    uint8_t *sheet, *copy, *work;      /* a whole sheet, as much again, lent work space */
    const struct firn_lanes_engine *lanes;
    const struct firn_reserve_engine *reserve;
    uint8_t *matrix_tables;            /* for ec_encode_data */
    uint64_t sink;
};

typedef void measured(struct bench *bench);

static double now(void)
{
    struct timespec time;

    clock_gettime(CLOCK_MONOTONIC, &time);
    return (double)time.tv_sec + 1e-9 * (double)time.tv_nsec;
}

static int by_size(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;

    return (x > y) - (x < y);
}

static double once(struct bench *bench, measured *call, unsigned repeats)
{
    double start = now();

    for (unsigned i = 0; i < repeats; i++)
        call(bench);
    return (now() - start) / repeats;
}

/* Runs call and its memcpy by turns, and prints the medians. */
static void compare(struct bench *bench, const char *name, const char *engine, measured *call, measured *copy,
                    size_t bytes, unsigned repeats)
{
    double calls[RUNS], copies[RUNS], speed, copy_speed;

    once(bench, call, 1);
    for (unsigned i = 0; i < RUNS; i++) {
        calls[i] = once(bench, call, repeats);
        copies[i] = once(bench, copy, repeats);
    }
    qsort(calls, RUNS, sizeof calls[0], by_size);
    qsort(copies, RUNS, sizeof copies[0], by_size);
    speed = 1e-9 * (double)bytes / calls[RUNS / 2];
    copy_speed = 1e-9 * (double)bytes / copies[RUNS / 2];
    printf("%-34s %-8s %8.2f %10.2f %8.2f\n", name, engine, speed, copy_speed, speed / copy_speed);
}

static void copy_cached(struct bench *bench)
{
    for (unsigned i = 0; i < CACHED_BLOCKS; i++)
        memcpy(bench->copy + (size_t)i * FIRN_BLOCK_BYTES, bench->sheet + (size_t)i * FIRN_BLOCK_BYTES,
               FIRN_BLOCK_BYTES);
    bench->sink += bench->copy[bench->sink % FIRN_BLOCK_BYTES];
}

static void lanes_syndrome(struct bench *bench)
{
    uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS];

    for (unsigned i = 0; i < CACHED_BLOCKS; i++) {
        bench->lanes->syndrome(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES, syndrome);
        bench->sink ^= syndrome[9];
    }
}

static void lanes_check(struct bench *bench)
{
    for (unsigned i = 0; i < CACHED_BLOCKS; i++)
        bench->sink += firn_lanes_check(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES);
}

static void lanes_guard(struct bench *bench)
{
    for (unsigned i = 0; i < CACHED_BLOCKS; i++)
        firn_lanes_guard(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES);
}

static void hash_blocks(struct bench *bench)
{
    for (unsigned i = 0; i < CACHED_BLOCKS; i++)
        bench->sink += firn_hash_low(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES, FIRN_BLOCK_HASH_AT);
}

static void seal_blocks(struct bench *bench)
{
    struct firn_block_tag tag = { FIRN_BLOCK_FORMAT_VERSION, FIRN_BLOCK_DATA, { K, M, DEPTH }, "bench", 0, K * DEPTH };

    for (unsigned i = 0; i < CACHED_BLOCKS; i++)
        firn_block_seal(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES, &tag);
}

static void open_blocks(struct bench *bench, unsigned count, bool check_all)
{
    struct firn_block_tag tag;

    for (unsigned i = 0; i < count; i++)
        if (firn_block_open(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES, check_all, &tag) != FIRN_BLOCK_SOUND)
            abort();
}

static void open_cached(struct bench *bench)
{
    open_blocks(bench, CACHED_BLOCKS, true);
}

static void open_stream_reading(struct bench *bench)
{
    open_blocks(bench, STREAM_BLOCKS, false);
}

static void open_stream_scrubbing(struct bench *bench)
{
    open_blocks(bench, STREAM_BLOCKS, true);
}

static void copy_stream(struct bench *bench)
{
    memcpy(bench->copy, bench->sheet, (size_t)STREAM_BLOCKS * FIRN_BLOCK_BYTES);
}

/* The payloads of a row as they lie in a sheet: DEPTH blocks apart. */
static void pick_row(struct bench *bench, unsigned row, uint8_t *payloads[K + M])
{
    for (unsigned column = 0; column < K + M; column++)
        payloads[column] = bench->sheet + ((size_t)column * DEPTH + row) * FIRN_BLOCK_BYTES;
}

static void encode_rows(struct bench *bench)
{
    uint8_t *payloads[K + M];

    for (unsigned row = 0; row < ROWS; row++) {
        pick_row(bench, row, payloads);
        firn_reserve_encode_by(bench->reserve, K, M, (const uint8_t *const *)payloads, payloads + K,
                               FIRN_BLOCK_PAYLOAD_BYTES, bench->work);
    }
}

static void encode_rows_by_matrix(struct bench *bench)
{
    uint8_t *payloads[K + M];

    for (unsigned row = 0; row < ROWS; row++) {
        pick_row(bench, row, payloads);
        ec_encode_data(FIRN_BLOCK_PAYLOAD_BYTES, K, M, bench->matrix_tables, payloads, payloads + K);
    }
}

static void rebuild_rows(struct bench *bench)
{
    uint8_t *payloads[K + M];
    unsigned lost[M];

    for (unsigned i = 0; i < M; i++)
        lost[i] = 7 * i;
    for (unsigned row = 0; row < ROWS; row++) {
        pick_row(bench, row, payloads);
        firn_reserve_rebuild_by(bench->reserve, K, M, payloads, lost, M, FIRN_BLOCK_PAYLOAD_BYTES, bench->work);
    }
}

static void copy_rows(struct bench *bench)
{
    uint8_t *payloads[K + M];

    for (unsigned row = 0; row < ROWS; row++) {
        pick_row(bench, row, payloads);
        for (unsigned i = 0; i < K; i++)
            memcpy(bench->copy + ((size_t)row * K + i) * FIRN_BLOCK_PAYLOAD_BYTES, payloads[i],
                   FIRN_BLOCK_PAYLOAD_BYTES);
    }
}

/* The reserve's coefficients by Lagrange's formula: points M .. 255 known, value wanted at the points 0 .. M - 1. */
static void make_matrix(uint8_t *tables)
{
    static uint8_t matrix[M * K];

    for (unsigned j = 0; j < M; j++)
        for (unsigned i = 0; i < K; i++) {
            uint8_t over = 1, under = 1;

            for (unsigned s = M; s < 256; s++)
                if (s != M + i) {
                    over = firn_gf_multiply(over, (uint8_t)(j ^ s));
                    under = firn_gf_multiply(under, (uint8_t)((M + i) ^ s));
                }
            matrix[j * K + i] = firn_gf_multiply(over, firn_gf_inverse(under));
        }
    ec_init_tables(K, M, matrix, tables);
}

static void measure_blocks(struct bench *bench)
{
    const size_t cached = (size_t)CACHED_BLOCKS * FIRN_BLOCK_BYTES, stream = (size_t)STREAM_BLOCKS * FIRN_BLOCK_BYTES;
    const char *here = firn_lanes_engine_here()->name;

    for (unsigned i = 0; firn_lanes_engines[i] != NULL; i++) {
        bench->lanes = firn_lanes_engines[i];
        if (bench->lanes->usable())
            compare(bench, "lanes: syndrome, in cache", bench->lanes->name, lanes_syndrome, copy_cached, cached, 2000);
    }
    compare(bench, "lanes: check, in cache", here, lanes_check, copy_cached, cached, 2000);
    compare(bench, "lanes: guard, in cache", here, lanes_guard, copy_cached, cached, 2000);
    compare(bench, "XXH3-128 a block, in cache", "", hash_blocks, copy_cached, cached, 2000);
    compare(bench, "block: seal, in cache", here, seal_blocks, copy_cached, cached, 2000);
    for (unsigned i = 0; i < STREAM_BLOCKS; i++) {
        struct firn_block_tag tag = {
            FIRN_BLOCK_FORMAT_VERSION, FIRN_BLOCK_DATA, { K, M, DEPTH }, "bench", i, K * DEPTH,
        };

        firn_block_seal(bench->sheet + (size_t)i * FIRN_BLOCK_BYTES, &tag);
    }
    compare(bench, "block: open and check, in cache", here, open_cached, copy_cached, cached, 2000);
    compare(bench, "block: open, a stream of 64 MiB", here, open_stream_reading, copy_stream, stream, 1);
    compare(bench, "block: open and check, 64 MiB", here, open_stream_scrubbing, copy_stream, stream, 1);
}

static void measure_rows(struct bench *bench)
{
    const size_t bytes = (size_t)ROWS * K * FIRN_BLOCK_PAYLOAD_BYTES;

    for (unsigned i = 0; firn_reserve_engines[i] != NULL; i++) {
        bench->reserve = firn_reserve_engines[i];
        if (!bench->reserve->usable())
            continue;
        compare(bench, "reserve: encode 224 + 32", bench->reserve->name, encode_rows, copy_rows, bytes, 1);
        compare(bench, "reserve: rebuild 32 lost of 224", bench->reserve->name, rebuild_rows, copy_rows, bytes, 1);
    }
    make_matrix(bench->matrix_tables);
    compare(bench, "ISA-L ec_encode_data 224 + 32", "", encode_rows_by_matrix, copy_rows, bytes, 1);
}

int main(void)
{
    struct bench bench = { .sheet = malloc(sheet_bytes), .copy = malloc(sheet_bytes),
                           .work = aligned_alloc(64, firn_reserve_work_bytes()),
                           .matrix_tables = malloc((size_t)32 * K * M) };
    uint64_t random = 88172645463325252U;

    if (bench.sheet == NULL || bench.copy == NULL || bench.work == NULL || bench.matrix_tables == NULL)
        return EXIT_FAILURE;
    for (size_t at = 0; at < sheet_bytes; at += 8) {
        random ^= random << 13;
        random ^= random >> 7;
        random ^= random << 17;
        memcpy(bench.sheet + at, &random, 8);
    }
    memset(bench.copy, 1, sheet_bytes);
    printf("%-34s %-8s %8s %10s %8s\n", "medians of 21", "engine", "GB/s", "memcpy", "ratio");
    measure_blocks(&bench);
    measure_rows(&bench);
    free(bench.sheet);
    free(bench.copy);
    free(bench.work);
    free(bench.matrix_tables);
    return bench.sink == 1 ? 2 : EXIT_SUCCESS;
}
