/*
 * tests/bench/bench_segments.c - how dense and how fast: firn's segments beside the libraries', in one run, as a table
 *
 * Usage: bench_segments [--ratios] [--speeds] [--every N] [--only NAME,...] FOLDER...
 *
 * Each folder is a class of the corpus; its files, in the order of their names, are cut into segments of at most 1 MiB
 * that are coded one by one through each coder's C API, one thread, and decoded and compared. Files below 4 KiB are
 * joined end to end (bundles). --ratios and --speeds print one of the two tables only. --every N takes every N-th
 * segment only. The listing's hash (FNV-1a, 64 bits, over names and contents of what was measured) says whether two
 * tables are about the same bytes. Times are processor time, of one pass; of decoding, the best of three.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/segment.h"

#include <brotli/decode.h>
#include <brotli/encode.h>
#include <dirent.h>
#include <lzma.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <zlib.h>
#include <zstd.h>

enum { SEGMENT_BYTES = FIRN_SEGMENT_RAW_MAX, ROOM_BYTES = SEGMENT_BYTES * 2, CLASSES_MAX = 16, SMALL_BYTES = 4096 };

static void *encode_work, *decode_work;

static double now(void)
{
    struct timespec time;

    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &time);     /* other programs do not count */
    return (double)time.tv_sec + 1e-9 * (double)time.tv_nsec;
}

static void stop_if(bool wrong, const char *what)
{
    if (wrong) {
        fprintf(stderr, "bench_segments: %s\n", what);
        exit(1);
    }
}

/* ---- the coders: both calls return the bytes they made ---- */

static size_t firn_in(int level, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    size_t made = 0;

    stop_if(firn_segment_encode(raw, raw_bytes, (enum firn_segment_effort)level, coded, &made, encode_work) != FIRN_OK,
            "firn: coding failed");
    return made;
}

static size_t firn_out(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes)
{
    stop_if(firn_segment_decode(coded, coded_bytes, raw, raw_bytes, decode_work) != FIRN_OK, "firn: decoding failed");
    return raw_bytes;
}

static size_t zlib_in(int level, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    uLongf made = ROOM_BYTES;

    stop_if(compress2(coded, &made, raw, (uLong)raw_bytes, level) != Z_OK, "zlib: coding failed");
    return made;
}

static size_t zlib_out(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes)
{
    uLongf made = (uLongf)raw_bytes;

    stop_if(uncompress(raw, &made, coded, (uLong)coded_bytes) != Z_OK, "zlib: decoding failed");
    return made;
}

static size_t zstd_in(int level, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    size_t made = ZSTD_compress(coded, ROOM_BYTES, raw, raw_bytes, level);

    stop_if(ZSTD_isError(made) != 0, "zstd: coding failed");
    return made;
}

static size_t zstd_out(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes)
{
    return ZSTD_decompress(raw, raw_bytes, coded, coded_bytes);
}

static size_t lzma_in(int level, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    lzma_options_lzma options;
    lzma_filter filters[2] = { { LZMA_FILTER_LZMA2, &options }, { LZMA_VLI_UNKNOWN, NULL } };
    size_t made = 0;

    stop_if(lzma_lzma_preset(&options, (uint32_t)level), "lzma: no such preset");
    stop_if(lzma_raw_buffer_encode(filters, NULL, raw, raw_bytes, coded, &made, ROOM_BYTES) != LZMA_OK,
            "lzma: coding failed");
    return made;
}

static size_t lzma_out(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes)
{
    lzma_options_lzma options;
    lzma_filter filters[2] = { { LZMA_FILTER_LZMA2, &options }, { LZMA_VLI_UNKNOWN, NULL } };
    size_t at = 0, made = 0;

    stop_if(lzma_lzma_preset(&options, 6), "lzma: no such preset");
    stop_if(lzma_raw_buffer_decode(filters, NULL, coded, &at, coded_bytes, raw, &made, raw_bytes) != LZMA_OK,
            "lzma: decoding failed");
    return made;
}

static size_t brotli_in(int level, const uint8_t *raw, size_t raw_bytes, uint8_t *coded)
{
    size_t made = ROOM_BYTES;

    stop_if(BrotliEncoderCompress(level, 22, BROTLI_MODE_GENERIC, raw_bytes, raw, &made, coded) == BROTLI_FALSE,
            "brotli: coding failed");
    return made;
}

