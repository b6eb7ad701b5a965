/*
 * tests/bench/bench_coding.c - order-0 coding of files in segments of 1 MiB, beside zlib's Z_HUFFMAN_ONLY and memcpy
 * in the same run
 *
 * Usage: bench_coding [FILE...]; without files, an interpreter and the texts of perl, or what of it is there. All of
 * a file is held in memory; every figure is the median of several rounds over all of its segments. The machine may be
 * busy, so the ratios to zlib say more than the MB/s.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/candidates.h"
#include "firn/prefix.h"
#include "firn/segment.h"

#include <glob.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <zlib.h>

enum { ROUNDS = 7, SEGMENT_BYTES = FIRN_SEGMENT_RAW_MAX, FILE_BYTES_MAX = 32 << 20, SEGMENTS_MAX = 32 };

/* A file, its coded segments and the room they lie in, segment by segment. */
struct subject {
    uint8_t *raw, *coded, *back;
    size_t raw_bytes, coded_bytes;
    size_t sizes[SEGMENTS_MAX];
    void *encode_work, *decode_work;
    enum firn_segment_effort effort;
};

static const size_t place_bytes = SEGMENT_BYTES + SEGMENT_BYTES / 8;   /* for a segment; zlib may need more than raw */

typedef size_t segment_call(struct subject *subject, size_t index, const uint8_t *raw, size_t raw_bytes,
                            uint8_t *coded);

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

static void stop_if(int wrong, const char *what)
{
    if (wrong) {
        fprintf(stderr, "bench_coding: %s\n", what);
        exit(1);
    }
}

/* ---- what is measured ---- */

static size_t firn_in(struct subject *s, size_t index, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    size_t coded_bytes = 0;

    (void)index;
    /* stretches alone, not what would be chosen: this is about codes for bytes each for itself */
    if (s->effort == FIRN_SEGMENT_EFFORT_NONE ||
        (coded_bytes = firn_candidates_stretches(raw, raw_bytes, s->effort, coded, s->encode_work)) == 0)
        stop_if(firn_segment_encode(raw, raw_bytes, FIRN_SEGMENT_EFFORT_NONE, coded, &coded_bytes, s->encode_work) !=
                    FIRN_OK, "a segment was not coded");
    return coded_bytes;
}

static size_t firn_out(struct subject *s, size_t index, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    uint8_t *back = s->back + (raw - s->raw);

    stop_if(firn_segment_decode(coded, s->sizes[index], back, raw_bytes, s->decode_work) != FIRN_OK, "decode failed");
    return s->sizes[index];
}

static size_t zlib_in(struct subject *s, size_t index, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    z_stream z = { .next_in = (Bytef *)(uintptr_t)raw, .avail_in = (uInt)raw_bytes, .next_out = coded,
                   .avail_out = (uInt)place_bytes };

    (void)s;
    (void)index;
    stop_if(deflateInit2(&z, Z_DEFAULT_COMPRESSION, Z_DEFLATED, -15, 8, Z_HUFFMAN_ONLY) != Z_OK, "deflateInit2 failed");
    stop_if(deflate(&z, Z_FINISH) != Z_STREAM_END, "deflate failed");
    deflateEnd(&z);
    return z.total_out;
}

static size_t zlib_out(struct subject *s, size_t index, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    z_stream z = { .next_in = coded, .avail_in = (uInt)s->sizes[index], .next_out = s->back + (raw - s->raw),
                   .avail_out = (uInt)raw_bytes };

    stop_if(inflateInit2(&z, -15) != Z_OK, "inflateInit2 failed");
    stop_if(inflate(&z, Z_FINISH) != Z_STREAM_END, "inflate failed");
    inflateEnd(&z);
    return s->sizes[index];
}

static size_t copy(struct subject *s, size_t index, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    (void)s;
    (void)index;
    memcpy(coded, raw, raw_bytes);
    return raw_bytes;
}

/* MB/s of raw bytes, median; the sizes are kept. */
static double measure(struct subject *s, segment_call *call)
{
    double times[ROUNDS];

    for (unsigned round = 0; round < ROUNDS; round++) {
        double start = now();

        s->coded_bytes = 0;
        for (size_t at = 0, index = 0; at < s->raw_bytes; at += SEGMENT_BYTES, index++) {
            size_t size = s->raw_bytes - at < SEGMENT_BYTES ? s->raw_bytes - at : SEGMENT_BYTES;

            s->sizes[index] = call(s, index, s->raw + at, size, s->coded + index * place_bytes);
            s->coded_bytes += s->sizes[index];
        }
        times[round] = now() - start;
    }
    qsort(times, ROUNDS, sizeof *times, by_size);
    return (double)s->raw_bytes / times[ROUNDS / 2] / 1e6;
}

/* ---- the table ---- */