static size_t brotli_out(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes)
{
    size_t made = raw_bytes;

    stop_if(BrotliDecoderDecompress(coded_bytes, coded, &made, raw) != BROTLI_DECODER_RESULT_SUCCESS,
            "brotli: decoding failed");
    return made;
}

static const struct coder {
    const char *name;
    int level;
    size_t (*in)(int level, const uint8_t *raw, size_t raw_bytes, uint8_t *coded);
    size_t (*out)(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes);
} coders[] = {
    { "zlib-9", 9, zlib_in, zlib_out },
    { "zstd-9", 9, zstd_in, zstd_out },
    { "zstd-19", 19, zstd_in, zstd_out },
    { "lzma-6", 6, lzma_in, lzma_out },
    { "brotli-11", 11, brotli_in, brotli_out },
    { "quick", FIRN_SEGMENT_EFFORT_QUICK, firn_in, firn_out },
    { "normal", FIRN_SEGMENT_EFFORT_NORMAL, firn_in, firn_out },
    { "thorough", FIRN_SEGMENT_EFFORT_THOROUGH, firn_in, firn_out },
};

enum { CODERS = sizeof coders / sizeof *coders };

/* ---- what is measured ---- */

struct sum {
    double raw, coded, in, out;
};

static struct sum sums[CLASSES_MAX + 1][CODERS];        /* the last: all classes */
static bool wanted[CODERS];
static uint64_t listing = UINT64_C(0xCBF29CE484222325);
static size_t every = 1, segment_number;
static bool loud;

static void hash(const uint8_t *bytes, size_t count)
{
    for (size_t i = 0; i < count; i++)
        listing = (listing ^ bytes[i]) * UINT64_C(0x100000001B3);
}

static void measure(size_t class, const char *name, const uint8_t *raw, size_t raw_bytes)
{
    static uint8_t coded[ROOM_BYTES], back[SEGMENT_BYTES];

    if (segment_number++ % every != 0)
        return;
    hash((const uint8_t *)name, strlen(name) + 1);
    hash(raw, raw_bytes);
    for (size_t c = 0; c < CODERS; c++) {
        double start, out = 1e9;
        size_t coded_bytes;

        if (!wanted[c])
            continue;
        start = now();
        coded_bytes = coders[c].in(coders[c].level, raw, raw_bytes, coded);
        sums[class][c].in += now() - start;
        for (unsigned round = 0; round < 3; round++) {
            start = now();
            stop_if(coders[c].out(coded, coded_bytes, back, raw_bytes) != raw_bytes, "another size came back");
            out = now() - start < out ? now() - start : out;
        }
        stop_if(memcmp(raw, back, raw_bytes) != 0, "other bytes came back");
        sums[class][c].out += out;
        sums[class][c].raw += (double)raw_bytes;
        sums[class][c].coded += (double)coded_bytes;
        if (loud)
            printf("%-10s %8zu %8zu %.3f  method %d %d  %s\n", coders[c].name, raw_bytes, coded_bytes,
                   (double)raw_bytes / (double)coded_bytes, coded[0], coded[1], name);
    }
}

static void measure_folder(size_t class, const char *folder)
{
    static uint8_t piece[SEGMENT_BYTES], bundle[SEGMENT_BYTES];
    struct dirent **names;
    int count = scandir(folder, &names, NULL, alphasort);
    size_t bundled = 0;

    stop_if(count < 0, "cannot list a folder");
    for (int k = 0; k < count; k++) {
        char path[4096];
        FILE *file;
        size_t got;

        snprintf(path, sizeof path, "%s/%s", folder, names[k]->d_name);
        file = names[k]->d_name[0] == '.' ? NULL : fopen(path, "rb");
        while (file != NULL && (got = fread(piece, 1, sizeof piece, file)) > 0) {
            if (got >= SMALL_BYTES) {
                measure(class, names[k]->d_name, piece, got);
                continue;
            }
            if (bundled + got > sizeof bundle) {
                measure(class, "bundle", bundle, bundled);
                bundled = 0;
            }
            memcpy(bundle + bundled, piece, got);
            bundled += got;
        }
        if (file != NULL)
            fclose(file);
        free(names[k]);
    }
    free(names);
    if (bundled > 0)
        measure(class, "bundle", bundle, bundled);
}

/* ---- the table ---- */