static void row(const struct subject *s, const char *name, double in, double out, double zlib_in_rate,
                double zlib_out_rate)
{
    printf("  %-22s %7.4f %10.0f %10.0f %9.2f %9.2f\n", name, (double)s->raw_bytes / (double)s->coded_bytes, in, out,
           in / zlib_in_rate, out / zlib_out_rate);
}

static void bench(struct subject *s, const char *path)
{
    static const char *const names[] = { "firn none", "firn quick", "firn normal", "firn thorough" };
    double zlib_in_rate, zlib_out_rate, in, out;

    printf("%s, %zu bytes\n", path, s->raw_bytes);
    printf("  %-22s %7s %10s %10s %9s %9s\n", "", "ratio", "in MB/s", "out MB/s", "in/zlib", "out/zlib");
    zlib_in_rate = measure(s, zlib_in);
    zlib_out_rate = measure(s, zlib_out);
    stop_if(memcmp(s->raw, s->back, s->raw_bytes) != 0, "zlib gave back something else");
    row(s, "zlib Z_HUFFMAN_ONLY", zlib_in_rate, zlib_out_rate, zlib_in_rate, zlib_out_rate);
    for (unsigned effort = FIRN_SEGMENT_EFFORT_NONE; effort <= FIRN_SEGMENT_EFFORT_THOROUGH; effort++) {
        s->effort = (enum firn_segment_effort)effort;
        in = measure(s, firn_in);
        memset(s->back, 0, s->raw_bytes);
        out = measure(s, firn_out);
        stop_if(memcmp(s->raw, s->back, s->raw_bytes) != 0, "firn gave back something else");
        row(s, names[effort], in, out, zlib_in_rate, zlib_out_rate);
    }
    in = measure(s, copy);
    row(s, "memcpy", in, in, zlib_in_rate, zlib_out_rate);
}

static void add_file(struct subject *s, const char *path)
{
    FILE *file = fopen(path, "rb");

    if (file == NULL)
        return;
    s->raw_bytes += fread(s->raw + s->raw_bytes, 1, FILE_BYTES_MAX - s->raw_bytes, file);
    fclose(file);
}

static void add_matches(struct subject *s, const char *pattern)
{
    glob_t found;

    if (glob(pattern, 0, NULL, &found) != 0)
        return;
    for (size_t k = 0; k < found.gl_pathc; k++)
        add_file(s, found.gl_pathv[k]);
    globfree(&found);
}

/* The pattern's files end to end. */
static void bench_matches(struct subject *s, const char *pattern)
{
    s->raw_bytes = 0;
    add_matches(s, pattern);
    if (s->raw_bytes > 0)
        bench(s, pattern);
}

/* How long the lengths of 256 symbols take, limit 11: weights of a run of noise, falling off evenly. */
static void bench_lengths(void)
{
    enum { CALLS = 2000 };
    uint32_t weights[256];
    uint8_t lengths[256];
    double times[ROUNDS], start;
    void *work = malloc(firn_prefix_work_bytes(256));

    stop_if(work == NULL, "out of memory");
    for (unsigned round = 0; round < ROUNDS; round++) {
        start = now();
        for (uint32_t call = 0; call < CALLS; call++) {
            for (uint32_t s = 0; s < 256; s++)
                weights[s] = 1 + ((s * 2654435761u ^ call) >> 18) * (1 + (s * 40503u & 255)) / 64 / (1 + s);
            stop_if(firn_prefix_lengths(weights, 256, 11, lengths, work) != FIRN_OK, "lengths failed");
        }
        times[round] = now() - start;
    }
    qsort(times, ROUNDS, sizeof *times, by_size);
    printf("code lengths of 256 symbols, limit 11: %.1f microseconds\n", times[ROUNDS / 2] / CALLS * 1e6);
    free(work);
}

int main(int argc, char **argv)
{
    struct subject s = { .raw_bytes = 0 };

    s.raw = malloc(FILE_BYTES_MAX);
    s.back = malloc(FILE_BYTES_MAX);
    s.coded = malloc(SEGMENTS_MAX * place_bytes);
    s.encode_work = aligned_alloc(64, (firn_segment_encode_work_bytes() + 63) / 64 * 64);
    s.decode_work = aligned_alloc(64, (firn_segment_decode_work_bytes() + 63) / 64 * 64);
    stop_if(s.raw == NULL || s.back == NULL || s.coded == NULL || s.encode_work == NULL || s.decode_work == NULL,
            "out of memory");
    printf("zlib %s; medians of %d rounds\n", zlibVersion(), ROUNDS);
    for (int a = 1; a < argc; a++)
        bench_matches(&s, argv[a]);
    if (argc < 2) {
        bench_matches(&s, "/usr/bin/python3.[0-9]*");
        bench_matches(&s, "/usr/share/perl/*/*/*.p[lm]");
        bench_matches(&s, "/usr/lib/*/libcrypto.so.3");
    }
    bench_lengths();
    free(s.decode_work);
    free(s.encode_work);
    free(s.coded);
    free(s.back);
    free(s.raw);
    return 0;
}