static void rows(const char *title, const struct sum *of)
{
    double raw = 0;

    for (size_t c = 0; c < CODERS; c++)
        raw = of[c].raw > raw ? of[c].raw : raw;
    printf("%-12s %6.1f MB", title, raw / 1e6);
    for (size_t c = 0; c < CODERS; c++)
        if (wanted[c])
            printf(" %10.3f", of[c].raw / of[c].coded);
    printf("\n");
}

static void speeds(const char *title, const struct sum *of, bool in)
{
    printf("%-22s", title);
    for (size_t c = 0; c < CODERS; c++)
        if (wanted[c])
            printf(" %10.1f", of[c].raw / 1e6 / (in ? of[c].in : of[c].out));
    printf("\n");
}

static void table(size_t classes, char **names, bool ratios, bool times)
{
    printf("zlib %s, zstd %s, lzma %s, brotli %u.%u.%u; every %zu; corpus %016llx\n%-22s", zlibVersion(),
           ZSTD_versionString(), lzma_version_string(), BrotliEncoderVersion() >> 24,
           BrotliEncoderVersion() >> 12 & 4095, BrotliEncoderVersion() & 4095, every, (unsigned long long)listing, "");
    for (size_t c = 0; c < CODERS; c++)
        if (wanted[c])
            printf(" %10s", coders[c].name);
    printf("\n");
    for (size_t k = 0; ratios && k <= classes; k++)
        rows(k < classes ? names[k] : "all", sums[k < classes ? k : CLASSES_MAX]);
    for (size_t k = 0; times && k <= classes; k++) {
        char title[64];

        snprintf(title, sizeof title, "in MB/s %s", k < classes ? names[k] : "all");
        speeds(title, sums[k < classes ? k : CLASSES_MAX], true);
    }
    for (size_t k = 0; times && k <= classes; k++) {
        char title[64];

        snprintf(title, sizeof title, "out MB/s %s", k < classes ? names[k] : "all");
        speeds(title, sums[k < classes ? k : CLASSES_MAX], false);
    }
}

static void choose(const char *list)
{
    for (size_t c = 0; c < CODERS; c++) {
        const char *found = list == NULL ? coders[c].name : strstr(list, coders[c].name);
        size_t length = strlen(coders[c].name);

        wanted[c] = found != NULL && (list == NULL || found[length] == '\0' || found[length] == ',');
    }
}

int main(int argc, char **argv)
{
    char *names[CLASSES_MAX];
    size_t classes = 0;
    bool ratios = false, times = false;

    encode_work = aligned_alloc(64, (firn_segment_encode_work_bytes() + 63) / 64 * 64);
    decode_work = aligned_alloc(64, (firn_segment_decode_work_bytes() + 63) / 64 * 64);
    stop_if(encode_work == NULL || decode_work == NULL, "out of memory");
    choose(NULL);
    for (int a = 1; a < argc; a++) {
        if (strcmp(argv[a], "--every") == 0 && a + 1 < argc) {
            every = strtoul(argv[++a], NULL, 10);
            stop_if(every == 0, "--every takes a number above 0");
        } else if (strcmp(argv[a], "--only") == 0 && a + 1 < argc) {
            choose(argv[++a]);
        } else if (strcmp(argv[a], "--loud") == 0) {
            loud = true;
        } else if (strcmp(argv[a], "--ratios") == 0) {
            ratios = true;
        } else if (strcmp(argv[a], "--speeds") == 0) {
            times = true;
        } else {
            char *slash = strrchr(argv[a], '/');

            stop_if(classes == CLASSES_MAX, "too many folders");
            names[classes] = slash == NULL ? argv[a] : slash + 1;
            measure_folder(classes, argv[a]);
            for (size_t c = 0; c < CODERS; c++) {
                sums[CLASSES_MAX][c].raw += sums[classes][c].raw;
                sums[CLASSES_MAX][c].coded += sums[classes][c].coded;
                sums[CLASSES_MAX][c].in += sums[classes][c].in;
                sums[CLASSES_MAX][c].out += sums[classes][c].out;
            }
            classes++;
        }
    }
    stop_if(classes == 0,
            "usage: bench_segments [--ratios] [--speeds] [--every N] [--only NAME,...] [--loud] FOLDER...");
    table(classes, names, ratios || !times, times || !ratios);
    free(encode_work);
    free(decode_work);
    return 0;
}
